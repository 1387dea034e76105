"""A covariance family for the thickness of a body that thins out at its outline.

Thickness, or its square root = mean profile + edge profile x a continuous field + a short-scale field. The mean
profile is made of powers of the dome over the outline, the edge profile is another power of it, so thickness and its
variance vanish at the outline. The square root is for bodies whose thick parts vary more than their thin ones. No
single set of parameters is chosen: few holes never tell them. A table of sets is weighted by how well each explains
the contacts (Bayesian model averaging over a grid, with a unit-information prior for the drift).

References
----------
Handcock, M.S. and Stein, M.L. (1993). A Bayesian analysis of kriging. Technometrics 35, 403-410.
Kass, R.E. and Wasserman, L. (1995). A reference Bayesian test for nested hypotheses. JASA 90, 928-934
(unit-information prior). Cited from memory.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import product
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[Any]
PRIOR_DEGREES = 4.0  # weight, in holes, of the prior below
# Profiles that are tried: steep-edged, paraboloid, and those with a head or a foot. The standard deviation of the
# field dies out no faster than a paraboloid, or a gentle foot would be taken for a well-known one.
MEAN_POWERS = ((0.4,), (0.65,), (1.0,), (0.5, 1.5), (1.0, 2.0), (1.0, 3.0))
EDGE_POWERS = (0.5, 1.0)
PRIOR_VARIATION = 0.35  # thickness strays so much about its profile where too few holes tell (assumed)


@dataclass(frozen=True)
class ThicknessSettings:
    """What is fixed by the user and what the contacts decide (None).

    Parameters
    ----------
    range_m : float, optional
        Practical range of the continuous field.
    shape : "exponential" | "smooth", optional
        Its covariance; smooth is the Matern covariance with exponent 3/2.
    short_share : float, optional
        Share, 0.01 to 0.9, of the variance that belongs to the short-scale field.
    edge_power : float, optional
        Power of the dome in the mean: 0.5 is a steep-edged ellipsoid, 1 a paraboloid, 2 a foot that runs out
        gently.
    root : 1 | 2, optional
        2 where the square root of the thickness, not the thickness, is taken as normal.
    relief : bool, optional
        Whether thickness follows the height of the seafloor above its surroundings.
    draws, seed : int
        Bodies drawn for the volume's standard deviation and for the base below open holes, and the seed of
        their generator.
    """

    range_m: float | None = None
    shape: str | None = None
    short_share: float | None = None
    edge_power: float | None = None
    root: int | None = None
    relief: bool | None = None
    draws: int = 300
    seed: int = 20240501

    def __post_init__(self) -> None:
        if self.range_m is not None and not self.range_m > 0:
            raise ValueError(f"range_m must be a positive length in m, not {self.range_m!r}")
        if self.shape not in (None, "exponential", "smooth"):
            raise ValueError(f"shape must be 'exponential' or 'smooth', not {self.shape!r}")
        if self.short_share is not None and not 0.01 <= self.short_share <= 0.9:
            raise ValueError(f"short_share must lie between 0.01 and 0.9, not {self.short_share!r}")
        if self.edge_power is not None and not 0 <= self.edge_power <= 4:
            raise ValueError(f"edge_power must lie between 0 and 4, not {self.edge_power!r}")
        if self.root not in (None, 1, 2):
            raise ValueError(f"root must be 1 or 2, not {self.root!r}")
        if self.draws < 50:
            raise ValueError(f"draws must be at least 50, not {self.draws!r}")


@dataclass(frozen=True, eq=False)
class Sites:
    """Places (n,) with what the model needs to know of each.

    ``xy`` (n, 2) in m; ``dome`` 0 to 1; ``edge`` 0 to 1, taper of the short-scale field; ``relief`` scaled
    height above the surroundings.
    """

    xy: Array
    dome: Array
    edge: Array
    relief: Array

    def __getitem__(self, index: Any) -> Sites:
        return Sites(self.xy[index], self.dome[index], self.edge[index], self.relief[index])

    def __len__(self) -> int:
        return len(self.dome)


class Pairs:
    """All pairs of two lots of sites; what many sets of parameters share is worked out once.

    Parameters
    ----------
    a, b : Sites
    """

    def __init__(self, a: Sites, b: Sites) -> None:
        self.a, self.b = a, b
        east = a.xy[:, 0][:, None] - b.xy[:, 0][None]
        north = a.xy[:, 1][:, None] - b.xy[:, 1][None]
        self.distance = np.sqrt(east * east + north * north)
        self._kept: dict[Any, Array] = {}

    def field(self, shape: str, range_m: float) -> Array:
        """Correlation of the continuous field."""
        key = (shape, range_m)
        if key not in self._kept:
            if shape == "exponential":
                self._kept[key] = np.exp(self.distance * (-3.0 / range_m))
            else:  # 95 % of the sill is gone where (1 + t) exp(-t) = 0.05
                t = self.distance * (4.7438645183905 / range_m)
                self._kept[key] = (1.0 + t) * np.exp(-t)
        return self._kept[key]

    def short(self, range_m: float) -> Array:
        """Correlation of the short-scale field (spherical), tapered toward the outline."""
        key = ("short", range_m)
        if key not in self._kept:
            q = np.minimum(self.distance / range_m, 1.0)
            self._kept[key] = (1.0 - 1.5 * q + 0.5 * q**3) * (self.a.edge[:, None] * self.b.edge[None])
        return self._kept[key]

    def profile(self, power: float) -> Array:
        """Product of the edge profiles."""
        key = ("profile", power)
        if key not in self._kept:
            self._kept[key] = (self.a.dome**power)[:, None] * (self.b.dome**power)[None]
        return self._kept[key]


@dataclass(frozen=True)
class Parameters:
    """One set of parameters; variances are relative to the total sill.

    ``root`` is 1 where thickness is taken as normal, 2 where its square root is. ``mean_powers`` are the powers
    of the dome in the mean thickness, ``edge_power`` that in the standard deviation of the continuous field,
    both divided by ``root`` where the root is modelled.
    """

    range_m: float
    shape: str
    short_share: float
    edge_power: float
    mean_powers: tuple[float, ...]
    relief: bool
    short_range_m: float
    root: int = 1

    def drift(self, sites: Sites) -> Array:
        """Drift functions (n, k)."""
        columns = [sites.dome ** (power / self.root) for power in self.mean_powers]
        if self.relief:
            columns.append(np.sign(sites.relief) * np.abs(sites.relief) ** (1.0 / self.root))
        return np.column_stack(columns)

    @property
    def covariance_key(self) -> tuple[Any, ...]:
        """Sets with one key share their covariance and differ in their drift only."""
        return self.range_m, self.shape, self.short_share, self.edge_power / self.root

    def covariance(self, pairs: Pairs) -> Array:
        """Relative covariance (a, b) of pairs of sites."""
        long = pairs.field(self.shape, self.range_m) * pairs.profile(self.edge_power / self.root)
        return (1.0 - self.short_share) * long + self.short_share * pairs.short(self.short_range_m)

    def variance(self, sites: Sites) -> Array:
        """Relative variance (n,) of the thickness."""
        long = (1.0 - self.short_share) * sites.dome ** (2 * self.edge_power / self.root)
        return long + self.short_share * sites.edge**2


class FittedSet:
    """One set of parameters with its system of equations solved for the contacts.

    Parameters
    ----------
    parameters : Parameters
    holes : Sites
    inverse : ndarray (n, n)
        Inverse of the covariance of the holes; shared by sets with one covariance.
    log_determinant : float
        Of that covariance.
    """

    def __init__(self, parameters: Parameters, holes: Sites, inverse: Array, log_determinant: float) -> None:
        self.parameters, self.holes = parameters, holes
        self.inverse, self.log_determinant = inverse, log_determinant
        drift = parameters.drift(holes)
        self.drift_count = drift.shape[1]
        self.inverse_drift = inverse @ drift
        information = drift.T @ self.inverse_drift
        # A relief that follows the dome exactly would make this singular; the ridge shares the mean between them.
        information[np.diag_indices(self.drift_count)] *= 1.0 + 1e-9
        self.drift_covariance = np.linalg.inv(information)

    def projected(self) -> Array:
        """Inverse of the covariance with the drift taken out (n, n)."""
        return self.inverse - self.inverse_drift @ self.drift_covariance @ self.inverse_drift.T

    def squares(self, thickness: Array, whole: float) -> float:
        """Residual sum of squares, given that without a drift."""
        moment = self.inverse_drift.T @ thickness
        return whole - float(moment @ self.drift_covariance @ moment)

    def weights(self, pairs: Pairs) -> tuple[Array, Array]:
        """Kriging weights (b, n) at the targets ``pairs.a``, and relative kriging variance (b,)."""
        targets, covariance = pairs.a, self.parameters.covariance(pairs)
        rest = self.parameters.drift(targets) - covariance @ self.inverse_drift
        lagrange = rest @ self.drift_covariance
        solved = covariance @ self.inverse
        weights = solved + lagrange @ self.inverse_drift.T
        variance = self.parameters.variance(targets) - np.einsum("bn,bn->b", solved, covariance)
        variance = variance + np.einsum("bk,bk->b", lagrange, rest)
        return weights, np.maximum(variance, 0.0)

    def joint(self, own: Pairs, to_holes: Pairs) -> tuple[Array, Array]:
        """Kriging weights (q, n) and the relative covariance (q, q) of the kriging errors of all sites at once."""
        to_data = self.parameters.covariance(to_holes)
        rest = self.parameters.drift(own.a) - to_data @ self.inverse_drift
        solved = to_data @ self.inverse
        weights = solved + rest @ self.drift_covariance @ self.inverse_drift.T
        covariance = (
            self.parameters.covariance(own) - solved @ to_data.T + rest @ self.drift_covariance @ rest.T
        )
        return weights, 0.5 * (covariance + covariance.T)


def parameter_sets(
    settings: ThicknessSettings,
    size_m: float,
    short_range_m: float,
    relief: bool,
    edge: bool,
    positive: bool = True,
) -> Iterator[Parameters]:
    """Every set of parameters that the settings leave open.

    Parameters
    ----------
    settings : ThicknessSettings
    size_m : float
        Radius of the circle with the area of the outline; ranges are tried in proportion to it.
    short_range_m : float
        Range of the short-scale field.
    relief : bool
        Whether the relief is there to be followed.
    edge : bool
        False where thickness is not known to vanish at the outline: the profile is then flat.
    positive : bool
        False where the data may be negative, so that no root can be taken.
    """
    ranges = [settings.range_m] if settings.range_m else [f * size_m for f in (0.3, 0.6, 1.2, 2.4)]
    shapes = [settings.shape] if settings.shape else ["exponential", "smooth"]
    shares = [settings.short_share] if settings.short_share else [0.02, 0.15]
    profiles: list[tuple[float, tuple[float, ...]]]
    if not edge:
        profiles = [(0.0, (0.0,))]
    elif settings.edge_power is not None:
        profiles = [(min(settings.edge_power, 1.0), (settings.edge_power,))]
    else:
        profiles = [(spread, mean) for spread in EDGE_POWERS for mean in MEAN_POWERS]
    reliefs = [False] if not relief else [False, True] if settings.relief is None else [settings.relief]
    roots = [1] if not positive else [1, 2] if settings.root is None else [settings.root]
    every = product(ranges, shapes, shares, profiles, reliefs, roots)
    for range_m, shape, share, (spread, mean), follow, root in every:
        yield Parameters(
            float(range_m), shape, float(share), float(spread), mean, follow, short_range_m, root
        )


def solve_sets(candidates: Iterable[Parameters], holes: Sites, error_variance: Array) -> list[FittedSet]:
    """Solve every set for the holes.

    Parameters
    ----------
    candidates : iterable of Parameters
    holes : Sites
    error_variance : ndarray (n,)
        Relative variance of the error of each datum (zero for contacts in holes).
    """
    pairs = Pairs(holes, holes)
    solved: dict[tuple[Any, ...], tuple[Array, float]] = {}
    out = []
    for parameters in candidates:
        key = parameters.covariance_key
        if key not in solved:
            covariance = parameters.covariance(pairs)
            covariance[np.diag_indices_from(covariance)] += error_variance + 1e-10
            lower = root_of(covariance)
            inverse = np.linalg.inv(lower)
            solved[key] = inverse.T @ inverse, 2.0 * float(np.log(np.diag(lower)).sum())
        out.append(FittedSet(parameters, holes, *solved[key]))
    return out


def root_of(covariance: Array) -> Array:
    """Lower Cholesky factor; a matrix that rounding has made indefinite gets a little more on its diagonal."""
    diagonal = np.diag_indices_from(covariance)
    extra = 0.0
    for _ in range(8):
        try:
            return np.linalg.cholesky(covariance)
        except np.linalg.LinAlgError:
            added = max(extra * 10.0, 1e-10 * float(np.max(covariance[diagonal])))
            covariance = covariance.copy()
            covariance[diagonal] += added - extra
            extra = added
    raise ValueError("contacts give a covariance that cannot be solved; look for holes at one place")

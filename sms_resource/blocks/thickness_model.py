"""A covariance family for the thickness of a body that thins out at its outline.

Thickness = edge profile x (mean + a continuous field) + a short-scale field. The edge profile is a power of the
dome over the outline, so thickness and its variance vanish at the outline. No single set of parameters is
chosen: few holes never tell them. A table of sets is weighted by how well each explains the contacts
(Bayesian model averaging over a grid, with a unit-information prior for the drift).

References
----------
Handcock, M.S. and Stein, M.L. (1993). A Bayesian analysis of kriging. Technometrics 35, 403-410.
Kass, R.E. and Wasserman, L. (1995). A reference Bayesian test for nested hypotheses. JASA 90, 928-934
(unit-information prior). Cited from memory.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import product
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[Any]
PRIOR_DEGREES = 4.0  # weight, in holes, of the prior below
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
        Power of the dome: 0.5 is a steep-edged ellipsoid, 1 a paraboloid, 2 a foot that runs out gently.
    relief : bool, optional
        Whether thickness follows the height of the seafloor above its surroundings.
    draws, seed : int
        Draws of the unknown base below open holes, and the seed of their generator.
    """

    range_m: float | None = None
    shape: str | None = None
    short_share: float | None = None
    edge_power: float | None = None
    relief: bool | None = None
    draws: int = 240
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
        if self.draws < 20:
            raise ValueError(f"draws must be at least 20, not {self.draws!r}")


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


@dataclass(frozen=True)
class Parameters:
    """One set of parameters; variances are relative to the total sill."""

    range_m: float
    shape: str
    short_share: float
    edge_power: float
    relief: bool
    short_range_m: float

    def drift(self, sites: Sites) -> Array:
        """Drift functions (n, 1 or 2)."""
        profile = sites.dome**self.edge_power
        return np.column_stack([profile, sites.relief]) if self.relief else profile[:, None]

    def covariance(self, a: Sites, b: Sites) -> Array:
        """Relative covariance (len(a), len(b))."""
        h = np.sqrt(
            (a.xy[:, 0][:, None] - b.xy[:, 0][None]) ** 2 + (a.xy[:, 1][:, None] - b.xy[:, 1][None]) ** 2
        )
        profile = (a.dome**self.edge_power)[:, None] * (b.dome**self.edge_power)[None]
        if self.shape == "exponential":
            field = np.exp(-3.0 * h / self.range_m)
        else:  # 95 % of the sill is gone where (1 + t) exp(-t) = 0.05
            t = 4.7438645183905 * h / self.range_m
            field = (1.0 + t) * np.exp(-t)
        q = np.minimum(h / self.short_range_m, 1.0)
        short = (1.0 - 1.5 * q + 0.5 * q**3) * (a.edge[:, None] * b.edge[None])
        return (1.0 - self.short_share) * profile * field + self.short_share * short

    def variance(self, sites: Sites) -> Array:
        """Relative variance (n,) of the thickness."""
        long = (1.0 - self.short_share) * sites.dome ** (2 * self.edge_power)
        return long + self.short_share * sites.edge**2


class FittedSet:
    """One set of parameters with its system of equations solved for the contacts.

    Parameters
    ----------
    parameters : Parameters
    holes : Sites
    error_variance : ndarray (n,)
        Relative variance of the error of each datum (zero for contacts in holes).
    """

    def __init__(self, parameters: Parameters, holes: Sites, error_variance: Array) -> None:
        self.parameters = parameters
        self.holes = holes
        covariance = parameters.covariance(holes, holes)
        covariance[np.diag_indices_from(covariance)] += error_variance + 1e-10
        lower = np.linalg.cholesky(covariance)
        inverse = np.linalg.inv(lower)
        self.inverse = inverse.T @ inverse
        self.log_determinant = 2.0 * float(np.log(np.diag(lower)).sum())
        drift = parameters.drift(holes)
        self.drift_count = drift.shape[1]
        self.inverse_drift = self.inverse @ drift
        self.drift_covariance = np.linalg.pinv(drift.T @ self.inverse_drift)
        self.projected = self.inverse - self.inverse_drift @ self.drift_covariance @ self.inverse_drift.T

    def dual(self, thickness: Array) -> tuple[Array, Array]:
        """Drift coefficients and covariance weights for values at the holes."""
        drift = self.drift_covariance @ (self.inverse_drift.T @ thickness)
        return drift, self.projected @ thickness

    def estimate(self, targets: Sites, thickness: Array, covariance: Array | None = None) -> Array:
        """Universal kriging of the thickness at ``targets`` (b,), for values (n,) or (n, m) at the holes."""
        drift, weights = self.dual(thickness)
        if covariance is None:
            covariance = self.parameters.covariance(targets, self.holes)
        return self.parameters.drift(targets) @ drift + covariance @ weights

    def weights(self, targets: Sites, covariance: Array) -> tuple[Array, Array]:
        """Kriging weights (b, n) and relative kriging variance (b,)."""
        drift = self.parameters.drift(targets)
        rest = drift - covariance @ self.inverse_drift
        lagrange = rest @ self.drift_covariance
        weights = covariance @ self.inverse + lagrange @ self.inverse_drift.T
        variance = self.parameters.variance(targets)
        variance = variance - np.einsum("bn,nm,bm->b", covariance, self.inverse, covariance, optimize=True)
        variance = variance + np.einsum("bk,bk->b", lagrange, rest)
        return weights, np.maximum(variance, 0.0)

    def integral(self, targets: Sites, areas: Array) -> tuple[Array, float]:
        """Weights (n,) of the volume over ``targets`` on the holes, and its relative kriging variance."""
        parameters = self.parameters
        to_holes = areas @ parameters.covariance(targets, self.holes)
        drift = areas @ parameters.drift(targets)
        own = float(areas @ parameters.covariance(targets, targets) @ areas)
        rest = drift - to_holes @ self.inverse_drift
        lagrange = rest @ self.drift_covariance
        weights = to_holes @ self.inverse + lagrange @ self.inverse_drift.T
        variance = own - to_holes @ self.inverse @ to_holes + lagrange @ rest
        return weights, max(float(variance), 0.0)


def parameter_sets(
    settings: ThicknessSettings, size_m: float, short_range_m: float, relief: bool, edge: bool
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
    """
    ranges = [settings.range_m] if settings.range_m else [f * size_m for f in (0.3, 0.6, 1.2, 2.4)]
    shapes = [settings.shape] if settings.shape else ["exponential", "smooth"]
    shares = [settings.short_share] if settings.short_share else [0.02, 0.12, 0.4]
    powers = [0.0] if not edge else [settings.edge_power] if settings.edge_power is not None else [
        0.35, 0.5, 0.7, 1.0, 1.4, 2.0,
    ]  # fmt: skip
    reliefs = [False] if not relief else [False, True] if settings.relief is None else [settings.relief]
    for range_m, shape, share, power, follow in product(ranges, shapes, shares, powers, reliefs):
        yield Parameters(float(range_m), shape, float(share), float(power), follow, short_range_m)

"""What the contacts make of the thickness: its mean and its standard deviation at any place."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.thickness_model import FittedSet, Pairs, Sites

Array = NDArray[Any]
SURFACE_SHARE = 0.97  # the surfaces are made of the likeliest sets that together weigh so much
SURFACE_SETS = 14


@dataclass(frozen=True, eq=False)
class ThicknessFit:
    """Sets of parameters with their weights, and the root of the thickness at every datum.

    Attributes
    ----------
    sets : tuple of FittedSet
    weights : ndarray (m,)
        Posterior weight of each set; they sum to 1.
    values : ndarray (m, n)
        Expected root of the thickness at the data given each set: the contact itself where the base was
        reached, the expectation beyond the end where the hole ended in sulphide.
    floor : ndarray (m, n)
        The same with open holes at their end.
    sills : ndarray (m,)
        Expected total sill of each set.
    open_covariance : dict of int to ndarray (n, n)
        For each root, the covariance of what is not known at open holes.
    volumes : ndarray (draws,)
        Volumes in m3 of equally likely bodies.
    positive : bool
        Whether the thickness is cut at zero here (and not by the caller, who adds an offset).
    """

    sets: tuple[FittedSet, ...]
    weights: Array
    values: Array
    floor: Array
    sills: Array
    open_covariance: dict[int, Array]
    volumes: Array
    positive: bool

    @property
    def volume_sigma_m3(self) -> float:
        """Standard deviation of the volume."""
        return float(np.std(self.volumes, ddof=1))

    def likeliest(self) -> ThicknessFit:
        """The same with the likeliest sets only, for surfaces."""
        order = np.argsort(-self.weights, kind="stable")
        total = np.cumsum(self.weights[order])
        count = min(int(np.searchsorted(total, SURFACE_SHARE)) + 1, SURFACE_SETS, order.size)
        keep = np.sort(order[:count])
        return ThicknessFit(
            tuple(self.sets[m] for m in keep), self.weights[keep] / self.weights[keep].sum(), self.values[keep],
            self.floor[keep], self.sills[keep], self.open_covariance, self.volumes, self.positive,
        )  # fmt: skip

    def estimate(self, targets: Sites, *, chunk: int = 2000) -> tuple[Array, Array, Array]:
        """Thickness at places.

        Returns
        -------
        mean, known, sigma : ndarray (b,)
            Expected thickness in m; the same with open holes held at their ends; and the standard deviation
            from the kriging, the choice of parameters and what is not known below open holes.
        """
        mean, known, second = (np.zeros(len(targets)) for _ in range(3))
        for start in range(0, len(targets), chunk):
            part = slice(start, start + chunk)
            pairs = Pairs(targets[part], self.sets[0].holes)
            for m, fitted in enumerate(self.sets):
                weights, variance = fitted.weights(pairs)
                power = fitted.parameters.root
                kriged = self.sills[m] * variance
                spread = np.einsum("bn,bn->b", weights @ self.open_covariance[power], weights)
                moments = self._moments(weights @ self.values[m], kriged + spread, power)
                mean[part] += self.weights[m] * moments[0]
                second[part] += self.weights[m] * moments[1]
                known[part] += self.weights[m] * self._moments(weights @ self.floor[m], kriged, power)[0]
        return mean, known, np.sqrt(np.maximum(second - mean**2, 0.0))

    def _moments(self, mean: Array, variance: Array, power: int) -> tuple[Array, Array]:
        if not self.positive:
            return mean, mean**2 + variance
        return positive_moment(mean, variance, power), positive_moment(mean, variance, 2 * power)

    def record(self) -> dict[str, Any]:
        """What the contacts say of the parameters: the best set, and weighted means."""
        best = self.sets[int(np.argmax(self.weights))].parameters
        parameters = [fitted.parameters for fitted in self.sets]

        def mean(name: str) -> float:
            return float(np.dot(self.weights, [float(getattr(p, name)) for p in parameters]))

        return {
            "sets_weighted": len(self.sets),
            "best_weight": float(self.weights.max()),
            "best_range_m": best.range_m,
            "best_shape": best.shape,
            "best_short_share": best.short_share,
            "best_mean_powers": list(best.mean_powers),
            "best_edge_power": best.edge_power,
            "best_root": best.root,
            "best_follows_relief": best.relief,
            "mean_range_m": mean("range_m"),
            "mean_short_share": mean("short_share"),
            "mean_root": mean("root"),
            "weight_of_relief": mean("relief"),
            "volume_mean_m3": float(self.volumes.mean()),
            "volume_low_m3": float(np.quantile(self.volumes, 0.16)),
            "volume_high_m3": float(np.quantile(self.volumes, 0.84)),
            "bodies_drawn": len(self.volumes),
        }


def positive_moment(mean: Array, variance: Array, power: int) -> Array:
    """Expectation of max(X, 0) ** power for normal X, by the recursion of truncated normal moments."""
    from scipy.special import ndtr

    sd = np.sqrt(np.maximum(variance, 1e-18))
    z = mean / sd
    before = ndtr(z)
    moment = mean * before + sd * np.exp(-0.5 * z * z) / np.sqrt(2 * np.pi)
    for order in range(2, power + 1):
        before, moment = moment, mean * moment + (order - 1) * variance * before
    return moment

"""Thickness from contacts, and from holes that only say how thick it is at least."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.thickness_model import (
    PRIOR_DEGREES,
    PRIOR_VARIATION,
    FittedSet,
    Parameters,
    Sites,
    ThicknessSettings,
)

Array = NDArray[Any]
KEEP_LOG = 9.0  # sets of parameters this much less likely (natural logarithm) than the best are dropped
KEEP_SETS = 48


@dataclass(frozen=True, eq=False)
class ThicknessFit:
    """Sets of parameters with their weights, and the thickness at every datum.

    Attributes
    ----------
    sets : tuple of FittedSet
    weights : ndarray (m,)
        Posterior weight of each set; they sum to 1.
    values : ndarray (m, n)
        Expected thickness at the data given each set, minus the offset: the contact itself where the base was
        reached, the expectation beyond the end where the hole ended in sulphide.
    floor : ndarray (n,)
        The same with open holes at their end.
    sills : ndarray (m,)
        Expected total sill of each set in m2.
    open_covariance : ndarray (n, n)
        Covariance of the thickness that is not known at open holes.
    volume_mean, volume_variance : float
        Mean and variance of the integral over the quadrature that was given.
    """

    sets: tuple[FittedSet, ...]
    weights: Array
    values: Array
    floor: Array
    sills: Array
    open_covariance: Array
    volume_mean: float
    volume_variance: float

    def estimate(self, targets: Sites, *, chunk: int = 4000) -> tuple[Array, Array]:
        """Expected thickness at ``targets``, and the same with open holes held at their ends (b,), (b,)."""
        mean, known = np.zeros(len(targets)), np.zeros(len(targets))
        for start in range(0, len(targets), chunk):
            part = slice(start, start + chunk)
            here = targets[part]
            for fitted, weight, values in zip(self.sets, self.weights, self.values, strict=True):
                both = fitted.estimate(here, np.column_stack([values, self.floor]))
                mean[part] += weight * both[:, 0]
                known[part] += weight * both[:, 1]
        return mean, known

    def sigma(self, targets: Sites, *, chunk: int = 2000) -> Array:
        """Standard deviation (b,) in m: kriging, the choice of parameters, and the unknown below open holes."""
        out = np.zeros(len(targets))
        for start in range(0, len(targets), chunk):
            part = slice(start, start + chunk)
            here = targets[part]
            first, second = np.zeros(len(here)), np.zeros(len(here))
            for fitted, weight, values, sill in zip(
                self.sets, self.weights, self.values, self.sills, strict=True
            ):
                covariance = fitted.parameters.covariance(here, fitted.holes)
                lam, variance = fitted.weights(here, covariance)
                mean = lam @ values
                spread = np.einsum("bn,nm,bm->b", lam, self.open_covariance, lam, optimize=True)
                first += weight * mean
                second += weight * (mean**2 + sill * variance + spread)
            out[part] = np.sqrt(np.maximum(second - first**2, 0.0))
        return out

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
            "best_edge_power": best.edge_power,
            "best_follows_relief": best.relief,
            "mean_range_m": mean("range_m"),
            "mean_short_share": mean("short_share"),
            "mean_edge_power": mean("edge_power"),
            "weight_of_relief": mean("relief"),
            "sill_m2": float(np.dot(self.weights, self.sills)),
        }


def fit_thickness(
    holes: Sites,
    thickness: Array,
    is_open: NDArray[np.bool_],
    error_sigma: Array,
    candidates: list[Parameters],
    quadrature: Sites,
    areas: Array,
    settings: ThicknessSettings,
) -> ThicknessFit:
    """Weigh the sets of parameters and find what is to be expected below open holes.

    Open holes are inequalities. Their thickness is drawn from its distribution given all other data, cut off
    at the end of the hole (Gibbs sampling of a truncated multivariate normal), together with the parameters;
    kriging is linear, so kriging the mean of the draws is the mean of the krigings.

    Parameters
    ----------
    holes : Sites
    thickness : ndarray (n,)
        Contacts, or least thickness at open holes.
    is_open : ndarray of bool (n,)
    error_sigma : ndarray (n,)
        Standard deviation in m of data that are not exact, else zero.
    candidates : list of Parameters
    quadrature, areas : Sites, ndarray (q,)
        Points and areas in m2 over which the volume is integrated.
    settings : ThicknessSettings

    References
    ----------
    Freulon, X. and de Fouquet, C. (1993). Conditioning a Gaussian model with inequalities. In Geostatistics
    Troia '92, 201-212 (the method; cited from memory).
    """
    rng = np.random.default_rng(settings.seed)
    floor = np.asarray(thickness, dtype=np.float64)
    count = floor.size
    scale = max(float(np.mean(floor)), 0.1)
    prior = PRIOR_DEGREES * (PRIOR_VARIATION * scale) ** 2
    # Errors are relative to the sill; the prior guess of the sill turns metres into that.
    error = (np.asarray(error_sigma) / (PRIOR_VARIATION * scale)) ** 2
    current = floor + np.where(is_open, 0.25 * scale, 0.0)
    fitted = [FittedSet(parameters, holes, error) for parameters in candidates]
    fitted = _prune(fitted, current, prior)
    open_index = np.flatnonzero(is_open)
    integrals = [item.integral(quadrature, areas) for item in fitted]
    volume_weights = np.array([weights for weights, _ in integrals])
    volume_relative = np.array([variance for _, variance in integrals])
    projected = np.array([item.projected for item in fitted])
    degrees = PRIOR_DEGREES + count - np.array([item.drift_count for item in fitted])

    total = np.zeros(len(fitted))
    values = np.zeros((len(fitted), count))
    sills = np.zeros(len(fitted))
    seen, cross = np.zeros(open_index.size), np.zeros((open_index.size, open_index.size))
    first = second = 0.0
    draws = settings.draws if open_index.size else 1
    warm = draws // 4 if open_index.size else 0
    for step in range(warm + draws):
        squares = np.einsum("mij,i,j->m", projected, current, current, optimize=True)
        posterior = _posterior(fitted, current, squares, prior)
        if open_index.size:
            pick = int(rng.choice(len(fitted), p=posterior))
            sill = (prior + squares[pick]) / rng.chisquare(degrees[pick])
            current = _sweep(current, floor, open_index, projected[pick], sill, rng)
            squares = np.einsum("mij,i,j->m", projected, current, current, optimize=True)
            posterior = _posterior(fitted, current, squares, prior)
        if step < warm:
            continue
        sill_mean = (prior + squares) / (degrees - 2.0)
        total += posterior
        values += posterior[:, None] * current[None]
        sills += posterior * sill_mean
        volumes = volume_weights @ current
        first += float(posterior @ volumes)
        second += float(posterior @ (volumes**2 + sill_mean * volume_relative))
        seen += current[open_index]
        cross += np.outer(current[open_index], current[open_index])
    weights = total / draws
    safe = np.where(total > 0, total, 1.0)
    covariance = np.zeros((count, count))
    if open_index.size:
        mean_open = seen / draws
        covariance[np.ix_(open_index, open_index)] = cross / draws - np.outer(mean_open, mean_open)
    keep = weights > 1e-4 * weights.max()
    return ThicknessFit(
        tuple(item for item, kept in zip(fitted, keep, strict=True) if kept),
        weights[keep] / weights[keep].sum(),
        (values / safe[:, None])[keep],
        floor,
        (sills / safe)[keep],
        covariance,
        first / draws,
        max(second / draws - (first / draws) ** 2, 0.0),
    )


def _posterior(fitted: list[FittedSet], current: Array, squares: Array, prior: float) -> Array:
    """Weights of the sets given the thickness at all holes (unit-information prior on the drift)."""
    count = current.size
    logs = np.empty(len(fitted))
    for m, item in enumerate(fitted):
        regression = float(current @ item.inverse @ current) - squares[m]
        total = prior + squares[m] + max(regression, 0.0) / (1.0 + count)
        logs[m] = (
            -0.5 * item.log_determinant
            - 0.5 * item.drift_count * math.log(1.0 + count)
            - 0.5 * (PRIOR_DEGREES + count) * math.log(total)
        )
    weights = np.exp(logs - logs.max())
    return weights / weights.sum()


def _prune(fitted: list[FittedSet], current: Array, prior: float) -> list[FittedSet]:
    """Drop sets that the data all but rule out."""
    squares = np.array([float(current @ item.projected @ current) for item in fitted])
    weights = _posterior(fitted, current, squares, prior)
    order = np.argsort(-weights, kind="stable")
    keep = [int(m) for m in order[:KEEP_SETS] if weights[m] > math.exp(-KEEP_LOG) * weights[order[0]]]
    return [fitted[m] for m in sorted(keep)]


def _sweep(
    current: Array, floor: Array, open_index: Array, projected: Array, sill: float, rng: np.random.Generator
) -> Array:
    """Draw each open hole's thickness once, given all others, from its truncated normal."""
    from scipy.special import log_ndtr, ndtri_exp

    current = current.copy()
    uniform = rng.random(open_index.size)
    for u, i in zip(uniform, open_index, strict=True):
        diagonal = projected[i, i]
        mean = current[i] - float(projected[i] @ current) / diagonal
        sd = math.sqrt(sill / diagonal)
        # The upper tail beyond the end of the hole, by symmetry in the lower tail and in logarithms.
        tail = float(log_ndtr((mean - floor[i]) / sd)) + math.log(max(1.0 - u, 1e-300))
        current[i] = max(mean - sd * float(ndtri_exp(tail)), floor[i])
    return current

"""Weighing sets of parameters, and drawing what is not known below holes that ended in sulphide."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.thickness_fit import ThicknessFit
from sms_resource.blocks.thickness_model import (
    PRIOR_DEGREES,
    PRIOR_VARIATION,
    FittedSet,
    Pairs,
    Parameters,
    Sites,
    ThicknessSettings,
    root_of,
    solve_sets,
)

Array = NDArray[Any]
KEEP_LOG = 9.0  # sets of parameters this much less likely (natural logarithm) than the best are dropped
KEEP_SETS = 48


@dataclass(frozen=True, eq=False)
class Quadrature:
    """Places over which a volume is summed: sites (q,), area of each in m2, and an offset of the thickness."""

    sites: Sites
    areas: Array
    offset: Array


def fit_thickness(
    holes: Sites,
    thickness: Array,
    is_open: NDArray[np.bool_],
    error_sigma: Array,
    candidates: list[Parameters],
    quadrature: Quadrature,
    settings: ThicknessSettings,
    *,
    positive: bool = True,
) -> ThicknessFit:
    """Weigh the sets of parameters, and draw bodies that are equally likely given the contacts.

    Open holes are inequalities. Each draw takes a set of parameters by its weight, then the thickness at open
    holes from its distribution given all other data, cut off at the end of the hole (Gibbs sampling of a
    truncated multivariate normal), then one body by conditional simulation.

    Parameters
    ----------
    holes : Sites
    thickness : ndarray (n,)
        Contacts, or least thickness at open holes, in m; minus the offset if there is one.
    is_open : ndarray of bool (n,)
    error_sigma : ndarray (n,)
        Standard deviation in m of data that are not exact, else zero.
    candidates : list of Parameters
        With roots above 1 only where all ``thickness`` is at least zero.
    quadrature : Quadrature
    settings : ThicknessSettings
    positive : bool
        False where ``thickness`` is a difference from an offset, which may be negative.

    References
    ----------
    Freulon, X. and de Fouquet, C. (1993). Conditioning a Gaussian model with inequalities. In Geostatistics
    Troia '92, 201-212 (the method; cited from memory).
    """
    rng = np.random.default_rng(settings.seed)
    floor = np.asarray(thickness, dtype=np.float64)
    scale = max(float(np.mean(np.abs(floor))), 0.1)
    current = floor + np.where(is_open, 0.25 * scale, 0.0)
    # Errors are relative to the sill; the prior guess of the sill turns metres into that.
    error = (np.asarray(error_sigma) / (PRIOR_VARIATION * scale)) ** 2
    system = System.of(_likely(solve_sets(candidates, holes, error), current, scale), scale)
    count = len(system.sets)
    bodies = _Bodies(system, holes, quadrature, positive)
    open_index = np.flatnonzero(is_open)
    warm = settings.draws // 4 if open_index.size else 0
    total, sills = np.zeros(count), np.zeros(count)
    values = np.zeros((count, floor.size))
    volumes = np.empty(settings.draws)
    roots = sorted(set(system.roots))
    seen = {root: np.zeros(open_index.size) for root in roots}
    cross = {root: np.zeros((open_index.size, open_index.size)) for root in roots}
    posterior, squares, moved = system.posterior(current)
    for step in range(warm + settings.draws):
        pick = int(rng.choice(count, p=posterior))
        sill = (system.prior[pick] + squares[pick]) / rng.chisquare(system.degrees[pick])
        if open_index.size:
            root = int(system.roots[pick])
            lower = floor[open_index] ** (1.0 / root)
            drawn = _sweep(moved[pick], lower, open_index, system.projected[pick], sill, rng)
            current = np.where(is_open, np.maximum(drawn**root, floor), floor)
            posterior, squares, moved = system.posterior(current)
        if step < warm:
            continue
        volumes[step - warm] = bodies.volume(pick, moved[pick], sill, rng)
        total += posterior
        values += posterior[:, None] * moved
        sills += posterior * (system.prior + squares) / (system.degrees - 2.0)
        for root in roots:
            part = current[open_index] ** (1.0 / root)
            seen[root] += part
            cross[root] += np.outer(part, part)
    safe = np.where(total > 0, total, 1.0)
    covariance = {}
    for root in roots:
        covariance[root] = np.zeros((floor.size, floor.size))
        mean = seen[root] / settings.draws
        between = cross[root] / settings.draws - np.outer(mean, mean)
        covariance[root][np.ix_(open_index, open_index)] = between
    keep = total > 1e-4 * total.max()
    ends = np.where(floor >= 0, np.abs(floor)[None] ** (1.0 / system.roots[:, None]), floor[None])
    return ThicknessFit(
        tuple(item for item, kept in zip(system.sets, keep, strict=True) if kept),
        total[keep] / total[keep].sum(),
        (values / safe[:, None])[keep],
        ends[keep],
        (sills / safe)[keep],
        covariance,
        volumes,
        positive,
    )


@dataclass(frozen=True, eq=False)
class System:
    """The sets of parameters side by side, to be weighted again for every draw."""

    sets: list[FittedSet]
    roots: Array
    projected: Array
    inverse: Array
    constant: Array
    degrees: Array
    prior: Array

    @classmethod
    def of(cls, sets: list[FittedSet], scale: float) -> System:
        """Stack the sets; ``scale`` is a typical thickness in m, for the prior guess of the sill."""
        count = len(sets[0].holes)
        drifts = np.array([item.drift_count for item in sets], dtype=np.float64)
        return cls(
            sets,
            np.array([item.parameters.root for item in sets]),
            np.array([item.projected() for item in sets]),
            np.array([item.inverse for item in sets]),
            np.array([_log_constant(item, count, scale) for item in sets]),
            PRIOR_DEGREES + count - drifts,
            np.array([_prior_squares(item.parameters.root, scale) for item in sets]),
        )

    def posterior(self, current: Array) -> tuple[Array, Array, Array]:
        """Weights of the sets given the thickness, their residual sums of squares, and its roots (m, n)."""
        count = current.size
        roots, which = np.unique(self.roots, return_inverse=True)
        moved = np.array([_root(current, int(root)) for root in roots])[which]
        squares = np.sum((self.projected @ moved[:, :, None])[:, :, 0] * moved, axis=1)
        whole = np.sum((self.inverse @ moved[:, :, None])[:, :, 0] * moved, axis=1)
        total = self.prior + squares + np.maximum(whole - squares, 0.0) / (1.0 + count)
        stretch = np.array([_log_jacobian(current, int(root)) for root in roots])[which]
        logs = self.constant + stretch - 0.5 * (PRIOR_DEGREES + count) * np.log(total)
        weights = np.exp(logs - logs.max())
        return weights / weights.sum(), squares, moved


class _Bodies:
    """Conditional simulation of the body on the quadrature; each set is factored when it is first drawn."""

    def __init__(self, system: System, holes: Sites, quadrature: Quadrature, positive: bool) -> None:
        self.system, self.quadrature, self.positive = system, quadrature, positive
        self.own = Pairs(quadrature.sites, quadrature.sites)
        self.to_holes = Pairs(quadrature.sites, holes)
        self.factors: dict[int, tuple[Array, Array]] = {}

    def volume(self, pick: int, values: Array, sill: float, rng: np.random.Generator) -> float:
        """Volume in m3 of one body drawn from a set."""
        if pick not in self.factors:
            weights, covariance = self.system.sets[pick].joint(self.own, self.to_holes)
            covariance[np.diag_indices_from(covariance)] += 1e-8 * (1.0 + covariance.max())
            self.factors[pick] = weights, root_of(covariance)
        weights, lower = self.factors[pick]
        field = weights @ values + math.sqrt(sill) * (lower @ rng.standard_normal(len(lower)))
        if self.positive:
            field = np.maximum(field, 0.0) ** self.system.sets[pick].parameters.root
        return float(np.sum(self.quadrature.areas * np.maximum(field + self.quadrature.offset, 0.0)))


def _likely(sets: list[FittedSet], current: Array, scale: float) -> list[FittedSet]:
    """The sets that the data do not all but rule out."""
    whole: dict[tuple[int, int], float] = {}
    logs = np.empty(len(sets))
    count = current.size
    stretch = {root: _log_jacobian(current, root) for root in {item.parameters.root for item in sets}}
    for m, item in enumerate(sets):
        root = item.parameters.root
        moved = _root(current, root)
        key = id(item.inverse), root
        if key not in whole:
            whole[key] = float(moved @ item.inverse @ moved)
        squares = item.squares(moved, whole[key])
        total = _prior_squares(root, scale) + squares + max(whole[key] - squares, 0.0) / (1.0 + count)
        fit = -0.5 * (PRIOR_DEGREES + count) * math.log(total)
        logs[m] = _log_constant(item, count, scale) + stretch[root] + fit
    order = np.argsort(-logs, kind="stable")[:KEEP_SETS]
    return [sets[m] for m in sorted(order) if logs[m] > logs[order[0]] - KEEP_LOG]


def _root(thickness: Array, root: int) -> Array:
    return thickness if root == 1 else np.maximum(thickness, 0.0) ** (1.0 / root)


def _log_jacobian(thickness: Array, root: int) -> float:
    """Of the change from thickness to its root; near-zero thickness counts as a twentieth of the mean."""
    if root == 1:
        return 0.0
    least = 0.05 * max(float(np.mean(thickness)), 1e-6)
    logs = np.log(np.maximum(thickness, least))
    return float(np.sum((1.0 / root - 1.0) * logs)) - thickness.size * math.log(root)


def _prior_squares(root: int, scale: float) -> float:
    """Sum of squares of the prior guess: the root strays as much as the thickness does, to first order."""
    return PRIOR_DEGREES * (PRIOR_VARIATION * scale ** (1.0 / root) / root) ** 2


def _log_constant(item: FittedSet, count: int, scale: float) -> float:
    """A set's likelihood apart from the data: determinant, price of its drift (unit information), prior."""
    prior = 0.5 * PRIOR_DEGREES * math.log(_prior_squares(item.parameters.root, scale))
    return prior - 0.5 * item.log_determinant - 0.5 * item.drift_count * math.log(1.0 + count)


def _sweep(
    values: Array, lower: Array, open_index: Array, projected: Array, sill: float, rng: np.random.Generator
) -> Array:
    """Draw the root at each open hole once, given all others, from its normal cut off at the hole's end."""
    from scipy.special import log_ndtr, ndtri_exp

    values = values.copy()
    for u, least, i in zip(rng.random(open_index.size), lower, open_index, strict=True):
        diagonal = projected[i, i]
        mean = values[i] - float(projected[i] @ values) / diagonal
        sd = math.sqrt(sill / diagonal)
        # The upper tail beyond the end of the hole, by symmetry in the lower tail and in logarithms.
        tail = float(log_ndtr((mean - least) / sd)) + math.log(max(1.0 - u, 1e-300))
        values[i] = max(mean - sd * float(ndtri_exp(tail)), least)
    return values

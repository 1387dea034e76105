"""Fit of a variogram model to experimental variograms.

Only the ranges are searched: for given ranges the nugget and the sills follow from a linear least squares
problem with no negative answer (variable projection, Golub & Pereyra 1973), so that the search has few
dimensions and one or two starts are enough.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.geostatistics import fit_kernels
from sms_resource.geostatistics.directions import cached_axes
from sms_resource.geostatistics.experimental import ExperimentalVariogram
from sms_resource.geostatistics.fit_kernels import (
    FIXED,
    FREE,
    MEAN_OVER_PAIRS,
    NO_EQUATION,
    RATIO,
    SUM_OF_SILLS,
)
from sms_resource.geostatistics.fit_settings import FitSettings
from sms_resource.geostatistics.model import SHAPE_CODES, Structure, VariogramModel

Array = NDArray[np.float64]
AXIS_NAMES = ("major", "semi-major", "minor")


@dataclass(frozen=True)
class FitStart:
    """Logs of the free ranges and the fitted model at the lags, from an earlier fit of nearly the same data."""

    parameters: Array
    fitted_gamma: Array


@dataclass(frozen=True)
class VariogramFit:
    """A fitted model and how it was reached.

    Attributes
    ----------
    model : VariogramModel
    weighted_ss : float
        Weighted sum of squared differences, sum w (gamma - model)^2.
    lags_used, pairs_used : int
    bounds_hit : tuple of str
        Which parameters stand at a limit, in words.
    parameters : (p,) float
        Logs of the free ranges.
    fitted_gamma : (lags used,) float
        The model at the lags.
    """

    model: VariogramModel
    weighted_ss: float
    lags_used: int
    pairs_used: int
    bounds_hit: tuple[str, ...]
    parameters: Array
    fitted_gamma: Array

    @property
    def start(self) -> FitStart:
        """Where a fit of nearly the same lags may start."""
        return FitStart(self.parameters, self.fitted_gamma)


class _Problem:
    """Lags and settings as the arrays that the kernels take."""

    def __init__(
        self, variograms: Sequence[ExperimentalVariogram], settings: FitSettings, start: FitStart | None
    ) -> None:
        self.settings = settings
        axes = cached_axes(settings.azimuth, settings.plunge, settings.tilt)
        keep = [
            np.isfinite(v.gamma) & np.isfinite(v.distance) & (v.pairs >= max(1, settings.least_pairs))
            for v in variograms
        ]
        self.squares = np.concatenate([(v.separations[k] @ axes.T) ** 2 for v, k in zip(variograms, keep)])
        self.gamma = np.concatenate([v.gamma[k] for v, k in zip(variograms, keep)])
        self.pairs = np.concatenate([v.pairs[k] for v, k in zip(variograms, keep)]).astype(float)
        self.distance = np.concatenate([v.distance[k] for v, k in zip(variograms, keep)])
        if self.gamma.size == 0:
            raise ValueError("no lag has enough pairs to fit a model")
        self.layout_kind, self.layout_value = range_layout(settings)
        free = self.layout_kind == FREE
        self.count = int(self.layout_value[free].max(initial=-1.0)) + 1
        self.low, self.high = self._limits()
        same_lags = start is not None and len(start.fitted_gamma) == len(self.gamma)
        self.weights = self._weights(start.fitted_gamma if start is not None and same_lags else None)
        self.pair_squares = np.empty((0, 3))
        self.mode, self.total = NO_EQUATION, 0.0
        if settings.mean_over_pairs is not None and settings.pair_separations is not None:
            self.pair_squares = (settings.pair_separations @ axes.T) ** 2
            self.mode, self.total = MEAN_OVER_PAIRS, float(settings.mean_over_pairs)
        elif settings.total_sill is not None:
            self.mode, self.total = SUM_OF_SILLS, float(settings.total_sill)
        given = (settings.nugget, *(settings.sills or (None,) * len(settings.shapes)))
        self.fixed = np.array([np.nan if value is None else value for value in given])
        self.shapes = np.array([SHAPE_CODES[shape] for shape in settings.shapes], dtype=np.int64)

    def _limits(self) -> tuple[Array, Array]:
        reach = (0.5 * float(self.distance.min()), 3.0 * float(self.distance.max()))
        table = self.settings.range_limits or (reach, reach, reach)
        low, high = np.zeros(self.count), np.full(self.count, np.inf)
        for kinds, values in zip(self.layout_kind, self.layout_value):
            for axis in np.flatnonzero(kinds == FREE):
                number = int(values[axis])
                low[number] = max(low[number], table[axis][0])
                high[number] = min(high[number], table[axis][1])
        return np.log(low), np.log(np.maximum(high, low * 1.0001))

    def _weights(self, model: Array | None) -> Array:
        kind = self.settings.weighting
        if kind == "equal":
            return np.ones_like(self.gamma)
        if kind == "pairs" or (kind == "pairs_over_gamma" and model is None):
            return self.pairs.copy()
        if kind == "pairs_over_gamma" and model is not None:
            floor = 1e-3 * float(np.max(model)) or 1.0
            return self.pairs / np.maximum(model, floor) ** 2
        return self.pairs / self.distance**2

    def descend(self, start: Array, tolerance: float) -> tuple[Array, Array, Array, float]:
        """Logs of ranges, sills, weighted residuals and their sum of squares, from a start."""
        kernel: Any = fit_kernels.descend
        return kernel(
            start, self.low, self.high, tolerance, self.layout_kind, self.layout_value, self.shapes,
            self.squares, self.gamma, self.weights, self.fixed, self.mode, self.total, self.pair_squares,
        )  # fmt: skip

    def best_points(self, points: Array, most: int) -> Array:
        """The points (p, k) with the least sums of squares."""
        costs = np.empty(len(points))
        kernel: Any = fit_kernels.costs
        kernel(
            points, self.layout_kind, self.layout_value, self.shapes, self.squares, self.gamma, self.weights,
            self.fixed, self.mode, self.total, self.pair_squares, costs,
        )  # fmt: skip
        return points[np.argsort(costs, kind="stable")[:most]]

    def search(self) -> tuple[Array, Array, Array, float]:
        """Best of the descents from the two best points of a grid; weights that need a model are renewed."""
        rounds = 3 if self.settings.weighting == "pairs_over_gamma" else 1
        found = min(
            (self.descend(p, 1e-7) for p in self.best_points(self._grid(), 2)), key=lambda item: item[3]
        )
        for _ in range(rounds - 1):
            self.weights = self._weights(self.fitted(found[2]))
            found = self.descend(found[0], 1e-7)
        return found

    def fitted(self, residual: Array) -> Array:
        """The model at the lags."""
        return self.gamma + residual / np.sqrt(self.weights)

    def _grid(self) -> Array:
        count = self.count
        if count == 0:
            return np.empty((1, 0))
        if count > 5:
            shares = np.random.default_rng(0).uniform(0.1, 0.9, (200, count))
        else:
            levels = np.linspace(0.05, 0.95, {1: 16, 2: 8, 3: 5}.get(count, 3))
            shares = np.stack(np.meshgrid(*[levels] * count, indexing="ij"), axis=-1).reshape(-1, count)
        return self.low + shares * (self.high - self.low)

    def ranges(self, parameters: Array) -> Array:
        """Ranges (structures, 3) of a vector of logs."""
        result = np.empty((len(self.shapes), 3))
        kernel: Any = fit_kernels.set_ranges
        kernel(parameters, self.layout_kind, self.layout_value, result)
        return result


def range_layout(settings: FitSettings) -> tuple[NDArray[np.int64], Array]:
    """Where each range (structures, 3) comes from, as the kernels read it.

    A fixed range wins; then a ratio to the major range; then a fixed range of an axis with the same link.
    """
    kinds = np.zeros((len(settings.shapes), 3), dtype=np.int64)
    values = np.zeros((len(settings.shapes), 3))
    number = 0
    for row, given in enumerate(settings.ranges or ((None, None, None),) * len(settings.shapes)):
        groups: dict[int, int] = {}
        for axis in range(3):
            ratio = (None, settings.semi_ratio, settings.minor_ratio)[axis]
            link = settings.links[axis]
            shared = [given[other] for other in range(3) if settings.links[other] == link]
            firm = (
                given[axis] if given[axis] is not None else next((v for v in shared if v is not None), None)
            )
            if given[axis] is None and ratio is not None:
                kinds[row, axis], values[row, axis] = RATIO, ratio
            elif firm is not None:
                kinds[row, axis], values[row, axis] = FIXED, firm
            else:
                if link not in groups:
                    groups[link], number = number, number + 1
                kinds[row, axis], values[row, axis] = FREE, groups[link]
    return kinds, values


def fit_variogram(
    variograms: ExperimentalVariogram | Sequence[ExperimentalVariogram],
    settings: FitSettings | None = None,
    *,
    start: FitStart | None = None,
) -> VariogramFit:
    """Weighted least squares fit through the mean pair distances of one or several experimental variograms.

    Parameters
    ----------
    variograms : ExperimentalVariogram or sequence
        Fitted together, each lag at the mean separation of its pairs.
    settings : FitSettings, optional
    start : FitStart, optional
        Of an earlier fit of nearly the same lags, such as one without a hole: the search starts there alone,
        stops at a ten-thousandth of a range, and weights that depend on the model are those of that fit.

    Returns
    -------
    VariogramFit

    Raises
    ------
    ValueError
        If no lag has enough pairs, or nugget and sills would all be zero.

    References
    ----------
    Cressie, N. (1985). Fitting variogram models by weighted least squares. Mathematical Geology 17, 563-586.
    Golub, G. H., & Pereyra, V. (1973). SIAM Journal on Numerical Analysis 10, 413-432.
    """
    settings = settings or FitSettings()
    several = (variograms,) if isinstance(variograms, ExperimentalVariogram) else tuple(variograms)
    problem = _Problem(several, settings, start)
    if start is not None:
        best, sills, residual, cost = problem.descend(start.parameters, 1e-4)
    else:
        best, sills, residual, cost = problem.search()
    return VariogramFit(
        model=_model(problem, best, sills),
        weighted_ss=float(cost),
        lags_used=len(problem.gamma),
        pairs_used=int(problem.pairs.sum()),
        bounds_hit=_bounds_hit(problem, best, sills),
        parameters=best,
        fitted_gamma=problem.fitted(residual),
    )


def _model(problem: _Problem, parameters: Array, sills: Array) -> VariogramModel:
    settings = problem.settings
    if not sills.sum() > 0.0:
        raise ValueError("the fitted nugget and sills are all zero: the values do not vary")
    structures = [
        Structure(shape, float(sill), (float(triple[0]), float(triple[1]), float(triple[2])))  # type: ignore[arg-type]
        for shape, sill, triple in zip(settings.shapes, sills[1:], problem.ranges(parameters))
    ]
    if settings.ranges is None and settings.sills is None:
        structures.sort(key=lambda structure: structure.ranges[0])
    return VariogramModel(
        float(sills[0]), tuple(structures), settings.azimuth, settings.plunge, settings.tilt
    )


def _bounds_hit(problem: _Problem, parameters: Array, sills: Array) -> tuple[str, ...]:
    """Parameters at a limit, in words."""
    hit = []
    floor = 1e-6 * float(sills.sum())
    if np.isnan(problem.fixed[0]) and sills[0] <= floor:
        hit.append("the nugget is at its lower limit, zero")
    numbers = list(range(1, len(sills)))
    if problem.settings.ranges is None and problem.settings.sills is None:  # as the model sorts them
        majors = [float(triple[0]) for triple in problem.ranges(parameters)]
        numbers = (np.argsort(np.argsort(majors, kind="stable"), kind="stable") + 1).tolist()
    for place, (number, sill) in enumerate(zip(numbers, sills[1:]), start=1):
        if np.isnan(problem.fixed[place]) and sill <= floor:
            hit.append(f"the sill of structure {number} is at its lower limit, zero")
    seen: set[float] = set()
    for number, kinds, values in zip(numbers, problem.layout_kind, problem.layout_value):
        for axis in np.flatnonzero(kinds == FREE):
            if values[axis] in seen:
                continue
            seen.add(values[axis])
            at, low, high = (v[int(values[axis])] for v in (parameters, problem.low, problem.high))
            own = [
                a for a in range(3) if (kinds[a] == FREE and values[a] == values[axis]) or kinds[a] == RATIO
            ]
            names = " and ".join(AXIS_NAMES[a] for a in own)
            for limit, word in ((low, "lower"), (high, "upper")):
                if abs(at - limit) < 1e-4:
                    hit.append(
                        f"the {names} range of structure {number} is at its {word} limit, {math.exp(limit):.3g} m"
                    )
    return tuple(hit)

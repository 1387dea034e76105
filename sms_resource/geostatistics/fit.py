"""Fit of a variogram model to experimental variograms.

Only the ranges are searched: for given ranges the nugget and the sills follow from a linear least squares
problem with no negative answer (variable projection, Golub & Pereyra 1973), so that the search has few
dimensions and one or two starts are enough.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sms_resource.geostatistics.experimental import ExperimentalVariogram
from sms_resource.geostatistics.fit_settings import FitSettings
from sms_resource.geostatistics.model import Structure, VariogramModel, rotation_axes

Array = NDArray[np.float64]
AXIS_NAMES = ("major", "semi-major", "minor")
FIRM = 1e5  # weight of an equation that must hold, relative to the strongest lag


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


def unit_structure(shape: str, reduced: Array) -> Array:
    """Variogram with sill 1 at squared reduced distances (range 1)."""
    if shape == "exponential":
        return -np.expm1(-3.0 * np.sqrt(reduced))
    if shape == "gaussian":
        return -np.expm1(-3.0 * reduced)
    h = np.minimum(np.sqrt(reduced), 1.0)
    return h * (1.5 - 0.5 * h * h)


class _Problem:
    """Lags as arrays, the free ranges as one vector of logs, and the linear part solved for each."""

    def __init__(
        self, variograms: Sequence[ExperimentalVariogram], settings: FitSettings, start: FitStart | None
    ) -> None:
        self.settings = settings
        axes = rotation_axes(settings.azimuth, settings.plunge, settings.tilt)
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
        self.layout = self._layout()
        self.low, self.high = self._limits()
        reference = None  # the model that weights depend on
        if start is not None and len(start.fitted_gamma) == len(self.gamma):
            reference = start.fitted_gamma
        self.weights = self._weights(reference)
        self.pair_squares = None
        if settings.mean_over_pairs is not None and settings.pair_separations is not None:
            self.pair_squares = (settings.pair_separations @ axes.T) ** 2
        count = len(settings.shapes)
        self.fixed = np.full(count + 1, np.nan)
        if settings.nugget is not None:
            self.fixed[0] = settings.nugget
        for row, sill in enumerate(settings.sills or (None,) * count):
            if sill is not None:
                self.fixed[row + 1] = sill

    def _layout(self) -> list[list[tuple[str, float]]]:
        """For each structure and axis: ("fixed", m), ("free", number) or ("ratio", factor of the major)."""
        settings = self.settings
        result, number = [], 0
        for given in settings.ranges or ((None, None, None),) * len(settings.shapes):
            groups: dict[int, int] = {}
            row: list[tuple[str, float]] = []
            for axis in range(3):
                ratio = (None, settings.semi_ratio, settings.minor_ratio)[axis]
                value = given[axis]
                shared = [given[other] for other in range(3) if settings.links[other] == settings.links[axis]]
                firm = [item for item in shared if item is not None]
                if value is not None:
                    row.append(("fixed", value))
                elif ratio is not None:
                    row.append(("ratio", ratio))
                elif firm:
                    row.append(("fixed", firm[0]))
                else:
                    if settings.links[axis] not in groups:
                        groups[settings.links[axis]] = number
                        number += 1
                    row.append(("free", groups[settings.links[axis]]))
            if row[0][0] == "free" and row[0][1] not in [item[1] for item in row[1:] if item[0] == "free"]:
                # a range that only reaches the data through its ratio follows from the axis that is fixed
                for axis in (1, 2):
                    ratio = (None, settings.semi_ratio, settings.minor_ratio)[axis]
                    if ratio is not None and row[axis][0] == "fixed":
                        row[0] = ("fixed", row[axis][1] / ratio)
                        number -= 1
                        break
            result.append(row)
        self.count = number
        return result

    def _limits(self) -> tuple[Array, Array]:
        reach = (0.5 * float(self.distance.min()), 3.0 * float(self.distance.max()))
        table = self.settings.range_limits or (reach, reach, reach)
        low, high = np.zeros(self.count), np.full(self.count, np.inf)
        for row in self.layout:
            for axis, (kind, number) in enumerate(row):
                if kind == "free":
                    low[int(number)] = max(low[int(number)], table[axis][0])
                    high[int(number)] = min(high[int(number)], table[axis][1])
        high = np.maximum(high, low * 1.0001)
        return np.log(low), np.log(high)

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

    def reweigh(self, model: Array) -> None:
        """Renew weights that depend on the model at the lags."""
        self.weights = self._weights(model)

    def ranges(self, parameters: Array) -> Array:
        """Ranges (structures, 3) of a vector of logs."""
        result = np.empty((len(self.layout), 3))
        for number, row in enumerate(self.layout):
            for axis, (kind, value) in enumerate(row):
                if kind == "fixed":
                    result[number, axis] = value
                elif kind == "free":
                    result[number, axis] = math.exp(parameters[int(value)])
                else:
                    result[number, axis] = value * result[number, 0]
        return result

    def design(self, squares: Array, ranges: Array) -> Array:
        """Columns of the nugget and of each structure with sill 1."""
        columns = [np.ones(len(squares))]
        for shape, triple in zip(self.settings.shapes, ranges):
            columns.append(unit_structure(shape, squares @ triple**-2.0))
        return np.column_stack(columns)

    def solve(self, parameters: Array) -> tuple[Array, Array]:
        """Nugget and sills for given ranges, and the weighted residuals."""
        ranges = self.ranges(parameters)
        design = self.design(self.squares, ranges)
        root = np.sqrt(self.weights)
        equation: Array | None = None
        total: float | None = 0.0
        if self.pair_squares is not None:
            equation, total = (
                self.design(self.pair_squares, ranges).mean(axis=0),
                self.settings.mean_over_pairs,
            )
        elif self.settings.total_sill is not None:
            equation, total = np.ones(design.shape[1]), self.settings.total_sill
        sills = _linear_part(
            design * root[:, None], self.gamma * root, self.fixed, equation, float(total or 0.0)
        )
        return sills, root * (design @ sills - self.gamma)


def _linear_part(design: Array, target: Array, fixed: Array, equation: Array | None, total: float) -> Array:
    """Least squares with no negative answer; known entries of ``fixed`` stay, ``equation @ answer = total``."""
    free = np.isnan(fixed)
    answer = np.where(free, 0.0, fixed)
    count = int(free.sum())
    if count == 0:
        return answer
    rest = target - design[:, ~free] @ fixed[~free]
    columns = design[:, free]
    left = 0.0
    if equation is not None:
        left = max(0.0, total - float(equation[~free] @ fixed[~free]))
        if count == 1:
            answer[free] = left / max(float(equation[free][0]), 1e-12)
            return answer
    if count == 1:
        norm = float(columns[:, 0] @ columns[:, 0])
        answer[free] = max(0.0, float(columns[:, 0] @ rest) / norm) if norm > 0.0 else 0.0
        return answer
    if equation is not None and count == 2:
        # one unknown is left once the equation is used: share t of the first, the rest of the second
        first, second = left / max(equation[free][0], 1e-12), left / max(equation[free][1], 1e-12)
        slope = columns[:, 0] * first - columns[:, 1] * second
        norm = float(slope @ slope)
        share = float(slope @ (rest - columns[:, 1] * second)) / norm if norm > 0.0 else 0.0
        share = min(1.0, max(0.0, share))
        answer[free] = (share * first, (1.0 - share) * second)
        return answer
    from scipy.optimize import nnls

    if equation is not None:
        firm = FIRM * max(float(np.linalg.norm(columns)), 1e-300)
        columns = np.vstack([columns, firm * equation[free]])
        rest = np.append(rest, firm * left)
    answer[free] = nnls(columns, rest)[0]
    return answer


def _descend(problem: _Problem, start: Array, tolerance: float) -> tuple[Array, float]:
    """Levenberg-Marquardt steps inside limits, with differences for the slopes, to a shift of ``tolerance``."""
    low, high = problem.low, problem.high
    at = np.clip(start, low, high)
    here = problem.solve(at)[1]
    cost, damping, step = float(here @ here), 1e-3, 1e-6
    for _ in range(60):
        slopes = np.empty((len(here), len(at)))
        for number in range(len(at)):
            side = step if at[number] + step <= high[number] else -step
            moved = at.copy()
            moved[number] += side
            slopes[:, number] = (problem.solve(moved)[1] - here) / side
        normal, downhill = slopes.T @ slopes, -slopes.T @ here
        held = ((at <= low) & (downhill < 0.0)) | ((at >= high) & (downhill > 0.0))
        downhill[held] = 0.0
        normal[held, :] = normal[:, held] = 0.0
        scale = np.diag(normal).copy()
        scale[scale <= 0.0] = 1.0
        found: Array | None = None
        while damping < 1e8:
            move = np.linalg.solve(normal + damping * np.diag(scale), downhill)
            trial = np.clip(at + np.clip(move, -1.0, 1.0), low, high)
            there = problem.solve(trial)[1]
            trial_cost = float(there @ there)
            if trial_cost < cost:
                found = trial
                break
            if float(np.max(np.abs(trial - at))) <= tolerance:
                break
            damping *= 8.0
        if found is None:
            break
        shift = float(np.max(np.abs(found - at)))
        at, here, cost, damping = found, there, trial_cost, max(damping / 6.0, 1e-12)
        if shift <= tolerance:
            break
    return at, cost


def _starts(problem: _Problem) -> list[Array]:
    """Starts: a grid of shares of the way between the limits, the two best by their sum of squares."""
    count = problem.count
    if count == 0:
        return [np.empty(0)]
    levels = np.linspace(0.05, 0.95, {1: 16, 2: 8, 3: 5}.get(count, 3))
    if count > 5:
        grid = np.random.default_rng(0).uniform(0.1, 0.9, (200, count))
    else:
        grid = np.stack(np.meshgrid(*[levels] * count, indexing="ij"), axis=-1).reshape(-1, count)
    points = problem.low + grid * (problem.high - problem.low)
    costs = [float(r @ r) for r in (problem.solve(point)[1] for point in points)]
    order = np.argsort(costs, kind="stable")
    return [points[number] for number in order[:2]]


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
        best = _descend(problem, start.parameters, 1e-4)[0] if problem.count else np.empty(0)
    else:
        best = _search(problem)
    sills, residual = problem.solve(best)
    return VariogramFit(
        model=_model(problem, best, sills),
        weighted_ss=float(residual @ residual),
        lags_used=len(problem.gamma),
        pairs_used=int(problem.pairs.sum()),
        bounds_hit=_bounds_hit(problem, best, sills),
        parameters=best,
        fitted_gamma=problem.gamma + residual / np.sqrt(problem.weights),
    )


def _search(problem: _Problem) -> Array:
    """Best logs of the ranges from the starts of the grid, with weights renewed where they need a model."""
    rounds = 3 if problem.settings.weighting == "pairs_over_gamma" else 1
    best = np.empty(0)
    for turn in range(rounds):
        if problem.count:
            starts = _starts(problem) if turn == 0 else [best]
            best = min((_descend(problem, point, 1e-7) for point in starts), key=lambda pair: pair[1])[0]
        if turn + 1 < rounds:
            sills = problem.solve(best)[0]
            problem.reweigh(problem.design(problem.squares, problem.ranges(best)) @ sills)
    return best


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
    for number, sill in enumerate(sills[1:], start=1):
        if np.isnan(problem.fixed[number]) and sill <= floor:
            hit.append(f"the sill of structure {number} is at its lower limit, zero")
    seen = set()
    for number, row in enumerate(problem.layout, start=1):
        for kind, value in row:
            if kind != "free" or value in seen:
                continue
            seen.add(value)
            at, low, high = parameters[int(value)], problem.low[int(value)], problem.high[int(value)]
            names = " and ".join(
                AXIS_NAMES[a] for a, item in enumerate(row) if item == ("free", value) or item[0] == "ratio"
            )
            for limit, word in ((low, "lower"), (high, "upper")):
                if abs(at - limit) < 1e-4:
                    hit.append(
                        f"the {names} range of structure {number} is at its {word} limit, {math.exp(limit):.3g} m"
                    )
    return tuple(hit)

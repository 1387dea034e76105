"""Weighted least squares of a variogram model: linear part for given ranges, and steps in the ranges.

A layout says where each range comes from: kind 0 a fixed number, kind 1 the exponential of a free parameter
(``layout_value`` is its number), kind 2 a ratio of the major range.
"""

# mypy: allow-untyped-defs

from __future__ import annotations

import numpy as np
from numba import njit

FIXED, FREE, RATIO = range(3)
SPHERICAL, EXPONENTIAL, GAUSSIAN = range(3)
NO_EQUATION, SUM_OF_SILLS, MEAN_OVER_PAIRS = range(3)


@njit(cache=True)
def set_ranges(parameters, layout_kind, layout_value, ranges):
    """Ranges (k, 3) for a vector of logs."""
    for k in range(ranges.shape[0]):
        for axis in range(3):
            value = layout_value[k, axis]
            if layout_kind[k, axis] == FREE:
                ranges[k, axis] = np.exp(parameters[int(value)])
            elif layout_kind[k, axis] == FIXED:
                ranges[k, axis] = value
        for axis in range(3):
            if layout_kind[k, axis] == RATIO:
                ranges[k, axis] = layout_value[k, axis] * ranges[k, 0]


@njit(cache=True)
def unit(shape, square):
    """Variogram with sill 1 and range 1 at a squared distance."""
    if shape == EXPONENTIAL:
        return 1.0 - np.exp(-3.0 * np.sqrt(square))
    if shape == GAUSSIAN:
        return 1.0 - np.exp(-3.0 * square)
    if square >= 1.0:
        return 1.0
    h = np.sqrt(square)
    return h * (1.5 - 0.5 * h * h)


@njit(cache=True)
def set_design(squares, shapes, ranges, design):
    """Columns of the nugget (ones) and of each structure with sill 1."""
    for row in range(squares.shape[0]):
        design[row, 0] = 1.0
        for k in range(shapes.shape[0]):
            reduced = 0.0
            for axis in range(3):
                reduced += squares[row, axis] / (ranges[k, axis] * ranges[k, axis])
            design[row, k + 1] = unit(shapes[k], reduced)


@njit(cache=True)
def eliminate(matrix, size):
    """Solve the leading system in place, right side in column ``size``; False where it is singular."""
    largest = 0.0
    for i in range(size):
        for j in range(size):
            largest = max(largest, abs(matrix[i, j]))
    for i in range(size):
        pivot = i
        for row in range(i + 1, size):
            if abs(matrix[row, i]) > abs(matrix[pivot, i]):
                pivot = row
        if abs(matrix[pivot, i]) <= 1e-13 * largest:
            return False
        if pivot != i:
            for j in range(i, size + 1):
                swap = matrix[i, j]
                matrix[i, j] = matrix[pivot, j]
                matrix[pivot, j] = swap
        for row in range(size):
            if row != i:
                factor = matrix[row, i] / matrix[i, i]
                if factor != 0.0:
                    for j in range(i, size + 1):
                        matrix[row, j] -= factor * matrix[i, j]
    for i in range(size):
        matrix[i, size] /= matrix[i, i]
    return True


@njit(cache=True)
def linear_part(design, gamma, weights, fixed, mode, equation, total, gram, system, index, trial, sills):
    """Nugget and sills of least weighted squares, none negative, known ones kept.

    Every set of sills that may be above zero is tried: there are few. ``equation`` times the sills equals
    ``total`` unless ``mode`` is NO_EQUATION. ``gram`` (c, c + 1), ``system`` (c + 1, c + 2), ``index`` and
    ``trial`` (c,) are space to work in, c = structures + 1.
    """
    count = fixed.shape[0]
    left = total
    for k in range(count):
        sills[k] = 0.0
        if not np.isnan(fixed[k]):
            sills[k] = fixed[k]
            left -= equation[k] * fixed[k]
    left = max(left, 0.0)
    for i in range(count):
        for j in range(count + 1):
            gram[i, j] = 0.0
    for row in range(design.shape[0]):
        rest = gamma[row]
        for k in range(count):
            if not np.isnan(fixed[k]):
                rest -= design[row, k] * fixed[k]
        for i in range(count):
            part = weights[row] * design[row, i]
            for j in range(count):
                gram[i, j] += part * design[row, j]
            gram[i, count] += part * rest
    best = np.inf
    scale = gram[0, 0]  # of the equation's row and column, so that pivots compare
    for chosen in range(1, 1 << count):
        size = 0
        allowed = True
        for k in range(count):
            if chosen >> k & 1:
                allowed = allowed and np.isnan(fixed[k])
                index[size] = k
                size += 1
        if not allowed:
            continue
        order = size if mode == NO_EQUATION else size + 1
        for i in range(size):
            for j in range(size):
                system[i, j] = gram[index[i], index[j]]
            if mode != NO_EQUATION:
                system[i, size] = equation[index[i]] * scale
                system[size, i] = equation[index[i]] * scale
            system[i, order] = gram[index[i], count]
        if mode != NO_EQUATION:
            system[size, size] = 0.0
            system[size, order] = left * scale
        if not eliminate(system, order):
            continue
        feasible = True
        for k in range(count):
            trial[k] = 0.0
        for i in range(size):
            trial[index[i]] = system[i, order]
            feasible = feasible and system[i, order] >= 0.0
        if not feasible:
            continue
        cost = 0.0
        for i in range(count):
            cost -= 2.0 * trial[i] * gram[i, count]
            for j in range(count):
                cost += trial[i] * gram[i, j] * trial[j]
        if cost < best:
            best = cost
            for k in range(count):
                if np.isnan(fixed[k]):
                    sills[k] = trial[k]


@njit(cache=True)
def evaluate(
    parameters, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total, pair_squares,
    ranges, design, pair_design, equation, gram, system, index, trial, sills, residual,
):  # fmt: skip
    """Sills and weighted residuals for a vector of logs of ranges; returns the sum of squares."""
    set_ranges(parameters, layout_kind, layout_value, ranges)
    set_design(squares, shapes, ranges, design)
    for k in range(equation.shape[0]):
        equation[k] = 1.0
    if mode == MEAN_OVER_PAIRS:
        set_design(pair_squares, shapes, ranges, pair_design)
        for k in range(equation.shape[0]):
            mean = 0.0
            for row in range(pair_design.shape[0]):
                mean += pair_design[row, k]
            equation[k] = mean / pair_design.shape[0]
    linear_part(design, gamma, weights, fixed, mode, equation, total, gram, system, index, trial, sills)
    cost = 0.0
    for row in range(gamma.shape[0]):
        value = -gamma[row]
        for k in range(sills.shape[0]):
            value += design[row, k] * sills[k]
        residual[row] = np.sqrt(weights[row]) * value
        cost += residual[row] * residual[row]
    return cost


@njit(cache=True)
def descend(
    start, low, high, tolerance, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total,
    pair_squares,
):  # fmt: skip
    """Levenberg-Marquardt steps inside limits, with differences for the slopes.

    Returns
    -------
    parameters, sills, residual, cost
    """
    size = start.shape[0]
    count = fixed.shape[0]
    lags = gamma.shape[0]
    ranges = np.ones((count - 1, 3))
    design = np.empty((lags, count))
    pair_design = np.empty((pair_squares.shape[0], count))
    equation = np.ones(count)
    gram = np.empty((count, count + 1))
    system = np.empty((count + 1, count + 2))
    index = np.empty(count, dtype=np.int64)
    trial_sills = np.empty(count)
    sills = np.empty(count)
    here = np.empty(lags)
    there = np.empty(lags)
    slopes = np.empty((size, lags))
    normal = np.empty((size, size))
    downhill = np.empty(size)
    scale = np.empty(size)
    newton = np.empty((size, size + 1))
    at = np.minimum(np.maximum(start, low), high)
    trial = at.copy()
    cost = evaluate(
        at, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total, pair_squares,
        ranges, design, pair_design, equation, gram, system, index, trial_sills, sills, here,
    )  # fmt: skip
    damping = 1e-3
    for _ in range(60 if size > 0 else 0):
        for p in range(size):
            side = 1e-6 if at[p] + 1e-6 <= high[p] else -1e-6
            trial[:] = at
            trial[p] += side
            evaluate(
                trial, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total,
                pair_squares, ranges, design, pair_design, equation, gram, system, index, trial_sills, sills, there,
            )  # fmt: skip
            for row in range(lags):
                slopes[p, row] = (there[row] - here[row]) / side
        for p in range(size):
            downhill[p] = 0.0
            for row in range(lags):
                downhill[p] -= slopes[p, row] * here[row]
            for q in range(size):
                normal[p, q] = 0.0
                for row in range(lags):
                    normal[p, q] += slopes[p, row] * slopes[q, row]
        for p in range(size):
            held = (at[p] <= low[p] and downhill[p] < 0.0) or (at[p] >= high[p] and downhill[p] > 0.0)
            if held:
                downhill[p] = 0.0
                for q in range(size):
                    normal[p, q] = 0.0
                    normal[q, p] = 0.0
            scale[p] = normal[p, p] if normal[p, p] > 0.0 else 1.0
        found = False
        shift = 0.0
        while damping < 1e8:
            for p in range(size):
                for q in range(size):
                    newton[p, q] = normal[p, q]
                newton[p, p] += damping * scale[p]
                newton[p, size] = downhill[p]
            if not eliminate(newton, size):
                damping *= 8.0
                continue
            shift = 0.0
            for p in range(size):
                move = min(1.0, max(-1.0, newton[p, size]))
                trial[p] = min(high[p], max(low[p], at[p] + move))
                shift = max(shift, abs(trial[p] - at[p]))
            trial_cost = evaluate(
                trial, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total,
                pair_squares, ranges, design, pair_design, equation, gram, system, index, trial_sills, sills, there,
            )  # fmt: skip
            if trial_cost < cost:
                found = True
                at[:] = trial
                here[:] = there
                cost = trial_cost
                break
            if shift <= tolerance:
                break
            damping *= 8.0
        if not found:
            break
        damping = max(damping / 6.0, 1e-12)
        if shift <= tolerance:
            break
    cost = evaluate(
        at, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total, pair_squares,
        ranges, design, pair_design, equation, gram, system, index, trial_sills, sills, here,
    )  # fmt: skip
    return at, sills, here, cost


@njit(cache=True)
def costs(
    points, layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total, pair_squares, out
):
    """Sum of squares at each of the points (p, k)."""
    count = fixed.shape[0]
    ranges = np.ones((count - 1, 3))
    design = np.empty((gamma.shape[0], count))
    pair_design = np.empty((pair_squares.shape[0], count))
    equation = np.ones(count)
    gram = np.empty((count, count + 1))
    system = np.empty((count + 1, count + 2))
    index = np.empty(count, dtype=np.int64)
    trial = np.empty(count)
    sills = np.empty(count)
    residual = np.empty(gamma.shape[0])
    for row in range(points.shape[0]):
        out[row] = evaluate(
            points[row], layout_kind, layout_value, shapes, squares, gamma, weights, fixed, mode, total,
            pair_squares, ranges, design, pair_design, equation, gram, system, index, trial, sills, residual,
        )  # fmt: skip

"""Slow and obvious twins of the search and the kriging kernels: one target at a time, plain NumPy."""

from __future__ import annotations

import numpy as np

from sms_resource.geostatistics import discretisation_offsets


def chosen_samples(points, holes, target, item, skip_hole=None, skip_sample=None):
    """Samples of one pass after a full sort by distance: walk outward, leave out what a limit forbids."""
    apart = ((points - target) @ item.axes.T) / np.array(item.radii)
    squared = (apart**2).sum(axis=1)
    taken, by_sector, by_hole = [], {}, {}
    for i in np.lexsort((np.arange(len(points)), squared)):
        if squared[i] > 1.0 or len(taken) == item.max_samples:
            break
        if i == skip_sample or (skip_hole is not None and holes[i] == skip_hole):
            continue
        upper = tuple(apart[i] >= 0.0)
        sector = {"none": (), "quadrants": upper[:2], "octants": upper}[item.sectors]
        if by_sector.get(sector, 0) >= item.sector_limit:
            continue
        if item.max_per_hole is not None and by_hole.get(holes[i], 0) >= item.max_per_hole:
            continue
        by_sector[sector] = by_sector.get(sector, 0) + 1
        by_hole[holes[i]] = by_hole.get(holes[i], 0) + 1
        taken.append(int(i))
    enough = len(taken) >= item.min_samples and len(by_hole) >= item.min_holes
    return np.array(sorted(taken), dtype=int), len(by_hole), enough


def kriged(points, values, target, model, offsets=None, mean=None):
    """Weights by the whole system; estimate, variance, multiplier, slope, efficiency, negative weights."""
    n = len(points)
    matrix = model.covariance(points[:, None] - points[None])
    if offsets is None:
        right = model.covariance(points - target)
        support = model.total_sill
    else:
        cells = target + offsets
        right = model.structured_covariance(points[:, None] - cells[None]).mean(axis=1)
        support = model.structured_covariance(offsets[:, None] - offsets[None]).mean()
    if mean is None:
        system = np.ones((n + 1, n + 1))
        system[n, n] = 0.0
        system[:n, :n] = matrix
        solved = np.linalg.solve(system, np.append(right, 1.0))
        weights, mu = solved[:n], solved[n]
        estimate = weights @ values
    else:
        weights, mu = np.linalg.solve(matrix, right), 0.0
        estimate = mean + weights @ (values - mean)
    variance = support - weights @ right - mu
    gain = support - variance
    slope = (gain + abs(mu)) / (gain + 2 * abs(mu))
    return np.array([estimate, variance, mu, slope, gain / support, np.minimum(weights, 0.0).sum()])


def kriged_everywhere(points, values, targets, models, passes, holes, block=None, counts=(1, 1, 1)):
    """(b, m, 9): the six figures of ``kriged``, then sample count, hole count and nearest distance."""
    offsets = None if block is None else discretisation_offsets(block, counts)
    out = np.full((len(targets), values.shape[1], 9), np.nan)
    for b, target in enumerate(targets):
        for m in range(values.shape[1]):
            present = np.flatnonzero(np.isfinite(values[:, m]))
            for item in passes:
                rows, hole_count, enough = chosen_samples(points[present], holes[present], target, item)
                if enough:
                    break
            rows = present[rows]
            out[b, m, 6:8] = len(rows), hole_count
            if len(rows):
                out[b, m, 8] = np.sqrt(((points[rows] - target) ** 2).sum(axis=1).min())
            if enough:
                out[b, m, :6] = kriged(points[rows], values[rows, m], target, models[m], offsets)
    return out


def scene(seed, samples=120, holes=15, targets=25, columns=2, missing=0.15):
    """Random samples in short holes, targets among them, and models with two structures."""
    rng = np.random.default_rng(seed)
    hole_of = np.sort(rng.integers(0, holes, samples))
    tops = rng.uniform(0, 80, (holes, 2))
    points = np.column_stack([tops[hole_of] + rng.normal(0, 0.3, (samples, 2)), rng.uniform(-20, 0, samples)])
    values = rng.lognormal(0.0, 0.8, (samples, columns))
    values[rng.random(values.shape) < missing] = np.nan
    where = np.column_stack([rng.uniform(-5, 85, (targets, 2)), rng.uniform(-22, 2, targets)])
    return points, values, hole_of, where

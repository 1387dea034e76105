"""Plain NumPy twins of the variogram kernels: all pairs at once, nothing clever."""

from __future__ import annotations

import itertools

import numpy as np

from sms_resource.geostatistics.directions import Direction


def twin_variogram(
    xyz, values, edges, direction=None, holes=None, mode="any", weights=None, measure="semivariogram"
):
    """Pairs, mean distance and measure per lag, over the full table of pairs."""
    direction = direction or Direction.omnidirectional()
    n = len(values)
    i, j = np.triu_indices(n, 1)
    step = xyz[j] - xyz[i]
    distance = np.sqrt((step**2).sum(axis=1))
    axes = direction.axes
    part = np.abs(step @ axes.T)
    keep = distance > 0
    if direction.kind == "directional":
        keep &= part[:, 0] >= np.cos(np.radians(direction.angle_tolerance)) * distance
        keep &= (part[:, 1] <= direction.bandwidth_horizontal) & (part[:, 2] <= direction.bandwidth_vertical)
    elif direction.kind == "plane":
        keep &= part[:, 2] <= np.sin(np.radians(direction.angle_tolerance)) * distance
        keep &= part[:, 2] <= direction.bandwidth_vertical
    if mode == "within":
        keep &= holes[i] == holes[j]
    elif mode == "across":
        keep &= holes[i] != holes[j]
    w = np.ones(n) if weights is None else weights / weights.mean()
    pairs, means, gammas = [], [], []
    for low, high in itertools.pairwise(edges):
        chosen = keep & (distance > low) & (distance <= high)
        a, b, pair_weight = values[i[chosen]], values[j[chosen]], (w[i] * w[j])[chosen]
        pairs.append(int(chosen.sum()))
        if not chosen.any():
            means.append(np.nan)
            gammas.append(np.nan)
            continue
        means.append(np.average(distance[chosen], weights=pair_weight))
        if measure == "semivariogram":
            gammas.append(0.5 * np.average((a - b) ** 2, weights=pair_weight))
        elif measure == "pairwise_relative":
            gammas.append(0.5 * np.average(((a - b) / (0.5 * (a + b))) ** 2, weights=pair_weight))
        else:  # heads and tails taken together
            both = np.concatenate([a, b]), np.concatenate([b, a]), np.concatenate([pair_weight] * 2)
            mean = np.average(both[0], weights=both[2])
            covariance = np.average((both[0] - mean) * (both[1] - mean), weights=both[2])
            gammas.append(1.0 - covariance / np.average((both[0] - mean) ** 2, weights=both[2]))
    return np.array(pairs), np.array(means), np.array(gammas)


def drilled(holes=9, samples=8, spacing=20.0, seed=3):
    """Invented holes on a jittered grid: coordinates, hole names."""
    generator = np.random.default_rng(seed)
    side = int(np.ceil(np.sqrt(holes)))
    rows = []
    names = []
    for number in range(holes):
        x, y = spacing * (number % side), spacing * (number // side)
        x, y = np.array([x, y]) + generator.uniform(-0.3, 0.3, 2) * spacing
        top = generator.uniform(0.0, 3.0)
        for step in range(samples):
            rows.append((x, y, -top - step - 0.5))
            names.append(f"H{number:03d}")
    return np.array(rows), np.array(names)


def simulated(model, xyz, fields, seed):
    """Gaussian fields (fields, n) of a model, by the Cholesky factor of its covariance."""
    factor = np.linalg.cholesky(model.covariance(xyz[:, None, :] - xyz[None, :, :]))
    return np.random.default_rng(seed).normal(size=(fields, len(xyz))) @ factor.T

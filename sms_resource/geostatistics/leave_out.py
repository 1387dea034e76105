"""Leave one out: each sample estimated from the others, or from the other holes."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from .inputs import Samples, checked_samples, checked_threads, cross
from .model import VariogramModel, as_models
from .neighbourhood import Neighbourhood, as_passes, check_holes

FloatArray = NDArray[np.float64]


def leave_one_out(
    coordinates: ArrayLike,
    values: ArrayLike,
    model: VariogramModel | Sequence[VariogramModel],
    neighbourhood: Neighbourhood | Sequence[Neighbourhood] | None = None,
    *,
    hole_ids: ArrayLike | None = None,
    leave: Literal["hole", "sample"] = "hole",
    threads: int | None = None,
    coincident: str = "error",
) -> pd.DataFrame:
    """Estimate every sample by ordinary kriging from the samples that are left.

    Parameters
    ----------
    coordinates : (n, 3) metres
    values : (n,) or (n, m) array or DataFrame, NaN where missing
    model : VariogramModel, or one per column
    neighbourhood : Neighbourhood, or several to try in turn, or None for all samples
    hole_ids : (n,), needed to leave out whole holes
    leave : "hole" | "sample"
        Leave out all samples of the hole, which is the harder and the honest test, or the sample alone.
    threads, coincident : as in ``ordinary_kriging``

    Returns
    -------
    DataFrame, one row per sample and column that holds a value: ``index`` (row of the sample), ``column`` (name
    or number), ``true``, ``estimate``, ``variance``, ``error`` (estimate - true), ``standardised_error``
    (error over the kriging standard deviation), ``sample_count``; NaN where too few samples were left.

    Raises
    ------
    ValueError
        As ``ordinary_kriging``; or if holes are to be left out and ``hole_ids`` is missing.

    Notes
    -----
    From all samples the errors of a left-out set H are ``(B_HH)^-1 (B z)_H`` and their covariances
    ``(B_HH)^-1``, with B the inverse of the whole kriging system (Dubrule 1983), so one inverse serves all.
    """
    if leave not in ("hole", "sample"):
        raise ValueError(f'leave is {leave!r}; wanted "hole" or "sample"')
    if leave == "hole" and hole_ids is None:
        raise ValueError('hole_ids is missing: leave="hole" needs the hole of each sample')
    names = list(values.columns) if isinstance(values, pd.DataFrame) else None
    samples = checked_samples(coordinates, values, hole_ids, coincident)
    passes = as_passes(neighbourhood)
    check_holes(passes, hole_ids)
    models = as_models(model, samples.values.shape[1])
    workers = checked_threads(threads)
    if passes:
        estimate, variance, count = _by_neighbourhood(samples, models, passes, leave, workers)
    else:
        estimate, variance, count = _from_all_samples(samples, models, leave, workers)
    frames = []
    for column in range(samples.values.shape[1]):
        true = samples.values[:, column]
        rows = np.flatnonzero(np.isfinite(true))
        error = estimate[rows, column] - true[rows]
        with np.errstate(divide="ignore", invalid="ignore"):
            standardised = error / np.sqrt(variance[rows, column])
        frames.append(
            pd.DataFrame(
                {
                    "index": samples.rows[rows],
                    "column": names[column] if names is not None else column,
                    "true": true[rows],
                    "estimate": estimate[rows, column],
                    "variance": variance[rows, column],
                    "error": error,
                    "standardised_error": standardised,
                    "sample_count": count[rows, column],
                }
            )
        )
    return pd.concat(frames, ignore_index=True)


Errors = tuple[FloatArray, FloatArray, NDArray[np.int32]]


def _by_neighbourhood(
    samples: Samples, models: list[VariogramModel], passes: list[Neighbourhood], leave: str, workers: int
) -> Errors:
    """The kernels of kriging, with a search that does not see the sample or its hole."""
    from .kriging import Outputs
    from .kriging_run import columns_by_model, fill_search, krige_found
    from .kriging_setup import model_arrays
    from .search_run import CHUNK, Finder, near_order

    columns = samples.values.shape[1]
    out = Outputs.empty(len(samples.points), columns)
    arrays = {item: model_arrays(item, samples.points, None, (1, 1, 1)) for item in models}
    unlimited = np.full(columns, np.inf)
    for group in samples.patterns().values():
        present = np.flatnonzero(np.isfinite(samples.values[:, group[0]]))
        if not len(present):
            continue
        finder = Finder(samples.points[present], samples.holes[present], passes, workers)
        order = near_order(samples.points[present])
        for first in range(0, len(order), CHUNK):
            part = order[first : first + CHUNK]
            local = np.ascontiguousarray(samples.points[present[part]])
            own_hole = samples.holes[present[part]] if leave == "hole" else None
            found = finder.find(local, own_hole, part.astype(np.int32))
            rows = present[part]
            fill_search(found, rows, group, out)
            runs = found.runs()
            for model, alike in columns_by_model(group, models):
                krige_found(
                    found, local, rows, present, samples, arrays[model], alike, runs, workers, unlimited,
                    np.inf, None, out,
                )  # fmt: skip
    return out.estimate, out.variance, out.count


def _from_all_samples(samples: Samples, models: list[VariogramModel], leave: str, workers: int) -> Errors:
    """Dubrule's formula on the inverse of the whole system."""
    from scipy.linalg import inv
    from scipy.linalg.lapack import dpotri

    from .kriging_run import MOST_FOR_ALL, columns_by_model, whole_factor
    from .kriging_setup import model_arrays

    shape = samples.values.shape
    estimate, variance = np.full(shape, np.nan), np.full(shape, np.nan)
    count = np.zeros(shape, dtype=np.int32)
    for group in samples.patterns().values():
        present = np.flatnonzero(np.isfinite(samples.values[:, group[0]]))
        n = len(present)
        if n > MOST_FOR_ALL:
            raise ValueError(
                f"neighbourhood is None for {n} samples; wanted one above {MOST_FOR_ALL} samples"
            )
        if n < 2:
            continue
        points = samples.points[present]
        sets = samples.holes[present] if leave == "hole" else np.arange(n)
        folds = [np.flatnonzero(sets == label) for label in np.unique(sets)]
        for model, alike in columns_by_model(group, models):
            setup = model_arrays(model, samples.points, None, (1, 1, 1))
            factor = whole_factor(np.ascontiguousarray(points), setup, present, workers)
            if factor is None:
                continue
            inverse, _ = dpotri(factor, lower=1, overwrite_c=True)
            inverse = np.tril(inverse) + np.tril(inverse, -1).T
            # the part of the inverse of the whole system that belongs to the samples
            ones = inverse.sum(axis=1)
            inverse -= np.outer(ones, ones / ones.sum())
            table = samples.values[cross(present, alike)]
            score = inverse @ table
            for fold in folds:
                if len(fold) == n:
                    continue
                covariance = inv(inverse[np.ix_(fold, fold)], check_finite=False)
                place = cross(present[fold], alike)
                estimate[place] = table[fold] - covariance @ score[fold]
                variance[place] = np.maximum(np.diag(covariance), 0.0)[:, None]
                count[place] = n - len(fold)
    return estimate, variance, count

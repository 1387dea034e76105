"""Statistics of data with several detection limits: regression on order statistics."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

LEAST_DETECTED = 5
GREATEST_CENSORED_SHARE = 0.8


class TooFewDetected(ValueError):
    """There are too few results above detection for the regression."""


def plotting_positions(values: ArrayLike, censored: ArrayLike) -> Floats:
    """Plotting positions of data with several detection limits (Helsel & Cohn 1988; Hirsch & Stedinger 1987).

    Parameters
    ----------
    values : array-like, shape (n,)
        Measured values, and the limit where censored.
    censored : array-like of bool, shape (n,)

    Returns
    -------
    ndarray, shape (n,)
        Probability of not exceeding each value. Among results below one limit the positions ascend in the order
        in which they come.
    """
    value = np.asarray(values, dtype=np.float64)
    below = np.asarray(censored, dtype=bool)
    limits = np.unique(value[below])
    edges = np.concatenate([[-np.inf], limits, [np.inf]])
    count = len(edges) - 1
    # detected values at or above each limit and below the next
    slot = np.clip(np.searchsorted(edges, value, side="right") - 1, 0, count - 1)
    detected = np.bincount(slot[~below], minlength=count)
    censored_at = np.concatenate([[0], np.array([np.sum(below & (value == limit)) for limit in limits])])
    exceed = np.zeros(count + 1)
    for at in range(count - 1, 0, -1):
        under = sum(detected[:at]) + sum(censored_at[: at + 1])
        share = detected[at] / (detected[at] + under) if detected[at] + under else 0.0
        exceed[at] = exceed[at + 1] + share * (1.0 - exceed[at + 1])
    exceed[0] = 1.0
    result = np.empty(len(value))
    for at in range(count):
        members = np.flatnonzero(~below & (slot == at))
        order = members[np.argsort(value[members], kind="stable")]
        rank = np.arange(1, len(order) + 1)
        step = exceed[at] - exceed[at + 1]
        result[order] = (1.0 - exceed[at]) + step * rank / (len(order) + 1)
        if at > 0:
            group = np.flatnonzero(below & (value == limits[at - 1]))
            result[group] = (1.0 - exceed[at]) * np.arange(1, len(group) + 1) / (len(group) + 1)
    return result


def regression_on_order_statistics(values: ArrayLike, censored: ArrayLike) -> Floats:
    """Robust regression on order statistics, lognormal (Helsel & Cohn 1988, Water Resources Research 24(12)).

    Measured values stay as they are; those below detection get the values that a line through the logarithms of
    the measured ones, against normal scores of their plotting positions, gives at their own positions.

    Raises
    ------
    TooFewDetected
        If fewer than 5 results, or less than 20 %, are above detection, or a measured value is not positive.
    """
    from scipy.special import ndtri

    value = np.asarray(values, dtype=np.float64)
    below = np.asarray(censored, dtype=bool)
    measured = int((~below).sum())
    if measured < LEAST_DETECTED or below.mean() > GREATEST_CENSORED_SHARE:
        raise TooFewDetected(f"only {measured} of {len(value)} results are above detection")
    if np.any(value[~below] <= 0):
        raise TooFewDetected("a measured result is not positive, so it has no logarithm")
    result = value.copy()
    if not below.any():
        return result
    score = ndtri(plotting_positions(value, below))
    centred = score[~below] - score[~below].mean()
    logs = np.log(value[~below])
    slope = float(centred @ logs / (centred @ centred))
    fitted = np.exp(logs.mean() + slope * (score[below] - score[~below].mean()))
    # a fitted value above its own detection limit would contradict the laboratory
    result[below] = np.minimum(fitted, value[below])
    return result

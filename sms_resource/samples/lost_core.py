"""What stands for the core that was lost: four treatments, side by side."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from sms_resource.findings import Findings

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Treatment = Literal["unknown", "represented", "background", "neighbour_mean"]

TREATMENTS: dict[str, str] = {
    "unknown": "lost length is unknown; a composite weighs recovered length (default)",
    "represented": "recovered grade stands for the whole run",
    "background": "lost length takes a background grade (floor)",
    "neighbour_mean": "lost length takes the mean of poorly recovered intervals nearby",
}
NEIGHBOURS = 8


@dataclass(frozen=True)
class LostCore:
    """How lost core is treated.

    Parameters
    ----------
    treatment : "unknown", "represented", "background" or "neighbour_mean"
    background : mapping, optional
        Grade of lost core for "background": metal to grade, or domain to (metal to grade). What is not given is
        zero, the lowest that can be, and a finding says so.
    neighbour_recovery_pct : float
        For "neighbour_mean": runs at or below this recovery are poorly recovered.
    neighbour_distance_m : float
        How far away they may lie; where none does, all poorly recovered ones of the domain are used, and where
        there are none at all the length stays unknown.
    """

    treatment: Treatment = "unknown"
    background: Mapping | None = None
    neighbour_recovery_pct: float = 50.0
    neighbour_distance_m: float = 50.0

    def __post_init__(self) -> None:
        if self.treatment not in TREATMENTS:
            raise ValueError(f"lost_core must be one of {', '.join(TREATMENTS)}, not {self.treatment!r}")
        if not 0 <= self.neighbour_recovery_pct <= 100:
            raise ValueError(
                f"neighbour_recovery_pct must lie between 0 and 100, not {self.neighbour_recovery_pct}"
            )
        if not self.neighbour_distance_m > 0:
            raise ValueError(f"neighbour_distance_m must be positive, not {self.neighbour_distance_m}")


def treat_lost_core(
    settings: LostCore,
    *,
    length: Floats,
    recovered: Floats,
    run_recovery: Floats,
    grades: Floats,
    metals: list[str],
    run: Integers,
    domain: Integers,
    domain_names: list[str],
    hole: Integers,
    positions: Floats,
    by_length: bool,
    findings: Findings,
) -> tuple[Floats, Floats]:
    """Weight, and weight x grade, of every piece of hole and metal.

    Parameters
    ----------
    length, recovered, run_recovery : ndarray, shape (p,)
        Length of each piece, core recovered from it (NaN where not known) and recovery of its run (fraction).
    grades : ndarray, shape (p, m)
        Assayed grades, NaN where not assayed.
    run, domain, hole : ndarray of int, shape (p,)
        Numbers of run, domain and hole, -1 for none.
    positions : ndarray, shape (p, 3)
    by_length : bool
        Whether a recovered piece weighs its whole length under "unknown".

    Returns
    -------
    weights, amounts : ndarray, shape (p, m)
    """
    kind = settings.treatment
    # over-recovery is core of a neighbour: a piece never weighs more than its length
    core = np.where(np.isfinite(recovered), np.minimum(recovered, length), length)
    known = np.isfinite(grades)
    if kind == "represented":
        filled = _fill_from_run(grades, length, run, domain)
        weights = np.where(np.isfinite(filled), length[:, None], 0.0)
        return weights, weights * np.nan_to_num(filled)
    base = length if (kind == "unknown" and by_length) else core
    weights = np.where(known, base[:, None], 0.0)
    amounts = weights * np.nan_to_num(grades)
    if kind == "unknown":
        return weights, amounts
    lost = np.where(np.isfinite(recovered), length - core, 0.0)
    if kind == "background":
        fill = _background(settings.background, metals, domain, domain_names, findings)
    else:
        poor = run_recovery * 100.0 <= settings.neighbour_recovery_pct
        fill = _neighbour_means(
            grades, core, poor, domain, positions, lost > 0, settings.neighbour_distance_m
        )
    extra = np.where(np.isfinite(fill), lost[:, None], 0.0)
    return weights + extra, amounts + extra * np.nan_to_num(fill)


def _fill_from_run(grades: Floats, length: Floats, run: Integers, domain: Integers) -> Floats:
    """Grades with gaps of a run filled by the mean of its assayed pieces, never across a domain contact."""
    filled = grades.copy()
    if len(run) == 0 or run.max() < 0:
        return filled
    width = int(domain.max()) + 2
    _, key = np.unique(run * width + domain + 1, return_inverse=True)
    for column in range(grades.shape[1]):
        known = np.isfinite(grades[:, column])
        weight = np.bincount(key[known], length[known], key.max() + 1)
        total = np.bincount(key[known], length[known] * grades[known, column], key.max() + 1)
        with np.errstate(invalid="ignore", divide="ignore"):
            mean = np.where(weight > 0, total / weight, np.nan)
        gap = ~known & (run >= 0)
        filled[gap, column] = mean[key[gap]]
    return filled


def _background(
    background: Mapping | None,
    metals: list[str],
    domain: Integers,
    domain_names: list[str],
    findings: Findings,
) -> Floats:
    given = dict(background or {})
    by_domain = {name: value for name, value in given.items() if isinstance(value, Mapping)}
    table = np.zeros((len(domain_names) + 1, len(metals)))
    zero: set[str] = set()
    for row, name in enumerate(domain_names):
        here = {**{k: v for k, v in given.items() if k not in by_domain}, **by_domain.get(name, {})}
        for column, metal in enumerate(metals):
            if metal in here:
                table[row, column] = float(here[metal])
            else:
                zero.add(metal)
    if zero:
        findings.note(
            "background-zero",
            f"Lost core takes a grade of zero for {', '.join(m for m in metals if m in zero)}: no background is given",
            "Give the grade of the rock that washes out, where you know it.",
        )
    return table[domain]


def _neighbour_means(
    grades: Floats,
    core: Floats,
    poor: NDArray[np.bool_],
    domain: Integers,
    positions: Floats,
    wanted: NDArray[np.bool_],
    distance: float,
) -> Floats:
    """Mean grade, by recovered length, of the poorly recovered pieces nearest to each wanted piece."""
    from scipy.spatial import cKDTree

    fill = np.full(grades.shape, np.nan)
    placed = np.asarray(np.isfinite(positions).all(axis=1))
    for code in np.unique(domain[domain >= 0]):
        here = domain == code
        targets = np.flatnonzero(here & wanted)
        for column in range(grades.shape[1]):
            source = np.flatnonzero(here & poor & np.isfinite(grades[:, column]) & (core > 0))
            if len(source) == 0 or len(targets) == 0:
                continue
            value, weight = grades[source, column], core[source]
            result = np.full(len(targets), weight @ value / weight.sum())
            near = placed[source]
            reach = np.flatnonzero(placed[targets])
            if near.any() and len(reach):
                tree = cKDTree(positions[source[near]])
                gap, at = tree.query(
                    positions[targets[reach]],
                    k=min(NEIGHBOURS, int(near.sum())),
                    distance_upper_bound=distance,
                )
                gap, at = gap.reshape(len(reach), -1), at.reshape(len(reach), -1)
                found = np.asarray(np.isfinite(gap), dtype=np.float64)
                near_weight = np.append(weight[near], 0.0)[at] * found
                near_value = np.append(value[near], 0.0)[at]
                total = np.asarray(near_weight.sum(axis=1))
                some = np.asarray(total > 0)
                result[reach[some]] = (near_weight * near_value).sum(axis=1)[some] / total[some]
            fill[targets, column] = result
    return fill

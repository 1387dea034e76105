"""Tonnes, grades and metal above every cut-off at once, by any grouping of the blocks."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import product

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource import units
from sms_resource.economics.exact_sums import exact_parts

ALL = "all"
Floats = NDArray[np.float64]


def content_columns(metal: str) -> dict[str, float]:
    """Columns that hold the content of a metal column, and the factor from tonnes of metal to each.

    Metals kept in g/t are shown in kilograms and troy ounces, all others in tonnes.

    Examples
    --------
    >>> content_columns("cu_pct")
    {'cu_t': 1.0}
    """
    element, _, unit = metal.rpartition("_")
    if not element or not units.known_unit(unit):
        raise ValueError(f"{metal!r} is not a grade column such as cu_pct or au_gpt")
    if unit == "gpt":
        return {f"{element}_kg": 1e3, f"{element}_oz": float(units.tonnes_to_troy_ounces(1.0))}
    return {f"{element}_t": 1.0}


def grade_tonnage(
    frame: pd.DataFrame,
    *,
    metals: Sequence[str],
    cutoff_variable: str,
    cutoffs: Sequence[float] | Floats | str = ALL,
    groups: Sequence[str] = ("proposed_class",),
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> pd.DataFrame:
    """Table of tonnes: what each cut-off leaves, exact at the support of the blocks.

    A block is in when its cut-off variable is at or above the cut-off; a block whose cut-off variable is
    missing is never in (see :func:`missing_tonnage`). Every block falls into one bin between two cut-offs;
    the bins are summed from the top, so all cut-offs cost one pass and tonnes cannot rise with the cut-off. Sums
    are exact up to one rounding at the end: they do not depend on the other cut-offs, the groups or the order.

    Parameters
    ----------
    frame : DataFrame
        One row a block. Grades are on dry mass.
    metals : sequence of str
        Grade columns such as ``cu_pct`` (%), ``au_gpt`` (g/t), ``as_ppm`` (ppm).
    cutoff_variable : str
        Column that the cut-off is on: a metal, an equivalent, a value per dry tonne.
    cutoffs : sequence of float, or "all"
        In the unit of the variable. "all" takes every distinct value of the variable.
    groups : sequence of str
        Columns to tell apart: class, domain, bench, screen. Every one also takes the value "all".
    dry_tonnes, wet_tonnes : str
        Columns of tonnes (t) on each basis.

    Returns
    -------
    DataFrame
        cutoff_variable, cutoff, one column a group, dry_tonnes, wet_tonnes, each metal's grade (dry-mass
        weighted; NaN where nothing is left) and each metal's content: ``cu_t`` (t), or ``au_kg`` and
        ``au_oz`` for metals in g/t. Cut-offs rise within a group.

    Raises
    ------
    ValueError
        If a column is missing, a tonnage is missing or negative, or a cut-off is not a number.
    """
    groups, metals = list(groups), list(metals)
    _check_columns(frame, [*groups, *metals, cutoff_variable, dry_tonnes, wet_tonnes])
    dry, wet = (_tonnes(frame, column) for column in (dry_tonnes, wet_tonnes))
    values = frame[cutoff_variable].to_numpy(dtype=np.float64)
    levels = _cutoffs(values, cutoffs)

    grades = (
        np.stack([frame[m].to_numpy(dtype=np.float64) for m in metals]) if metals else np.empty((0, len(dry)))
    )
    known = ~np.isnan(grades)
    # One row a quantity: dry, wet, then graded tonnes and metal of each element; each in two parts, so that no sum
    # depends on which other cut-offs or groups it is made with.
    quantities = [dry, wet, *(known * dry), *(np.where(known, grades, 0.0) * dry)]
    parts = np.stack([part for quantity in quantities for part in exact_parts(quantity)])

    labels, code = _group_codes(frame, groups)
    split, occupied = _sums_above(values, levels, parts, code, [len(names) for names in labels])
    sums = split[0::2] + split[1::2]
    return _tidy(sums, occupied, levels, labels, groups, metals, cutoff_variable)


def missing_tonnage(
    frame: pd.DataFrame,
    *,
    columns: Sequence[str],
    groups: Sequence[str] = (),
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> pd.DataFrame:
    """Blocks and tonnes whose value in a column is missing, so that no tonne is lost in silence.

    Returns
    -------
    DataFrame
        column, one column a group, blocks, dry_tonnes, wet_tonnes; only rows with missing values.
    """
    groups = list(groups)
    _check_columns(frame, [*columns, *groups, dry_tonnes, wet_tonnes])
    parts = []
    for column in columns:
        lost = frame.loc[frame[column].isna(), [*groups, dry_tonnes, wet_tonnes]].assign(
            column=column, blocks=1
        )
        keys = ["column", *groups]
        sums = lost.groupby(keys, as_index=False, observed=True)[["blocks", dry_tonnes, wet_tonnes]].sum()
        parts.append(sums.rename(columns={dry_tonnes: "dry_tonnes", wet_tonnes: "wet_tonnes"}))
    names = ["column", *groups, "blocks", "dry_tonnes", "wet_tonnes"]
    return pd.concat(parts, ignore_index=True)[names] if parts else pd.DataFrame(columns=names)


def beside_change_of_support(
    table: pd.DataFrame, curve: pd.DataFrame, *, metal: str, group: str = "proposed_class"
) -> pd.DataFrame:
    """Set a change-of-support curve beside the block curve of the same metal.

    Parameters
    ----------
    table : DataFrame
        From :func:`grade_tonnage`, cut on ``metal``.
    curve : DataFrame
        cutoff, proportion (share of tonnes at or above) and grade (mean above), in the unit of ``metal``.

    Returns
    -------
    DataFrame
        cutoff, block_dry_tonnes, block_grade, support_dry_tonnes, support_grade, tonnes_difference_pct.
        The curve is read at the cut-offs of the table by straight lines; outside its span it is missing.
    """
    whole = table[table[group] == ALL] if group in table else table
    if not (whole["cutoff_variable"] == metal).all():
        raise ValueError(f"the table is cut on {whole['cutoff_variable'].iloc[0]!r}, not on {metal!r}")
    whole = whole.sort_values("cutoff")
    curve = curve.sort_values("cutoff")
    cutoffs = whole["cutoff"].to_numpy(dtype=float)
    total = float(whole["dry_tonnes"].iloc[0])

    def at(column: str) -> Floats:
        known = curve[["cutoff", column]].dropna()
        return np.interp(cutoffs, known["cutoff"], known[column], left=np.nan, right=np.nan)

    base = float(at("proportion")[0])
    # The block curve starts at its own lowest cut-off, so the other starts from the same tonnes.
    tonnes = total * at("proportion") / base if base > 0 else np.full(len(cutoffs), np.nan)
    block = whole["dry_tonnes"].to_numpy(dtype=float)
    with np.errstate(divide="ignore", invalid="ignore"):
        difference = np.where(tonnes > 0, 100.0 * (block / tonnes - 1.0), np.nan)
    return pd.DataFrame(
        {
            "cutoff": cutoffs,
            "block_dry_tonnes": block,
            "block_grade": whole[metal].to_numpy(dtype=float),
            "support_dry_tonnes": tonnes,
            "support_grade": at("grade"),
            "tonnes_difference_pct": difference,
        }
    )


def _check_columns(frame: pd.DataFrame, columns: Sequence[str]) -> None:
    missing = [column for column in dict.fromkeys(columns) if column not in frame]
    if missing:
        raise ValueError(f"the frame has no column {', '.join(map(repr, missing))}")


def _tonnes(frame: pd.DataFrame, column: str) -> Floats:
    tonnes = frame[column].to_numpy(dtype=np.float64)
    bad = ~(tonnes >= 0) | np.isinf(tonnes)
    if bad.any():
        raise ValueError(
            f"{column!r} is missing, negative or infinite in {int(bad.sum())} of {len(tonnes)} blocks"
        )
    return tonnes


def _cutoffs(values: Floats, cutoffs: Sequence[float] | Floats | str) -> Floats:
    if isinstance(cutoffs, str):
        if cutoffs != ALL:
            raise ValueError(f"cutoffs is {cutoffs!r}; a list of numbers or 'all' was wanted")
        return np.unique(values[~np.isnan(values)])
    levels = np.unique(np.asarray(cutoffs, dtype=np.float64))
    if np.isnan(levels).any():
        raise ValueError("a cut-off is not a number")
    return levels


def _group_codes(frame: pd.DataFrame, groups: Sequence[str]) -> tuple[list[list[object]], NDArray[np.int64]]:
    """Labels of each group column and one code a block into the table of all combinations."""
    labels: list[list[object]] = []
    code = np.zeros(len(frame), dtype=np.int64)
    for column in groups:
        if (frame[column] == ALL).any():
            raise ValueError(f"{column!r} holds the value 'all', which names the sum over the column")
        codes, names = pd.factorize(frame[column], sort=True, use_na_sentinel=True)
        named: list[object] = list(names)
        if (codes < 0).any():  # a block without a label keeps its tonnes under a name of its own
            named.append("not given")
            codes = np.where(codes < 0, len(named) - 1, codes)
        code = code * max(len(named), 1) + codes
        labels.append(named)
    return labels, code


def _sums_above(
    values: Floats, levels: Floats, quantities: Floats, code: NDArray[np.int64], sizes: list[int]
) -> tuple[Floats, NDArray[np.bool_]]:
    """Sums of each quantity at or above each level: (quantity, *groups, level), with margins last on each group.

    The second array tells which combinations of groups hold any block.
    """
    count = len(levels)
    cells = int(np.prod(sizes, dtype=np.int64)) if sizes else 1
    # Bin b holds the values with exactly b levels at or below them; NaN goes into bin 0.
    bins = np.searchsorted(levels, values, side="right")
    bins[np.isnan(values)] = 0
    flat = code * (count + 1) + bins
    sums = np.empty((len(quantities), cells, count))
    for row, quantity in enumerate(quantities):
        binned = np.bincount(flat, weights=quantity, minlength=cells * (count + 1)).reshape(cells, count + 1)
        sums[row] = np.cumsum(binned[:, :0:-1], axis=1)[:, ::-1]
    shaped: NDArray[np.float64] = sums.reshape(len(quantities), *sizes, count)
    present = np.bincount(code, minlength=cells).reshape(1, *sizes, 1)
    for axis in range(1, len(sizes) + 1):
        shaped = np.concatenate([shaped, shaped.sum(axis=axis, keepdims=True)], axis=axis)
        present = np.concatenate([present, present.sum(axis=axis, keepdims=True)], axis=axis)
    return shaped, present.ravel() > 0


def _tidy(
    sums: Floats,
    present: NDArray[np.bool_],
    levels: Floats,
    labels: list[list[object]],
    groups: Sequence[str],
    metals: Sequence[str],
    cutoff_variable: str,
) -> pd.DataFrame:
    count, width = len(levels), len(metals)
    cells = sums.reshape(len(sums), -1, count)
    combinations = list(product(*[[*names, ALL] for names in labels]))
    # Combinations without a block say nothing; the whole stays even where the frame is empty.
    occupied = [n for n, names in enumerate(combinations) if present[n] or all(name == ALL for name in names)]
    flat = cells[:, occupied, :].reshape(len(sums), -1)
    rows = len(occupied)
    columns: dict[str, object] = {
        "cutoff_variable": np.full(rows * count, cutoff_variable, dtype=object),
        "cutoff": np.tile(levels, rows),
    }
    for position, column in enumerate(groups):
        names = [combinations[index][position] for index in occupied]
        columns[column] = pd.Series(names, dtype=object).repeat(count).to_numpy()
    columns["dry_tonnes"], columns["wet_tonnes"] = flat[0], flat[1]
    graded, metal_sums = flat[2 : 2 + width], flat[2 + width :]
    with np.errstate(divide="ignore", invalid="ignore"):
        for index, metal in enumerate(metals):
            columns[metal] = np.where(graded[index] > 0, metal_sums[index] / graded[index], np.nan)
    for index, metal in enumerate(metals):
        for name, factor in content_columns(metal).items():
            columns[name] = units.contained_tonnes(metal_sums[index], 1.0, metal) * factor
    return pd.DataFrame(columns)

"""Lists and grids of overrides, and the tables that tell what they did."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import product
from typing import Any

import numpy as np
import pandas as pd

Override = tuple[str, dict[str, Any]]
BASE = "base"


class ScenarioError(ValueError):
    """Scenarios that cannot be expanded; the message says which and why."""


def expand_overrides(
    items: Sequence[Mapping[str, Any]] = (), grids: Sequence[Mapping[str, Any]] = ()
) -> list[Override]:
    """All scenarios of a list and of grids, as labels and dotted keys.

    Parameters
    ----------
    items : sequence of mappings
        ``{"label": ..., "set": {key: value, ...}}``; keys dotted or nested. Without a label one is made.
    grids : sequence of mappings
        ``{"label": ..., "vary": {key: [values], ...}}``: every combination.

    Returns
    -------
    list of (label, {dotted key: value})
        In the order given; the first key of a grid varies slowest.

    Raises
    ------
    ScenarioError
        If a scenario sets nothing, a list is empty, or two scenarios share a label.

    Examples
    --------
    >>> expand_overrides(grids=[{"vary": {"cutoff.at": [1.0, 2.0]}}])
    [('cutoff.at=1.0', {'cutoff.at': 1.0}), ('cutoff.at=2.0', {'cutoff.at': 2.0})]
    """
    out: list[Override] = []
    for item in items:
        keys = dotted(item.get("set", {}))
        label = str(item.get("label") or _label(keys))
        if not keys:
            raise ScenarioError(f"scenario {label!r} sets nothing")
        out.append((label, keys))
    for grid in grids:
        vary = dotted(grid.get("vary", {}))
        prefix = f"{grid['label']}: " if grid.get("label") else ""
        if not vary:
            raise ScenarioError(f"grid {prefix or 'without a label'} varies nothing")
        for key, values in vary.items():
            if not isinstance(values, list | tuple) or not values:
                raise ScenarioError(f"key {key!r} of a grid needs a list of values, not {values!r}")
        for values in product(*vary.values()):
            keys = dict(zip(vary, values))
            out.append((prefix + _label(keys), keys))
    seen: set[str] = set()
    for label, _ in out:
        if label in seen:
            raise ScenarioError(f"two scenarios are called {label!r}")
        seen.add(label)
    return out


def one_at_a_time(alternatives: Mapping[str, Sequence[Any]]) -> list[Override]:
    """One scenario for each alternative of each key, all else as it is: what a tornado and the ledger need."""
    return [(_label({key: value}), {key: value}) for key, values in alternatives.items() for value in values]


def dotted(nested: Mapping[str, Any], prefix: str = "") -> dict[str, Any]:
    """Nested mappings as one level of dotted keys; a mapping that is empty stays a value."""
    out: dict[str, Any] = {}
    for key, value in nested.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping) and value:
            out.update(dotted(value, f"{name}."))
        else:
            out[name] = value
    return out


def tornado_table(
    results: pd.DataFrame,
    base: Mapping[str, float],
    measures: Sequence[str],
    *,
    key: str = "key",
    label: str = "label",
) -> pd.DataFrame:
    """How far each key moves each measure, ranked.

    Parameters
    ----------
    results : DataFrame
        Tidy: one row a scenario, with the key that it varies, its label and the measures.
    base : mapping of measure to value
        The study as it is.

    Returns
    -------
    DataFrame
        measure, rank, key, base, low, high, low_label, high_label, low_pct, high_pct (of base), swing_pct;
        rank 1 is the widest swing. Where every alternative lies on one side, the base itself is the other end.
    """
    rows = []
    for measure in measures:
        start = float(base[measure])
        for name, part in results.groupby(key, sort=False):
            values = part[measure].to_numpy(dtype=np.float64)
            labels = [*part[label].astype(str), BASE]
            values = np.append(values, start)
            if np.isnan(values).all():
                continue
            low, high = int(np.nanargmin(values)), int(np.nanargmax(values))
            percent = [100.0 * (values[i] / start - 1.0) if start else np.nan for i in (low, high)]
            rows.append(
                {
                    "measure": measure,
                    "key": name,
                    "base": start,
                    "low": values[low],
                    "high": values[high],
                    "low_label": labels[low],
                    "high_label": labels[high],
                    "low_pct": percent[0],
                    "high_pct": percent[1],
                    "swing_pct": percent[1] - percent[0],
                    "_swing": values[high] - values[low],
                }
            )
    columns = [
        "measure", "rank", "key", "base", "low", "high", "low_label", "high_label", "low_pct", "high_pct", "swing_pct",
    ]  # fmt: skip
    if not rows:
        return pd.DataFrame(columns=columns)
    table = pd.DataFrame(rows)
    table["rank"] = (
        table.groupby("measure", sort=False)["_swing"].rank(method="first", ascending=False).astype(int)
    )
    order = {measure: position for position, measure in enumerate(measures)}
    table["_order"] = table["measure"].map(order)
    return table.sort_values(["_order", "rank"], ignore_index=True)[columns]


def _label(keys: Mapping[str, Any]) -> str:
    return ", ".join(f"{key}={value}" for key, value in keys.items())

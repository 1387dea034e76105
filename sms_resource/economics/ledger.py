"""The decision ledger: every decision, its reason, and what its alternatives would do."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

ORIGINS: tuple[str, ...] = ("choice", "default", "borrowed", "override")
MISSING_REASON = "no reason given"


@dataclass(frozen=True)
class Decision:
    """One decision of a study.

    Parameters
    ----------
    key : str
        Dotted key in the study.
    value : object
        What was decided.
    origin : "choice" | "default" | "borrowed" | "override"
        Chosen in the study, left at the default, borrowed from another deposit or paper, or a class replaced.
    reason, who : str
    meaning : str
        What the key means, in plain words.
    alternatives : tuple
        Values that a careful person would also consider.
    """

    key: str
    value: Any
    origin: str = "default"
    reason: str = ""
    who: str = ""
    meaning: str = ""
    alternatives: tuple[Any, ...] = ()

    def __post_init__(self) -> None:
        if self.origin not in ORIGINS:
            raise ValueError(f"origin is {self.origin!r}; one of {', '.join(ORIGINS)} was wanted")


def build_ledger(
    decisions: Sequence[Decision],
    results: Mapping[tuple[str, str], Mapping[str, float]],
    base: Mapping[str, float],
    measures: Sequence[str],
) -> pd.DataFrame:
    """One row for each alternative of each decision, and one for a decision without any.

    Parameters
    ----------
    decisions : sequence of Decision
    results : mapping of (key, text of the alternative) to mapping of measure to value
        From the scenarios; :func:`as_text` makes the text.
    base : mapping of measure to value
        The study as it is.
    measures : sequence of str
        Such as dry_tonnes, cu_pct, cu_t.

    Returns
    -------
    DataFrame
        key, meaning, value, origin, reason, who, alternative, state ("run", "not run", "no alternative"), then for
        each measure its change and its change in percent of the base; widest_pct is the largest of these for the
        decision. Decisions that move the measures most come first.
    """
    rows = []
    for number, decision in enumerate(decisions):
        head = {
            "_number": number,
            "key": decision.key,
            "meaning": decision.meaning,
            "value": as_text(decision.value),
            "origin": decision.origin,
            "reason": decision.reason or MISSING_REASON,
            "who": decision.who or "not named",
        }
        if not decision.alternatives:
            rows.append({**head, "alternative": "", "state": "no alternative"})
        for alternative in decision.alternatives:
            found = results.get((decision.key, as_text(alternative)))
            row = {
                **head,
                "alternative": as_text(alternative),
                "state": "not run" if found is None else "run",
            }
            if found is not None:
                for measure in measures:
                    change = float(found[measure]) - float(base[measure])
                    row[f"{measure}_change"] = change
                    row[f"{measure}_pct"] = 100.0 * change / float(base[measure]) if base[measure] else np.nan
            rows.append(row)
    effects = [f"{measure}{ending}" for measure in measures for ending in ("_change", "_pct")]
    first = ["key", "meaning", "value", "origin", "reason", "who", "alternative", "state"]
    table = pd.DataFrame(rows, columns=["_number", *first, *effects])
    percents = table[[name for name in effects if name.endswith("_pct")]].astype(float).abs().max(axis=1)
    table["widest_pct"] = percents.groupby(table["_number"]).transform("max") if len(table) else percents
    order = table.assign(_rank=-table["widest_pct"].fillna(-1.0)).sort_values(
        ["_rank", "_number"], kind="stable"
    )
    return order[[*first, *effects, "widest_pct"]].reset_index(drop=True)


def difference_waterfall(
    before: Mapping[str, Any],
    after: Mapping[str, Any],
    evaluate: Callable[[dict[str, Any]], Mapping[str, float]],
    measures: Sequence[str],
    *,
    order: Sequence[str] | None = None,
) -> pd.DataFrame:
    """Which decision caused how much of the difference between two runs, by replacing one after another.

    Starting from the first run, each decision that differs takes the value of the second, and the run is evaluated
    again; the steps sum exactly to the difference. A step depends on the order where decisions act together, so
    each is also shown alone (from the first run) and last (into the second): where these differ, they interact.

    Parameters
    ----------
    before, after : mapping of dotted key to value
        Decisions of the two runs. A key that one of them lacks counts as None there.
    evaluate : callable
        From a mapping of decisions to measures; called about three times a decision that differs.
    measures : sequence of str
    order : sequence of str, optional
        Keys in the order of replacement; those left out follow in the order of ``after``.

    Returns
    -------
    DataFrame
        step, key, from, to, then for each measure its value after the step, ``<measure>_step``, ``<measure>_alone`` and
        ``<measure>_last``. The first row is the first run; the last row checks that the second run is reached.
    """
    keys = [key for key in dict.fromkeys([*after, *before]) if not _same(before.get(key), after.get(key))]
    if order is not None:
        keys = [*[key for key in order if key in keys], *[key for key in keys if key not in set(order)]]
    state = dict(before)
    start = dict(evaluate(dict(state)))
    end = dict(evaluate(dict(after)))
    rows: list[dict[str, Any]] = [
        {"step": 0, "key": "first run", "from": "", "to": "", **{m: start[m] for m in measures}}
    ]
    reached = start
    for number, key in enumerate(keys, start=1):
        state = _with(state, key, after)
        now = dict(evaluate(dict(state))) if number < len(keys) else end
        alone = now if number == 1 else dict(evaluate(_with(dict(before), key, after)))
        last = reached if number == len(keys) else dict(evaluate(_with(dict(after), key, before)))
        row: dict[str, Any] = {
            "step": number,
            "key": key,
            "from": as_text(before.get(key)),
            "to": as_text(after.get(key)),
        }
        for m in measures:
            row[m] = now[m]
            row[f"{m}_step"] = now[m] - reached[m]
            row[f"{m}_alone"] = alone[m] - start[m]
            row[f"{m}_last"] = end[m] - last[m]
        rows.append(row)
        reached = now
    total = {f"{m}_step": end[m] - start[m] for m in measures}
    rows.append(
        {
            "step": len(keys) + 1,
            "key": "second run",
            "from": "",
            "to": "",
            **{m: end[m] for m in measures},
            **total,
        }
    )
    endings = ("", "_step", "_alone", "_last")
    return pd.DataFrame(
        rows, columns=["step", "key", "from", "to", *[f"{m}{e}" for m in measures for e in endings]]
    )


def as_text(value: Any) -> str:
    """A value as the ledger prints it, the same for lists and tuples."""
    if value is None:
        return "not given"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.12g}"
    if isinstance(value, list | tuple):
        return ", ".join(as_text(item) for item in value) or "none"
    if isinstance(value, Mapping):
        return "; ".join(f"{name}: {as_text(item)}" for name, item in value.items()) or "none"
    return str(value)


def _with(state: dict[str, Any], key: str, source: Mapping[str, Any]) -> dict[str, Any]:
    out = dict(state)
    if key in source:
        out[key] = source[key]
    else:
        out.pop(key, None)
    return out


def _same(one: Any, other: Any) -> bool:
    if isinstance(one, list | tuple) and isinstance(other, list | tuple):
        return len(one) == len(other) and all(_same(a, b) for a, b in zip(one, other))
    if isinstance(one, float) and isinstance(other, float) and one != one and other != other:
        return True
    return bool(one == other)

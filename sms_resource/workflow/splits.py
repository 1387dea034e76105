"""Tables of tonnes told apart by domain, by bench and by screen, each of which sums to the whole."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

CARRIED = ("volume_m3", "dry_tonnes", "wet_tonnes")
FILES = (
    "grade_tonnage_by_domain", "grade_tonnage_by_bench", "grade_tonnage_by_screen", "benches", "body_parts",
    "dilution_and_loss",
)  # fmt: skip


def split_tables(
    frame: pd.DataFrame,
    marks: pd.DataFrame,
    model: Any,
    *,
    variable: str,
    at: float,
    steps: Sequence[float],
    metals: Sequence[str],
    bench_m: float | None,
) -> dict[str, pd.DataFrame]:
    """Tonnes, grades and metal above every cut-off by domain, bench and screen; the benches at one cut-off.

    Parameters
    ----------
    frame : DataFrame
        One row a block: tonnes, metals, the cut-off variable, domain, proposed_class, kept_share.
    marks : DataFrame
        kept_share and the ``taken_<screen>`` shares of each block, in its order.
    model : BlockModel
        Of the same blocks.
    variable, at, steps
        Column of the cut-off, the study's value, and all values of the tables.
    metals : sequence of str
    bench_m : float or None
        Height of a bench; None is that of a block.

    Returns
    -------
    dict of DataFrame
        grade_tonnage_by_domain and grade_tonnage_by_bench (of what the screens leave), grade_tonnage_by_screen (of the
        whole body: "kept", and what each screen takes), benches (above the cut-off), body_parts (domain, bench and
        screen of every tonne of the body).
    """
    from sms_resource.blocks.benches import bench_parts, benches
    from sms_resource.economics import grade_tonnage

    columns = list(dict.fromkeys([*CARRIED, *metals, variable, "domain", "proposed_class"]))
    lean = frame[columns]
    share = frame["kept_share"].to_numpy(dtype=np.float64)
    slices = bench_parts(model, height_m=bench_m)
    by_bench = cut(lean, slices["row"].to_numpy(), slices["share"].to_numpy() * share[slices["row"]])
    by_bench = by_bench.assign(bench=slices["floor_elevation"].to_numpy())
    pieces = screen_pieces(marks)
    by_screen = cut(lean, pieces["row"].to_numpy(), pieces["share"].to_numpy()).assign(
        screen=pieces["screen"].to_numpy()
    )
    domains = cut(lean, np.arange(len(lean)), share)
    made = {}
    for name, part in (("domain", domains), ("bench", by_bench), ("screen", by_screen)):
        held = part[part["volume_m3"] > 0]
        made[f"grade_tonnage_by_{name}"] = grade_tonnage(
            held,
            metals=list(metals),
            cutoff_variable=variable,
            cutoffs=list(steps),
            groups=("proposed_class", name),
        )
    height = model.grid.size[2] if bench_m is None else bench_m
    made["grade_tonnage_by_bench"] = named_benches(made["grade_tonnage_by_bench"], height)
    above = np.where(frame[variable].to_numpy(dtype=np.float64) >= at, share, 0.0)
    table = benches(model.with_frame(frame), height_m=bench_m, kept_share=above, metals=list(metals))
    made["benches"] = table[table["volume_m3"] > 0].reset_index(drop=True)
    made["body_parts"] = body_parts(lean, slices, pieces, metals)
    return made


def cut(frame: pd.DataFrame, row: np.ndarray, share: np.ndarray) -> pd.DataFrame:
    """Parts of blocks with their share of volume and tonnes."""
    part = frame.iloc[row].reset_index(drop=True)
    return part.assign(**{name: part[name].to_numpy() * share for name in CARRIED})


def screen_pieces(marks: pd.DataFrame) -> pd.DataFrame:
    """Row, share and name of each piece of a block: what is kept, and what each screen takes."""
    parts = []
    names = [str(name) for name in marks.columns]
    for column in ("kept_share", *[name for name in names if name.startswith("taken_")]):
        share = marks[column].to_numpy(dtype=np.float64)
        row = np.flatnonzero(share > 0)
        name = "kept" if column == "kept_share" else column.removeprefix("taken_")
        parts.append(pd.DataFrame({"row": row, "share": share[row], "screen": name}))
    return pd.concat(parts, ignore_index=True)


def named_benches(table: pd.DataFrame, height: float) -> pd.DataFrame:
    """Benches by their floor and roof, from the top down, the sum over all of them last."""
    floor = pd.to_numeric(table["bench"], errors="coerce")
    words = [
        "all" if np.isnan(low) else f"{low:g} to {low + height:g}" for low in floor.to_numpy(dtype=np.float64)
    ]
    place = list(table.columns).index("bench")
    named = table.assign(bench=words)
    named.insert(place + 1, "floor_elevation", floor.to_numpy(dtype=np.float64))
    named.insert(place + 2, "roof_elevation", floor.to_numpy(dtype=np.float64) + height)
    order = {name: number for number, name in enumerate(dict.fromkeys(named["proposed_class"]))}
    named["_class"] = named["proposed_class"].map(order)
    named = named.sort_values(
        ["_class", "floor_elevation", "cutoff"],
        ascending=[True, False, True],
        na_position="last",
        kind="stable",
    )
    return named.drop(columns="_class").reset_index(drop=True)


def body_parts(
    frame: pd.DataFrame, slices: pd.DataFrame, pieces: pd.DataFrame, metals: Sequence[str]
) -> pd.DataFrame:
    """Volume, tonnes and metal of the whole body by domain, bench and screen, no cut-off: the parts sum to the body."""
    from sms_resource.units import contained_tonnes

    both = slices.merge(pieces, on="row", suffixes=("", "_screen"))
    row, share = both["row"].to_numpy(), (both["share"] * both["share_screen"]).to_numpy()
    held = cut(frame, row, share)
    made = both[["floor_elevation", "roof_elevation", "screen"]].assign(
        domain=held["domain"].to_numpy(), **{name: held[name].to_numpy() for name in CARRIED}
    )
    for metal in metals:
        grade = np.nan_to_num(held[metal].to_numpy(dtype=np.float64))
        made[f"{metal.rpartition('_')[0]}_contained_t"] = contained_tonnes(
            held["dry_tonnes"].to_numpy(), grade, metal
        )
    keys = ["domain", "floor_elevation", "roof_elevation", "screen"]
    return made.groupby(keys, as_index=False, sort=True).sum()


def write_splits(folder: Path, tables: dict[str, pd.DataFrame]) -> None:
    """Write those of the tables that a run has made, each as CSV under its name."""
    for name in FILES:
        if name in tables:
            tables[name].to_csv(folder / f"{name}.csv", index=False)

"""What scenarios tell: effects of alternatives for the ledger, tornado, heat maps."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

import pandas as pd

from sms_resource.reporting.rounding import mass_text
from sms_resource.study import Study
from sms_resource.units import element_column, unit_label
from sms_resource.workflow.cheap import NAMED
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.scenarios import ScenarioRun


def effects(study: Study, run: ScenarioRun) -> dict[str, str]:
    """What the alternatives of each decision do to dry tonnes, grade and metal, in words."""
    if not len(run.table):
        return {}
    tonnes, lead, *contents = lead_measures(study, run)
    found: dict[str, str] = {}
    part = run.table[run.table["origin"] == "ledger"]
    for group, rows in part.groupby("group", sort=False):
        words = []
        for row in rows.to_dict("records"):
            value = row["label"].partition(" = ")[2]
            if row["state"] != "run":
                words.append(f"{value}: could not be run")
                continue
            says = [f"dry t {_percent(row[tonnes], run.base[tonnes])}"]
            says.append(f"{lead.partition('_')[0].capitalize()} {_percent(row[lead], run.base[lead])}")
            says += [f"metal {_percent(row[name], run.base[name])}" for name in contents]
            says += class_words(row, run.base)
            words.append(f"{value}: " + ", ".join(says))
        found[str(group)] = "; ".join(words)
    return found


def class_words(row: Mapping[Any, Any], base: dict[str, float]) -> list[str]:
    """What a scenario does to the dry tonnes of a class, where that is not what it does to all of them."""
    share = row["dry_tonnes"] / base["dry_tonnes"] if base["dry_tonnes"] else float("nan")
    said = []
    for name in NAMED:
        before, after = base.get(f"{name}_dry_tonnes", 0.0), row[f"{name}_dry_tonnes"]
        if before and abs(after / before - share) > 5e-4:
            said.append(f"{name.capitalize()} dry t {_percent(after, before)}")
        elif not before and after:
            said.append(f"{name.capitalize()} from none to {mass_text(float(after), 'dry')}")
    return said


def effect_sizes(study: Study, run: ScenarioRun) -> dict[str, float]:
    """Largest change, in percent, of dry tonnes or of the first metal's content, by decision."""
    if not len(run.table):
        return {}
    names = [name for name in lead_measures(study, run) if name != metal_columns(study.config)[0]]
    part = run.table[(run.table["origin"] == "ledger") & (run.table["state"] == "run")]
    found: dict[str, float] = {}
    for row in part.to_dict("records"):
        sizes = [abs(100.0 * (row[name] / run.base[name] - 1.0)) for name in names if run.base[name]]
        found[row["group"]] = max([found.get(row["group"], 0.0), *sizes])
    return found


def _percent(value: float, base: float) -> str:
    if not base or value != value:
        return "n/a"
    return f"{100.0 * (value / base - 1.0):+.1f} %"


def lead_measures(study: Study, run: ScenarioRun) -> list[str]:
    """Dry tonnes, grade of the first metal, and its content."""
    lead = metal_columns(study.config)[0]
    element = lead.partition("_")[0]
    contents = [name for name in run.base if name in (f"{element}_t", f"{element}_kg")]
    return ["dry_tonnes", lead, *contents]


def tables(study: Study, run: ScenarioRun) -> dict[str, Any]:
    """Table of scenarios, effects, tornado and heat maps for the report.

    Returns
    -------
    dict
        scenarios, effects, effect_pct; tornado (DataFrame) where a decision was moved alone; heat_maps: one mapping
        for each grid of two keys, with its label, the keys and a DataFrame of x, y and the measures.
    """
    from sms_resource.economics.scenarios import tornado_table

    made: dict[str, Any] = {
        "scenarios": run.table,
        "effects": effects(study, run),
        "effect_pct": effect_sizes(study, run),
    }
    if not len(run.table):
        return made
    ran = run.table[run.table["state"] == "run"]
    measures = lead_measures(study, run)
    alone = moved_alone(ran)
    if len(alone):
        made["tornado"] = tornado_table(alone, run.base, measures).rename(columns={"key": "decision"})
    maps = [
        heat_map(
            ran[ran["group"] == grid.label],
            grid.label,
            list(grid.vary),
            measures,
            [f"{key} ({key_unit(study, key)})" for key in grid.vary],
        )
        for grid in study.config.scenarios.grid
        if len(grid.vary) == 2 and (ran["group"] == grid.label).any()
    ]
    if maps:
        made["heat_maps"] = maps
    return made


def moved_alone(table: pd.DataFrame) -> pd.DataFrame:
    """Scenarios of one key, each with the key and the value that it takes; others under their own label."""
    changes = table["changes"].map(json.loads)
    single = changes.map(len) == 1
    keys = [
        next(iter(change)) if one else label for change, one, label in zip(changes, single, table["label"])
    ]
    labels = [
        _short(next(iter(change.values()))) if one else label
        for change, one, label in zip(changes, single, table["label"])
    ]
    wanted = (table["origin"] != "grid") | single
    return table.assign(key=keys, label=labels)[wanted.to_numpy()]


def heat_map(
    rows: pd.DataFrame, label: str, keys: list[str], measures: list[str], axes: list[str]
) -> dict[str, Any]:
    """A grid of two keys: values of the second across, of the first up, in the order of the study."""
    first, second = keys
    parts = rows["changes"].map(json.loads)
    frame = pd.DataFrame(
        {"x": [_short(part[second]) for part in parts], "y": [_short(part[first]) for part in parts]}
    )
    for name in measures:
        frame[name] = rows[name].to_numpy(dtype=float)
    return {"label": label, "x": axes[1], "y": axes[0], "frame": frame}


def key_unit(study: Study, key: str) -> str:
    """Unit of a key of the study, for an axis; "setting" where it is a choice or a bare number."""
    config = study.config
    if key == "cutoff.at":
        if config.cutoff.variable == "value":
            return f"{config.value.currency} per dry t"
        equivalent = config.cutoff.variable == "equivalent"
        element = config.value.equivalent_in if equivalent else config.cutoff.variable
        return f"{element.capitalize()}{'Eq' if equivalent else ''}, {unit_label(element_column(element))}"
    last = key.rpartition(".")[2]
    if last == "price":
        metal = config.value.metals.get(key.split(".")[2]) if key.count(".") == 3 else None
        return f"{config.value.currency}/{metal.price_unit}" if metal is not None else config.value.currency
    endings = {"_m": "m", "_pct": "%", "_deg": "°", "_m2": "m²", "_m3": "m³", "factor": "ratio", "_tpm3": "t/m³",
               "_per_wet_tonne": f"{config.value.currency} per wet t",
               "_per_dry_tonne": f"{config.value.currency} per dry t",
               "_per_day": f"{config.value.currency} per day"}  # fmt: skip
    return next((unit for ending, unit in endings.items() if last.endswith(ending)), "setting")


def _short(value: Any) -> str:
    if isinstance(value, float):
        return f"{value:.12g}"
    return value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)

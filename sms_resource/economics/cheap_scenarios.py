"""Scenarios of prices, recoveries, costs and cut-offs on one block model: thousands at once."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource import units
from sms_resource.economics.costs import CostModel
from sms_resource.economics.exact_sums import exact_parts
from sms_resource.economics.grade_tonnage import content_columns
from sms_resource.economics.recovery import Recovery
from sms_resource.economics.scenario_terms import (
    CheapScenario,
    Coefficients,
    bends,
    needed_columns,
    needs_deductions,
    scenario_groups,
)
from sms_resource.findings import Findings

Floats = NDArray[np.float64]


def cheap_scenarios(
    frame: pd.DataFrame,
    scenarios: Sequence[CheapScenario],
    *,
    metals: Sequence[str],
    parts: str | None = None,
    domain: str = "domain",
    slope: str = "slope_deg",
    elevation: str = "elevation",
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> tuple[pd.DataFrame, Findings]:
    """What each scenario selects from the same blocks.

    Gives what ``block_value``, ``block_costs`` and a cut on their difference give one by one, in one pass over the
    blocks for all scenarios. Tonnes, grades and contents are those of ``grade_tonnage`` to the last bit, since both
    sum exactly (see ``exact_parts``), wherever ``in_doubt`` is 0. Scenarios with the same metals share a pass;
    recoveries that bend with grade and costs by slope and depth take one more pass for each distinct bend.

    Parameters
    ----------
    frame : DataFrame
        One row a block, as for ``block_value`` and ``block_costs``.
    metals : sequence of str
        Grade columns to report.
    parts : str, optional
        Column, such as the class, whose values each get their own dry tonnes too.

    Returns
    -------
    DataFrame
        One row a scenario in the order given: label, dry_tonnes, wet_tonnes, each grade, each content,
        ``<part>_dry_tonnes`` of each part, mean_net_value_per_dry_tonne of what is selected (the mean equivalent
        where it chooses), and in_doubt: how many blocks lie so near their threshold that rounding could put them on
        either side. NaN where the terms have errors.
    Findings
        Errors of terms and costs, each once for all scenarios that share it.
    """
    findings = Findings()
    known: set[tuple[str, str]] = set()
    sound: list[int] = []
    for index, scenario in enumerate(scenarios):
        problems = [*_problems(scenario, frame, slope, elevation)]
        for finding in problems:
            if (finding.code, finding.message) not in known:
                known.add((finding.code, finding.message))
                findings.extend([finding])
        if not any(finding.severity == "error" for finding in problems):
            sound.append(index)
    dry, wet = (frame[c].to_numpy(dtype=np.float64) for c in (dry_tonnes, wet_tonnes))
    quantities, columns = _quantities(frame, dry, wet, metals, parts)
    sums = np.full((len(columns) + 2, len(scenarios)), np.nan)
    sums[:, sound] = 0.0
    domains, names = (
        pd.factorize(frame[domain].astype(str)) if domain in frame else (np.zeros(len(dry), int), [""])
    )
    wanted = {c for i in sound for c in needed_columns(scenarios[i])} | ({slope, elevation} & set(frame))
    needed = frame[sorted(wanted)]
    for code, name in enumerate(names):
        rows = np.flatnonzero(domains == code)
        part = needed.iloc[rows]
        wet_per_dry = np.divide(wet[rows], dry[rows], out=np.full(len(rows), np.nan), where=dry[rows] > 0)
        for members in scenario_groups([scenarios[i] for i in sound], str(name)).values():
            chosen = [sound[i] for i in members]
            group = [scenarios[i] for i in chosen]
            sums[:, chosen] += _weigh(part, group, str(name), quantities[rows], wet_per_dry, slope, elevation)
    return _table(scenarios, dict(zip([*columns, "value", "in_doubt"], sums)), metals, parts), findings


def _quantities(
    frame: pd.DataFrame, dry: Floats, wet: Floats, metals: Sequence[str], parts: str | None
) -> tuple[Floats, list[str]]:
    """What is summed over the chosen blocks, dry tonnes first; each but those in two parts that sum exactly."""
    made: dict[str, Floats] = {"dry": dry}

    def put(name: str, values: Floats) -> None:
        made[f"{name} coarse"], made[f"{name} fine"] = exact_parts(values)

    put("dry_tonnes", dry)
    put("wet_tonnes", wet)
    for metal in metals:
        grade = frame[metal].to_numpy(dtype=np.float64)
        gaps = np.isnan(grade)
        put(metal, np.where(gaps, 0.0, grade) * dry)
        if gaps.any():  # all other metals are graded by every dry tonne
            put(f"graded {metal}", ~gaps * dry)
    if parts is not None:
        coarse, fine = made["dry_tonnes coarse"], made["dry_tonnes fine"]
        for name in sorted(frame[parts].astype(str).unique()):
            mine = (frame[parts].astype(str) == name).to_numpy()
            made[f"part {name} coarse"], made[f"part {name} fine"] = (
                np.where(mine, coarse, 0.0),
                np.where(mine, fine, 0.0),
            )
    return np.column_stack(list(made.values())), list(made)


def _problems(scenario: CheapScenario, frame: pd.DataFrame, slope: str, elevation: str) -> Findings:
    found = Findings() if scenario.equivalent is not None else scenario.terms.check()
    for column in needed_columns(scenario):
        if column not in frame:
            found.error(
                "metal-missing", f"The blocks have no column {column}.", "Estimate it.", column=column
            )
    if scenario.equivalent is not None:
        return found
    found.extend(scenario.costs.check())
    wanted = [
        (slope, bool(scenario.costs.slope_factors)),
        (elevation, scenario.costs.depth_rate_per_100_m != 0),
    ]
    for column, needed in wanted:
        if needed and column not in frame:
            found.error(
                "cost-column-missing", f"Costs go by {column}, which the blocks do not have.", "Add it."
            )
    return found


def _weigh(
    part: pd.DataFrame,
    group: Sequence[CheapScenario],
    domain: str,
    quantities: Floats,
    wet_per_dry: Floats,
    slope: str,
    elevation: str,
) -> Floats:
    from sms_resource.economics import scenario_kernels as kernels

    first = group[0]
    columns = []
    for name, bend in bends(first, domain):
        grade = part[name].to_numpy(dtype=np.float64)
        columns.append(grade * Recovery(by_grade=bend).fraction(grade) if bend else grade)
    recovered = np.column_stack(columns) if columns else np.zeros((len(part), 1))
    if first.equivalent is not None:
        shapes = np.zeros((len(part), 3))
    else:
        shapes = np.column_stack(
            [wet_per_dry, *_cost_shapes(part, first.costs, wet_per_dry, slope, elevation)]
        )
    carrier = 0
    if first.equivalent is None and first.terms.product is not None:
        carrier = list(needed_columns(first)).index(first.terms.product.carrier)
    coefficients = Coefficients.empty(len(group), recovered.shape[1], kernels.TILE)
    for s, scenario in enumerate(group):
        coefficients.fill(s, scenario, domain)
    coefficients.set_nearness(recovered, shapes, carrier)
    padded = coefficients.tiled(kernels.TILE)
    sums = np.zeros((kernels.RUNS, padded["worth"].shape[0], quantities.shape[1] + 2, kernels.TILE))
    block = tuple(np.ascontiguousarray(a) for a in (recovered, shapes, quantities))
    if needs_deductions(first):
        kernels.deducted_sums(
            block[0], carrier, block[1], block[2], padded["share"], padded["worth"], padded["by_carrier"],
            padded["flat"], padded["product"], padded["charge"], padded["royalty"], padded["threshold"],
            padded["nearness"], sums,
        )  # fmt: skip
    else:
        kernels.linear_sums(
            block[0], block[1], block[2], padded["worth"], padded["charge"], padded["royalty"], padded["threshold"],
            padded["nearness"], sums,
        )  # fmt: skip
    whole = sums.sum(axis=0)  # (tiles, quantities, TILE), runs in a fixed order
    return np.moveaxis(whole, 0, 1).reshape(whole.shape[1], -1)[:, : len(group)]


def _cost_shapes(
    part: pd.DataFrame, costs: CostModel, wet_per_dry: Floats, slope: str, elevation: str
) -> tuple[Floats, Floats]:
    """How vessel and lifting costs per dry tonne vary over the blocks, for one unit of money a wet tonne."""
    steep = np.ones(len(part))
    if costs.slope_factors:
        steep = costs.slope_factor(part[slope].to_numpy(dtype=np.float64))
    deep = np.ones(len(part))
    if costs.depth_rate_per_100_m:
        deep = costs.depth_factor(part[elevation].to_numpy(dtype=np.float64))
    return steep * wet_per_dry, steep * deep * wet_per_dry


def _table(
    scenarios: Sequence[CheapScenario], sums: dict[str, Floats], metals: Sequence[str], parts: str | None
) -> pd.DataFrame:
    def whole(name: str) -> Floats:
        return sums[f"{name} coarse"] + sums[f"{name} fine"]

    out: dict[str, object] = {"label": [scenario.label for scenario in scenarios]}
    out["dry_tonnes"], out["wet_tonnes"] = whole("dry_tonnes"), whole("wet_tonnes")
    with np.errstate(divide="ignore", invalid="ignore"):
        for metal in metals:
            graded = whole(f"graded {metal}" if f"graded {metal} fine" in sums else "dry_tonnes")
            out[metal] = np.where(graded > 0, whole(metal) / graded, np.nan)
        mean = np.where(sums["dry"] > 0, sums["value"] / sums["dry"], np.nan)
    for metal in metals:
        mass = units.contained_tonnes(whole(metal), np.ones(1), metal)
        for name, factor in content_columns(metal).items():
            out[name] = mass * factor
    if parts is not None:
        for name in [key[5:-5] for key in sums if key.startswith("part ") and key.endswith(" fine")]:
            out[f"{name}_dry_tonnes"] = whole(f"part {name}")
    out["mean_net_value_per_dry_tonne"] = mean
    out["in_doubt"] = sums["in_doubt"]
    return pd.DataFrame(out)

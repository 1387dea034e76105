"""Scenarios: the same study with some decisions changed, run through the stages that the change touches."""

from __future__ import annotations

import json
import time
from collections import OrderedDict
from dataclasses import dataclass, field
from typing import Any

import pandas as pd

from sms_resource.findings import Findings
from sms_resource.study import Study, StudyError, decisions
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.stage import (
    ConfigView,
    Progress,
    StageCache,
    named_files,
    run_stages,
    stage_key,
)

Changes = dict[str, Any]


@dataclass(frozen=True)
class Scenario:
    """A label, the keys that it changes, and where it comes from: "list", "grid" or "ledger"."""

    label: str
    changes: Changes
    origin: str
    group: str = ""


@dataclass
class ScenarioRun:
    """What the scenarios gave.

    Attributes
    ----------
    table : DataFrame
        One row a scenario: label, origin, group, changes, dry_tonnes, wet_tonnes, each grade and each metal's content
        above the study's cut-off, and how many stages were run again.
    base : dict
        The same measures of the study as it is.
    findings : Findings
        Scenarios that could not be run, each with the reason.
    """

    table: pd.DataFrame
    base: dict[str, float]
    findings: Findings = field(default_factory=Findings)


class RecentStages:
    """Outputs of the last few stages in memory, before the cache on disk.

    A scenario's own outputs stay in memory: on disk they would push out what the next run needs. Its row of results is
    small and is kept.
    """

    def __init__(self, disk: StageCache | None, most: int = 24) -> None:
        self.disk = disk
        self.most = most
        self.recent: OrderedDict[str, Any] = OrderedDict()

    def get(self, key: str, default: Any = None) -> Any:
        """From memory, else from disk."""
        if key in self.recent:
            self.recent.move_to_end(key)
            return self.recent[key]
        found = self.disk.get(key) if self.disk is not None else None
        if found is None:
            return default
        self.put(key, found)
        return found

    def put(self, key: str, value: Any) -> None:
        """Keep in memory; the least recently used goes."""
        self.recent[key] = value
        self.recent.move_to_end(key)
        while len(self.recent) > self.most:
            self.recent.popitem(last=False)


def scenario_list(study: Study) -> list[Scenario]:
    """All scenarios of a study: its list, its grids, and one for each alternative of its decisions.

    Raises
    ------
    StudyError
        If a scenario changes nothing, two share a label, or one sets what cannot be set.
    """
    from sms_resource.economics.scenarios import ScenarioError, expand_overrides

    choice = study.config.scenarios
    findings = Findings()
    try:
        single = expand_overrides([{"label": item.label, "set": item.change} for item in choice.single])
        scenarios = [Scenario(label, changes, "list") for label, changes in single]
        for grid in choice.grid:
            for label, changes in expand_overrides(grids=[{"label": grid.label, "vary": grid.vary}]):
                scenarios.append(Scenario(label, changes, "grid", grid.label))
    except ScenarioError as error:
        findings.error("scenario-invalid", str(error), "Mend [scenarios] of the study.", file=study.path.name)
        raise StudyError(findings) from None
    for item in choice.single:
        _check_overrides(study, item.label, item.change, findings)
    for grid in choice.grid:
        for name, values in grid.vary.items():
            for value in values:
                _check_overrides(study, grid.label, {name: value}, findings)
    if findings.has_errors:
        raise StudyError(findings)
    if choice.ledger:
        scenarios += ledger_scenarios(study)
    return scenarios


def _check_overrides(study: Study, label: str, changes: Changes, findings: Findings) -> None:
    """Put into words which override of a scenario cannot be made."""
    try:
        study.with_overrides(changes)
    except StudyError as error:
        for item in error.findings.errors:
            findings.error(
                "scenario-invalid", f"scenario '{label}': {item.message}", item.remedy, file=study.path.name,
                column=item.column,
            )  # fmt: skip


def ledger_scenarios(study: Study) -> list[Scenario]:
    """One scenario for each alternative of each decision that has any."""
    return [
        Scenario(f"{row.key} = {json.dumps(other)}", {row.key: other}, "ledger", row.key)
        for row in decisions(study)
        for other in row.alternatives
        if not row.key.startswith("scenarios.")
    ]


def outcome_stages() -> tuple[Any, ...]:
    """The stages that tonnes and grades depend on: all but the checks of the estimate."""
    from sms_resource.workflow.stages import ESTIMATE_STAGES

    return tuple(stage for stage in ESTIMATE_STAGES if stage.name != "validate")


def final_key(study: Study, files: dict[str, str]) -> str:
    """Key of the last stage, from the study alone: nothing is run."""
    keys: dict[str, str] = {}
    named = named_files(files, study)
    for stage in outcome_stages():
        keys[stage.name] = stage_key(stage, ConfigView(study.config, stage.reads), keys, named)
    return keys["classify"]


def measures(study: Study, done: dict[str, Any]) -> dict[str, float]:
    """Dry and wet tonnes, grades and contained metal at the study's cut-off, all classes together."""
    state = done["classify"]
    table = state.grade_tonnage
    row = table[(table["cutoff"] == study.config.cutoff.at) & (table["proposed_class"] == "all")].iloc[0]
    skip = {"cutoff_variable", "cutoff", "proposed_class"}
    found = {str(name): float(value) for name, value in row.items() if name not in skip}
    for name in ("indicated", "inferred"):
        part = table[(table["cutoff"] == study.config.cutoff.at) & (table["proposed_class"] == name)]
        found[f"{name}_dry_tonnes"] = float(part["dry_tonnes"].iloc[0]) if len(part) else 0.0
    return found


def run_scenarios(
    study: Study,
    scenarios: list[Scenario],
    *,
    store: StageCache | None,
    files: dict[str, str],
    threads: int | None = None,
    progress: Progress | None = None,
) -> ScenarioRun:
    """Run each scenario through the stages that its changes touch.

    Parameters
    ----------
    study : Study
    scenarios : list of Scenario
    store : StageCache, optional
        Where the stages of the study as it is are found, and where rows of results are kept.
    files : dict
        Hash of each input file by role.
    threads : int, optional
    progress : Progress, optional

    Returns
    -------
    ScenarioRun
    """
    recent = RecentStages(store)
    findings = Findings()
    base = one(study, recent, store, files, threads)
    if isinstance(base, Findings):
        return ScenarioRun(pd.DataFrame(), {}, base)
    rows: list[dict[str, Any]] = []
    for number, scenario in enumerate(scenarios, 1):
        begun = time.perf_counter()
        if progress:
            progress.started(f"{number}/{len(scenarios)}", scenario.label)
        try:
            changed = study.with_overrides(scenario.changes)
            found = one(changed, recent, store, files, threads)
        except StudyError as error:
            found = error.findings
        state = "run"
        if isinstance(found, Findings):
            state = "not run"
            for item in found.errors:
                findings.warning(
                    "scenario-failed", f"{scenario.label}: {item.message}", item.remedy, file=study.path.name
                )
            found = {}
        rows.append(
            {"label": scenario.label, "origin": scenario.origin, "group": scenario.group, "state": state,
             "changes": json.dumps(scenario.changes, ensure_ascii=False), **found}
        )  # fmt: skip
        if progress:
            said = f"{found['dry_tonnes']:,.0f} dry t" if found else "not run"
            progress.finished(
                f"{number}/{len(scenarios)}", time.perf_counter() - begun, f"{scenario.label}: {said}", False
            )
    return ScenarioRun(pd.DataFrame(rows), base, findings)


def one(
    study: Study, recent: RecentStages, store: StageCache | None, files: dict[str, str], threads: int | None
) -> dict[str, float] | Findings:
    """Measures of one study, from the cache where they were found before; Findings where it cannot be run."""
    key = final_key(study, files)
    row_key = stage_row_key(key)
    kept = store.get(row_key) if store is not None else None
    if isinstance(kept, dict):
        return kept
    outcome = run_stages(outcome_stages(), study, store=recent, threads=threads, files=files)
    if outcome.findings.has_errors:
        return outcome.findings
    found = measures(study, outcome.done)
    if store is not None:
        store.put(row_key, found)
    return found


def stage_row_key(key: str) -> str:
    """Name of a row of results in the cache."""
    import hashlib

    return hashlib.sha256(f"row {key}".encode()).hexdigest()


def effects(study: Study, run: ScenarioRun) -> dict[str, str]:
    """What the alternatives of each decision do to dry tonnes, grade and metal, in words."""
    if not len(run.table):
        return {}
    lead = metal_columns(study.config)[0]
    content = next(
        (name for name in run.base if name.startswith(lead.partition("_")[0] + "_") and name.endswith("_t")),
        "",
    )
    found: dict[str, str] = {}
    part = run.table[run.table["origin"] == "ledger"]
    for group, rows in part.groupby("group", sort=False):
        words = []
        for row in rows.to_dict("records"):
            value = row["label"].partition(" = ")[2]
            if row["state"] != "run":
                words.append(f"{value}: could not be run")
                continue
            says = [f"dry t {_percent(row['dry_tonnes'], run.base['dry_tonnes'])}"]
            says.append(f"{lead.partition('_')[0].capitalize()} {_percent(row[lead], run.base[lead])}")
            if content:
                says.append(f"metal {_percent(row[content], run.base[content])}")
            words.append(f"{value}: " + ", ".join(says))
        found[str(group)] = "; ".join(words)
    return found


def effect_sizes(study: Study, run: ScenarioRun) -> dict[str, float]:
    """Largest change, in percent, of dry tonnes or of the first metal's content, by decision."""
    if not len(run.table):
        return {}
    lead = metal_columns(study.config)[0].partition("_")[0]
    names = ["dry_tonnes", *[name for name in run.base if name in (f"{lead}_t", f"{lead}_kg")]]
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


def tables(study: Study, run: ScenarioRun) -> dict[str, Any]:
    """Tornado, heat map and effects for the report."""
    from sms_resource.economics.scenarios import heat_table, tornado_table

    made: dict[str, Any] = {
        "scenarios": run.table,
        "effects": effects(study, run),
        "effect_pct": effect_sizes(study, run),
    }
    metals = metal_columns(study.config)
    ran = run.table[run.table["state"] == "run"] if len(run.table) else run.table
    ledger = ran[ran["origin"] == "ledger"] if len(ran) else ran
    if len(ledger):
        chosen = [
            "dry_tonnes",
            metals[0],
            *[name for name in run.base if name == f"{metals[0].partition('_')[0]}_t"],
        ]
        made["tornado_table"] = tornado_table(ledger.rename(columns={"group": "key"}), run.base, chosen)
        made["tornado"] = made["tornado_table"].rename(columns={"key": "decision"})
    for grid in study.config.scenarios.grid:
        if len(grid.vary) != 2 or not len(ran):
            continue
        first, second = grid.vary
        rows = ran[ran["group"] == grid.label]
        parts = rows["changes"].map(json.loads)
        flat = rows.assign(
            **{first: [part[first] for part in parts], second: [part[second] for part in parts]}
        )
        made.setdefault("heat_tables", {})[grid.label] = heat_table(
            flat, rows=first, columns=second, measure="dry_tonnes"
        )
        if "heat_map" not in made:
            made["heat_map"] = pd.DataFrame(
                {"x": flat[second], "y": flat[first], "value": flat["dry_tonnes"]}
            )
            made["heat_map_labels"] = (second, first, "Dry tonnes above the cut-off (t dry)")
    return made

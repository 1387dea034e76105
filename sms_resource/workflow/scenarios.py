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
from sms_resource.study.locate import key_rows, row_of
from sms_resource.workflow.cheap import cheap_rows, is_cheap, measures_at
from sms_resource.workflow.stage import (
    Progress,
    StageCache,
    named_files,
    run_stages,
    stage_key,
)
from sms_resource.workflow.tonnage_tables import cutoff_column

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
        findings.error("scenario-invalid", str(error), "Mend [scenarios] of the study.", file=study.path.name,
                       row=_row(study, "scenarios"), column="scenarios")  # fmt: skip
        raise StudyError(findings) from None
    for number, item in enumerate(choice.single):
        _check_overrides(study, item.label, item.change, f"scenarios.single.{number}.change", findings)
    for number, grid in enumerate(choice.grid):
        for name, values in grid.vary.items():
            for value in values:
                place = f"scenarios.grid.{number}.vary"
                _check_overrides(study, grid.label, {name: value}, place, findings)
    if findings.has_errors:
        raise StudyError(findings)
    if choice.ledger:
        scenarios += ledger_scenarios(study)
    return scenarios


def _row(study: Study, place: str) -> int | None:
    """Row of the study file where a key of it stands; None where the file cannot be read any more."""
    try:
        text = study.path.read_text(encoding="utf-8", errors="replace")
    except OSError:
        return None
    return row_of(key_rows(text), place)


def _check_overrides(study: Study, label: str, changes: Changes, place: str, findings: Findings) -> None:
    """Put into words which override of a scenario cannot be made, with the row of the scenario."""
    try:
        study.with_overrides(changes)
    except StudyError as error:
        for item in error.findings.errors:
            findings.error(
                "scenario-invalid", f"scenario '{label}': {item.message}", item.remedy, file=study.path.name,
                row=_row(study, place), column=item.column,
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
        keys[stage.name] = stage_key(stage, study, keys, named)
    return keys["classify"]


def measures(study: Study, done: dict[str, Any]) -> dict[str, float]:
    """Dry and wet tonnes, grades and contained metal at the study's cut-off, all classes together."""
    table = done["classify"].grade_tonnage
    mine = table[table["cutoff_variable"] == cutoff_column(study.config)]
    return measures_at(mine, study.config.cutoff.at)


def run_scenarios(
    study: Study,
    scenarios: list[Scenario],
    *,
    store: StageCache | None,
    files: dict[str, str],
    threads: int | None = None,
    progress: Progress | None = None,
) -> ScenarioRun:
    """Run each scenario through the stages that its changes touch; those of value and cut-off alone all at once.

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
    cheap = at_once(study, scenarios, recent, files, threads, progress)
    rows: list[dict[str, Any]] = []
    number = 0
    slow = len(scenarios) - len(cheap)
    for index, scenario in enumerate(scenarios):
        begun = time.perf_counter()
        found: dict[str, float] | Findings
        if index in cheap:
            found = cheap[index]
        else:
            number += 1
            if progress:
                progress.started(f"{number}/{slow}", scenario.label)
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
        if progress and index not in cheap:
            said = f"{found['dry_tonnes']:,.0f} dry t" if found else "not run"
            progress.finished(
                f"{number}/{slow}", time.perf_counter() - begun, f"{scenario.label}: {said}", False
            )
    return ScenarioRun(pd.DataFrame(rows), base, findings)


def at_once(
    study: Study,
    scenarios: list[Scenario],
    recent: RecentStages,
    files: dict[str, str],
    threads: int | None,
    progress: Progress | None,
) -> dict[int, dict[str, float]]:
    """Rows of the scenarios that change value and cut-off alone, by their place in the list."""
    count = sum(is_cheap(scenario.changes) for scenario in scenarios)
    if not count:
        return {}
    begun = time.perf_counter()
    if progress:
        progress.started("scenarios", f"{count} scenarios of value and cut-off")
    outcome = run_stages(outcome_stages(), study, store=recent, threads=threads, files=files)
    found = cheap_rows(study, [scenario.changes for scenario in scenarios], outcome.done["value"].frame)
    if progress:
        detail = f"{len(found)} scenarios of value and cut-off, in one pass over the blocks"
        progress.finished("scenarios", time.perf_counter() - begun, detail, False)
    return found


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

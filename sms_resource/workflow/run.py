"""Run a study: all stages in order, and the results put in their place when they are whole."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from sms_resource.findings import Findings
from sms_resource.reporting import ahead
from sms_resource.study import Study, StudyError
from sms_resource.workflow.folder import ResultFolder, has_blocks
from sms_resource.workflow.foresight import override_faults, scenario_faults
from sms_resource.workflow.manifest import input_hashes
from sms_resource.workflow.stage import Outcome, Progress, StageCache, run_stages

if TYPE_CHECKING:
    import pandas as pd

    from sms_resource.workflow.summary import Summary


@dataclass
class Result:
    """What a run has made.

    Attributes
    ----------
    findings : Findings
        Everything that the checks and the stages found.
    out : Path or None
        Folder of the results; None where errors stopped the run.
    block_model : BlockModel or None
        ``.frame`` has one row a block; ``.to_pyvista()``, ``.to_xarray()``, ``.to_geodataframe()``.
    grade_tonnage : DataFrame or None
        Tonnes and grades by cut-off and proposed class.
    variograms : dict
        VariogramInference by (domain, metal column).
    summary : Summary or None
        The table of tonnes at the study's cut-off, rounded and worded for print.
    stages : dict
        Outputs of the stages by name, for notebooks.
    scenarios : DataFrame or None
        One row a scenario, where scenarios were run.
    """

    findings: Findings
    out: Path | None = None
    block_model: Any = None
    grade_tonnage: pd.DataFrame | None = None
    variograms: dict[tuple[str, str], Any] = field(default_factory=dict)
    summary: Summary | None = None
    stages: dict[str, Any] = field(default_factory=dict)
    scenarios: pd.DataFrame | None = None

    def __repr__(self) -> str:
        return f"Result({self.out}, {self.findings!r})"


def check_study(study: Study) -> Findings:
    """Read the data of a study and list everything that is wrong with it.

    Parameters
    ----------
    study : Study

    Returns
    -------
    Findings
    """
    from sms_resource.workflow.stages import CHECK_STAGES

    if study.without_drilling:
        from sms_resource.workflow.prospect import TARGET_STAGES

        return run_stages(TARGET_STAGES, study, keep_on=True).findings
    findings = run_stages(CHECK_STAGES, study, keep_on=True).findings
    findings.extend(override_faults(study))
    findings.extend(scenario_faults(study))
    return findings


def default_cache() -> StageCache | None:
    """The cache of stages of this user; None where no folder for it can be made."""
    from sms_resource.cache import StageCache as DiskCache

    try:
        return DiskCache()
    except OSError:
        return None


def run_study(
    study: Study,
    out: str | Path | None = "results",
    *,
    progress: Progress | None = None,
    threads: int | None = None,
    cache: bool | StageCache = True,
    scenarios: bool = False,
    against: str | Path | None = None,
) -> Result:
    """Run the whole estimate of a study.

    Parameters
    ----------
    study : Study
    out : str or Path, optional
        Folder of the results. It is replaced as a whole when the run is whole; None writes nothing.
    progress : Progress, optional
        Told of each stage.
    threads : int, optional
        Threads of the kernels; results do not depend on it.
    cache : bool or StageCache
        Whether outputs of stages made before are used.
    scenarios : bool
        Whether the scenarios of the study are run too, so that the ledger tells what alternatives do.
    against : str or Path, optional
        Results of another run; the report tells what changed since, and which decision caused it.

    Returns
    -------
    Result
        Where ``findings.has_errors``, nothing was written and ``out`` is None.

    Raises
    ------
    NotResultsError
        If ``out`` holds something that is not a result.
    StudyError
        If the study's list of scenarios holds one that cannot be, or a polygon sets a class that is not allowed.
    """
    from sms_resource.workflow.stages import ESTIMATE_STAGES

    if study.without_drilling:
        return _run_target(study, out, progress, asked_more=scenarios or against is not None)
    store = (default_cache() if cache else None) if isinstance(cache, bool) else cache
    inputs = input_hashes(study)
    hashes = {role: entry["sha256"] for role, entry in inputs.items() if role != "study"}
    threads = threads or study.config.kriging.threads

    def stages() -> Outcome:
        return run_stages(
            ESTIMATE_STAGES, study, progress=progress, store=store, threads=threads, files=hashes
        )

    early = override_faults(study)  # told before anything is run
    if scenarios:
        early.extend(scenario_faults(study))
    if early.has_errors:
        raise StudyError(early)
    if out is None:
        return _result(study, stages(), None)
    ahead.begin(Path(out) if store is not None else None)
    with ResultFolder(out) as folder:
        outcome = stages()
        if outcome.findings.has_errors:
            return Result(outcome.findings)
        from sms_resource.workflow.publish import write_results

        extra = more(study, outcome, store, hashes, threads, progress, scenarios, against)
        summary = write_results(folder.staging, folder.out, study, outcome, inputs, progress, extra, store)
        folder.publish()
    result = _result(study, outcome, summary)
    result.out = folder.out
    result.scenarios = extra.get("scenarios")
    return result


def _run_target(study: Study, out: str | Path | None, progress: Progress | None, asked_more: bool) -> Result:
    """Run a study without drilling: ranges of an exploration target, and no block model."""
    from sms_resource.workflow.prospect import TARGET_STAGES
    from sms_resource.workflow.publish_target import write_target

    outcome = run_stages(TARGET_STAGES, study, progress=progress)
    if asked_more:
        outcome.findings.warning(
            "exploration-unused", "a study without drilling has no scenarios and is compared with no other run",
            "Change its ranges and run it again.", file=study.path.name,
        )  # fmt: skip
    if outcome.findings.has_errors:
        return Result(outcome.findings)
    result = Result(outcome.findings, stages=outcome.done)
    if out is not None:
        with ResultFolder(out) as folder:
            result.summary = write_target(folder.staging, study, outcome, input_hashes(study))
            folder.publish()
        result.out = folder.out
    return result


def more(
    study: Study,
    outcome: Outcome,
    store: StageCache | None,
    hashes: dict[str, str],
    threads: int | None,
    progress: Progress | None,
    scenarios: bool,
    against: str | Path | None,
) -> dict[str, Any]:
    """Scenario tables, and what changed against another run, where they are asked for."""
    extra: dict[str, Any] = {}
    if scenarios:
        from sms_resource.workflow.scenario_tables import tables
        from sms_resource.workflow.scenarios import run_scenarios, scenario_list

        run = run_scenarios(
            study, scenario_list(study), store=store, files=hashes, threads=threads, progress=progress
        )
        outcome.findings.extend(run.findings)
        extra.update(tables(study, run))
    if against is not None and not has_blocks(Path(against)):
        outcome.findings.warning(
            "against-unreadable", f"the run in {Path(against).name} has no block model to compare with",
            "Name the results of a study with drilling.", file=study.path.name,
        )  # fmt: skip
    elif against is not None:
        from sms_resource.workflow.reproduce import changes_since

        try:
            table, words, notes = changes_since(
                Path(against), study, store=store, files=hashes, threads=threads
            )
        except (StudyError, ValueError, KeyError, OSError) as error:
            outcome.findings.warning(
                "against-unreadable", f"the run in {Path(against).name} cannot be compared with this one: {error}",
                "Run that study again with this version, then compare.", file=study.path.name,
            )  # fmt: skip
            return extra
        extra.update(changes=table, against=words)
        for note in notes:
            outcome.findings.note("run-differs", f"Against {words}: {note}.", file=study.path.name)
    return extra


def _result(study: Study, outcome: Outcome, summary: Any) -> Result:
    if outcome.findings.has_errors:
        return Result(outcome.findings)
    done = outcome.done
    return Result(
        findings=outcome.findings,
        block_model=done["blocks"].model.with_frame(done["value"].frame),
        grade_tonnage=done["classify"].grade_tonnage,
        variograms=done["variograms"].inferences,
        summary=summary,
        stages=done,
    )

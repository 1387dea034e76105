"""Run a study again from the manifest of its results, and compare two runs decision by decision."""

from __future__ import annotations

import tempfile
import tomllib
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from sms_resource.findings import Findings
from sms_resource.study import Study, StudyError, load_study
from sms_resource.workflow.manifest import input_hashes, output_hashes, read_manifest, versions
from sms_resource.workflow.stage import Progress, code_fingerprint


@dataclass
class Verification:
    """Whether a run could be repeated byte for byte, and what differs.

    Attributes
    ----------
    same : bool
        Every output of the first run was made again with the same bytes.
    differing : list of str
        Outputs that differ, are missing or are new.
    causes : list of str
        Inputs, decisions, versions or code that are not those of the first run.
    findings : Findings
        What stopped the second run, if anything.
    """

    same: bool
    differing: list[str] = field(default_factory=list)
    causes: list[str] = field(default_factory=list)
    findings: Findings = field(default_factory=Findings)


def verify_results(
    results: Path, *, progress: Progress | None = None, threads: int | None = None
) -> Verification:
    """Run the study of some results again, without the cache, and compare every output.

    Parameters
    ----------
    results : Path
        Folder of results.
    progress : Progress, optional
    threads : int, optional

    Returns
    -------
    Verification

    Raises
    ------
    FileNotFoundError
        If the folder holds no results.
    """
    from sms_resource.workflow.run import run_study

    manifest = read_manifest(results)
    stored = manifest["outputs"]
    touched = [name for name, digest in output_hashes(results).items() if stored.get(name, digest) != digest]
    causes = [f"output changed after the run: {name}" for name in touched]
    path = Path(manifest["study"]["folder"]) / manifest["study"]["file"]
    try:
        study = load_study(path)
    except StudyError as error:
        return Verification(
            False, sorted(stored), [*causes, f"the study cannot be read: {path}"], error.findings
        )
    causes += differences(manifest, study)
    study = replace(study, given=manifest["study"]["given"])
    study = study.with_overrides({})
    with tempfile.TemporaryDirectory() as folder:
        out = Path(folder) / "results"
        result = run_study(
            study,
            out,
            progress=progress,
            threads=threads,
            cache=False,
            scenarios=bool(manifest.get("scenarios")),
        )
        if result.findings.has_errors:
            return Verification(False, sorted(stored), causes, result.findings)
        made = output_hashes(out)
    differing = sorted(name for name in {*stored, *made} if stored.get(name) != made.get(name))
    return Verification(not differing and not touched, differing, causes)


def differences(manifest: dict[str, Any], study: Study) -> list[str]:
    """Inputs, decisions, versions and code in which a study now differs from a manifest."""
    found = []
    now = input_hashes(study)
    for role, entry in manifest["inputs"].items():
        if role == "study":
            continue
        if role not in now:
            found.append(f"input is missing: {role} ({entry['file']})")
        elif now[role]["sha256"] != entry["sha256"]:
            found.append(f"input has changed: {role} ({entry['file']})")
    given = tomllib.loads(study.path.read_text(encoding="utf-8-sig"))
    before, after = flat(manifest["study"]["resolved"]), flat(study.config.model_dump(mode="json"))
    if given:
        for name in sorted({*before, *after}):
            if before.get(name) != after.get(name):
                found.append(
                    f"decision has changed in the study file: {name} was {before.get(name)!r}, is {after.get(name)!r}"
                )
    for name, version in versions().items():
        old = manifest["versions"].get(name)
        if old != version:
            found.append(f"version has changed: {name} was {old}, is {version}")
    if (
        manifest.get("code") != code_fingerprint()
        and manifest["versions"].get("sms_resource") == versions()["sms_resource"]
    ):
        found.append("the code of sms_resource has changed without a change of its version")
    return found


def flat(nested: Any, prefix: str = "") -> dict[str, Any]:
    """A nested mapping as dotted keys."""
    if not isinstance(nested, dict) or not nested:
        return {prefix: nested}
    found: dict[str, Any] = {}
    for name, value in nested.items():
        found.update(flat(value, f"{prefix}.{name}" if prefix else str(name)))
    return found


def changes_since(
    other: Path, study: Study, *, store: Any, files: dict[str, str], threads: int | None = None
) -> tuple[Any, str, list[str]]:
    """What changed since another run, and which decision caused how much of it.

    Parameters
    ----------
    other : Path
        Folder of the other run's results.
    study : Study
        The study as it is now; both runs are evaluated on today's files.
    store : StageCache, optional
    files : dict
        Hash of each input file by role.

    Returns
    -------
    waterfall : DataFrame
        step, dry_tonnes, kind ("total" or "change"), decision.
    against : str
        What the other run was.
    notes : list of str
        Differences of inputs and versions, which the waterfall cannot split.
    """
    import pandas as pd

    from sms_resource.economics.ledger import difference_waterfall
    from sms_resource.workflow.scenarios import RecentStages, one

    manifest = read_manifest(other)
    before_all, after_all = flat(manifest["study"]["resolved"]), flat(study.config.model_dump(mode="json"))
    skip = ("study.", "data.", "reasons", "report.", "scenarios.")
    names = [
        name for name in sorted({*before_all, *after_all})
        if before_all.get(name) != after_all.get(name) and not name.startswith(skip)
    ]  # fmt: skip
    before = {name: before_all.get(name) for name in names}
    after = {name: after_all.get(name) for name in names}
    recent = RecentStages(store)

    def evaluate(decisions: dict[str, Any]) -> dict[str, float]:
        changed = study.with_overrides(decisions)
        found = one(changed, recent, store, files, threads)
        if isinstance(found, Findings):
            raise StudyError(found)
        return {"dry_tonnes": found["dry_tonnes"]}

    table = difference_waterfall(before, after, evaluate, ["dry_tonnes"])
    rows = []
    last = len(table) - 1
    for number, row in enumerate(table.to_dict("records")):
        total = number in (0, last)
        rows.append(
            {"step": "the other run" if number == 0 else "this run" if total else row["key"],
             "kind": "total" if total else "change",
             "dry_tonnes": row["dry_tonnes"] if total else row["dry_tonnes_step"],
             "decision": "" if total else f"{row['key']}: {row['from']} to {row['to']}"}
        )  # fmt: skip
    notes = [item for item in differences(manifest, study) if not item.startswith("decision")]
    against = f"{manifest['study']['name']}, results in {other.name}"
    return pd.DataFrame(rows), against, notes

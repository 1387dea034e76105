"""Stage report: everything that a run leaves in its folder."""

from __future__ import annotations

import json
import time
from concurrent.futures import Executor, Future, ThreadPoolExecutor
from pathlib import Path
from typing import Any

import pandas as pd

from sms_resource import second
from sms_resource.findings import Findings
from sms_resource.reporting import ahead
from sms_resource.reporting.figures_neighbourhood import measured
from sms_resource.reporting.html import write_html
from sms_resource.reporting.pack import write_texts
from sms_resource.reporting.pages import record_key, set_pages
from sms_resource.reporting.pdf import pages_record
from sms_resource.reporting.report import draw_report
from sms_resource.reporting.workbook import Content, save_workbook, workbook_content
from sms_resource.study import Study, decisions
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.kept_files import KeptFiles
from sms_resource.workflow.layers import write_layers
from sms_resource.workflow.manifest import versions, write_manifest
from sms_resource.workflow.neighbourhood import recommendation
from sms_resource.workflow.splits import write_splits
from sms_resource.workflow.stage import Outcome, Progress, StageCache, StageRecord, code_fingerprint
from sms_resource.workflow.state import ClassState
from sms_resource.workflow.summary import Summary, summarise


def write_results(
    folder: Path,
    out: Path,
    study: Study,
    outcome: Outcome,
    inputs: dict[str, dict[str, Any]],
    progress: Progress | None = None,
    extra: dict[str, Any] | None = None,
    store: StageCache | None = None,
) -> Summary:
    """Write tables, layers, the report and the manifest of a run.

    Parameters
    ----------
    folder : Path
        An empty staging folder.
    out : Path
        Where the results will stand.
    study : Study
    outcome : Outcome
        Of all stages.
    inputs : dict
        Hashes of the input files.
    progress : Progress, optional
    extra : dict, optional
        Scenario tables and changes against another run, for the report.
    store : StageCache, optional
        Where figures are kept between runs.
    """
    if progress:
        progress.started("report", "Writing the report")
    begun = time.perf_counter()
    done = outcome.done
    ledger = ledger_table(study, extra)
    kept = KeptFiles(store, outcome)
    with ThreadPoolExecutor(3) as pool:
        # Pages, pack and block model come from elsewhere, or from libraries that leave this interpreter free meanwhile.
        files = write_report_files(folder, out, study, outcome, inputs, ledger, extra, store, pool)
        blocks = write_tables(folder, study, done, outcome.findings, pool)
        kept.write(
            "evidence",
            folder,
            ("composite", "variograms", "validate"),
            lambda place: write_evidence(place, done),
        )
        kept.write(
            "layers", folder / "layers", ("load", "composite", "body", "blocks"),
            lambda place: write_layers(place, study, done),
        )  # fmt: skip
        if len(done["validate"].neighbourhood):
            kept.write("times", folder / "measured", ("validate",), lambda place: write_times(place, done))
        ledger.to_csv(folder / "decisions.csv", index=False)
        blocks.result()
        count = sum(len(item.result()) if isinstance(item, Future) else 1 for item in files)
    if extra and extra.get("scenarios") is not None:
        extra["scenarios"].to_csv(folder / "scenarios.csv", index=False)
    seconds = time.perf_counter() - begun
    record = StageRecord("report", seconds, f"{count} files", False, "")
    outcome.records.append(record)
    summary = summarise(study, done)
    facts = {"summary": summary.record(), "cutoff": {"variable": done["classify"].facts["cutoff_variable"],
                                                     "value": study.config.cutoff.at},
             "tally_label": done["classify"].facts["tally_label"], "metals": metal_columns(study.config),
             "scenarios": bool(extra and extra.get("scenarios") is not None)}  # fmt: skip
    write_manifest(folder, study, inputs, outcome.records, facts)
    if progress:
        progress.finished("report", seconds, record.detail, False)
    return summary


def block_columns(frame: pd.DataFrame, metals: list[str]) -> list[str]:
    """Columns of block_model.parquet: what every reader wants first, then the details."""
    first = [
        "i", "j", "k", "easting", "northing", "elevation", "volume_m3", "body_fraction", "domain",
        "dry_density_tpm3", "wet_density_tpm3", "dry_tonnes", "wet_tonnes", *metals,
        *[f"{metal}_{name}" for metal in metals for name in ("variance", "slope", "efficiency")],
        "sample_count", "hole_count", "nearest_distance_m", "pass_number", "proposed_class", "class_reasons",
        "extrapolation", "kept_share", "screened_by",
    ]  # fmt: skip
    head = [name for name in first if name in frame]
    return head + [name for name in frame.columns if name not in head]


def write_tables(
    folder: Path, study: Study, done: dict[str, Any], findings: Findings, pool: Executor
) -> Future[None]:
    """Tables of tonnes and findings; the block model by a thread that is returned."""
    metals = metal_columns(study.config)
    state: ClassState = done["classify"]
    blocks: pd.DataFrame = done["value"].frame
    frame = blocks[block_columns(blocks, metals)]
    writing = pool.submit(
        frame.to_parquet, folder / "block_model.parquet", index=False, compression="zstd",
        use_dictionary=text_columns(frame),
    )  # fmt: skip
    state.grade_tonnage.to_csv(folder / "grade_tonnage.csv", index=False)
    write_splits(folder, state.tables)
    write_json(folder / "findings.json", findings.to_records())
    return writing


def text_columns(frame: pd.DataFrame) -> list[str]:
    """Columns of a table of blocks that say the same few things over and over; numbers of blocks hardly ever do."""
    return [str(name) for name in frame if not pd.api.types.is_numeric_dtype(frame[name])]


def write_evidence(folder: Path, done: dict[str, Any]) -> None:
    """Composites, variograms and validation: nothing that prices or cut-offs touch."""
    composites = done["composite"].composites
    weights = done["variograms"].samples.set_index("composite_id")["declustering_weight"]
    composites = composites.assign(declustering_weight=composites["composite_id"].map(weights))
    composites.to_csv(folder / "composites.csv", index=False)
    records = [
        {"domain": domain, "metal": metal, **item.to_record()}
        for (domain, metal), item in done["variograms"].inferences.items()
    ]
    write_json(folder / "variograms.json", records)
    done["validate"].table.to_csv(folder / "validation.csv", index=False)


def write_times(folder: Path, done: dict[str, Any]) -> None:
    """The study of neighbourhoods with its times, which no two runs share; the manifest does not hold its hashes."""
    table = done["validate"].neighbourhood
    files = measured(table.drop(columns="recommendation"), recommendation(table))
    for ending, made in zip(("png", "svg", "csv"), files):
        (folder / f"neighbourhood.{ending}").write_bytes(made)


def write_json(path: Path, content: Any) -> None:
    """Write JSON in one form, so that the same content is the same bytes."""
    text = json.dumps(content, indent=1, ensure_ascii=False, default=_plain, allow_nan=True)
    path.write_text(text, encoding="utf-8")


def _plain(value: Any) -> Any:
    """NumPy scalars and arrays as JSON holds them."""
    if hasattr(value, "tolist"):
        return value.tolist()
    return str(value)


def ledger_table(study: Study, extra: dict[str, Any] | None = None) -> pd.DataFrame:
    """Every decision as a row, with what its alternatives would do where scenarios have told."""
    effects: dict[str, str] = (extra or {}).get("effects", {})
    sizes: dict[str, float] = (extra or {}).get("effect_pct", {})
    rows = [
        {"key": row.key, "value": json.dumps(row.value, ensure_ascii=False), "origin": row.origin,
         "meaning": row.meaning, "reason": row.reason, "by": row.by,
         "alternatives": ", ".join(json.dumps(other, ensure_ascii=False) for other in row.alternatives),
         "effect": effects.get(row.key, ""), "effect_pct": sizes.get(row.key, float("nan"))}
        for row in decisions(study)
    ]  # fmt: skip
    return pd.DataFrame(rows)


def write_report_files(
    folder: Path,
    out: Path,
    study: Study,
    outcome: Outcome,
    inputs: dict[str, dict[str, Any]],
    ledger: pd.DataFrame,
    extra: dict[str, Any] | None,
    store: StageCache | None,
    pool: Executor,
) -> list[Path | Future[list[Path]]]:
    """The report, its figures and the pack that a CP takes away; what a thread still writes comes as a future."""
    from sms_resource.workflow.report_data import report_data
    from sms_resource.workflow.truth import truth_page

    manifest = {
        "inputs": [{"role": role, "path": entry["file"], **entry} for role, entry in inputs.items()],
        "versions": versions(),
        "seed": study.config.study.seed,
    }
    truth = truth_page(study, outcome.done)
    data = report_data(study, outcome.done, outcome.findings, ledger, manifest, truth, extra)
    # The second interpreter writes the workbook and sets the pages meanwhile.
    content = workbook_content(data)
    workbook = pool.submit(place_workbook, ahead.workbook(content), content, folder / "workbook.xlsx")
    report = draw_report(data, folder, store, code_fingerprint())
    record = pages_record(report.document)
    asked = ahead.pages(record, report.pictures)
    pages = pool.submit(place_pages, asked, record, report.pictures, folder / "report.pdf")
    if store is not None:
        pool.submit(store.put, record_key(out), record)
    page = write_html(report.document, report.pictures, folder / "report.html")
    return [page, *report.paths, pages, workbook, *write_texts(data, folder)]


def place_workbook(asked: Future[bytes] | None, content: Content, path: Path) -> list[Path]:
    """The workbook, from the second interpreter or written here."""
    made = second.answer(asked)
    if made is None:
        return [save_workbook(content, path)]
    path.write_bytes(made)
    return [path]


def place_pages(
    asked: Future[bytes] | None, record: str, pictures: dict[str, bytes], path: Path
) -> list[Path]:
    """The PDF, from the second interpreter or set here."""
    made = second.answer(asked)
    path.write_bytes(set_pages(record, pictures) if made is None else made)
    return [path]

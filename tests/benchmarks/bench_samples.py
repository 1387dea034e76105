"""Speed of the evidence: 20 000 assays in 500 holes through the stages that judge them, and their figures.

Run with ``python -m pytest tests/benchmarks/bench_samples.py -m benchmark -n 0 -s``. The holes are those of the demo, seven
times over, with every sample cut in three. Stages and figures are made first as a run makes them, with the second
interpreter beside this one; then figure by figure in this one alone, to see what each costs. The limit is on the clock of
the first.
"""

from __future__ import annotations

import time
from dataclasses import replace
from pathlib import Path

import pandas as pd
import pytest

from sms_resource import load_study
from sms_resource.findings import Findings
from sms_resource.reporting import ahead
from sms_resource.reporting.data import Evidence, LaboratoryEvidence, ReportData, Subject
from sms_resource.reporting.drawing import draw_in_two
from sms_resource.reporting.figures import MAKERS
from sms_resource.reporting.style import borrowed_settings, render
from sms_resource.samples.topcut_tables import cut_summary
from sms_resource.workflow.evidence import composite, density, metal_columns
from sms_resource.workflow.load import load
from sms_resource.workflow.stage import ConfigView, Context
from sms_resource.workflow.stages import COMPOSITE, DENSITY

pytestmark = pytest.mark.benchmark
DEMO = Path(__file__).parents[2] / "demo_deposit"
COPIES, PIECES, LIMIT_S = 7, 3, 5.0
DRAWN = (
    "plan of holes", "collars against the seafloor", "recovery", "lost core", "histograms", "log-probability plots",
    "top cuts", "contact analysis", "tracers with depth", "surface against core", "control charts", "blanks", "duplicates",
    "density",
)  # fmt: skip


def copies(table: pd.DataFrame, named: tuple[str, ...]) -> pd.DataFrame:
    """The table several times over, each time under names of its own."""
    made = []
    for number in range(COPIES):
        part = table.copy()
        for name in named:
            if name in part:
                part[name] = [f"{value}.{number}" if str(value) else "" for value in part[name]]
        if "easting" in part:
            part["easting"] = part["easting"] + 7.0 * number
        made.append(part)
    return pd.concat(made, ignore_index=True)


def cut_in_pieces(assays: pd.DataFrame) -> pd.DataFrame:
    """Each sample as several of the same grade."""
    made = []
    step = (assays["to_m"] - assays["from_m"]) / PIECES
    for number in range(PIECES):
        part = assays.assign(
            from_m=assays["from_m"] + number * step, to_m=assays["from_m"] + (number + 1) * step
        )
        made.append(part.assign(sample_id=[f"{name}-{number}" for name in part["sample_id"]]))
    return pd.concat(made, ignore_index=True).sort_values(
        ["hole_id", "from_m"], kind="stable", ignore_index=True
    )


def timed(rows: list[dict], what: str, call):
    """Result of a call; its clock and processor seconds go into the rows."""
    clock, processor = time.perf_counter(), time.process_time()
    result = call()
    rows.append(
        {"what": what, "clock_s": time.perf_counter() - clock, "processor_s": time.process_time() - processor}
    )
    return result


def test_twenty_thousand_assays(capsys) -> None:
    ahead.begin(None)  # as a run does, before it reads the files
    study = load_study(DEMO / "study.toml")
    data = load(Context(study.config, {}, Findings(), study, 1))
    drill = data.drill
    named = ("hole_id", "sample_id", "original_sample_id")
    big = replace(
        data,
        drill=replace(
            drill,
            collars=copies(drill.collars, named),
            surveys=copies(drill.surveys, named),
            runs=copies(drill.runs, named),
            lithology=copies(drill.lithology, named),
            densities=copies(drill.densities, named),
            assays=cut_in_pieces(copies(drill.assays, named)),
        ),
        surface=copies(data.surface, named),
        laboratory=copies(data.laboratory, named),
    )
    holes, assays = len(big.drill.collars), len(big.drill.assays)
    assert holes >= 500 and assays >= 20_000
    done: dict = {"load": big}
    rows: list[dict] = []

    def stage(what, work, reads):
        return work(Context(ConfigView(study.config, reads), done, Findings(), study, 1))

    done["composite"] = timed(rows, "stage composite", lambda: stage("", composite, COMPOSITE.reads))
    done["density"] = timed(rows, "stage density", lambda: stage("", density, DENSITY.reads))
    found = done["composite"]
    tables, lab = found.tables, found.laboratory
    inside = found.composites[found.composites["domain"].isin(study.config.domains.sulphide)]
    report = ReportData(
        subject=Subject(metals=tuple(metal_columns(study.config))),
        evidence=Evidence(
            collars=found.collars, sticks=found.sticks, runs=big.drill.runs, lithology=big.drill.lithology,
            composites=inside, surface=found.surface, dredges=big.dredges, surface_bias=tables["surface_bias"],
            recovery_bias=tables["recovery_bias"], lost_core=tables["lost_core"], densities=done["density"].table,
            density_by_domain=done["density"].by_domain, top_cut_curves=tables["top_cut_curves"],
            top_cuts=cut_summary(inside, tables["top_cut_study"], tables["top_cut_study"].iloc[:0]),
            contact_analysis=tables["contact_analysis"], tracers=tables["tracers"],
            laboratory=LaboratoryEvidence(
                table=big.laboratory, verdicts=lab.verdicts, references=lab.references, blanks=lab.blanks,
                duplicates=lab.duplicates, checks=lab.checks, pairs=lab.duplicate_pairs, check_pairs=lab.check_pairs,
            ),
        ),
        body=replace(ReportData().body, seafloor=data.seafloor, outline=data.outline.geometry.union_all()),
    )  # fmt: skip
    makers = dict(MAKERS)
    before = len(rows)
    both: list[dict] = []
    numbers = [number for number, (name, _) in enumerate(MAKERS) if name in DRAWN]
    timed(both, "figures", lambda: draw_in_two(report, numbers))
    with borrowed_settings():
        for name in DRAWN:
            drawing = timed(rows, f"draw {name}", lambda name=name: makers[name](report))
            assert drawing is not None, name
            timed(rows, f"write {name}", lambda drawing=drawing: render(drawing))
    table = pd.DataFrame(rows)
    stages, figures = table.iloc[:before], table.iloc[before:]
    with capsys.disabled():
        print(f"\n{holes} holes, {assays} assays, {len(inside)} composites in sulphide")
        print(table.round(2).to_string(index=False))
        for what, part in (("stages", stages), ("figures", figures), ("all", table)):
            print(f"{what}: {part['clock_s'].sum():.2f} s clock, {part['processor_s'].sum():.2f} s processor")
        whole = stages["clock_s"].sum() + both[0]["clock_s"]
        print(
            f"figures as a run draws them, in two processes: {both[0]['clock_s']:.2f} s clock; with stages {whole:.2f} s"
        )
    assert whole < LIMIT_S

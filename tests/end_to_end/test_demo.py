"""The demo from files to the report, once: its estimate against the known truth, its size, its time and its memory."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from dataclasses import dataclass
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

DEMO = Path(__file__).parents[2] / "demo_deposit"
METALS = ["cu_pct", "zn_pct", "au_gpt", "ag_gpt"]
MEASURED = """
import json, resource, subprocess, sys
done = subprocess.run([sys.executable, "-m", "sms_resource.cli", *sys.argv[1:]], capture_output=True, text=True)
used = resource.getrusage(resource.RUSAGE_CHILDREN)
print(json.dumps({"code": done.returncode, "out": done.stdout, "err": done.stderr, "kilobytes": used.ru_maxrss}))
"""

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(os.name != "posix", reason="memory is measured by POSIX means"),
]


@dataclass(frozen=True)
class Demo:
    """Results of the demo, what the command printed, and the greatest memory that it held."""

    out: Path
    printed: str
    kilobytes: int
    truth: dict[str, Any]


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Demo:
    out = tmp_path_factory.mktemp("demo") / "results"
    arguments = ["run", str(DEMO / "study.toml"), "--out", str(out), "--no-cache"]
    done = subprocess.run(
        [sys.executable, "-c", MEASURED, *arguments], capture_output=True, text=True, check=True, timeout=900
    )
    told = json.loads(done.stdout)
    assert told["code"] == 0, told["err"]
    truth = json.loads((DEMO / "truth" / "truth.json").read_text())
    return Demo(out, told["out"], told["kilobytes"], truth["body"])


@pytest.fixture(scope="module")
def blocks(demo: Demo) -> pd.DataFrame:
    return pd.read_parquet(demo.out / "block_model.parquet")


def estimated(blocks: pd.DataFrame, metal: str) -> float:
    return float(np.average(blocks[metal], weights=blocks["dry_tonnes"]))


def test_tonnes_of_the_body_are_within_a_tenth_of_the_truth(demo: Demo, blocks: pd.DataFrame) -> None:
    for name in ("volume_m3", "dry_tonnes", "wet_tonnes"):
        assert blocks[name].sum() == pytest.approx(demo.truth[name], rel=0.10), name


@pytest.mark.parametrize("metal", METALS)
def test_mean_grades_are_within_fifteen_per_cent_and_better_than_a_plain_mean(
    metal: str, demo: Demo, blocks: pd.DataFrame
) -> None:
    known = demo.truth[metal]
    estimate = estimated(blocks, metal)
    assert estimate == pytest.approx(known, rel=0.15)
    # Every sample that was assayed in sulphide or picked up, counted once: what the evidence looks like at first sight.
    composites = pd.read_csv(demo.out / "composites.csv")
    inside = composites[composites["domain"] != "waste"]
    surface = pd.read_csv(DEMO / "surface_samples.csv")
    column, factor = {"cu_pct": ("Cu_pct", 1), "zn_pct": ("Zn_pct", 1), "au_gpt": ("Au_ppb", 1e-3),
                      "ag_gpt": ("Ag_gpt", 1)}[metal]  # fmt: skip
    picked = pd.to_numeric(surface[column], errors="coerce").dropna() * factor
    plain = np.concatenate([inside[metal].dropna(), picked]).mean()
    assert abs(plain / known - 1.0) > abs(estimate / known - 1.0)


def test_the_model_has_a_hundred_thousand_blocks_that_add_up(demo: Demo, blocks: pd.DataFrame) -> None:
    assert len(blocks) >= 100_000
    np.testing.assert_allclose(
        blocks["dry_tonnes"], blocks["volume_m3"] * blocks["dry_density_tpm3"], rtol=1e-9
    )
    assert blocks[METALS].notna().all(axis=None)
    assert not blocks.duplicated(["i", "j", "k"]).any()
    assert set(blocks["proposed_class"]) <= {"indicated", "inferred", "unclassified"}
    tonnage = pd.read_csv(demo.out / "grade_tonnage.csv")
    for _, rows in tonnage.groupby("cutoff"):
        parts = rows.loc[rows["proposed_class"] != "all", "dry_tonnes"].sum()
        assert parts == pytest.approx(
            rows.loc[rows["proposed_class"] == "all", "dry_tonnes"].iloc[0], rel=1e-9
        )


def test_peak_memory_is_under_two_gigabytes(demo: Demo) -> None:
    assert demo.kilobytes * 1024 < 2e9


def test_the_truth_page_gives_figures_and_causes(demo: Demo, blocks: pd.DataFrame) -> None:
    page = (demo.out / "report.html").read_text(encoding="utf-8")
    text = re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", page))
    assert "deposit is invented" in text
    for words in (
        "dry tonnes of the body",
        "mean Cu of the body",
        "plain mean of all samples, surface included",
    ):
        assert words in text, words
    assert "limit on extrapolation below holes" in text  # the cause of a difference in tonnes
    assert "richer than the body" in text  # the cause of a plain mean that is off


def test_the_command_prints_stages_the_table_and_where_the_report_is(demo: Demo) -> None:
    lines = demo.printed.splitlines()
    stages = ["load", "check", "composite", "density", "body", "blocks", "variograms", "estimate", "validate",
              "propose", "value", "classify", "report"]  # fmt: skip
    assert [line.split()[0] for line in lines[: len(stages)]] == stages
    assert all(re.search(r"\d+\.\d\d s  ", line) for line in lines[: len(stages)])
    assert "dry" in demo.printed.lower() and str(demo.out / "report.html") in demo.printed
    assert "tally" in demo.printed.lower()  # nobody judged the prospects
    shown = demo.printed.lower()
    assert not re.search(r"\b(ore|reserve|resource estimate|proven|probable|calculated)\b", shown)


class Pictures(HTMLParser):
    """Sources of the pictures of a page."""

    def __init__(self) -> None:
        super().__init__()
        self.sources: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag == "img":
            self.sources.append(dict(attrs).get("src") or "")


def test_the_report_is_self_contained(demo: Demo) -> None:
    seen = Pictures()
    seen.feed((demo.out / "report.html").read_text(encoding="utf-8"))
    assert len(seen.sources) >= 15
    assert all(source.startswith("data:image/") for source in seen.sources)


def test_findings_of_the_demo_are_no_errors_and_have_their_codes(demo: Demo) -> None:
    found = json.loads((demo.out / "findings.json").read_text())
    assert not [item for item in found if item["severity"] == "error"]
    codes = {item["code"] for item in found}
    # the diseases of real data that the demo has: poor recovery, rich surface samples, open holes, prospects not judged
    assert {"recovery-low", "surface-bias", "hole-end-sulphide", "class-prospects-not-judged"} <= codes


def test_the_report_shows_what_the_samples_are_worth(demo: Demo) -> None:
    page = (demo.out / "report.html").read_text(encoding="utf-8")
    for title in (
        "Positions by method", "How the holes ended", "Collars less seafloor, before and after",
        "Collars, furthest off the median first", "Treatments of lost core, composites (means by length)",
        "Statistics of the composites, weighted by recovered length", "Twin holes: grades compared",
        "Clusters: sites with more than one hole", "Top cuts: proposed, and in use", "Dredges: tracks, never points",
        "Check laboratory (reduced major axis)", "Contacts of domains: hard or soft", "Tracers over the whole depth",
    ):  # fmt: skip
        assert title in page, title
    assert page.count("none used") >= 12  # no cut is in use in any of three domains and four metals
    curves = pd.read_csv(demo.out / "figures" / "data" / "top_cuts.csv")
    assert len(curves[["domain", "metal"]].drop_duplicates()) == 12
    last = curves.groupby(["domain", "metal"]).tail(1)
    assert (last["n_cut"] == 0).all() and (last["metal_removed_pct"] == 0).all()
    collars = pd.read_csv(demo.out / "figures" / "data" / "plan_collars.csv")
    assert len(collars) == 73 and (collars["original_elevation"] != collars["elevation"]).all()

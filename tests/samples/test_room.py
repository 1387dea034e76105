"""The room as a whole: codes that mean something, empty tables, speed, words kept out."""

from __future__ import annotations

import re
import time
from pathlib import Path

import numpy as np
import pandas as pd

import sms_resource.samples as room
from sms_resource.samples import (
    associations,
    contacts,
    density,
    domains,
    guards,
    lognormal,
    position,
    quality,
    recovery,
    surface,
    topcut_tables,
    topcuts,
    twins,
)
from sms_resource.samples.assays import resolve_assays
from sms_resource.samples.codes import CODES
from sms_resource.samples.composites import composite
from sms_resource.samples.desurvey import hole_paths
from sms_resource.samples.plan_shift import plan_shift
from tests.samples.test_composites import many_holes

SOURCES = sorted(Path(room.__path__[0]).glob("*.py"))
METALS = ["cu_pct", "au_gpt"]


def test_every_code_is_explained_and_used() -> None:
    text = "\n".join(path.read_text(encoding="utf-8") for path in SOURCES if path.name != "codes.py")
    used = set(re.findall(r"\.(?:error|warning|note)\(\s*\"([a-z0-9-]+)\"", text))
    assert used == set(CODES), (used - set(CODES), set(CODES) - used)


def test_words_kept_out_of_output() -> None:
    banned = re.compile(
        r"\b(ore|reserves?|proven|probable|compliant|mineable resource|in-situ value|guaranteed|calculated)\b"
    )
    for path in SOURCES:
        for literal in re.findall(r'"([^"\n]*)"', path.read_text(encoding="utf-8")):
            assert not banned.search(literal), (path.name, literal)


def empty(*columns: str) -> pd.DataFrame:
    return pd.DataFrame({name: pd.Series(dtype=object) for name in columns})


class Flat:
    """A level floor."""

    def sample(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return np.full(np.shape(x), -1600.0)


def test_empty_tables_pass_through_every_door() -> None:
    collars = empty(
        "hole_id",
        "easting",
        "northing",
        "elevation",
        "length_m",
        "azimuth",
        "dip",
        "ended_in",
        "position_method",
        "position_sigma_m",
        "source_row",
    )
    interval = ("hole_id", "from_m", "to_m", "source_row")
    match = position.match_collars(collars, Flat(), policy="shift_median")
    assert match.shift_m == 0.0
    paths = hole_paths(match.collars, empty("hole_id", "depth_m", "azimuth", "dip", "source_row"))
    assays, _, summary = resolve_assays(
        empty("hole_id", "sample_id", "from_m", "to_m", "method", *METALS), METALS
    )
    assert len(assays) == 0 and len(summary) == 2
    log = domains.domain_intervals(empty(*interval, "code"), {"MPY": "massive"})
    assert len(domains.unmapped_codes(empty(*interval, "code"), {"MPY": "massive"})) == 1
    runs = empty(*interval, "recovered_length_m", "recovery_pct")
    made = composite(assays, runs, log, paths, metals=METALS)
    assert made.findings.has_errors and made.frame.empty
    frame = made.frame
    assert recovery.sticks(assays, runs, log, paths, METALS).empty
    assert recovery.recovery_bias(frame, METALS).empty
    assert recovery.join_recovery(assays, runs).empty
    assert recovery.recovery_summary(runs, log)[0]["runs"].tolist() == [0]
    assert set(recovery.lost_core_bracket(assays, runs, log, paths, metals=METALS)["domain"]) == {"all"}
    assert topcuts.top_cut_study(frame, METALS).empty
    table = density.density_table(empty(*interval, "wet_density_tpm3", "dry_density_tpm3"), assays, log)
    assert density.fit_density(table).by_domain.empty
    points = empty("sample_id", "sample_type", "easting", "northing", "elevation", *METALS)
    assert surface.surface_bias(points, frame, METALS)["n"].tolist() == [0, 0]
    assert surface.dredge_tracks(
        empty(
            "dredge_id",
            "start_easting",
            "start_northing",
            "end_easting",
            "end_northing",
            "start_elevation",
            "end_elevation",
        )
    )[0].empty
    assert twins.twin_report(collars, frame).pairs.empty
    assert contacts.contact_analysis(frame, log, METALS)[1].empty
    assert lognormal.lognormal_table(frame, METALS).empty
    assert associations.metal_associations(frame, METALS).empty
    assert len(guards.grade_guards(frame, METALS)) == 0
    inserts = empty(
        "kind",
        "batch",
        "sequence",
        "sample_id",
        "original_sample_id",
        "material",
        "stage",
        "element",
        "value",
        "value_status",
        "value_limit",
        "expected",
        "expected_sd",
        "source_row",
    )
    assert quality.laboratory_quality(inserts).verdicts.empty
    assert position.hole_ends(collars)[0]["holes"].sum() == 0
    assert position.position_table(collars, "collars")[0].empty


def test_all_but_the_strip_logs_in_five_seconds() -> None:
    """20 000 assays in 500 holes through every table of the room; processor time, so that a busy machine does not
    decide."""
    assays, cores, log, names = many_holes()
    rng = np.random.default_rng(0)
    count = len(names)
    assays["sample_id"] = [f"S{i}" for i in range(len(assays))]
    for column in METALS:
        assays[f"{column}_status"], assays[f"{column}_limit"] = 0, np.nan
        below = rng.choice(len(assays), 400, replace=False)
        assays.loc[below, [f"{column}_status", f"{column}_limit"]] = [1, 0.5]
    collars = pd.DataFrame(
        {
            "hole_id": names,
            "easting": rng.uniform(0, 300, count),
            "northing": rng.uniform(0, 300, count),
            "elevation": -1600.0,
            "length_m": 41.0,
            "azimuth": np.nan,
            "dip": np.nan,
            "position_sigma_m": 1.0,
        }
    )
    points = pd.DataFrame(
        {
            "sample_id": [f"P{i}" for i in range(200)],
            "sample_type": "grab",
            "easting": rng.uniform(0, 300, 200),
            "northing": rng.uniform(0, 300, 200),
            "elevation": -1600.0,
            "cu_pct": rng.lognormal(1, 1, 200),
            "au_gpt": rng.lognormal(1, 1, 200),
        }
    )
    pieces = assays.iloc[:: len(assays) // 300][["hole_id", "from_m", "to_m"]].assign(
        dry_density_tpm3=3.3, wet_density_tpm3=3.5
    )
    inserts = pd.DataFrame(
        {
            "kind": "duplicate",
            "batch": "B1",
            "sequence": range(2000),
            "sample_id": [f"D{i}" for i in range(2000)],
            "original_sample_id": [f"S{i}" for i in range(2000)],
            "material": "",
            "stage": "pulp",
            "element": "cu",
            "value": assays["cu_pct"].iloc[:2000] * 1.01,
            "expected": np.nan,
            "expected_sd": np.nan,
        }
    )
    start = time.process_time()
    match = position.match_collars(collars, Flat(), policy="shift_median")
    paths = hole_paths(match.collars)
    plain, _, _ = resolve_assays(assays, METALS, below_detection="ros")
    made = composite(plain, cores, log, paths, metals=METALS, lost_core="neighbour_mean")
    frame = made.frame
    recovery.recovery_bias(frame, METALS)
    recovery.recovery_summary(cores, log)
    study = topcuts.top_cut_study(frame, METALS, weight_column="weight")
    curves = topcut_tables.cut_curves(frame, METALS)
    topcut_tables.cut_summary(frame, study, study)
    position.position_table(match.collars, "collars")
    plan_shift(match.collars, Flat(), 1)
    table = density.density_table(pieces, plain, log)
    density.fit_density(table).predict(frame["domain"])
    surface.surface_bias(points, frame, METALS, 1)
    twins.twin_report(collars, frame, metals=METALS)
    contacts.contact_analysis(frame, log, METALS)
    lognormal.lognormal_table(frame, METALS)
    associations.metal_associations(frame, METALS)
    guards.grade_guards(plain, METALS)
    quality.laboratory_quality(inserts, plain)
    assert time.process_time() - start < 5.0
    assert len(frame) > 19_000
    assert len(curves) == 4 * 60  # two domains, two metals

"""Surface samples against core: planted ratios are found; types and tracks stay what they are."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from sms_resource.samples.surface import (
    cap_samples,
    dredge_tracks,
    surface_bias,
    surface_findings,
    surface_use,
)
from tests.samples.holes import codes

PLANTED = {"cu_pct": 1.3, "zn_pct": 8.0, "au_gpt": 2.5, "ag_gpt": 4.4}


def seafloor(seed: int, holes: int = 40, count: int = 60) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Holes of five metres with grades of their own, and surface samples that are richer by the planted ratios."""
    rng = np.random.default_rng(seed)
    place = rng.uniform(0, 200, (holes, 2))
    level = {metal: rng.lognormal(1, 0.6, holes) for metal in PLANTED}
    frames = []
    for hole in range(holes):
        core = pd.DataFrame(
            {
                "hole_id": f"H{hole}",
                "from_m": np.arange(5.0),
                "to_m": np.arange(5.0) + 1,
                "length_m": 1.0,
                "easting": place[hole, 0],
                "northing": place[hole, 1],
                "domain": "massive",
            }
        )
        for metal in PLANTED:
            core[metal] = level[metal][hole] * np.linspace(1.4, 0.6, 5)
        frames.append(core)
    near = rng.integers(0, holes, count)
    surface = pd.DataFrame(
        {
            "sample_id": [f"S{i}" for i in range(count)],
            "sample_type": rng.choice(["grab", "chimney"], count),
            "easting": place[near, 0] + rng.normal(0, 0.5, count),
            "northing": place[near, 1] + rng.normal(0, 0.5, count),
            "elevation": -1600.0,
        }
    )
    for metal, ratio in PLANTED.items():
        surface[metal] = ratio * level[metal][near] * rng.lognormal(-0.08, 0.4, count)
    return surface, pd.concat(frames, ignore_index=True)


def test_planted_ratios_lie_in_their_intervals() -> None:
    inside, total = 0, 0
    for seed in range(25):
        bias = surface_bias(*seafloor(seed), list(PLANTED), seed, repeats=500).set_index("metal")
        for metal, ratio in PLANTED.items():
            inside += bias.loc[metal, "ratio_low"] <= ratio <= bias.loc[metal, "ratio_high"]
            total += 1
    assert inside / total >= 0.86  # nominal 95 %; percentile intervals of some 25 holes are a little short


def test_table_by_type_and_top_metre() -> None:
    surface, core = seafloor(0)
    bias = surface_bias(surface, core, ["cu_pct"], 1, by_type=True)
    assert bias["sample_type"].tolist() == ["all", "chimney", "grab"]
    whole = bias.iloc[0]
    assert whole["n"] == 60
    assert whole["top_metre_mean"] == pytest.approx(1.4 * whole["nearest_core_mean"])
    assert whole["top_ratio"] == pytest.approx(whole["ratio"] / 1.4)
    assert whole["ratio"] == pytest.approx(whole["surface_mean"] / whole["nearest_core_mean"])
    assert codes(surface_findings(bias)) == ["surface-bias"] * int(whole["ratio_low"] > 1)


def test_the_same_seed_gives_the_same_interval() -> None:
    one, two = (surface_bias(*seafloor(0), ["cu_pct"], 7) for _ in range(2))
    pd.testing.assert_frame_equal(one, two)


def test_dredges_and_far_samples_are_left_out() -> None:
    surface, core = seafloor(0)
    surface.loc[:9, "sample_type"] = "dredge"
    surface.loc[10:14, "easting"] = 5000.0
    assert surface_bias(surface, core, ["cu_pct"]).iloc[0]["n"] == 45


def test_without_core_or_samples_there_is_no_ratio() -> None:
    surface, core = seafloor(0)
    for a, b in ((surface.iloc[:0], core), (surface, core.iloc[:0]), (surface.assign(cu_pct=np.nan), core)):
        bias = surface_bias(a, b, ["cu_pct"])
        assert bias["n"].iloc[0] == 0 and np.isnan(bias["ratio"].iloc[0])
        assert codes(surface_findings(bias)) == ["surface-none"]


def test_dredges_are_tracks() -> None:
    frame = pd.DataFrame(
        {
            "dredge_id": ["D1"],
            "start_easting": [0.0],
            "start_northing": [0.0],
            "end_easting": [30.0],
            "end_northing": [40.0],
            "start_elevation": [-1600.0],
            "end_elevation": [-1590.0],
        }
    )
    table, findings = dredge_tracks(frame)
    row = table.iloc[0]
    assert (row["length_m"], row["half_length_m"], row["rise_m"]) == (50.0, 25.0, 10.0)
    assert row["azimuth"] == pytest.approx(np.degrees(np.arctan2(3, 4)))
    assert codes(findings) == ["dredge-spread"]


def test_a_cap_is_a_domain_of_its_own_and_named() -> None:
    surface, _ = seafloor(0)
    frame, findings = cap_samples(surface, ["cu_pct"], thickness_m=0.6, types=["grab"])
    assert len(frame) == (surface["sample_type"] == "grab").sum()
    assert set(frame["domain"]) == {"cap"} and (frame["elevation"] == -1600.3).all()
    assert codes(findings) == ["surface-used"] and "0.6 m" in findings[0].message
    for wrong in (
        {"thickness_m": 0.0, "types": ["grab"]},
        {"thickness_m": 1.0, "types": ["dredge"]},
        {"thickness_m": 1.0, "types": ["mud"]},
    ):
        with pytest.raises(ValueError, match=r"thickness_m|types"):
            cap_samples(surface, ["cu_pct"], **wrong)  # type: ignore[arg-type]


def test_each_use_is_named() -> None:
    surface, _ = seafloor(0)
    text, findings = surface_use(surface, "none")
    assert "60 surface samples" in text and "grab" in text and len(findings) == 0
    text, findings = surface_use(surface, "outline")
    assert "outline" in text and codes(findings) == ["surface-used"]
    with pytest.raises(ValueError, match="use must be"):
        surface_use(surface, "body")


def test_a_cap_names_the_samples_that_it_takes_and_those_that_it_leaves() -> None:
    surface = pd.DataFrame({"sample_type": ["grab"] * 3 + ["push_core"] * 2})
    text, findings = surface_use(surface, "cap", ("push_core", "gravity_core"))
    assert text == "2 surface samples (2 push core) estimate a thin cap; the other 3 are kept out of it"
    assert codes(findings) == ["surface-used"]


def test_a_cap_that_shares_its_domain_with_core_is_told() -> None:
    surface = pd.DataFrame(
        {"sample_id": ["a"], "sample_type": ["grab"], "easting": [1.0], "northing": [1.0], "elevation": [-9.0],
         "cu_pct": [9.0]}
    )  # fmt: skip
    core = pd.DataFrame({"domain": ["cap", "cap", "massive"]})
    options = {"thickness_m": 1.0, "types": ("grab",)}
    _, mixed = cap_samples(surface, ["cu_pct"], domain="cap", core=core, **options)
    assert codes(mixed) == ["surface-used", "surface-mixed"]
    assert "2 composites of core and 1 surface samples" in list(mixed)[1].message
    _, alone = cap_samples(surface, ["cu_pct"], domain="crust", core=core, **options)
    assert codes(alone) == ["surface-used"]


def test_intervals_of_all_samples_do_not_depend_on_the_types() -> None:
    rng = np.random.default_rng(2)
    place = {"easting": rng.uniform(0, 50, 20), "northing": rng.uniform(0, 50, 20), "elevation": -1600.0}
    surface = pd.DataFrame(
        {**place, "sample_type": ["grab", "chimney"] * 10, "cu_pct": rng.lognormal(1, 0.3, 20)}
    )
    core = pd.DataFrame(
        {**place, "hole_id": [f"H{i % 6}" for i in range(20)], "from_m": 0.0, "length_m": 1.0, "zn_pct": 2.0,
         "cu_pct": rng.lognormal(0, 0.3, 20), "domain": "massive"}
    )  # fmt: skip
    surface["zn_pct"] = rng.lognormal(1, 0.4, 20)
    plain = surface_bias(surface, core, ["cu_pct", "zn_pct"], 5)
    typed = surface_bias(surface, core, ["cu_pct", "zn_pct"], 5, by_type=True)
    pd.testing.assert_frame_equal(typed[typed["sample_type"] == "all"].reset_index(drop=True), plain)
    assert set(typed["sample_type"]) == {"all", "chimney", "grab"}

"""Density: salt, water, minerals and models, against published and exact values."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.samples.density import density_findings, density_table, fit_density
from sms_resource.samples.mineralogy import (
    ATOMIC_MASS,
    MINERALS,
    NormSettings,
    formula_counts,
    heaviest_grain,
    least_mineral_percent,
    norm,
)
from sms_resource.samples.moisture import (
    dry_from_grain,
    dry_without_salt,
    moisture_and_density,
    wet_from_porosity,
)
from sms_resource.samples.seawater import SalinityOutOfRange, seawater_density
from tests.samples.holes import codes, intervals

IODP = {"salinity_gkg": 35.0, "pore_water_tpm3": 1.024}


@pytest.mark.parametrize(
    ("masses", "porosity", "wet", "dry", "grain"),
    [
        # worked by hand from the formulas of Blum (1997), ODP Technical Note 26, with IODP's constants
        ((31.53400, 28.07544, 6.556505), 0.350, 3.153, 2.795, 4.300),
        ((30.0, 25.5, 7.2), 0.3898769456, 2.5684053502, 2.1691713579, 3.5553014136),
    ],
)
def test_moisture_and_density_worked_examples(
    masses: tuple, porosity: float, wet: float, dry: float, grain: float
) -> None:
    found = moisture_and_density(*masses, **IODP)
    digits = 5e-4 if porosity == 0.350 else 1e-9
    assert float(found.porosity) == pytest.approx(porosity, abs=digits)
    assert float(found.wet_tpm3) == pytest.approx(wet, abs=digits)
    assert float(found.dry_tpm3) == pytest.approx(dry, abs=digits)
    assert float(found.grain_tpm3) == pytest.approx(grain, abs=digits)


def test_a_published_row_of_sediment() -> None:
    # ODP site 1232A, as published: water 30.1 % of the wet mass (with its salt), grain 2.784 -> bulk 1.835, dry 1.283,
    # porosity 53.9 %; tolerance .002
    wet, water = 100.0, 30.1
    solid = wet - water
    found = moisture_and_density(wet, wet - 0.965 * water, solid / 2.784 + 0.035 * water / 2.22, **IODP)
    assert float(found.wet_tpm3) == pytest.approx(1.835, abs=0.002)
    assert float(found.dry_tpm3) == pytest.approx(1.283, abs=0.002)
    assert float(found.porosity) == pytest.approx(0.539, abs=0.002)
    assert float(found.grain_tpm3) == pytest.approx(2.784, abs=1e-9)


@settings(max_examples=100, deadline=None)
@given(st.floats(0.01, 0.9), st.floats(2.0, 7.0), st.floats(0.0, 270.0), st.floats(1.0, 1.25))
def test_water_salt_and_solid_balance(porosity: float, grain: float, salinity: float, water: float) -> None:
    """A rock built from grains and brine comes back: wet = dry + water, and less dry without its salt."""
    share = salinity / 1000.0
    solid = grain * (1 - porosity)
    brine = porosity * water
    wet, dried = solid + brine, solid + share * brine
    volume = (1 - porosity) + share * brine / 2.22
    found = moisture_and_density(wet, dried, volume, salinity_gkg=salinity, pore_water_tpm3=water)
    assert float(found.porosity) == pytest.approx(porosity, rel=1e-9)
    assert float(found.grain_tpm3) == pytest.approx(grain, rel=1e-9)
    assert float(found.wet_tpm3) == pytest.approx(
        float(found.dry_tpm3) + float(found.porosity) * water, rel=1e-12
    )
    if salinity > 1e-6:
        assert float(found.dry_tpm3) < float(found.dry_with_salt_tpm3)
    assert float(
        dry_without_salt(found.wet_tpm3, found.dry_with_salt_tpm3, salinity_gkg=salinity)
    ) == pytest.approx(float(found.dry_tpm3), rel=1e-9)
    back, pores = dry_from_grain(found.wet_tpm3, found.grain_tpm3, pore_water_tpm3=water)
    assert float(back) == pytest.approx(float(found.dry_tpm3), rel=1e-9)
    assert float(wet_from_porosity(back, pores, pore_water_tpm3=water)) == pytest.approx(
        float(found.wet_tpm3), rel=1e-9
    )


def test_seawater_density_is_that_of_teos10() -> None:
    gsw = pytest.importorskip("gsw", reason="gsw is not installed")
    # the check value of TEOS-10's own documentation: SA 34.7118, CT 28.8099, p 10 -> 1021.8399357381
    assert gsw.rho(34.7118, 28.8099, 10.0) == pytest.approx(1021.8399357381, abs=1e-6)
    # in situ at 1600 and 3650 m: 1.035 and 1.045 t/m3 (TEOS-10, 3 and 2 degrees)
    assert seawater_density(35.0, 3.0, 1600.0) == pytest.approx(1.035, abs=5e-4)
    assert seawater_density(35.0, 2.0, 3650.0) == pytest.approx(1.045, abs=5e-4)
    assert seawater_density(35.0) == pytest.approx(1.024, abs=1e-3)  # IODP's pore water
    with pytest.raises(SalinityOutOfRange, match="brine"):
        seawater_density(150.0)


@pytest.mark.parametrize(
    ("mineral", "element", "percent"),
    [
        ("chalcopyrite", "Cu", 34.628),
        ("sphalerite", "Zn", 67.098),
        ("galena", "Pb", 86.600),
        ("pyrite", "Fe", 46.551),
        ("bornite", "Cu", 63.316),
        ("covellite", "Cu", 66.467),
        ("chalcocite", "Cu", 79.856),
        ("barite", "Ba", 58.842),
    ],
)
def test_metal_in_minerals(mineral: str, element: str, percent: float) -> None:
    # handbook values, tolerance .02
    assert 100 * MINERALS[mineral].fraction(element) == pytest.approx(percent, abs=0.02)


@pytest.mark.parametrize("library", ["periodictable", "molmass"])
def test_atomic_masses_are_those_of_a_chemistry_library(library: str) -> None:
    chemistry = pytest.importorskip(library, reason=f"{library} is not installed")
    for symbol, mass in ATOMIC_MASS.items():
        other = (
            getattr(chemistry, symbol).mass if library == "periodictable" else chemistry.Formula(symbol).mass
        )
        # abridged standard weights move by some 1e-4 between tables
        assert mass == pytest.approx(float(other), rel=6e-4), symbol
    for mineral in MINERALS.values():
        weight = sum(ATOMIC_MASS[s] * n for s, n in formula_counts(mineral.formula).items())
        other = (
            chemistry.formula(mineral.formula).mass
            if library == "periodictable"
            else chemistry.Formula(mineral.formula).mass
        )
        assert weight == pytest.approx(float(other), rel=3e-4), mineral.name


def sample(**grades: float) -> pd.DataFrame:
    return pd.DataFrame({name: [value] for name, value in grades.items()})


def test_norm_of_a_massive_sulphide() -> None:
    # independent code, same rules: Cu 6, Zn 4, Pb .6, As .2, Ba 5, Fe 26 %
    found = norm(sample(cu_pct=6, zn_pct=4, pb_pct=0.6, as_ppm=2000, ba_pct=5, fe_pct=26)).iloc[0]
    expected = {
        "chalcopyrite": 15.857,
        "sphalerite": 5.961,
        "galena": 0.693,
        "barite": 8.497,
        "tennantite": 0.987,
        "pyrite": 45.487,
        "silica": 22.517,
    }
    for name, value in expected.items():
        assert found[name] == pytest.approx(value, abs=2e-3), name
    assert found["grain_density_tpm3"] == pytest.approx(3.66837, abs=2e-4)


@settings(max_examples=50, deadline=None)
@given(st.floats(0, 30), st.floats(0, 40), st.floats(0, 30), st.floats(0, 40), st.floats(0, 20000))
def test_norm_keeps_mass_and_metal(cu: float, zn: float, ba: float, fe: float, arsenic: float) -> None:
    found = norm(sample(cu_pct=cu, zn_pct=zn, ba_pct=ba, fe_pct=fe, as_ppm=arsenic)).iloc[0]
    minerals = {name: found[name] for name in found.index if name in MINERALS}
    assert sum(minerals.values()) == pytest.approx(100.0, abs=1e-9)
    assert min(minerals.values()) >= 0
    if found["sum_pct"] <= 100:
        for element, grade in (("Cu", cu), ("Zn", zn), ("Ba", ba)):
            held = sum(mass * MINERALS[name].fraction(element) for name, mass in minerals.items())
            assert held == pytest.approx(grade, abs=1e-9)
    densities = [MINERALS[name].density_tpm3 for name, mass in minerals.items() if mass > 0]
    assert min(densities) - 1e-9 <= found["grain_density_tpm3"] <= max(densities) + 1e-9


def test_norm_settings() -> None:
    grades = pd.DataFrame({"cu_pct": [5.0, 5.0], "fe_pct": [10.0, 10.0], "domain": ["massive", "stockwork"]})
    found = norm(grades, NormSettings(rest_by_domain={"stockwork": "quartz"}))
    assert found["silica"].tolist()[1] == 0 and found["quartz"].tolist()[0] == 0
    assert found["grain_density_tpm3"].iloc[1] > found["grain_density_tpm3"].iloc[0]
    assert (
        norm(sample(cu_pct=10, fe_pct=1), NormSettings(copper_mineral="chalcocite"))["chalcocite"].iloc[0]
        > 12
    )
    assert norm(sample(cu_pct=10, fe_pct=1))["iron_short_pct"].iloc[0] == pytest.approx(
        10 * 55.845 / 63.546 - 1, abs=0.01
    )
    for wrong in ({"copper_mineral": "native"}, {"rest": "cheese"}, {"densities": {"cheese": 1.0}}):
        with pytest.raises(ValueError, match=r"mineral|copper"):
            NormSettings(**wrong)


def test_least_mineral_is_a_lower_bound() -> None:
    for mineral in ("chalcopyrite", "pyrite", "sphalerite", "barite", "bornite"):
        grades = sample(
            **{
                f"{symbol.lower()}_pct": 100 * MINERALS[mineral].fraction(symbol)
                for symbol in formula_counts(MINERALS[mineral].formula)
                if symbol in ("Cu", "Fe", "Zn", "Ba")
            }
        )
        assert least_mineral_percent(grades)[0] <= 100.0 + 1e-9
    assert (
        heaviest_grain(sample(cu_pct=1, fe_pct=5))[0]
        > heaviest_grain(sample(cu_pct=1, fe_pct=5, ba_pct=0.1))[0]
    )


def measured(rows: list[tuple], *columns: str) -> pd.DataFrame:
    return intervals(rows, *columns)


LOG = intervals([("A", 0, 10, "massive"), ("A", 10, 20, "stockwork")], "domain")


def test_each_way_to_a_density() -> None:
    columns = (
        "wet_density_tpm3",
        "dry_density_tpm3",
        "grain_density_tpm3",
        "wet_mass_g",
        "dry_mass_g",
        "dry_volume_cm3",
    )
    nan = np.nan
    table = density_table(
        measured(
            [
                ("A", 0, 1, nan, nan, nan, 31.534, 28.07544, 6.556505),
                ("A", 1, 2, 3.6, 3.4, nan, nan, nan, nan),
                ("A", 2, 3, 3.6, nan, 4.5, nan, nan, nan),
                ("A", 3, 4, nan, 3.4, 4.5, nan, nan, nan),
                ("A", 4, 5, 3.6, nan, nan, nan, nan, nan),
                ("A", 11, 12, 3.6, nan, nan, nan, nan, nan),
                ("A", 12, 13, nan, 2.9, nan, nan, nan, nan),
            ],
            *columns,
        ),
        None,
        LOG,
        porosity={"massive": 0.1},
        pore_water_tpm3=1.024,
    )
    assert table["dry_basis"].tolist() == [
        "masses and volume, salt removed",
        "measured",
        "wet and grain",
        "measured",
        "wet and assumed porosity",
        "none",
        "measured",
    ]
    dry, wet, pores = table["dry_density_tpm3"], table["wet_density_tpm3"], table["porosity"]
    assert dry.iloc[0] == pytest.approx(2.795, abs=5e-4)
    assert dry.iloc[4] == pytest.approx(3.6 - 0.1024)
    known = pores.notna()
    assert (wet[known] - dry[known]).to_numpy() == pytest.approx(1.024 * pores[known].to_numpy(), abs=1e-9)
    assert np.isnan(dry.iloc[5]) and np.isnan(wet.iloc[6])
    found = density_findings(table)
    assert codes(found) == ["density-wet-only"]
    assert next(iter(found)).row == 7


def test_dry_densities_that_hold_salt_are_corrected() -> None:
    frame = measured([("A", 0, 1, 2.5684053502, 2.1831445545)], "wet_density_tpm3", "dry_density_tpm3")
    table = density_table(frame, None, LOG, dry_contains_salt=True, pore_water_tpm3=1.024)
    assert table["dry_density_tpm3"].iloc[0] == pytest.approx(2.1691713579, abs=1e-6)
    assert "salt" in table["dry_basis"].iloc[0]


@pytest.mark.parametrize(
    ("wet", "dry", "grain"), [(3.0, 3.4, np.nan), (0.9, 0.5, np.nan), (9.0, 8.9, np.nan), (3.5, 3.4, 3.0)]
)
def test_impossible_densities_are_findings_at_their_row(wet: float, dry: float, grain: float) -> None:
    frame = measured(
        [("A", 0, 1, wet, dry, grain)], "wet_density_tpm3", "dry_density_tpm3", "grain_density_tpm3"
    )
    found = density_findings(density_table(frame, None, LOG))
    assert "density-impossible" in codes(found)
    assert all(item.row == 2 and item.remedy for item in found)


def test_a_density_above_its_minerals_is_a_finding() -> None:
    assays = intervals([("A", 0, 2, 1.0, 5.0, 0.1)], "cu_pct", "fe_pct", "ba_pct")
    frame = measured([("A", 0, 1, 4.4, 4.2)], "wet_density_tpm3", "dry_density_tpm3")
    assert "density-impossible" in codes(density_findings(density_table(frame, assays, LOG)))


def test_a_brine_needs_its_density() -> None:
    frame = measured([("A", 0, 1, 3.6, 3.4)], "wet_density_tpm3", "dry_density_tpm3")
    bare = density_table(frame, None, LOG, salinity_gkg=200.0)
    assert np.isnan(bare["porosity"].iloc[0]) and bare["dry_density_tpm3"].iloc[0] == 3.4
    model = fit_density(bare, salinity_gkg=200.0)
    assert [item.code for item in model.findings.errors] == ["salinity-range"]
    assert density_table(frame, None, LOG, salinity_gkg=200.0, pore_water_tpm3=1.15)["porosity"].iloc[0] > 0


def many(seed: int = 0, count: int = 40) -> pd.DataFrame:
    """Densities that are a straight line of iron and copper, with a little noise."""
    rng = np.random.default_rng(seed)
    cu, fe = rng.uniform(1, 10, count), rng.uniform(10, 40, count)
    dry = 2.0 + 0.03 * fe + 0.05 * cu + rng.normal(0, 0.05, count)
    return pd.DataFrame(
        {
            "hole_id": "A",
            "from_m": np.arange(count),
            "to_m": np.arange(count) + 1.0,
            "domain": "massive",
            "cu_pct": cu,
            "fe_pct": fe,
            "zn_pct": rng.uniform(0, 5, count),
            "dry_density_tpm3": dry,
            "wet_density_tpm3": dry + 0.15,
        }
    )


def test_measured_mean_has_the_t_interval() -> None:
    from scipy.stats import t

    table = many()
    row = fit_density(table).by_domain.iloc[0]
    values = table["dry_density_tpm3"]
    half = t.ppf(0.95, len(values) - 1) * values.std() / np.sqrt(len(values))
    assert (row["dry_low"], row["dry_base"], row["dry_high"]) == pytest.approx(
        (values.mean() - half, values.mean(), values.mean() + half)
    )
    assert row["wet_base"] - row["dry_base"] == pytest.approx(0.15)
    assert row["water_tpm3"] == pytest.approx(0.15)


def test_regression_finds_the_line_and_its_interval_covers() -> None:
    table = many()
    model = fit_density(table, "regression")
    grades = pd.DataFrame({"cu_pct": [5.0, np.nan], "fe_pct": [25.0, 20.0], "zn_pct": [2.0, 1.0]})
    dry, wet = model.predict(["massive", "massive"], grades)
    assert dry[0] == pytest.approx(3.0, abs=0.05)
    assert wet[0] == pytest.approx(dry[0] + 0.15)
    assert dry[1] == pytest.approx(
        model.by_domain["dry_base"].iloc[0]
    )  # a block without grades takes its domain's mean
    covered = 0
    for seed in range(150):
        fitted = fit_density(many(seed, 25), "regression")
        low, high = (
            fitted.predict(["massive"], grades.iloc[:1], case=case)[0][0] for case in ("low", "high")
        )
        covered += low <= 3.0 <= high
    assert 0.82 <= covered / 150 <= 0.97  # nominal 90 %
    assert codes(model.findings) == ["density-regression"]
    outside = pd.DataFrame({"cu_pct": [50.0, 5.0], "fe_pct": [20.0, 20.0], "zn_pct": [1.0, 1.0]})
    assert codes(model.extrapolation_findings(outside)) == ["density-extrapolated"]
    assert len(fit_density(table).extrapolation_findings(outside)) == 0
    assert model.extrapolated(
        pd.DataFrame({"cu_pct": [50.0], "fe_pct": [20.0], "zn_pct": [1.0]})
    ).tolist() == [True]


def test_regression_equals_least_squares_of_numpy() -> None:
    table = many()
    design = np.column_stack([np.ones(len(table)), table[["cu_pct", "zn_pct", "fe_pct"]]])
    expected = np.linalg.lstsq(design, table["dry_density_tpm3"].to_numpy(), rcond=None)[0]
    fitted = fit_density(table, "regression").regression
    assert fitted is not None
    assert fitted.coefficients == pytest.approx(expected, rel=1e-8)


def test_regression_does_not_reach_domains_that_were_assigned() -> None:
    model = fit_density(many(), "regression", assigned_dry_tpm3={"chimney": 1.8}, porosity={"chimney": 0.4})
    dry, wet = model.predict(["chimney"], pd.DataFrame({"cu_pct": [5.0], "fe_pct": [25.0], "zn_pct": [2.0]}))
    assert dry[0] == pytest.approx(1.8)
    assert wet[0] == pytest.approx(1.8 + 0.4 * seawater_density(35.0))


def test_minerals_and_porosity() -> None:
    grades = pd.DataFrame(
        {
            "domain": ["massive"] * 3,
            "cu_pct": [6.0] * 3,
            "zn_pct": 4.0,
            "pb_pct": 0.6,
            "as_ppm": 2000.0,
            "ba_pct": 5.0,
            "fe_pct": 26.0,
        }
    )
    model = fit_density(
        many(),
        "mineralogy",
        porosity={"massive": (0.05, 0.10, 0.15)},
        composites=grades,
        pore_water_tpm3=1.024,
    )
    row = model.by_domain.iloc[0]
    assert (row["dry_low"], row["dry_base"], row["dry_high"]) == pytest.approx(
        (3.66837 * 0.85, 3.66837 * 0.9, 3.66837 * 0.95), abs=1e-3
    )
    assert row["wet_base"] == pytest.approx(3.66837 * 0.9 + 0.1024, abs=1e-3)
    dry, wet = model.predict(["massive"], grades.iloc[:1], case="low")
    assert (dry[0], wet[0]) == pytest.approx((3.66837 * 0.85, 3.66837 * 0.85 + 0.15 * 1.024), abs=1e-3)


def test_assigned_and_scaled() -> None:
    model = fit_density(
        many(),
        "assigned",
        domains=["massive"],
        assigned_dry_tpm3={"massive": (3.0, 3.3, 3.5)},
        porosity={"massive": 0.1},
        factor=1.1,
        pore_water_tpm3=1.0,
    )
    row = model.by_domain.iloc[0]
    assert (row["dry_low"], row["dry_base"], row["dry_high"]) == pytest.approx((3.3, 3.63, 3.85))
    assert row["wet_base"] == pytest.approx(3.63 + 0.1)  # water stays
    assert codes(model.findings) == ["density-assigned"]
    low, base, high = (model.predict(["massive"], case=case)[0][0] for case in ("low", "base", "high"))
    assert low < base < high


def test_few_or_no_densities_widen_or_stop() -> None:
    few = fit_density(many(count=5))
    assert "density-few" in codes(few.findings)
    table = many()
    table.loc[:1, "domain"] = "stockwork"
    borrowed = fit_density(table)
    row = borrowed.by_domain.set_index("domain").loc["stockwork"]
    own = borrowed.by_domain.set_index("domain").loc["massive"]
    assert row["dry_high"] - row["dry_low"] > 3 * (own["dry_high"] - own["dry_low"])
    assert "density-unmeasured" in codes(borrowed.findings)
    none = fit_density(table.iloc[:0], domains=["massive"])
    assert none.findings.has_errors
    dry, _ = none.predict(["massive", "nowhere"])
    assert np.isnan(dry).all()


def test_wet_only_domains_say_that_wet_tonnes_are_unknown() -> None:
    table = many()
    table["wet_density_tpm3"] = np.nan
    assert "density-wet-only" in codes(fit_density(table).findings)
    assert fit_density(table, porosity={"massive": 0.1}).by_domain["water_tpm3"].iloc[0] == pytest.approx(
        0.1025, abs=1e-3
    )


@pytest.mark.parametrize(
    "options",
    [
        {"method": "guess"},
        {"confidence": 1.0},
        {"factor": 0.0},
        {"assigned_dry_tpm3": {"massive": -1.0}},
        {"assigned_dry_tpm3": {"massive": (3.0, 2.0, 4.0)}},
        {"porosity": {"massive": 1.2}},
        {"assigned_dry_tpm3": {"massive": {"dry": 3.0, "wet": 2.0}}},
    ],
)
def test_wrong_options_name_themselves(options: dict) -> None:
    with pytest.raises(ValueError, match=r"method|confidence|factor|density|porosity"):
        fit_density(many(), **options)


def test_wrong_predictions_name_themselves() -> None:
    model = fit_density(many())
    with pytest.raises(ValueError, match="case"):
        model.predict(["massive"], case="best")  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="rows"):
        model.predict(["massive"], many().iloc[:2])


def test_a_predictor_that_blocks_do_not_carry_is_left_out_and_named() -> None:
    table = many()
    model = fit_density(
        table, "regression", metals=["cu_pct", "zn_pct"], predictors=["cu_pct", "zn_pct", "fe_pct"]
    )
    assert codes(model.findings)[0] == "density-predictor"
    assert model.regression is not None and model.regression.predictors == ("cu_pct", "zn_pct")
    blocks = table[["cu_pct", "zn_pct"]].iloc[:3]
    expected = model.regression.predict(blocks)
    assert model.predict(["massive"] * 3, blocks)[0] == pytest.approx(expected)


def test_the_row_of_a_domain_is_the_line_at_its_mean_grades_and_says_how_many_pairs() -> None:
    table = many()
    composites = pd.DataFrame(
        {"domain": "massive", "cu_pct": [1.0, 4.0], "zn_pct": 1.0, "fe_pct": 25.0, "weight": [1.0, 3.0]}
    )
    model = fit_density(table, "regression", domains=["massive"], composites=composites)
    assert model.regression is not None
    mean = pd.DataFrame({"cu_pct": [0.25 * 1.0 + 0.75 * 4.0], "zn_pct": [1.0], "fe_pct": [25.0]})
    row = model.by_domain.iloc[0]
    for case in ("low", "base", "high"):
        assert row[f"dry_{case}"] == pytest.approx(model.regression.predict(mean, case)[0])  # type: ignore[arg-type]
    assert row["dry_low"] < row["dry_base"] < row["dry_high"]
    said = next(item.message for item in model.findings if item.code == "density-regression")
    assert f"pairs by domain: massive {len(table)}" in said and "90 % interval" in said


def test_the_regression_takes_no_density_of_the_host_rock() -> None:
    table = many()
    host = table.assign(domain="waste", dry_density_tpm3=9.0)
    both = pd.concat([table, host], ignore_index=True)
    alone = fit_density(table, "regression", domains=["massive"]).regression
    beside = fit_density(both, "regression", domains=["massive"]).regression
    assert alone is not None and beside is not None
    assert beside.coefficients == pytest.approx(alone.coefficients)


def test_without_assays_the_regression_says_what_it_did_instead() -> None:
    table = many().drop(columns=["cu_pct", "zn_pct", "fe_pct"])
    model = fit_density(table, "regression", domains=["massive"], metals=["cu_pct"], predictors=["cu_pct"])
    said = next(item for item in model.findings if item.code == "density-regression")
    assert said.severity == "warning" and said.message.startswith(f"0 of {len(table)} densities with Cu (%)")
    plain = fit_density(table, domains=["massive"]).by_domain
    pd.testing.assert_frame_equal(model.by_domain, plain)


def test_an_assigned_density_without_low_and_high_or_water_is_told() -> None:
    dry_only = many().assign(wet_density_tpm3=np.nan)
    model = fit_density(dry_only, "assigned", domains=["massive"], assigned_dry_tpm3={"massive": 3.0})
    assert codes(model.findings) == ["density-assigned", "density-wet-only"]
    assert "no doubt about it reaches the tonnes" in next(iter(model.findings)).message
    measured = fit_density(many(), "assigned", domains=["massive"], assigned_dry_tpm3={"massive": 3.0})
    assert measured.by_domain["wet_base"].iloc[0] == pytest.approx(3.15)  # the water that was measured


def test_a_density_in_use_far_from_the_measured_mean_is_told() -> None:
    far = fit_density(many(), "assigned", domains=["massive"], assigned_dry_tpm3={"massive": 2.0})
    assert "density-far" in codes(far.findings)
    near = float(many()["dry_density_tpm3"].mean())
    close = fit_density(many(), "assigned", domains=["massive"], assigned_dry_tpm3={"massive": near})
    assert "density-far" not in codes(close.findings)


def test_a_porosity_with_low_and_high_makes_wet_density_dry_by_its_base() -> None:
    frame = pd.DataFrame({"hole_id": ["1"], "from_m": [0.0], "to_m": [0.1], "wet_density_tpm3": [3.0]})
    log = pd.DataFrame({"hole_id": ["1"], "from_m": [0.0], "to_m": [5.0], "domain": ["massive"]})
    three = density_table(frame, None, log, porosity={"massive": (0.1, 0.2, 0.3)}, pore_water_tpm3=1.0)
    assert three["dry_density_tpm3"].iloc[0] == pytest.approx(3.0 - 0.2)


def test_minerals_do_not_count_as_measured_densities() -> None:
    grades = pd.DataFrame({"domain": ["massive"] * 30, "cu_pct": 6.0, "fe_pct": 26.0})
    model = fit_density(
        many().iloc[:0], "mineralogy", domains=["massive"], porosity={"massive": 0.1}, composites=grades
    )
    assert model.by_domain["n"].iloc[0] == 0
    assert "30 samples" in model.by_domain["basis"].iloc[0]


@pytest.mark.parametrize("method", ["measured_mean", "regression"])
def test_an_assigned_density_or_porosity_that_is_not_used_is_told(method: str) -> None:
    both = pd.concat([many(), many(1, 5).assign(domain="chimney"), many(2, 2).assign(domain="cap")])
    model = fit_density(
        both, method, domains=["chimney", "cap", "massive"], assigned_dry_tpm3={"chimney": 1.8, "cap": 2.0},
        porosity={"massive": 0.1, "cap": 0.3},
    )  # fmt: skip
    unused = [item for item in model.findings if item.code == "density-unused"]
    assert [item.column for item in unused] == [
        "density.assigned_dry_tpm3.chimney",  # it has five of its own
        "density.porosity_fraction.massive",  # its water was measured
    ]
    assert "assigned to domain chimney is not used" in unused[0].message


def test_what_is_used_is_not_called_unused() -> None:
    minerals = fit_density(
        many(),
        "mineralogy",
        domains=["massive"],
        porosity={"massive": 0.1},
        assigned_dry_tpm3={"massive": 3.0},
    )
    assert [item.column for item in minerals.findings if item.code == "density-unused"] == [
        "density.assigned_dry_tpm3.massive"
    ]
    dry_only = many().assign(wet_density_tpm3=np.nan)
    assert "density-unused" not in codes(fit_density(dry_only, porosity={"massive": 0.1}).findings)
    given = fit_density(
        many(), "assigned", domains=["massive"], assigned_dry_tpm3={"massive": 3.0}, porosity={"massive": 0.1}
    )
    assert "density-unused" not in codes(given.findings)


def test_an_assigned_domain_under_another_method_takes_measured_water_or_says_that_it_has_none() -> None:
    both = pd.concat([many(), many(2, 2).assign(domain="cap")])
    given = {"cap": 2.0, "chimney": 1.8}
    model = fit_density(both, "regression", domains=["chimney", "cap", "massive"], assigned_dry_tpm3=given)
    rows = model.by_domain.set_index("domain")
    assert rows.loc["cap", "wet_base"] == pytest.approx(2.15)  # two pairs of wet and dry, 0.15 apart
    assert rows.loc["cap", "dry_base"] == 2.0 and np.isnan(rows.loc["chimney", "wet_base"])
    told = [item.message for item in model.findings if item.code == "density-wet-only"]
    assert len(told) == 1 and "chimney" in told[0]

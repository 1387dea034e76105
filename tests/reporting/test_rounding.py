"""Rounding against the example of the reporting codes and hand-made cases."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sms_resource.reporting.rounding import (
    contained_metal,
    cutoff_phrase,
    grade_text,
    mass_text,
    metal_figures,
    metal_unit,
    round_significant,
    significant_text,
)


def test_the_example_of_the_reporting_codes():
    # 10 863 000 t at 8.23 % becomes 11 Mt at 8.2 %: the rounding example printed in the JORC Code (2012),
    # clause 25, and kept in the CRIRSCO family (from memory).
    assert round_significant(10_863_000.0) == 11_000_000.0
    assert mass_text(10_863_000.0, "dry") == "11 Mt dry"
    assert grade_text(8.23, "cu_pct") == "8.2 % Cu"
    metal = contained_metal(10_863_000.0, 8.23, "cu_pct")
    assert metal == pytest.approx(894_024.9)
    assert significant_text(metal / 1e6, metal_figures(2, 2)) == "0.89"


@pytest.mark.parametrize(
    ("value", "figures", "text"),
    [
        (0.0312, 2, "0.031"), (123.4, 2, "120"), (0.999, 2, "1.0"), (99.6, 2, "100"), (1.25, 2, "1.3"), (1.35, 2, "1.4"),
        (4.0, 2, "4.0"), (0.0, 2, "0"), (123456.0, 3, "123\u202f000"), (-2.34, 2, "−2.3"), (5.5, 1, "6"),
        (float("nan"), 2, "–"), (float("inf"), 2, "–"),
    ],
)  # fmt: skip
def test_significant_text(value, figures, text):
    assert significant_text(value, figures) == text


def test_mass_changes_unit_after_rounding():
    assert mass_text(999_600.0, "wet") == "1.0 Mt wet"
    assert mass_text(994_000.0, "wet") == "990 kt wet"
    assert mass_text(949.0, "dry", figures=1) == "900 t dry"
    assert mass_text(340_000.0, "dry", approximate=True) == "approximately 340 kt dry"


def test_metal_units():
    assert metal_unit("cu_pct", 12_000.0)[0] == "kt"
    assert metal_unit("cu_pct", 120.0)[0] == "t"
    name, scale = metal_unit("au_gpt", 1.0)
    assert name == "koz" and scale == pytest.approx(0.0311034768)  # NIST: troy ounce 31.1034768 g


def test_cutoff_phrase():
    assert cutoff_phrase("cu_pct", 2.0) == "Cu ≥ 2 %"
    assert cutoff_phrase("au_gpt", 0.5) == "Au ≥ 0.5 g/t"
    assert cutoff_phrase("cueq_pct", 1.5) == "CuEq ≥ 1.5 %"
    assert cutoff_phrase("equivalent", 2.0, equivalent_in="cu_pct") == "CuEq ≥ 2 %"
    assert cutoff_phrase("equivalent", 0.5, equivalent_in="au_gpt") == "AuEq ≥ 0.5 g/t"
    assert cutoff_phrase("value_per_dry_tonne", 200.0, currency="US$") == "net value ≥ 200 US$/t dry"
    assert cutoff_phrase(None, None) == "no cut-off"


@given(st.floats(min_value=1e-9, max_value=1e12), st.integers(min_value=1, max_value=6))
def test_rounding_is_close_idempotent_and_never_finer(value, figures):
    rounded = round_significant(value, figures)
    assert abs(rounded - value) <= 0.5 * 10.0 ** (math.floor(math.log10(value)) - figures + 1) * (1 + 1e-9)
    assert round_significant(rounded, figures) == rounded
    assert len(f"{rounded:.11e}".split("e")[0].replace(".", "").rstrip("0")) <= figures

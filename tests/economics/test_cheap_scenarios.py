"""Cheap scenarios: equal to the slow way one by one, to plain NumPy kernels, whatever the threads, and fast."""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from sms_resource.economics import (
    CheapScenario,
    CostModel,
    MetalTerms,
    Price,
    Product,
    Recovery,
    SellingTerms,
    block_costs,
    block_value,
    cheap_scenarios,
    grade_tonnage,
)
from sms_resource.economics.scenario_kernels import RUNS, TILE, deducted_sums, linear_sums

METALS = ("cu_pct", "zn_pct", "au_gpt", "ag_gpt")


def model(count: int, seed: int = 1) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    dry = rng.uniform(10, 500, count)
    frame = pd.DataFrame(
        {
            "cu_pct": rng.lognormal(0.7, 0.8, count), "zn_pct": rng.lognormal(0.5, 1.0, count),
            "au_gpt": rng.lognormal(0.5, 1.0, count), "ag_gpt": rng.lognormal(3.0, 1.0, count),
            "domain": rng.choice(["cap", "massive", "stockwork"], count), "slope_deg": rng.uniform(0, 35, count),
            "elevation": rng.uniform(-1700, -1600, count), "dry_tonnes": dry,
            "wet_tonnes": dry * rng.uniform(1.02, 1.3, count),
        }
    )  # fmt: skip
    frame.loc[rng.random(count) < 0.02, "au_gpt"] = np.nan
    return frame


def metal(
    column: str, price: float, unit: str, recovery: Recovery | float, payable: float, **more: float
) -> MetalTerms:
    held = recovery if isinstance(recovery, Recovery) else Recovery(percent=recovery, basis="b")
    return MetalTerms(column, Price(price, unit, "s", "d"), held, payable, **more)


CURVE = Recovery(by_grade=((0.0, 20.0), (2.0, 80.0), (5.0, 92.0)), basis="b")
DOMAINS = Recovery(
    by_domain={
        "cap": Recovery(percent=60, basis="b"),
        "massive": CURVE,
        "stockwork": Recovery(percent=85, basis="b"),
    }
)
PLAIN = SellingTerms(
    (metal("cu_pct", 8500, "t", 88, 95), metal("au_gpt", 1900, "oz", 70, 50), metal("ag_gpt", 23, "oz", 60, 30),
     MetalTerms("zn_pct", payable_pct=0.0)),
    freight_per_wet_tonne=30.0, treatment_per_dry_tonne=12.0, royalty_pct=4.0,
)  # fmt: skip
COSTS = CostModel(
    vessel_cost_per_day=200_000, wet_tonnes_per_day=3200, lifting_per_wet_tonne=35, depth_rate_per_100_m=0.03,
    reference_depth_m=1600, slope_factors=((15, 1.3), (25, 1.8)), processing_per_dry_tonne=40, general_per_dry_tonne=9,
)  # fmt: skip
CONCENTRATE = SellingTerms(
    (metal("cu_pct", 8500, "t", 88, 96.5, deduction=1.0, deduction_kind="minimum", refining_charge=180.0),
     metal("au_gpt", 60, "g", 65, 90, deduction=1.5), metal("zn_pct", 2500, "t", 70, 85, deduction=8.0)),
    Product("cu_pct", 24.0, 90.0, 70.0, 9.0), royalty_pct=3.0, royalty_basis="net",
)  # fmt: skip
SCENARIOS = [
    CheapScenario("base", PLAIN, COSTS),
    CheapScenario("dear", replace(PLAIN, freight_per_wet_tonne=90.0), COSTS),
    CheapScenario("fixed cut-off", PLAIN, COSTS, cutoff=250.0),
    CheapScenario("no cut-off", PLAIN, COSTS, cutoff=-1e9),
    CheapScenario("net royalty", replace(PLAIN, royalty_pct=20.0, royalty_basis="net"), COSTS),
    CheapScenario("flat costs", PLAIN, CostModel(lifting_per_wet_tonne=150.0)),
    CheapScenario("curve", SellingTerms((metal("cu_pct", 4.0, "lb", CURVE, 95),)), COSTS),
    CheapScenario("by domain", SellingTerms((metal("cu_pct", 4.0, "lb", DOMAINS, 95),)), COSTS),
    CheapScenario("deduction", SellingTerms((metal("cu_pct", 4.0, "lb", 88, 95, deduction=0.5),)), COSTS),
    CheapScenario("concentrate", CONCENTRATE, COSTS),
    CheapScenario("concentrate by domain", replace(CONCENTRATE, metals=(
        metal("cu_pct", 8500, "t", DOMAINS, 96.5, deduction=1.0), *CONCENTRATE.metals[1:])), COSTS),
    CheapScenario("nothing pays", PLAIN, CostModel(general_per_dry_tonne=1e6)),
]  # fmt: skip


def one_by_one(frame: pd.DataFrame, scenario: CheapScenario) -> dict[str, float]:
    """The slow way: value, costs, margin, table of tonnes."""
    value = block_value(frame, scenario.terms).frame["net_value_per_dry_tonne"]
    cost = block_costs(frame, scenario.costs)[0]["cost_per_dry_tonne"]
    margin = value - (cost if scenario.cutoff is None else scenario.cutoff)
    table = grade_tonnage(
        frame.assign(margin=margin), metals=METALS, cutoff_variable="margin", cutoffs=[0.0], groups=()
    ).iloc[0]
    taken = margin >= 0
    dry = frame.dry_tonnes[taken]
    mean = float((dry * value[taken]).sum() / dry.sum()) if dry.sum() > 0 else np.nan
    return {**table.drop(["cutoff_variable", "cutoff"]), "mean_net_value_per_dry_tonne": mean}


def test_equal_to_the_slow_way_one_by_one() -> None:
    frame = model(4000)
    table, findings = cheap_scenarios(frame, SCENARIOS, metals=METALS)
    assert not findings.has_errors and len(table) == len(SCENARIOS)
    assert table.label.tolist() == [s.label for s in SCENARIOS]
    for row, scenario in zip(table.itertuples(index=False), SCENARIOS):
        want = one_by_one(frame, scenario)
        for name, value in want.items():
            if name == "mean_net_value_per_dry_tonne":
                assert getattr(row, name) == pytest.approx(value, rel=1e-9, nan_ok=True), scenario.label
            else:  # the same blocks are summed exactly, so the bits are the same
                assert row.in_doubt == 0 and np.array_equal(getattr(row, name), value, equal_nan=True), name
    selected = table.set_index("label").dry_tonnes
    assert selected["nothing pays"] == 0 and selected["dear"] < selected["base"] < selected["no cut-off"]


def test_terms_with_errors_give_nothing_and_say_why() -> None:
    bad = SellingTerms((replace(PLAIN.metals[0], recovery=None),))
    table, findings = cheap_scenarios(
        model(50), [SCENARIOS[0], CheapScenario("bad", bad), CheapScenario("bad too", bad)], metals=METALS
    )
    assert [f.code for f in findings.errors] == ["recovery-missing"]
    assert table.iloc[1:, 1:].isna().all(axis=None) and table.dry_tonnes[0] > 0
    _, found = cheap_scenarios(model(50).drop(columns="slope_deg"), [SCENARIOS[0]], metals=METALS)
    assert "cost-column-missing" in {f.code for f in found.errors}


def test_results_do_not_depend_on_threads() -> None:
    import numba

    frame = model(3000)
    held = numba.get_num_threads()
    tables = []
    try:
        for threads in (1, held):
            numba.set_num_threads(threads)
            tables.append(cheap_scenarios(frame, SCENARIOS, metals=METALS)[0])
    finally:
        numba.set_num_threads(held)
    pd.testing.assert_frame_equal(tables[0], tables[1], check_exact=True)


@pytest.mark.parametrize("deducted", [False, True])
def test_kernels_equal_their_plain_twins(deducted: bool) -> None:
    rng = np.random.default_rng(2)
    n, m, q, tiles = 137, 3, 5, 2
    grades, shapes, quantities = (
        rng.lognormal(size=(n, m)),
        rng.uniform(1, 2, (n, 3)),
        rng.uniform(1, 9, (n, q)),
    )
    grades[::11, 1] = np.nan
    by_metal = [rng.uniform(1, 50, (tiles, m, TILE)) for _ in range(4)]
    product, royalty = rng.uniform(0, 2, (tiles, TILE)), rng.uniform(0, 0.2, (tiles, TILE))
    charge, threshold = rng.uniform(0, 5, (tiles, 2, TILE)), rng.uniform(0, 30, (tiles, 3, TILE))
    nearness = np.full((tiles, TILE), 0.5)
    sums = np.zeros((RUNS, tiles, q + 2, TILE))
    share, worth, by_carrier, flat = by_metal
    if deducted:
        deducted_sums(
            grades,
            2,
            shapes,
            quantities,
            share,
            worth,
            by_carrier,
            flat,
            product,
            charge,
            royalty,
            threshold,
            nearness,
            sums,
        )
        carrier = grades[:, 2, None, None, None]
        paid = worth * grades[:, None, :, None] - by_carrier * carrier - flat
        paid = np.maximum(np.minimum(share * grades[:, None, :, None], paid), 0.0)
        value = paid.sum(axis=2) - product * grades[:, 2, None, None]
    else:
        linear_sums(grades, shapes, quantities, worth, charge, royalty, threshold, nearness, sums)
        value = np.einsum("tms,nm->nts", worth, grades)
    value = value - charge[:, 0] - charge[:, 1] * shapes[:, 0, None, None]
    value = value - royalty * np.maximum(value, 0.0)
    with np.errstate(invalid="ignore"):
        needed = np.einsum("tps,np->nts", threshold[:, 1:], shapes[:, 1:]) + threshold[:, 0]
        taken = value >= needed
    want = np.einsum("nts,nq->tqs", taken.astype(float), quantities)
    money = (np.where(taken, value, 0.0) * quantities[:, 0, None, None]).sum(axis=0)
    np.testing.assert_allclose(sums.sum(axis=0)[:, :q], want, rtol=1e-12)
    np.testing.assert_allclose(sums.sum(axis=0)[:, q], money, rtol=1e-9)
    assert 0 < taken.mean() < 1
    with np.errstate(invalid="ignore"):
        doubt = (np.abs(value - needed) <= 0.5).sum(axis=0)
    assert (sums.sum(axis=0)[:, q + 1] == doubt).all() and doubt.sum() > 0


@pytest.mark.benchmark
def test_a_thousand_scenarios_on_a_million_blocks(capsys: pytest.CaptureFixture[str]) -> None:
    frame = model(1_000_000)
    rng = np.random.default_rng(3)
    for name, base in (("offtake", PLAIN), ("concentrate", CONCENTRATE)):
        many = []
        for number in range(1000):
            factor = rng.uniform(0.5, 2.0)
            metals = tuple(
                replace(m, price=replace(m.price, amount=m.price.amount * factor)) if m.price else m
                for m in base.metals
            )
            costs = replace(COSTS, lifting_per_wet_tonne=float(rng.uniform(20, 90)))
            many.append(CheapScenario(str(number), replace(base, metals=metals), costs))
        cheap_scenarios(frame.head(100), many[:2], metals=METALS)  # compiles
        start, cpu = time.perf_counter(), time.process_time()
        table, _ = cheap_scenarios(frame, many, metals=METALS)
        took, used = time.perf_counter() - start, time.process_time() - cpu
        with capsys.disabled():
            print(f"\n1000 scenarios, 1 000 000 blocks, {name}: {took:.1f} s wall, {used:.1f} s of processor")
        assert table.dry_tonnes.notna().all()
        # processor time: the wall clock of a machine of one's own is never longer, that of a shared one is chance
        assert used < 10.0

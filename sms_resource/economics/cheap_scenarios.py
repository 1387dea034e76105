"""Scenarios of prices, recoveries, costs and cut-offs on one block model: thousands at once."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource import units
from sms_resource.economics.costs import CostModel
from sms_resource.economics.grade_tonnage import content_columns
from sms_resource.economics.recovery import Recovery
from sms_resource.economics.terms import MetalTerms, SellingTerms
from sms_resource.findings import Findings

Floats = NDArray[np.float64]
Curve = tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class CheapScenario:
    """Terms and costs under which blocks are chosen by value.

    Parameters
    ----------
    label : str
    terms : SellingTerms
    costs : CostModel
    cutoff : float, optional
        Net value per dry tonne that a block must reach. None: each block must pay for its own costs.
    """

    label: str
    terms: SellingTerms
    costs: CostModel = field(default_factory=CostModel)
    cutoff: float | None = None


def cheap_scenarios(
    frame: pd.DataFrame,
    scenarios: Sequence[CheapScenario],
    *,
    metals: Sequence[str],
    domain: str = "domain",
    slope: str = "slope_deg",
    elevation: str = "elevation",
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> tuple[pd.DataFrame, Findings]:
    """What each scenario selects from the same blocks.

    Gives what ``block_value``, ``block_costs`` and a cut on their difference give one by one, to rounding, in one
    pass over the blocks for all scenarios. Scenarios with the same metals share a pass; recoveries that bend with
    grade and costs by slope and depth take one more pass for each distinct bend.

    Parameters
    ----------
    frame : DataFrame
        One row a block, as for ``block_value`` and ``block_costs``.
    metals : sequence of str
        Grade columns to report.

    Returns
    -------
    DataFrame
        One row a scenario in the order given: label, dry_tonnes, wet_tonnes, each grade, each content and
        mean_net_value_per_dry_tonne of what is selected. NaN where the terms have errors.
    Findings
        Errors of terms and costs, each once for all scenarios that share it.
    """
    findings = Findings()
    known: set[tuple[str, str]] = set()
    sound: list[int] = []
    for index, scenario in enumerate(scenarios):
        problems = [*_problems(scenario, frame, slope, elevation)]
        for finding in problems:
            if (finding.code, finding.message) not in known:
                known.add((finding.code, finding.message))
                findings.extend([finding])
        if not any(finding.severity == "error" for finding in problems):
            sound.append(index)
    dry, wet = (frame[c].to_numpy(dtype=np.float64) for c in (dry_tonnes, wet_tonnes))
    grades = (
        np.column_stack([frame[m].to_numpy(dtype=np.float64) for m in metals])
        if metals
        else np.empty((len(dry), 0))
    )
    # Only metals with missing grades need graded tonnes of their own: all others are graded by every dry tonne.
    gaps = np.isnan(grades)
    partial = np.flatnonzero(gaps.any(axis=0))
    quantities = np.column_stack(
        [dry, wet, np.where(gaps, 0.0, grades) * dry[:, None], ~gaps[:, partial] * dry[:, None]]
    )
    sums = np.full((quantities.shape[1] + 1, len(scenarios)), np.nan)
    sums[:, sound] = 0.0
    domains, names = (
        pd.factorize(frame[domain].astype(str)) if domain in frame else (np.zeros(len(dry), int), [""])
    )
    columns = {m.column for i in sound for m in _paid(scenarios[i].terms)} | ({slope, elevation} & set(frame))
    needed = frame[sorted(columns)]
    for code, name in enumerate(names):
        rows = np.flatnonzero(domains == code)
        part = needed.iloc[rows]
        wet_per_dry = np.divide(wet[rows], dry[rows], out=np.full(len(rows), np.nan), where=dry[rows] > 0)
        for members in _groups([scenarios[i] for i in sound], str(name)).values():
            chosen = [sound[i] for i in members]
            group = [scenarios[i] for i in chosen]
            sums[:, chosen] += _weigh(part, group, str(name), quantities[rows], wet_per_dry, slope, elevation)
    graded = np.tile(sums[0], (len(metals), 1))
    graded[partial] = sums[2 + len(metals) : -1]
    return _table(scenarios, sums, graded, metals), findings


def _problems(scenario: CheapScenario, frame: pd.DataFrame, slope: str, elevation: str) -> Findings:
    found = scenario.terms.check()
    found.extend(scenario.costs.check())
    for metal in scenario.terms.metals:
        if metal.column not in frame and metal.payable_pct != 0:
            found.error(
                "metal-missing",
                f"The blocks have no column {metal.column}.",
                "Estimate it.",
                column=metal.column,
            )
    wanted = [
        (slope, bool(scenario.costs.slope_factors)),
        (elevation, scenario.costs.depth_rate_per_100_m != 0),
    ]
    for column, needed in wanted:
        if needed and column not in frame:
            found.error(
                "cost-column-missing", f"Costs go by {column}, which the blocks do not have.", "Add it."
            )
    return found


def _groups(scenarios: Sequence[CheapScenario], domain: str) -> dict[object, list[int]]:
    """Scenarios that share metals, bends of recovery in this domain, shapes of cost and the kind of terms."""
    groups: dict[object, list[int]] = {}
    for index, scenario in enumerate(scenarios):
        paid = _paid(scenario.terms)
        key = (
            tuple((m.column, _resolved(m.recovery, domain)[1]) for m in paid),
            _needs_deductions(scenario.terms),
            None if scenario.terms.product is None else scenario.terms.product.carrier,
            scenario.costs.slope_factors,
            scenario.costs.depth_rate_per_100_m,
            scenario.costs.reference_depth_m if scenario.costs.depth_rate_per_100_m else 0.0,
        )
        groups.setdefault(key, []).append(index)
    return groups


def _paid(terms: SellingTerms) -> list[MetalTerms]:
    carrier = None if terms.product is None else terms.product.carrier
    return [m for m in terms.metals if m.payable_pct != 0 or m.column == carrier]


def _needs_deductions(terms: SellingTerms) -> bool:
    return terms.product is not None or any(m.deduction > 0 for m in _paid(terms))


def _resolved(recovery: Recovery | None, domain: str) -> tuple[float, Curve]:
    """Constant share and bend of a recovery in one domain: one of them is neutral."""
    if recovery is not None and recovery.by_domain:
        recovery = recovery.by_domain.get(domain)
    if recovery is None:
        return np.nan, ()
    if recovery.by_domain:
        raise ValueError("a recovery by domain may not hold another recovery by domain")
    return (recovery.percent / 100.0, ()) if recovery.percent is not None else (1.0, recovery.by_grade)


def _weigh(
    part: pd.DataFrame,
    group: Sequence[CheapScenario],
    domain: str,
    quantities: Floats,
    wet_per_dry: Floats,
    slope: str,
    elevation: str,
) -> Floats:
    from sms_resource.economics import scenario_kernels as kernels

    first = group[0]
    paid = _paid(first.terms)
    columns = []
    for metal in paid:
        grade = part[metal.column].to_numpy(dtype=np.float64)
        bend = _resolved(metal.recovery, domain)[1]
        columns.append(grade * Recovery(by_grade=bend).fraction(grade) if bend else grade)
    recovered = np.column_stack(columns) if columns else np.zeros((len(part), 1))
    shapes = np.column_stack([wet_per_dry, *_cost_shapes(part, first.costs, wet_per_dry, slope, elevation)])
    width = max(len(paid), 1)
    coefficients = _Coefficients.empty(len(group), width, kernels.TILE)
    for s, scenario in enumerate(group):
        coefficients.fill(s, scenario, _paid(scenario.terms), domain)
    padded = coefficients.tiled(kernels.TILE)
    tiles = padded["worth"].shape[0]
    sums = np.zeros((kernels.RUNS, tiles, quantities.shape[1] + 1, kernels.TILE))
    block = tuple(np.ascontiguousarray(a) for a in (recovered, shapes, quantities))
    if _needs_deductions(first.terms):
        carrier = 0
        if first.terms.product is not None:
            carrier = [m.column for m in paid].index(first.terms.product.carrier)
        kernels.deducted_sums(
            block[0], carrier, block[1], block[2], padded["share"], padded["worth"], padded["by_carrier"],
            padded["flat"], padded["product"], padded["charge"], padded["royalty"], padded["threshold"], sums,
        )  # fmt: skip
    else:
        kernels.linear_sums(
            block[0],
            block[1],
            block[2],
            padded["worth"],
            padded["charge"],
            padded["royalty"],
            padded["threshold"],
            sums,
        )
    whole = sums.sum(axis=0)  # (tiles, quantities, TILE), runs in a fixed order
    return np.moveaxis(whole, 0, 1).reshape(whole.shape[1], -1)[:, : len(group)]


def _cost_shapes(
    part: pd.DataFrame, costs: CostModel, wet_per_dry: Floats, slope: str, elevation: str
) -> tuple[Floats, Floats]:
    """How vessel and lifting costs per dry tonne vary over the blocks, for one unit of money a wet tonne."""
    steep = np.ones(len(part))
    if costs.slope_factors:
        steep = costs.slope_factor(part[slope].to_numpy(dtype=np.float64))
    deep = np.ones(len(part))
    if costs.depth_rate_per_100_m:
        deep = costs.depth_factor(part[elevation].to_numpy(dtype=np.float64))
    return steep * wet_per_dry, steep * deep * wet_per_dry


@dataclass
class _Coefficients:
    """Coefficients of the kernels, one column a scenario."""

    arrays: dict[str, Floats]

    @classmethod
    def empty(cls, count: int, width: int, tile: int) -> _Coefficients:
        total = -(-count // tile) * tile
        by_metal = {name: np.zeros((width, total)) for name in ("share", "worth", "by_carrier", "flat")}
        by_shape = {"charge": np.zeros((2, total)), "threshold": np.zeros((3, total))}
        by_shape["threshold"][0] = np.inf  # where there is no scenario nothing is selected
        return cls({**by_metal, **by_shape, "royalty": np.zeros((1, total)), "product": np.zeros((1, total))})

    def fill(self, s: int, scenario: CheapScenario, paid: Sequence[MetalTerms], domain: str) -> None:
        """Coefficients of one scenario in one domain."""
        terms, costs, a = scenario.terms, scenario.costs, self.arrays
        product = terms.product
        # A royalty on payable value scales what is paid; one on net value is taken from the sum.
        kept = 1.0 - terms.royalty_pct / 100.0 if terms.royalty_basis == "payable" else 1.0
        a["royalty"][0, s] = terms.royalty_pct / 100.0 if terms.royalty_basis == "net" else 0.0
        carrier_share = 1.0
        if product is not None:
            carrier_share = _resolved(terms.metal(product.carrier).recovery, domain)[0] / product.grade
            moist = product.freight / (1.0 - product.moisture_pct / 100.0)
            a["product"][0, s] = carrier_share * (product.treatment_charge + moist)
        for m, metal in enumerate(paid):
            pays = (metal.payable_pct or 0.0) / 100.0
            price = metal.net_price * kept if metal.price is not None else 0.0
            recovery = _resolved(metal.recovery, domain)[0] if metal.recovery is not None else 0.0
            # "before" pays a share of what is left after the deduction; "minimum" pays the lesser of the two.
            left = price * (pays if metal.deduction_kind == "before" else float(pays > 0))
            a["share"][m, s] = pays * price * recovery
            a["worth"][m, s] = left * recovery
            taken = left * metal.deduction
            a["by_carrier" if product is not None else "flat"][m, s] = (
                taken * carrier_share if product else taken
            )
        if not _needs_deductions(terms):
            a["worth"][:, s] = a["share"][:, s]
        a["charge"][0, s] = terms.treatment_per_dry_tonne
        a["charge"][1, s] = terms.freight_per_wet_tonne
        if scenario.cutoff is None:
            a["threshold"][0, s] = costs.processing_per_dry_tonne + costs.general_per_dry_tonne
            a["threshold"][1, s] = costs.vessel_per_wet_tonne()
            a["threshold"][2, s] = costs.lifting_per_wet_tonne
        else:
            a["threshold"][0, s] = scenario.cutoff

    def tiled(self, tile: int) -> Mapping[str, Floats]:
        """Arrays of shape (tiles, rows, tile); those of one row lose it."""
        out = {}
        for name, array in self.arrays.items():
            cut = np.ascontiguousarray(np.moveaxis(array.reshape(array.shape[0], -1, tile), 0, 1))
            out[name] = cut[:, 0] if name in ("royalty", "product") else cut
        return out


def _table(
    scenarios: Sequence[CheapScenario], sums: Floats, graded: Floats, metals: Sequence[str]
) -> pd.DataFrame:
    width = len(metals)
    out: dict[str, object] = {"label": [scenario.label for scenario in scenarios]}
    out["dry_tonnes"], out["wet_tonnes"] = sums[0], sums[1]
    metal_sums = sums[2 : 2 + width]
    with np.errstate(divide="ignore", invalid="ignore"):
        for index, metal in enumerate(metals):
            out[metal] = np.where(graded[index] > 0, metal_sums[index] / graded[index], np.nan)
        mean = np.where(sums[0] > 0, sums[-1] / sums[0], np.nan)
    for index, metal in enumerate(metals):
        for name, factor in content_columns(metal).items():
            out[name] = units.contained_tonnes(metal_sums[index], 1.0, metal) * factor
    out["mean_net_value_per_dry_tonne"] = mean
    return pd.DataFrame(out)

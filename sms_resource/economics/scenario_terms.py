"""What a scenario of terms asks of the kernels: columns, bends and coefficients in one domain."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from sms_resource.economics.costs import CostModel
from sms_resource.economics.equivalent import EVERYWHERE, MetalEquivalent
from sms_resource.economics.recovery import Recovery
from sms_resource.economics.terms import MetalTerms, SellingTerms

Floats = NDArray[np.float64]
Curve = tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class CheapScenario:
    """Terms and costs under which blocks are chosen by value, or an equivalent by which they are chosen.

    Parameters
    ----------
    label : str
    terms : SellingTerms
    costs : CostModel
    cutoff : float, optional
        Net value per dry tonne that a block must reach. None: each block must pay for its own costs.
    equivalent : MetalEquivalent, optional
        Where given, blocks are chosen by it and not by their value; ``cutoff`` is then in its unit.
    """

    label: str
    terms: SellingTerms
    costs: CostModel = field(default_factory=CostModel)
    cutoff: float | None = None
    equivalent: MetalEquivalent | None = None

    def __post_init__(self) -> None:
        if self.equivalent is not None and self.cutoff is None:
            raise ValueError(f"scenario {self.label!r} chooses by an equivalent and has no cutoff")


def needed_columns(scenario: CheapScenario) -> tuple[str, ...]:
    """Grade columns that bring something in a scenario."""
    if scenario.equivalent is not None:
        return scenario.equivalent.columns
    return tuple(metal.column for metal in _paid(scenario.terms))


def scenario_groups(scenarios: Sequence[CheapScenario], domain: str) -> dict[object, list[int]]:
    """Scenarios that share metals, bends of recovery in this domain, shapes of cost and the kind of terms."""
    groups: dict[object, list[int]] = {}
    for index, scenario in enumerate(scenarios):
        key: tuple[object, ...]
        if scenario.equivalent is not None:
            key = ("equivalent", scenario.equivalent.columns)
        else:
            key = (
                bends(scenario, domain),
                needs_deductions(scenario),
                None if scenario.terms.product is None else scenario.terms.product.carrier,
                scenario.costs.slope_factors,
                scenario.costs.depth_rate_per_100_m,
                scenario.costs.reference_depth_m if scenario.costs.depth_rate_per_100_m else 0.0,
            )
        groups.setdefault(key, []).append(index)
    return groups


def bends(scenario: CheapScenario, domain: str) -> tuple[tuple[str, Curve], ...]:
    """Grade columns of a scenario, each with the curve that its recovery follows; empty where it is one number."""
    if scenario.equivalent is not None:
        return tuple((column, ()) for column in scenario.equivalent.columns)
    return tuple((m.column, _resolved(m.recovery, domain)[1]) for m in _paid(scenario.terms))


def needs_deductions(scenario: CheapScenario) -> bool:
    """Whether value is not linear in the grades: a product, or deductions."""
    if scenario.equivalent is not None:
        return False
    return scenario.terms.product is not None or any(m.deduction > 0 for m in _paid(scenario.terms))


def _paid(terms: SellingTerms) -> list[MetalTerms]:
    carrier = None if terms.product is None else terms.product.carrier
    return [m for m in terms.metals if m.payable_pct != 0 or m.column == carrier]


def _resolved(recovery: Recovery | None, domain: str) -> tuple[float, Curve]:
    """Constant share and bend of a recovery in one domain: one of them is neutral."""
    if recovery is not None and recovery.by_domain:
        recovery = recovery.by_domain.get(domain)
    if recovery is None:
        return np.nan, ()
    if recovery.by_domain:
        raise ValueError("a recovery by domain may not hold another recovery by domain")
    return (recovery.percent / 100.0, ()) if recovery.percent is not None else (1.0, recovery.by_grade)


@dataclass
class Coefficients:
    """Coefficients of the kernels, one column a scenario."""

    arrays: dict[str, Floats]

    @classmethod
    def empty(cls, count: int, width: int, tile: int) -> Coefficients:
        """Coefficients of ``count`` scenarios that choose nothing yet, padded to whole tiles."""
        total = -(-count // tile) * tile
        by_metal = {name: np.zeros((width, total)) for name in ("share", "worth", "by_carrier", "flat")}
        by_shape = {"charge": np.zeros((2, total)), "threshold": np.zeros((3, total))}
        by_shape["threshold"][0] = np.inf  # where there is no scenario nothing is selected
        single = {name: np.zeros((1, total)) for name in ("royalty", "product", "nearness")}
        return cls({**by_metal, **by_shape, **single})

    def fill(self, s: int, scenario: CheapScenario, domain: str) -> None:
        """Coefficients of one scenario in one domain."""
        a = self.arrays
        if scenario.equivalent is not None:
            factors = scenario.equivalent.factors
            mine = factors[EVERYWHERE] if EVERYWHERE in factors else factors.get(domain, {})
            for m, column in enumerate(scenario.equivalent.columns):
                a["share"][m, s] = a["worth"][m, s] = mine.get(column, np.nan)
            a["threshold"][0, s] = scenario.cutoff
            return
        terms, costs = scenario.terms, scenario.costs
        product = terms.product
        # A royalty on payable value scales what is paid; one on net value is taken from the sum.
        kept = 1.0 - terms.royalty_pct / 100.0 if terms.royalty_basis == "payable" else 1.0
        a["royalty"][0, s] = terms.royalty_pct / 100.0 if terms.royalty_basis == "net" else 0.0
        carrier_share = 1.0
        if product is not None:
            carrier_share = _resolved(terms.metal(product.carrier).recovery, domain)[0] / product.grade
            moist = product.freight / (1.0 - product.moisture_pct / 100.0)
            a["product"][0, s] = carrier_share * (product.treatment_charge + moist)
        for m, metal in enumerate(_paid(terms)):
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
        if not needs_deductions(scenario):
            a["worth"][:, s] = a["share"][:, s]
        a["charge"][0, s] = terms.treatment_per_dry_tonne
        a["charge"][1, s] = terms.freight_per_wet_tonne
        if scenario.cutoff is None:
            a["threshold"][0, s] = costs.processing_per_dry_tonne + costs.general_per_dry_tonne
            a["threshold"][1, s] = costs.vessel_per_wet_tonne()
            a["threshold"][2, s] = costs.lifting_per_wet_tonne
        else:
            a["threshold"][0, s] = scenario.cutoff

    def set_nearness(self, recovered: Floats, shapes: Floats, carrier: int) -> None:
        """Say how near to its threshold a value is in doubt: a thousand times what rounding can do to it.

        A value is a sum of some tens of products, each rounded to 2**-53 of terms no larger than what stands here.
        """
        a = self.arrays
        top, reach = _largest(recovered), _largest(shapes)
        scale = np.zeros(a["royalty"].shape[1])
        for name in ("share", "worth"):
            scale += np.nan_to_num(np.abs(a[name])).T @ top
        scale += np.nan_to_num(np.abs(a["by_carrier"])).sum(axis=0) * top[carrier]
        scale += np.abs(a["flat"]).sum(axis=0) + np.nan_to_num(np.abs(a["product"][0])) * top[carrier]
        scale += a["charge"][0] + a["charge"][1] * reach[0]
        held = np.where(np.isfinite(a["threshold"]), np.abs(a["threshold"]), 0.0)
        scale += held[0] + held[1] * reach[1] + held[2] * reach[2]
        a["nearness"][0] = 1e-12 * scale

    def tiled(self, tile: int) -> Mapping[str, Floats]:
        """Arrays of shape (tiles, rows, tile); those of one row lose it."""
        out = {}
        for name, array in self.arrays.items():
            cut = np.ascontiguousarray(np.moveaxis(array.reshape(array.shape[0], -1, tile), 0, 1))
            out[name] = cut[:, 0] if name in ("royalty", "product", "nearness") else cut
        return out


def _largest(columns: Floats) -> Floats:
    """Largest size in each column; 0 where nothing is known."""
    if not len(columns):
        return np.zeros(columns.shape[1])
    return np.nanmax(np.abs(np.nan_to_num(columns)), axis=0)

"""Metal equivalents: the formula, its factors, and every statement that must stand beside it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource import units
from sms_resource.economics.terms import MetalTerms, SellingTerms
from sms_resource.findings import Findings

EVERYWHERE = ""


@dataclass(frozen=True)
class MetalEquivalent:
    """A metal equivalent that may be printed, because nothing it needs is missing.

    Attributes
    ----------
    base : str
        Grade column that the equivalent is in.
    factors : mapping of domain to mapping of column to factor
        One set under "" where recoveries are the same everywhere.
    formula : str
    statements : tuple of str
        What stands beside the equivalent wherever it is printed.
    """

    base: str
    factors: Mapping[str, Mapping[str, float]]
    formula: str
    statements: tuple[str, ...]

    @property
    def name(self) -> str:
        """Column name of the equivalent, such as ``cueq_pct``."""
        element, _, unit = self.base.rpartition("_")
        return f"{element}eq_{unit}"

    @property
    def columns(self) -> tuple[str, ...]:
        """Grade columns that add to the equivalent; a metal that is not paid adds nothing and may be missing."""
        first = next(iter(self.factors.values()))
        return tuple(column for column in first if any(by[column] for by in self.factors.values()))

    def apply(self, frame: pd.DataFrame, *, domain: str = "domain") -> NDArray[np.float64]:
        """Equivalent grade of each block; NaN where a grade is missing or the domain has no factor."""
        out = np.full(len(frame), np.nan)
        domains = None if EVERYWHERE in self.factors else frame[domain].astype(str).to_numpy(dtype=object)
        for name, factors in self.factors.items():
            mine = np.ones(len(frame), dtype=bool) if domains is None else domains == name
            total = np.zeros(int(mine.sum()))
            for column in self.columns:
                total = total + factors[column] * frame[column].to_numpy(dtype=np.float64)[mine]
            out[mine] = total
        return out


def metal_equivalent(terms: SellingTerms, base: str) -> tuple[MetalEquivalent | None, Findings]:
    """Equivalent of all metals of the terms in the grade unit of one of them.

    Equivalent = G_base + sum G_i (P_i R_i Y_i) / (P_base R_base Y_base), with grade G, price P, recovery R and
    payability Y.

    Returns
    -------
    MetalEquivalent or None
        None where a price, recovery or payability is missing or cannot be one number; the findings say why.
    findings : Findings
    """
    findings = terms.check()
    columns = [metal.column for metal in terms.metals]
    if base not in columns:
        findings.error(
            "equivalent-refused",
            f"The equivalent is refused: {base} is not among the metals of the selling terms.",
            "Give its price, recovery and payability.",
            column=base,
        )
        return None, findings
    reasons = [problem for metal in terms.metals for problem in _obstacles(metal)]
    domains = _domains(terms.metals)
    if not reasons:
        worth = {name: {m.column: _worth(m, name) for m in terms.metals} for name in domains}
        reasons = [
            f"{metal.symbol} has no recovery in {name}"
            for name, by in worth.items()
            for metal in terms.metals
            if by[metal.column] is None
        ]
        if not reasons and any(not by[base] for by in worth.values()):
            reasons = [f"{terms.metal(base).symbol} brings nothing, so nothing can be expressed in it"]
    if reasons or findings.has_errors:
        findings.error(
            "equivalent-refused",
            f"The equivalent is refused: {'; '.join(reasons) or 'the selling terms have errors'}.",
            "Give what is missing, or cut on value per dry tonne instead.",
            column=base,
        )
        return None, findings
    factors = {
        name: {column: float(value or 0.0) / float(by[base] or 1.0) for column, value in by.items()}
        for name, by in worth.items()
    }
    unsold = [m.symbol for m in terms.metals if m.payable_pct and not m.sold_statement.strip()]
    if unsold:
        findings.warning(
            "equivalent-not-sold",
            f"Nobody has stated that {', '.join(unsold)} can be recovered and sold.",
            "State for each metal who holds that it can be recovered and sold, and on what.",
        )
    formula = _formula(terms, base, factors)
    return MetalEquivalent(base, factors, formula, _statements(terms, base, formula, unsold)), findings


def _obstacles(metal: MetalTerms) -> list[str]:
    found: list[str] = []
    if metal.payable_pct == 0:
        return found
    if metal.price is None:
        found.append(f"{metal.symbol} has no price")
    if metal.recovery is None:
        found.append(f"{metal.symbol} has no recovery")
    elif metal.equivalent_recovery_pct is None and not (
        metal.recovery.is_constant or metal.recovery.is_constant_by_domain
    ):
        found.append(
            f"the recovery of {metal.symbol} varies with grade and no single recovery is stated for it"
        )
    if metal.payable_pct is None:
        found.append(f"{metal.symbol} has no payability")
    elif metal.deduction > 0 and metal.payable_pct > 0 and metal.equivalent_payable_pct is None:
        found.append(
            f"the payability of {metal.symbol} varies with grade (deduction) and no single share is stated"
        )
    return found


def _domains(metals: tuple[MetalTerms, ...]) -> list[str]:
    names: dict[str, None] = {}
    for metal in metals:
        if metal.recovery is not None and metal.recovery.by_domain and metal.equivalent_recovery_pct is None:
            names.update(dict.fromkeys(metal.recovery.by_domain))
    return list(names) or [EVERYWHERE]


def _recovery(metal: MetalTerms, domain: str) -> float | None:
    if metal.equivalent_recovery_pct is not None:
        return metal.equivalent_recovery_pct
    assert metal.recovery is not None
    if metal.recovery.percent is not None:
        return metal.recovery.percent
    part = metal.recovery.by_domain.get(domain)
    return None if part is None else part.percent


def _payable(metal: MetalTerms) -> float:
    given = metal.payable_pct if metal.equivalent_payable_pct is None else metal.equivalent_payable_pct
    return float(given or 0.0)


def _worth(metal: MetalTerms, domain: str) -> float | None:
    """Money for one grade unit in a tonne; None where the domain has no recovery."""
    if metal.payable_pct == 0:
        return 0.0
    recovery = _recovery(metal, domain)
    if recovery is None or metal.price is None:
        return None
    return metal.price.per_grade_unit(metal.column) * recovery / 100.0 * _payable(metal) / 100.0


def _formula(terms: SellingTerms, base: str, factors: Mapping[str, Mapping[str, float]]) -> str:
    lines = []
    for name, by in factors.items():
        others = [
            f"{by[m.column]:.4g} x {units.element_label(m.column)}" for m in terms.metals if m.column != base
        ]
        where = f" in {name}" if name != EVERYWHERE else ""
        symbol = terms.metal(base).symbol
        unit = units.unit_label(base)
        lines.append(f"{symbol}Eq ({unit}){where} = " + " + ".join([units.element_label(base), *others]))
    return "; ".join(lines)


def _statements(terms: SellingTerms, base: str, formula: str, unsold: list[str]) -> tuple[str, ...]:
    said = [
        f"Formula: {formula}. Each factor is (P x R x Y of the metal) / (P x R x Y of {terms.metal(base).symbol})."
    ]
    for metal in terms.metals:
        if metal.payable_pct == 0:
            continue
        recovery = (
            f"{metal.equivalent_recovery_pct:g} % stated for the equivalent"
            if metal.equivalent_recovery_pct is not None
            else str(metal.recovery)
        )
        payability = f"{_payable(metal):g} % of recovered metal"
        if metal.equivalent_payable_pct is not None:
            payability += ", stated for the equivalent"
        said.append(f"{metal.symbol}: price {metal.price}; recovery {recovery}; payability {payability}.")
    said.append("The grade of each metal is printed beside the equivalent.")
    for metal in terms.metals:
        if metal.payable_pct == 0:
            said.append(f"{metal.symbol} is not paid and adds nothing to the equivalent.")
        elif metal.symbol not in unsold:
            said.append(f"{metal.symbol} can be recovered and sold: {metal.sold_statement.strip()}")
    if unsold:
        said.append(
            f"To be stated by the Competent Person: that {', '.join(unsold)} can be recovered and sold."
        )
    return tuple(said)

"""Recovered, payable and net value of each block per dry tonne. Never a total of money in the ground."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.economics.terms import MetalTerms, SellingTerms
from sms_resource.findings import Findings

Floats = NDArray[np.float64]
VALUE_COLUMNS: tuple[str, ...] = (
    "recovered_value_per_dry_tonne",
    "payable_value_per_dry_tonne",
    "treatment_per_dry_tonne",
    "freight_per_dry_tonne",
    "royalty_per_dry_tonne",
    "net_value_per_dry_tonne",
)


@dataclass(frozen=True)
class BlockValue:
    """Value of blocks per dry tonne.

    Attributes
    ----------
    frame : DataFrame
        Rows and index of the blocks: ``recovered_<metal>`` (grade units per dry tonne lifted),
        ``payable_value_<metal>`` and the columns of ``VALUE_COLUMNS``, money per dry tonne. Recovered value
        counts the metals that are paid, at full price. All NaN where the
        terms lack something or the block lacks a grade.
    currency : str
    findings : Findings
    statement : str
        The terms in plain words.
    """

    frame: pd.DataFrame
    currency: str
    findings: Findings
    statement: str


def block_value(
    frame: pd.DataFrame,
    terms: SellingTerms,
    *,
    domain: str = "domain",
    dry_tonnes: str = "dry_tonnes",
    wet_tonnes: str = "wet_tonnes",
) -> BlockValue:
    """Value of every block per dry tonne.

    Net value = payable metal x (price - refining charge) - treatment - freight on wet tonnes - royalty, each per
    dry tonne lifted. Royalty is never negative.

    Parameters
    ----------
    frame : DataFrame
        One row a block with the grade columns of the terms, tonnes on both bases (for freight on wet tonnes) and,
        where a recovery goes by domain, the domain.
    terms : SellingTerms

    Returns
    -------
    BlockValue
        With error findings and missing values where the terms are incomplete: nothing is guessed.
    """
    findings = terms.check()
    for metal in terms.metals:
        idle = metal.payable_pct == 0 and (terms.product is None or terms.product.carrier != metal.column)
        if metal.column not in frame and not idle:
            findings.error(
                "metal-missing",
                f"The blocks have no column {metal.column}.",
                "Estimate the metal, or take it out of the selling terms.",
                column=metal.column,
            )
    names = [f"recovered_{m.column}" for m in terms.metals] + [
        f"payable_value_{m.column}" for m in terms.metals
    ]
    if findings.has_errors:
        empty = pd.DataFrame(np.nan, index=frame.index, columns=[*names, *VALUE_COLUMNS])
        return BlockValue(empty, terms.currency, findings, describe_terms(terms))

    recovered = recovered_grades(frame, terms, domain=domain, findings=findings)
    pull = _product_pull(terms, recovered)
    out: dict[str, Floats] = {f"recovered_{column}": values for column, values in recovered.items()}
    gross, payable = np.zeros(len(frame)), np.zeros(len(frame))
    for metal in terms.metals:
        mine = recovered[metal.column]
        if metal.payable_pct == 0 or metal.price is None:  # not paid, so a missing grade takes nothing away
            out[f"payable_value_{metal.column}"] = np.zeros(len(frame))
            continue
        paid = payable_grade(metal, mine, pull) * metal.net_price
        out[f"payable_value_{metal.column}"] = paid
        gross = gross + mine * metal.price.per_grade_unit(metal.column)
        payable = payable + paid
    wet = _wet_per_dry(frame, dry_tonnes, wet_tonnes)
    treatment = np.full(len(frame), terms.treatment_per_dry_tonne)
    freight = terms.freight_per_wet_tonne * wet if terms.freight_per_wet_tonne else np.zeros(len(frame))
    if terms.product is not None and pull is not None:
        treatment = treatment + terms.product.treatment_charge * pull
        freight = freight + terms.product.freight * pull / (1.0 - terms.product.moisture_pct / 100.0)
    net = payable - treatment - freight
    royalty = (
        terms.royalty_pct / 100.0 * np.maximum(payable if terms.royalty_basis == "payable" else net, 0.0)
    )
    for name, values in zip(VALUE_COLUMNS, (gross, payable, treatment, freight, royalty, net - royalty)):
        out[name] = np.where(np.isnan(payable), np.nan, values)
    lost = np.isnan(out["net_value_per_dry_tonne"])
    if lost.any():
        findings.warning(
            "value-missing",
            f"{int(lost.sum())} blocks, {frame.loc[lost, dry_tonnes].sum():,.0f} dry t, lack a grade or a recovery, so "
            "their value is missing.",
            "Estimate every metal of the selling terms in every block.",
        )
    return BlockValue(pd.DataFrame(out, index=frame.index), terms.currency, findings, describe_terms(terms))


def recovered_grades(
    frame: pd.DataFrame, terms: SellingTerms, *, domain: str = "domain", findings: Findings | None = None
) -> dict[str, Floats]:
    """Grade x recovery of each metal, in its grade unit per dry tonne lifted."""
    told_apart = any(metal.recovery is not None and metal.recovery.by_domain for metal in terms.metals)
    domains = frame[domain].astype(str).to_numpy(dtype=object) if told_apart and domain in frame else None
    out = {}
    for metal in terms.metals:
        if metal.recovery is None or metal.column not in frame:
            out[metal.column] = np.full(len(frame), np.nan)
            continue
        grades = frame[metal.column].to_numpy(dtype=np.float64)
        share = metal.recovery.fraction(grades, domains)
        lacking = np.isnan(share) & ~np.isnan(grades)
        if findings is not None and lacking.any() and domains is not None:
            findings.error(
                "recovery-domain-missing",
                f"{metal.symbol} has no recovery in {', '.join(sorted(set(domains[lacking])))}.",
                "Give a recovery for every domain.",
                column=metal.column,
            )
        out[metal.column] = grades * share
    return out


def payable_grade(metal: MetalTerms, recovered: Floats, pull: Floats | None) -> Floats:
    """Metal that is paid, in its grade unit per dry tonne lifted.

    ``pull`` is the dry mass of product per dry tonne lifted; None where no product is described, and then the
    deduction comes off the recovered grade itself.
    """
    share = (metal.payable_pct or 0.0) / 100.0
    taken = metal.deduction * (1.0 if pull is None else pull)
    if metal.deduction_kind == "minimum":
        return np.maximum(np.minimum(share * recovered, recovered - taken), 0.0)
    return share * np.maximum(recovered - taken, 0.0)


def describe_terms(terms: SellingTerms) -> str:
    """Prices, recoveries, payabilities and charges in plain words."""
    parts = []
    for metal in terms.metals:
        paid = "payability not stated" if metal.payable_pct is None else f"{metal.payable_pct:g} % paid"
        if metal.deduction:
            paid += f" after a deduction of {metal.deduction:g} ({metal.deduction_kind})"
        refining = f", refining {terms.currency} {metal.refining_charge:g}" if metal.refining_charge else ""
        recovery = f"recovery {metal.recovery}" if metal.recovery is not None else "recovery not stated"
        parts.append(f"{metal.symbol}: {metal.price or 'price not stated'}, {recovery}, {paid}{refining}.")
    charges = []
    if terms.product is not None:
        p = terms.product
        charges.append(
            f"product at {p.grade:g} in {p.carrier}, treatment {terms.currency} {p.treatment_charge:g} per dry tonne, "
            f"freight {terms.currency} {p.freight:g} per wet tonne at {p.moisture_pct:g} % moisture"
        )
    if terms.treatment_per_dry_tonne:
        charges.append(f"treatment {terms.currency} {terms.treatment_per_dry_tonne:g} per dry tonne lifted")
    if terms.freight_per_wet_tonne:
        charges.append(f"freight {terms.currency} {terms.freight_per_wet_tonne:g} per wet tonne lifted")
    if terms.royalty_pct:
        charges.append(f"royalty {terms.royalty_pct:g} % of {terms.royalty_basis} value")
    tail = f" Charges: {'; '.join(charges)}." if charges else " No treatment, freight or royalty is charged."
    return " ".join(parts) + tail


def value_against_grade(
    frame: pd.DataFrame,
    *,
    value: str,
    grade: str,
    cutoffs: list[float] | Floats,
    dry_tonnes: str = "dry_tonnes",
) -> pd.DataFrame:
    """What selection by value gains over selection by a grade cut-off, at the same dry tonnes and so the same cost.

    For each grade cut-off the blocks above it are taken, and beside them the same dry tonnes taken in the order
    of value (the last block in part). Greedy by value per tonne is the best there is for divisible blocks
    (Dantzig 1957), so the gain is never negative.

    Returns
    -------
    DataFrame
        cutoff, dry_tonnes, value_by_grade, value_by_value (means, money per dry tonne), gain.
    """
    known = frame[[value, grade, dry_tonnes]].dropna()
    worth, grades, dry = (known[c].to_numpy(dtype=np.float64) for c in (value, grade, dry_tonnes))
    order = np.argsort(-worth, kind="stable")
    tonnes = np.concatenate([[0.0], np.cumsum(dry[order])])
    money = np.concatenate([[0.0], np.cumsum(dry[order] * worth[order])])
    rows = []
    for cutoff in np.asarray(cutoffs, dtype=np.float64):
        taken = grades >= cutoff
        total = float(dry[taken].sum())
        if total <= 0:
            rows.append((cutoff, 0.0, np.nan, np.nan, np.nan))
            continue
        by_grade = float((dry[taken] * worth[taken]).sum()) / total
        by_value = float(np.interp(total, tonnes, money)) / total
        rows.append((cutoff, total, by_grade, by_value, by_value - by_grade))
    return pd.DataFrame(rows, columns=["cutoff", "dry_tonnes", "value_by_grade", "value_by_value", "gain"])


def _product_pull(terms: SellingTerms, recovered: dict[str, Floats]) -> Floats | None:
    if terms.product is None:
        return None
    return recovered[terms.product.carrier] / terms.product.grade


def _wet_per_dry(frame: pd.DataFrame, dry_tonnes: str, wet_tonnes: str) -> Floats:
    dry = frame[dry_tonnes].to_numpy(dtype=np.float64)
    wet = frame[wet_tonnes].to_numpy(dtype=np.float64)
    out = np.full(len(dry), np.nan)
    np.divide(wet, dry, out=out, where=dry > 0)
    return out

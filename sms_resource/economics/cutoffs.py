"""Break-even and marginal cut-offs, with the costs that are inside each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from sms_resource import units
from sms_resource.economics.costs import COST_ITEMS, CostModel, block_costs
from sms_resource.economics.terms import SellingTerms
from sms_resource.economics.value import block_value
from sms_resource.findings import Findings

# A grade above which no sulphide goes: the whole rock, or a hundredth of it for metals in g/t and ppm.
_HIGHEST = {"pct": 100.0, "gpt": 10_000.0, "ppm": 1_000_000.0}


@dataclass(frozen=True)
class CutOff:
    """A cut-off with its reasons.

    Attributes
    ----------
    kind : "break-even" | "marginal"
    variable : str
        Grade column, or "net_value_per_dry_tonne".
    value : float
        In the unit of the variable.
    cost_per_dry_tonne : float
        Sum of the costs inside.
    inside, outside : tuple of str
        Cost items that are inside and that are not.
    text : str
    domain : str
        Domain whose recoveries are inside; empty where they are the same everywhere.
    """

    kind: str
    variable: str
    value: float
    cost_per_dry_tonne: float
    inside: tuple[str, ...]
    outside: tuple[str, ...]
    text: str
    domain: str = ""


def break_even_grade(
    cost_per_dry_tonne: float,
    *,
    recovery_pct: float,
    price: float,
    price_unit: str,
    column: str,
    refining_charge: float = 0.0,
    payable_pct: float = 100.0,
) -> float:
    """Grade at which one metal alone pays for the costs: cost / (R Y (P - refining) units per grade unit).

    Examples
    --------
    >>> round(break_even_grade(180, recovery_pct=85, price=4.00, price_unit="lb", column="cu_pct",
    ...                        refining_charge=0.45), 6)
    2.705771
    """
    from sms_resource.economics.terms import units_per_grade_unit

    each = (price - refining_charge) * units_per_grade_unit(price_unit, column)
    each *= recovery_pct / 100.0 * payable_pct / 100.0
    if not each > 0:
        raise ValueError("price less refining charge, recovery and payability must all be above zero")
    return cost_per_dry_tonne / each


def cutoffs(
    terms: SellingTerms,
    costs: CostModel,
    *,
    column: str | None = None,
    wet_per_dry: float,
    depth_m: float | None = None,
    slope_deg: float = 0.0,
    domain: str = "",
    marginal_outside: tuple[str, ...] = ("vessel",),
) -> tuple[list[CutOff], Findings]:
    """Break-even and marginal cut-offs at one place, on value and, if asked, on one metal alone.

    Break-even: every cost is inside. Marginal: costs that run in any case (vessel days, unless told otherwise)
    are left out, so it answers whether to lift one tonne more on a day that is paid for.

    Parameters
    ----------
    column : str, optional
        Grade column to give the cut-off in as well; the other metals then bring nothing, which is careful.
    wet_per_dry : float
        Wet tonnes per dry tonne.
    depth_m, slope_deg : float
        Water depth (m; the reference depth of the costs if not given) and slope where the cut-off shall hold.
    domain : str
        Domain whose recoveries apply. Where they go by domain and none is given, each domain has its own grade.

    Returns
    -------
    list of CutOff, Findings
        No grade cut-off where terms are incomplete or no grade pays.
    """
    unknown = set(marginal_outside) - set(COST_ITEMS)
    if unknown:
        raise ValueError(f"{sorted(unknown)} are not cost items; they are {', '.join(COST_ITEMS)}")
    depth = costs.reference_depth_m if depth_m is None else depth_m
    place = pd.DataFrame(
        {"dry_tonnes": [1.0], "wet_tonnes": [wet_per_dry], "slope_deg": slope_deg, "elevation": -depth}
    )
    table, findings = block_costs(place, costs)
    if findings.has_errors:
        return [], findings
    out: list[CutOff] = []
    if column is not None:
        findings.extend(terms.check())
    for kind, outside in (("break-even", ()), ("marginal", tuple(marginal_outside))):
        inside = tuple(item for item in COST_ITEMS if item not in outside)
        cost = float(sum(table[f"{item}_per_dry_tonne"].iloc[0] for item in inside))
        named = f"{kind} cut-off: {terms.currency} {cost:.2f} per dry tonne pays for {', '.join(inside)}"
        named += f"; {', '.join(outside)} outside" if outside else ""
        text = f"{named}. Net value is after treatment, refining, freight and royalty."
        out.append(
            CutOff(kind, "net_value_per_dry_tonne", cost, cost, inside, outside, text[0].upper() + text[1:])
        )
        if column is None or findings.has_errors:
            continue
        for name in [domain] if domain else _domains(terms):
            grade = _grade_that_pays(terms, column, cost, wet_per_dry, name)
            label, where = units.element_label(column), f" in {name}" if name else ""
            if grade is None:
                findings.warning(
                    "cutoff-unreachable",
                    f"No grade of {label} alone pays {terms.currency} {cost:.2f} per dry tonne{where}.",
                    "Check prices, recoveries and costs, or cut on value.",
                    column=column,
                )
                continue
            text = f"{named}. In {label} alone{where}, other metals bringing nothing: {grade:.4g}."
            out.append(CutOff(kind, column, grade, cost, inside, outside, text[0].upper() + text[1:], name))
    return out, findings


def _domains(terms: SellingTerms) -> list[str]:
    """Domains that recoveries tell apart; one nameless domain where they do not."""
    names: dict[str, None] = {}
    for metal in terms.metals:
        if metal.recovery is not None:
            names.update(dict.fromkeys(metal.recovery.by_domain))
    return list(names) or [""]


def _grade_that_pays(
    terms: SellingTerms, column: str, cost: float, wet_per_dry: float, domain: str
) -> float | None:
    """Least grade of one metal whose net value meets the cost; narrowed down, since recoveries may bend."""
    highest = _HIGHEST[column.rpartition("_")[2]]

    def net(grades: np.ndarray) -> np.ndarray:
        rows: dict[str, object] = {metal.column: np.zeros(len(grades)) for metal in terms.metals}
        rows |= {column: grades, "dry_tonnes": 1.0, "wet_tonnes": wet_per_dry, "domain": domain}
        return block_value(pd.DataFrame(rows), terms).frame["net_value_per_dry_tonne"].to_numpy()

    # A coarse look first, because net value need not rise everywhere where recovery falls with grade.
    scan = np.concatenate([[0.0], np.geomspace(highest * 1e-6, highest, 400)])
    pays = net(scan) >= cost
    if not pays.any():
        return None
    first = int(np.argmax(pays))
    if first == 0:
        return 0.0
    low, high = scan[first - 1], scan[first]
    for _ in range(10):  # 64 parts each time: as narrow as 60 halvings, in a sixth of the calls
        steps = np.linspace(low, high, 65)[1:]
        found = int(np.argmax(net(steps) >= cost))  # the last one pays
        low, high = (steps[found - 1] if found else low), steps[found]
    return float(high)

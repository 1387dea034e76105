"""Scenarios that change value and cut-off alone: all in one pass over the blocks of the study as it is.

Such a scenario leaves the blocks, their classes and what screens take of them as they are, so only the selection is
made again. Where that cannot be said (terms that are not whole, a metal that is not there), the scenario is left to
the stages, which also tell why.
"""

from __future__ import annotations

from typing import Any

import pandas as pd

from sms_resource.reporting.rounding import cutoff_phrase
from sms_resource.study import Study, StudyError
from sms_resource.units import element_column
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.screening import kept
from sms_resource.workflow.tonnage_tables import SPECIAL, cutoff_column
from sms_resource.workflow.worth import cost_model, selling_terms

CHEAP = ("value", "cutoff")
NAMED = ("indicated", "inferred")  # classes that a row tells apart
Row = dict[str, float]


def is_cheap(changes: dict[str, Any]) -> bool:
    """Whether a scenario changes nothing but value and cut-off."""
    return bool(changes) and all(name.partition(".")[0] in CHEAP for name in changes)


def cutoff_words(config: Any) -> str:
    """The study's cut-off in words with its unit: ``CuEq ≥ 2 %``, ``net value ≥ 200 US$/t dry``."""
    if config.cutoff.variable not in SPECIAL:
        return cutoff_phrase(cutoff_column(config), config.cutoff.at)
    return cutoff_phrase(
        cutoff_column(config), config.cutoff.at,
        equivalent_in=element_column(config.value.equivalent_in), currency=config.value.currency,
    )  # fmt: skip


def measures_at(table: pd.DataFrame, at: float) -> Row:
    """Dry and wet tonnes, grades and contained metal at a cut-off, and the dry tonnes of the classes apart.

    Parameters
    ----------
    table : DataFrame
        From ``grade_tonnage``, by class, on one variable.
    """
    rows = table[table["cutoff"] == at]
    skip = {"cutoff_variable", "cutoff", "proposed_class"}
    whole = rows[rows["proposed_class"] == "all"].iloc[0]
    found = {str(name): float(value) for name, value in whole.items() if name not in skip}
    for name in NAMED:
        part = rows[rows["proposed_class"] == name]
        found[f"{name}_dry_tonnes"] = float(part["dry_tonnes"].iloc[0]) if len(part) else 0.0
    return found


def cheap_rows(study: Study, changes: list[dict[str, Any]], blocks: pd.DataFrame) -> dict[int, Row]:
    """Measures of scenarios of value and cut-off, as fresh runs give them, bit for bit.

    Parameters
    ----------
    study : Study
    changes : list of dict
        What each scenario changes; those that are not cheap are passed over.
    blocks : DataFrame
        Frame of the stage value of the study as it is.

    Returns
    -------
    dict
        Row by position in ``changes``. What is not here has to go through the stages.
    """
    left = kept(blocks)
    metals = metal_columns(study.config)
    grades = _Grades(left)
    found: dict[int, Row] = {}
    by_metal: dict[str, dict[int, float]] = {}
    by_worth: dict[int, tuple[Any, Any]] = {}
    for index, change in enumerate(changes):
        if not is_cheap(change):
            continue
        try:
            config = study.with_overrides(change).config
            terms, costs = selling_terms(config.value), cost_model(config.value)
        except (StudyError, ValueError):
            continue  # the stages tell what is wrong with it
        column = cutoff_column(config)
        if config.cutoff.variable in SPECIAL:
            scenario = _scenario(str(index), config, terms, costs)
            if scenario is not None and grades.whole(scenario):
                by_worth[index] = (scenario, config)
        elif grades.any((column,)):
            by_metal.setdefault(column, {})[index] = config.cutoff.at
    for column, wanted in by_metal.items():
        found.update(_by_metal(left, metals, column, wanted))
    found.update(_by_worth(left, blocks.loc[left.index], metals, by_worth))
    return found


def _by_metal(left: pd.DataFrame, metals: list[str], column: str, wanted: dict[int, float]) -> dict[int, Row]:
    """Rows where the cut-off is on a metal: one table of tonnes holds them all."""
    from sms_resource.economics import grade_tonnage

    table = grade_tonnage(left, metals=metals, cutoff_variable=column, cutoffs=sorted(set(wanted.values())))
    parts = table.groupby(table["cutoff"].astype(float))
    rows = {
        at: measures_at(part, at) for at, part in ((float(part["cutoff"].iloc[0]), part) for _, part in parts)
    }
    return {index: dict(rows[at]) for index, at in wanted.items()}


def _by_worth(
    left: pd.DataFrame, whole: pd.DataFrame, metals: list[str], wanted: dict[int, tuple[Any, Any]]
) -> dict[int, Row]:
    """Rows where the cut-off is on value or on an equivalent; ``whole`` has the blocks before the screens."""
    from sms_resource.economics import cheap_scenarios, grade_tonnage
    from sms_resource.economics.grade_tonnage import content_columns

    if not wanted:
        return {}
    table, findings = cheap_scenarios(
        left, [scenario for scenario, _ in wanted.values()], metals=metals, parts="proposed_class"
    )
    if findings.has_errors:  # the rooms differ on what is whole: the stages decide
        return {}
    for name in NAMED:
        if f"{name}_dry_tonnes" not in table:
            table[f"{name}_dry_tonnes"] = 0.0
    names = ["dry_tonnes", "wet_tonnes", *metals, *[c for metal in metals for c in content_columns(metal)]]
    names += [f"{name}_dry_tonnes" for name in NAMED]
    found: dict[int, Row] = {}
    columns = [table[name].to_list() for name in names]
    for position, (index, (scenario, config)) in enumerate(wanted.items()):
        if table["in_doubt"].iloc[position] == 0:
            found[index] = {name: float(column[position]) for name, column in zip(names, columns)}
            continue
        # a block on the very edge: its side depends on the order of the arithmetic, so that of the stage is used
        marked = left.assign(**{cutoff_column(config): _worth(scenario, whole)})
        single = grade_tonnage(
            marked, metals=metals, cutoff_variable=cutoff_column(config), cutoffs=[config.cutoff.at]
        )
        found[index] = measures_at(single, config.cutoff.at)
    return found


def _scenario(label: str, config: Any, terms: Any, costs: Any) -> Any:
    """The scenario as the economics room takes it; None where its terms are not whole."""
    from sms_resource.economics import CheapScenario, metal_equivalent

    if config.cutoff.variable == "value":
        if terms.check().has_errors:
            return None
        return CheapScenario(label, terms, costs, cutoff=config.cutoff.at)
    equivalent, found = metal_equivalent(terms, element_column(config.value.equivalent_in))
    if equivalent is None or found.has_errors:
        return None
    return CheapScenario(label, terms, costs, cutoff=config.cutoff.at, equivalent=equivalent)


class _Grades:
    """What of the grades is there, looked up once for each set of metals."""

    def __init__(self, left: pd.DataFrame) -> None:
        self.left = left
        self.domains = set(left["domain"].astype(str).unique())
        self.known: dict[tuple[str, ...], bool] = {}

    def any(self, names: tuple[str, ...]) -> bool:
        """Whether some block has all of these grades."""
        if names not in self.known:
            there = all(name in self.left for name in names)
            self.known[names] = there and bool(self.left[list(names)].notna().all(axis=1).any())
        return self.known[names]

    def whole(self, scenario: Any) -> bool:
        """Whether every domain has its recoveries and some block has every grade."""
        from sms_resource.economics.scenario_terms import needed_columns

        recoveries = [metal.recovery for metal in scenario.terms.metals if metal.recovery is not None]
        if any(item.by_domain and not self.domains <= set(item.by_domain) for item in recoveries):
            return False
        return self.any(needed_columns(scenario))


def _worth(scenario: Any, blocks: pd.DataFrame) -> Any:
    """What the stage cuts on: value or equivalent of each block, by the functions that the stage uses."""
    from sms_resource.economics import block_value

    if scenario.equivalent is not None:
        return scenario.equivalent.apply(blocks)
    return block_value(blocks, scenario.terms).frame["net_value_per_dry_tonne"].to_numpy()

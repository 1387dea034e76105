"""Values that are sound alone and not together, or that a number's type cannot rule out."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise
from typing import Any

from sms_resource import units
from sms_resource.study.sense_evidence import evidence_faults

# Dotted key, what is wrong, what to do.
Fault = tuple[str, str, str]

ESTIMATORS = ("matheron", "cressie", "dowd", "genton", "minmax", "percentile", "entropy")
DENSEST_TPM3 = 7.6  # galena, 7.60 by its cell; no bulk density of a sulphide is above it
MOST_POINTS = 4096


def value_faults(config: Any) -> Iterator[Fault]:
    """Every such fault of a study."""
    yield from _elements(config)
    yield from _domains(config)
    yield from _numbers(config)
    yield from _curves(config)
    yield from evidence_faults(config)


def _elements(config: Any) -> Iterator[Fault]:
    named: list[tuple[str, str]] = [
        ("screens.thickness_grade_of", config.screens.thickness_grade_of),
        ("value.equivalent_in", config.value.equivalent_in),
        *((f"checks.warn_above.{name}", name) for name in config.checks.warn_above),
        *((f"checks.error_above.{name}", name) for name in config.checks.error_above),
        *((f"search.restrain_above.{name}", name) for name in config.search.restrain_above),
        *((f"screens.host_grades.{name}", name) for name in config.screens.host_grades),
        *((f"composites.background.{name}", name)
          for name, value in config.composites.background.items() if not isinstance(value, dict)),
    ]  # fmt: skip
    if config.value.product is not None:
        named.append(("value.product.carrier", config.value.product.carrier))
    for dotted, name in named:
        if name.lower() not in units.ELEMENTS:
            yield dotted, f"'{name}' is not an element", f"Elements are {', '.join(units.ELEMENTS)}."
    screens = config.screens
    if screens.least_thickness_grade is not None and screens.thickness_grade_of not in config.metals.estimate:
        yield (
            "screens.thickness_grade_of", f"'{screens.thickness_grade_of}' is not estimated",
            f"Name one of {', '.join(config.metals.estimate)}.",
        )  # fmt: skip
    yield from _host(screens)


def _host(screens: Any) -> Iterator[Fault]:
    dry, wet = screens.host_dry_density_tpm3, screens.host_wet_density_tpm3
    if dry is not None and wet is not None and wet < dry:
        yield (
            "screens.host_wet_density_tpm3",
            f"{wet!r} t/m³ wet is under {dry!r} t/m³ dry",
            "Give both of the same rock.",
        )
    for name, grade in screens.host_grades.items():
        if not grade >= 0:
            yield f"screens.host_grades.{name}", f"a grade of {grade!r}", "A grade is at least 0."


def _domains(config: Any) -> Iterator[Fault]:
    sulphide = config.domains.sulphide
    if len(set(sulphide)) != len(sulphide):
        yield "domains.sulphide", "a domain is named twice", "Name each domain once, from the seafloor down."
    for section, named in (
        ("domains.thickness_m", config.domains.thickness_m),
        ("density.assigned_dry_tpm3", config.density.assigned_dry_tpm3),
        ("density.porosity_fraction", config.density.porosity_fraction),
    ):
        for domain in named:
            if domain not in sulphide:
                yield f"{section}.{domain}", f"domain '{domain}' is not in domains.sulphide", (
                    f"Name one of {', '.join(sulphide)}."
                )  # fmt: skip


def _numbers(config: Any) -> Iterator[Fault]:
    if config.composites.shortest_m > config.composites.length_m:
        yield (
            "composites.shortest_m", "the shortest rest is longer than a composite",
            "Keep composites.shortest_m at or under composites.length_m.",
        )  # fmt: skip
    for domain, value in config.density.assigned_dry_tpm3.items():
        if not all(0 < number <= DENSEST_TPM3 for number in _several(value)):
            yield (
                f"density.assigned_dry_tpm3.{domain}", f"a density of {value} t/m3 is outside 0 to {DENSEST_TPM3}",
                "Give tonnes per cubic metre.",
            )  # fmt: skip
    for domain, value in config.density.porosity_fraction.items():
        if not all(0 <= number < 1 for number in _several(value)):
            yield (
                f"density.porosity_fraction.{domain}", f"a porosity of {value} is not a fraction from 0 to below 1",
                "Divide per cent by 100.",
            )  # fmt: skip
    for domain, value in config.domains.thickness_m.items():
        if not value >= 0:
            yield f"domains.thickness_m.{domain}", f"a thickness of {value} m is below zero", "Give metres."
    for domain, cuts in config.top_cuts.cuts.items():
        for element, value in cuts.items():
            if not value > 0:
                yield (
                    f"top_cuts.cuts.{domain}.{element}",
                    f"a top cut of {value} is not above zero",
                    "Raise it.",
                )
    search = config.search
    if search.least_holes > search.most_samples:
        yield "search.least_holes", "least_holes is above most_samples", "Lower it."
    for dotted, lengths in (
        ("search.radii_m", search.radii_m),
        ("search.passes", search.passes),
        ("blocks.size_m", config.blocks.size_m),
    ):
        if lengths is not None and not min(lengths) > 0:
            yield dotted, f"{list(lengths)} holds a number that is not above zero", "Give numbers above zero."
    points = config.kriging.discretisation
    if min(points) < 1 or points[0] * points[1] * points[2] > MOST_POINTS:
        yield (
            "kriging.discretisation", f"{list(points)} is not 1 to {MOST_POINTS:,} points a block",
            "Three to five a side are enough: a block's variance hardly changes beyond.",
        )  # fmt: skip
    if config.variograms.estimator not in ESTIMATORS:
        yield (
            "variograms.estimator", f"'{config.variograms.estimator}' is not an estimator",
            f"Estimators are {', '.join(ESTIMATORS)}.",
        )  # fmt: skip
    for domain, by_element in config.variograms.models.items():
        for element, choice in by_element.items():
            ranges = [item.ranges_m for item in choice.structures or ()] + [choice.ranges_m or (1.0,)]
            if min(min(triple) for triple in ranges) <= 0:
                yield (
                    f"variograms.models.{domain}.{element}",
                    "a range is not above zero",
                    "Give metres above zero.",
                )
    yield from _cutoffs(config)


def _cutoffs(config: Any) -> Iterator[Fault]:
    steps = {"cutoff.steps": config.cutoff.steps}
    steps |= {f"cutoff.curves.{name}": value for name, value in config.cutoff.curves.items()}
    for dotted, row in steps.items():
        if not isinstance(row, str) and any(step < 0 for step in row):
            yield dotted, "a cut-off is below zero", "Give grades or values of zero and more."
    for name in config.cutoff.curves:
        if name not in (*config.metals.estimate, "equivalent", "value"):
            yield (
                f"cutoff.curves.{name}", f"a curve is asked for on '{name}', which is not estimated",
                f"Name one of {', '.join(config.metals.estimate)}, equivalent or value.",
            )  # fmt: skip


def _curves(config: Any) -> Iterator[Fault]:
    for element, metal in config.value.metals.items():
        grades = [grade for grade, _ in metal.recovery_by_grade]
        shares = [share for _, share in metal.recovery_by_grade] + list(metal.recovery_by_domain.values())
        if any(after <= before for before, after in pairwise(grades)):
            yield (
                f"value.metals.{element}.recovery_by_grade", "the grades of a recovery curve do not rise",
                "List its points from the lowest grade up.",
            )  # fmt: skip
        if any(not 0 <= share <= 100 for share in shares):
            yield f"value.metals.{element}", "a recovery is outside 0 to 100 %", "Give per cent."
    factors = config.value.costs.slope_factors
    if any(after[0] <= before[0] for before, after in pairwise(factors)) or any(
        item[1] <= 0 for item in factors
    ):
        yield (
            "value.costs.slope_factors", "the slopes do not rise, or a factor is not above zero",
            "List points of (slope in degrees, factor above zero) from the flattest up.",
        )  # fmt: skip
    if config.cutoff.variable == "equivalent" and config.value.metals:
        yield from _equivalent(config.value)
    for role in ("bathymetry", "base_grid"):
        grid = getattr(config.data, role)
        if grid is not None and grid.uncertainty_band == grid.band:
            yield (
                f"data.{role}.uncertainty_band", f"band {grid.band} is named as elevation and as uncertainty",
                "Name two bands.",
            )  # fmt: skip


def _equivalent(value: Any) -> Iterator[Fault]:
    """What a cut-off on an equivalent would be refused for at the end of a run."""
    if value.equivalent_in not in value.metals:
        yield (
            "value.equivalent_in", f"'{value.equivalent_in}' is not among the metals of [value]",
            f"Name one of {', '.join(value.metals)}, or give its price, recovery and payability.",
        )  # fmt: skip
    for name, metal in value.metals.items():
        if metal.payable_pct == 0:
            continue
        recovery = (
            metal.recovery_pct,
            metal.recovery_by_grade,
            metal.recovery_by_domain,
            metal.equivalent_recovery_pct,
        )
        missing = [
            what
            for what, given in (
                ("price", metal.price is not None),
                ("recovery", any(item not in (None, (), [], {}) for item in recovery)),
                ("payability", metal.payable_pct is not None),
            )
            if not given
        ]
        if missing:
            yield (
                f"value.metals.{name}", f"the cut-off is on an equivalent, and {name} has no {' and no '.join(missing)}",
                f"Give what is missing (payable_pct = 0 if it is not paid), or take {name} out of [value.metals].",
            )  # fmt: skip


def _several(value: Any) -> tuple[float, ...]:
    return tuple(value) if isinstance(value, tuple | list) else (value,)

"""Values of the samples' sections that are sound alone and not together, or that a type cannot rule out."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from sms_resource import units

Fault = tuple[str, str, str]

# Minerals of the norm and ratios that trace supply, as the samples room has them (a test holds them to it).
MINERALS = (
    "chalcopyrite", "bornite", "covellite", "chalcocite", "sphalerite", "galena", "barite", "anhydrite", "tennantite",
    "tetrahedrite", "pyrite", "pyrrhotite", "magnetite", "silica", "quartz",
)  # fmt: skip
TRACERS = ("cu/mo", "cu/zn")


def evidence_faults(config: Any) -> Iterator[Fault]:
    """Every such fault of the sections on samples, laboratory and density."""
    yield from _density(config)
    yield from _laboratory(config)
    yield from _background(config)
    for ratio, value in config.associations.tracer_thresholds.items():
        dotted = f"associations.tracer_thresholds.{ratio}"
        if ratio not in TRACERS:
            yield dotted, f"'{ratio}' is not a tracer", f"Tracers are {' and '.join(TRACERS)}."
        elif not value > 0:
            yield dotted, f"a ratio of {value!r} is not above zero", "Give a ratio by mass."
    surface = config.surface_samples
    if surface.use == "cap" and surface.cap_domain not in config.domains.sulphide:
        yield (
            "surface_samples.cap_domain",
            f"domain '{surface.cap_domain}' is not in domains.sulphide, so no block would take the cap",
            f"Name one of {', '.join(config.domains.sulphide)}, or add it there with a thickness in domains.thickness_m.",
        )
    if not config.assays.methods:
        yield "assays.methods", "no method is accepted, so no assay is left", "Name at least one."


def _density(config: Any) -> Iterator[Fault]:
    choice = config.density
    for section, given in (
        ("assigned_dry_tpm3", choice.assigned_dry_tpm3),
        ("porosity_fraction", choice.porosity_fraction),
    ):
        for domain, value in given.items():
            if isinstance(value, tuple | list) and list(value) != sorted(value):
                yield (
                    f"density.{section}.{domain}",
                    f"{list(value)} does not rise",
                    "List low, base and high.",
                )
    for element in choice.predictors:
        if element not in units.ELEMENTS:
            yield (
                "density.predictors",
                f"'{element}' is not an element",
                f"Elements are {', '.join(units.ELEMENTS)}.",
            )
    if choice.method == "regression" and not choice.predictors:
        yield (
            "density.predictors",
            "a regression needs at least one element",
            "Name those that follow density.",
        )
    for dotted, mineral in (
        ("density.rest_mineral", choice.rest_mineral),
        *((f"density.rest_by_domain.{domain}", name) for domain, name in choice.rest_by_domain.items()),
    ):
        if mineral not in MINERALS:
            yield dotted, f"'{mineral}' is not a mineral of the norm", f"Minerals are {', '.join(MINERALS)}."
    for domain in choice.rest_by_domain:
        if domain not in config.domains.sulphide:
            yield (
                f"density.rest_by_domain.{domain}", f"domain '{domain}' is not in domains.sulphide",
                f"Name one of {', '.join(config.domains.sulphide)}.",
            )  # fmt: skip


def _laboratory(config: Any) -> Iterator[Fault]:
    for element, stages in config.laboratory.pair_limits.items():
        if element not in units.ELEMENTS:
            yield (
                f"laboratory.pair_limits.{element}", f"'{element}' is not an element",
                f"Elements are {', '.join(units.ELEMENTS)}.",
            )  # fmt: skip
        for stage, (good, acceptable) in stages.items():
            if not 0 < good <= acceptable:
                yield (
                    f"laboratory.pair_limits.{element}.{stage}",
                    f"{good!r} good and {acceptable!r} acceptable are not two rising percentages above zero",
                    "Give the CVavg that is good, then that which is still acceptable.",
                )


def _background(config: Any) -> Iterator[Fault]:
    every = {*config.domains.sulphide, *config.domains.codes.values(), config.domains.unlogged}
    if config.domains.layout == "single":
        every.add("sulphide")  # what the stages call the joined domain
    for name, value in config.composites.background.items():
        dotted = f"composites.background.{name}"
        if not isinstance(value, dict):
            if not value >= 0:
                yield dotted, f"a grade of {value!r}", "A grade is at least 0."
            continue
        if name not in every:
            yield dotted, f"'{name}' is not a domain", f"Domains are {', '.join(sorted(every))}."
        for element, grade in value.items():
            if element not in units.ELEMENTS:
                yield (
                    f"{dotted}.{element}",
                    f"'{element}' is not an element",
                    f"Elements are {', '.join(units.ELEMENTS)}.",
                )
            elif not grade >= 0:
                yield f"{dotted}.{element}", f"a grade of {grade!r}", "A grade is at least 0."

"""Section about what a study without drilling may state: an exploration target, as ranges only."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from sms_resource.study.base import Section, key

Fault = tuple[str, str, str, str]


class Exploration(Section):
    """[exploration]: a study with surface samples and an outline and no drilling ends in ranges, and in no estimate."""

    thickness_low_m: float | None = key(
        None,
        "Least upright thickness of sulphide under the outline; stated by a geologist, no default.",
        gt=0,
    )
    thickness_high_m: float | None = key(
        None, "Greatest upright thickness of sulphide under the outline.", gt=0
    )
    surface_divisor: dict[str, float] = key(
        {},
        "By element: what the lower quartile of the surface samples is divided by to make the low end of its range, since "
        "they are richer than the body below. Where none is stated, the low end is left to the Competent Person.",
    )


def target_faults(config: Any) -> Iterator[Fault]:
    """Dotted key, code, what is wrong and what to do: of a study without drilling."""
    choice = config.exploration
    low, high = choice.thickness_low_m, choice.thickness_high_m
    for name, value in (("thickness_low_m", low), ("thickness_high_m", high)):
        if value is None:
            yield (
                f"exploration.{name}", "study-value-missing", "an exploration target needs a range of thickness",
                "State the least and the greatest thickness in metres, and on what, in [reasons].",
            )  # fmt: skip
    if low is not None and high is not None and not low < high:
        yield (
            "exploration.thickness_high_m", "study-value", f"the thickness runs from {low:g} to {high:g} m",
            "An exploration target states ranges: give a high above the low.",
        )  # fmt: skip
    if config.data.outline is None:
        yield (
            "data.outline", "study-value-missing", "no outline is given, so no area is known",
            "Add [data.outline]; without holes the tool proposes none.",
        )  # fmt: skip
    if not config.density.assigned_dry_tpm3:
        yield (
            "density.assigned_dry_tpm3", "study-value-missing", "an exploration target needs a dry density, or its range",
            "State low, base and high for a domain, such as massive = [2.4, 3.0, 3.6].",
        )  # fmt: skip
    for element, value in choice.surface_divisor.items():
        dotted = f"exploration.surface_divisor.{element}"
        if element not in config.metals.estimate:
            yield dotted, "study-metal", f"'{element}' is not in metals.estimate", "Name one that is."
        elif not value >= 1.0:
            yield (
                dotted, "study-value", f"a divisor of {value:g} would make surface samples poorer than the body",
                "Give 1 or more.",
            )  # fmt: skip
    for role in ("surveys", "runs", "lithology", "assays", "densities"):
        if getattr(config.data, role) is not None:
            yield (
                f"data.{role}", "study-value", f"{role} are given and no collars", "Add [data.collars], or take it out.",
            )  # fmt: skip

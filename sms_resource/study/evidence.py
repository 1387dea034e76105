"""Sections about the samples: what is read, repaired, joined and weighed before anything is estimated."""

from __future__ import annotations

import datetime
from typing import Literal

from pydantic import field_validator

from sms_resource import units
from sms_resource.study.base import Section, key


class About(Section):
    """[study]: what the estimate is, and for whom."""

    name: str = key(..., "Name of the deposit or of the estimate.", decision=False)
    effective_date: datetime.date = key(..., "Date at which the data were closed.", decision=False)
    crs: str = key(..., 'Projected coordinate system of all positions, such as "EPSG:32702".', decision=False)
    vertical_datum: str = key(
        "not stated", "Vertical datum that holes and grid share, with the tide correction.", decision=False
    )
    prepared_by: str = key("not stated", "Who prepared the estimate.", decision=False)
    competent_person: str = key("not named", "Competent Person for whom the draft is made.", decision=False)
    jurisdiction: Literal["area", "national"] = key(
        "area",
        "Where the deposit lies: in the Area (International Seabed Authority) or in national waters.",
        decision=False,
    )
    reporting_standard: str = key(
        "CRIRSCO International Reporting Template, November 2019",
        "Standard and edition that the draft follows; its text rules.", decision=False,
    )  # fmt: skip
    site_visit: str = key("", "Who of the team was on site, and when; empty if nobody was.", decision=False)
    seed: int = key(1, "Seed of every random number of the run.", ge=0)


class Prospects(Section):
    """[prospects]: who judged the reasonable prospects for eventual economic extraction, and on what."""

    judged: bool = key(
        False, "Whether the prospects were judged. If not, tables are block-model tallies everywhere."
    )
    by: str = key("", "Who judged.", decision=False)
    basis: str = key("", "On what basis.", decision=False)


class Metals(Section):
    """[metals]: which elements are estimated and which are only summarised."""

    estimate: tuple[str, ...] = key(
        ("cu", "zn", "au", "ag"), "Elements estimated into the blocks.", min_length=1
    )
    summarise: tuple[str, ...] = key(
        ("pb", "as", "fe", "ba", "sio2", "mo"), "Elements read and summarised, not estimated.", decision=False
    )

    @field_validator("estimate", "summarise")
    @classmethod
    def _known(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        for element in value:
            units.element_column(element)
        if len(set(value)) != len(value):
            raise ValueError("an element is named twice")
        return value


class Checks(Section):
    """[checks]: guards and tolerances of the checks of the data."""

    warn_above: dict[str, float] = key(
        {"cu": 35.0, "zn": 50.0, "au": 100.0, "ag": 2000.0},
        "Grades, in each element's own unit, above which a warning is given.", decision=False,
    )  # fmt: skip
    error_above: dict[str, float] = key(
        {"cu": 80.0, "zn": 67.1},
        "Grades above which no sulphide mineral can hold the metal: an error.",
        decision=False,
    )
    collar_tolerance_m: float = key(
        1.0, "Vertical mismatch of a collar with the seafloor that is flagged.", gt=0
    )
    far_below_m: float = key(
        100.0, "Depth below the seafloor beyond which a sample is doubted.", gt=0, decision=False
    )
    recovery_limit_pct: float = key(
        110.0, "Recovery above which a run is an error; 100 to this is a warning.", ge=100
    )
    twin_distance_m: float = key(3.0, "Distance within which two holes are twins.", gt=0)


class Assays(Section):
    """[assays]: how values that are not plain numbers are used."""

    below_detection: Literal["half", "zero", "as_is", "ros"] = key(
        "half", "Value of a result below detection: half the limit, zero, the limit, or from order statistics (ros).",
        alternatives=("zero", "as_is", "ros"),
    )  # fmt: skip
    over_limit: Literal["at_limit", "missing"] = key(
        "at_limit",
        "Value of a result over the upper limit: the limit itself, or missing.",
        alternatives=("missing",),
    )
    methods: tuple[str, ...] = key(
        ("laboratory",), "Analytical methods that are accepted; handheld readings stay out unless named here."
    )


class Position(Section):
    """[position]: collars against the seafloor."""

    collars: Literal["keep", "shift_median", "snap"] = key(
        "keep", "Vertical position of collars: kept, all shifted by the median mismatch, or each snapped to the grid.",
        alternatives=("shift_median", "snap"),
    )  # fmt: skip
    sigma_m: float = key(5.0, "Horizontal standard error of a collar where the table states none.", ge=0)


class Domains(Section):
    """[domains]: from logged codes to the bodies that are estimated apart."""

    codes: dict[str, str] = key({}, 'Domain of each logged code, such as MSC = "massive".')
    sulphide: tuple[str, ...] = key(
        ("massive",), "Domains that make up the body, from the seafloor down.", min_length=1
    )
    unlogged: str = key("waste", "Domain of codes that are not named, and of depths without a log.")
    layout: Literal["layered", "single", "indicator", "signed_distance"] = key(
        "layered", "How domains fill the body: as layers between contact surfaces, one domain throughout, or the likeliest "
        "of the logged domains by indicator kriging or by signed distance, with the probability kept.",
        alternatives=("single",),
    )  # fmt: skip
    logged_range_m: float = key(
        40.0, "Range in the plane of the logged domains, for indicator and signed distance.", gt=0
    )
    logged_vertical_range_m: float = key(6.0, "Upright range of the logged domains.", gt=0)
    thickness_m: dict[str, float] = key(
        {}, "Thickness of a layer, such as cap = 1.5, in place of its logged contact."
    )
    boundaries: Literal["hard", "soft"] = key(
        "hard", "Whether an estimate uses samples of its own domain only (hard) or of all domains of the body (soft).",
        alternatives=("soft",),
    )  # fmt: skip


class Composites(Section):
    """[composites]: joining samples to one length inside one domain."""

    length_m: float = key(1.0, "Length of a composite.", gt=0, le=50, alternatives=(0.5, 2.0))
    shortest_m: float = key(0.5, "Shortest rest at a contact that stays a composite of its own.", ge=0)
    short_rest: Literal["merge", "keep", "drop", "spread"] = key(
        "merge",
        "What becomes of a shorter rest: merged with its neighbour, kept, dropped, or spread over all composites.",
        alternatives=("keep", "drop", "spread"),
    )
    weighting: Literal["recovered_length", "length", "recovered_length_density"] = key(
        "recovered_length",
        "Weight of a sample inside its composite, and of a composite in a mean.",
        alternatives=("length",),
    )
    lost_core: Literal["unknown", "represented", "background", "neighbour_mean"] = key(
        "unknown",
        "What stands for lost core: nothing (unknown), the recovered grade of the run, a background grade "
        "(floor), or the mean of poorly recovered intervals nearby.",
        alternatives=("represented", "background", "neighbour_mean"),
    )
    background: dict[str, float | dict[str, float]] = key(
        {},
        "Background grade of each element, or of each domain and element, for lost core; zero if not named.",
    )
    neighbour_recovery_pct: float = key(
        50.0,
        'Recovery under which an interval counts as poorly recovered, for lost_core = "neighbour_mean".',
        gt=0,
        le=100,
    )
    neighbour_distance_m: float = key(
        50.0, "Distance within which poorly recovered intervals are averaged.", gt=0
    )
    least_recovery_pct: float = key(
        0.0, "Recovery under which an interval is treated as not sampled.", ge=0, le=100
    )


class SurfaceSamples(Section):
    """[surface_samples]: what samples from the seafloor may do."""

    use: Literal["none", "outline", "cap"] = key(
        "none", "Surface samples stay out of the estimate (none), support the outline that is proposed (outline), or are "
        "samples of a thin cap, a domain of its own (cap).",
    )  # fmt: skip
    cap_domain: str = key("cap", 'Domain that they estimate, for use = "cap".')
    cap_thickness_m: float = key(1.0, "Thickness of the cap that they stand for.", gt=0)
    cap_types: tuple[Literal["grab", "chimney", "push_core", "gravity_core"], ...] = key(
        ("push_core", "gravity_core"), "Types of sample that the cap takes; a dredge never."
    )
    compare_within_m: float = key(30.0, "Distance within which a surface sample is compared with core.", gt=0)


class TopCuts(Section):
    """[top_cuts]: restraint of extreme grades before the estimate."""

    apply: Literal["none", "given", "proposed"] = key(
        "none", "No cut, the cuts given here, or the cuts that the study of extreme grades proposes.",
        alternatives=("none", "proposed"),
    )  # fmt: skip
    cuts: dict[str, dict[str, float]] = key({}, "Cut by domain and element, in the element's unit.")


class Laboratory(Section):
    """[laboratory]: limits of the control of assays."""

    blank_limits: float = key(5.0, "Detection limits above which a blank fails.", gt=0)
    family_error: float = key(
        0.001, "Chance of accusing any good batch, over all batches and elements.", gt=0, lt=1
    )
    pair_limits: dict[str, dict[Literal["field", "coarse", "pulp"], tuple[float, float]]] = key(
        {}, "CVavg (%) of duplicates that is good, and that is still acceptable, by element and stage."
    )
    confidence: float = key(0.95, "Confidence of intervals of check assays.", gt=0, lt=1)


class Associations(Section):
    """[associations]: metal ratios as tracers of supply; shown as plots, never as a verdict."""

    tracer_thresholds: dict[str, float] = key(
        {}, 'Ratio by mass above which a tracer is called high, such as "cu/mo" = 500.'
    )


Amount = float | tuple[float, float, float]


class Density(Section):
    """[density]: dry and wet bulk density of each domain."""

    method: Literal["measured_mean", "regression", "mineralogy", "assigned"] = key(
        "measured_mean", "Where densities come from.", alternatives=("regression", "mineralogy", "assigned")
    )
    salinity_gkg: float = key(
        35.0, "Salinity of the pore water, for the salt correction of measured densities.", ge=0, le=300
    )
    pore_water_tpm3: float | None = key(
        None,
        "Density of the pore water; of seawater by TEOS-10 if not given. A brine over 42 g/kg needs it.",
        gt=0.9,
        lt=1.4,
    )
    dry_contains_salt: bool = key(
        False, "Whether measured dry densities still hold the salt of the dried pore water."
    )
    assigned_dry_tpm3: dict[str, Amount] = key(
        {},
        'Dry density by domain, or its low, base and high, where none can be measured or method = "assigned".',
    )
    porosity_fraction: dict[str, Amount] = key(
        {}, 'Porosity by domain, or its low, base and high, for method = "mineralogy" and for wet density.'
    )
    predictors: tuple[str, ...] = key(
        ("cu", "zn", "fe"),
        'Elements of the regression, for method = "regression"; only those that blocks carry can be used.',
    )
    copper_mineral: Literal["chalcopyrite", "bornite", "covellite", "chalcocite"] = key(
        "chalcopyrite", 'Mineral that holds the copper, for method = "mineralogy".'
    )
    rest_mineral: str = key("silica", "Mineral that fills up to 100 %.")
    rest_by_domain: dict[str, str] = key(
        {}, 'Mineral that fills up in a domain, such as stockwork = "quartz".'
    )
    confidence: float = key(0.9, "Confidence of the low and high densities.", gt=0, lt=1)
    least_count: int = key(10, "Number of measurements under which a domain's density is called few.", ge=1)
    factor: float = key(1.0, "Factor on every dry density; for scenarios.", gt=0, alternatives=(0.95, 1.05))

"""What a report is made from: plain frames, mappings and small types, grouped by the part of the story.

Every field may be absent (None, an empty frame or an empty tuple). What is absent is not drawn, and where
its absence matters (density, laboratory quality, reasonable prospects) the report says so as a caution.
Grades stand in columns named after their element and unit (``cu_pct``, ``au_gpt``); ``<metals>`` below means
one such column for each metal of ``Subject.metals``. Tonnages are dry or wet by name. Missing numbers are NaN.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Protocol

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.reporting.data_evidence import Evidence
from sms_resource.reporting.data_evidence import LaboratoryEvidence as LaboratoryEvidence

Frame = pd.DataFrame


class Surface(Protocol):
    """What the figures need of a surface: the ``SurfaceGrid`` of the blocks room has all of it.

    ``x`` (nx,) and ``y`` (ny,) are cell centres in metres, south-west first; ``values`` (ny, nx), NaN nodata.
    """

    values: NDArray[np.float64]

    @property
    def x(self) -> NDArray[np.float64]:
        """Eastings of the columns (m)."""
        ...

    @property
    def y(self) -> NDArray[np.float64]:
        """Northings of the rows (m)."""
        ...

    def sample(self, x: NDArray[np.float64], y: NDArray[np.float64]) -> NDArray[np.float64]:
        """Bilinear values at points; NaN outside."""
        ...


@dataclass(frozen=True)
class Subject:
    """Who, what, where, and the decisions that change the labels of the whole report.

    ``cutoff`` : ``{"variable": "cu_pct", "value": 2.0, "basis": str, "currency": str, "date": str}``; for an
    equivalent also ``equivalent_in``, the grade column that it is in.
    ``prospects`` : ``{"judged_by": str, "basis": str, "date": str}``; both of the first two must say something,
    or every tonnage is labelled a block-model tally.
    ``site_visit`` : ``{"who": str, "date": str, "statement": str}``.
    ``jurisdiction`` : ``"area"`` (the Authority's standard), ``"national"`` (a coastal State), or free text.
    ``deleterious`` : element columns summarised or estimated as deleterious; ``deleterious_estimated`` the
    part of them that the block model carries.
    """

    title: str = "Seafloor massive sulphide estimate"
    deposit: str = ""
    author: str = ""
    competent_person: str = ""
    effective_date: str = ""
    reporting_standard: str = ""
    jurisdiction: str = ""
    crs: str = ""
    vertical_datum: str = ""
    metals: tuple[str, ...] = ()
    deleterious: tuple[str, ...] = ()
    deleterious_estimated: tuple[str, ...] = ()
    cutoff: Mapping[str, Any] | None = None
    prospects: Mapping[str, Any] | None = None
    site_visit: Mapping[str, Any] | None = None
    significant_figures: int = 2
    inferred_figures: int = 2
    exaggeration: float = 2.0
    section_azimuth_deg: float | None = None
    section_count: int = 4
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class BodyEvidence:
    """The body between seafloor and base.

    ``seafloor``, ``base``, ``thickness``, ``thickness_sigma`` : surfaces (m). ``outline`` : shapely geometry.
    ``exclusions`` : GeoDataFrame with name, status, buffer_m, geometry (already buffered or not: drawn as given).
    ``volumes`` : volume_m3, drilled_m3, sideways_m3, downwards_m3. ``extrapolation`` : greatest_distance_m,
    basis (text), and optionally share_pct. ``contacts`` : hole_id, easting, northing, thickness_m, kind
    ("reached" | "open"). ``audit`` : free columns. ``geometry_uncertainty`` : case, volume_m3, dry_tonnes,
    change_pct (optional wet_tonnes). ``grid_proposal`` : free columns (what is proposed and why).
    ``method`` : how the base was interpolated, in words. ``waterfall`` : step, dry_tonnes (what the step takes,
    negative, or what stands at "start" / "end"), kind ("total" | "taken"); optional <metals> (here contained metal
    in tonnes); kinds "cut-off" and "skin" (loss, dilution) may follow the screens.
    ``sigma_seafloor_m`` : one sigma of the seafloor; ``sigma_seafloor_from`` : "file" or "study". ``slope``
    (degrees), ``roughness`` (m) : surfaces over ``footprint_m``. ``slope_classes`` : slope (words), area_m2,
    dry_tonnes, wet_tonnes, share_pct. ``splits`` : "domain", "bench", "screen" -> table of tonnes with
    that column beside proposed_class. ``skins`` : step, dry_tonnes, wet_tonnes, <metals> before and after loss and
    dilution; ``skins_rule`` : depths and host, in words.
    """

    seafloor: Surface | None = None
    base: Surface | None = None
    thickness: Surface | None = None
    thickness_sigma: Surface | None = None
    outline: Any = None
    exclusions: Any = None
    volumes: Mapping[str, float] | None = None
    extrapolation: Mapping[str, Any] | None = None
    contacts: Frame | None = None
    audit: Frame | None = None
    geometry_uncertainty: Frame | None = None
    grid_proposal: Frame | None = None
    method: str = ""
    waterfall: Frame | None = None
    sigma_seafloor_m: float | None = None
    sigma_seafloor_from: str = "study"
    slope: Surface | None = None
    roughness: Surface | None = None
    footprint_m: float = 0.0
    slope_classes: Frame | None = None
    splits: Mapping[str, Frame] | None = None
    skins: Frame | None = None
    skins_rule: str = ""


@dataclass(frozen=True)
class VariogramRecord:
    """One variogram as the report shows it.

    ``experimental`` : label, kind, distance, gamma, pairs, and where known azimuth, plunge (degrees); one row a
    lag. ``model`` : an object with ``variogram(separations (n, 3)) -> (n,)``, nugget, structures, azimuth,
    plunge, tilt (the ``VariogramModel`` of the geostatistics room), or None. ``intervals`` : parameter, low,
    best, high (jackknife over holes). ``measure`` : what ``experimental`` is a variogram of; where that is not the
    semivariogram, ``fitted_model`` is the model in that measure, before it was turned back to ``model``.
    ``plane_map`` : along_m, across_m, gamma, pairs; one row a cell of the map in the plane of the body.
    """

    metal: str
    domain: str = "all"
    experimental: Frame | None = None
    model: Any = None
    statement: str = ""
    assumed: tuple[str, ...] = ()
    bounds_hit: tuple[str, ...] = ()
    nugget_from: str = ""
    intervals: Frame | None = None
    sample_count: int = 0
    hole_count: int = 0
    measure: str = "semivariogram"
    plane_map: Frame | None = None
    plane_map_measure: str = "normal scores"
    fitted_model: Any = None

    @property
    def drawn_model(self) -> Any:
        """The model in the measure of ``experimental``."""
        return self.model if self.fitted_model is None else self.fitted_model

    @classmethod
    def from_inference(cls, metal: str, domain: str, inference: Any) -> VariogramRecord:
        """Take what the report shows from a ``VariogramInference`` of the geostatistics room."""
        frames = []
        for item in inference.experimental:
            frame = item.to_frame().rename(columns={"distance_m": "distance"})
            for name in ("label", "kind", "azimuth", "plunge"):
                if name not in frame:
                    frame[name] = getattr(item, name, np.nan)
            frames.append(frame)
        return cls(
            metal=metal,
            domain=domain,
            experimental=pd.concat(frames, ignore_index=True) if frames else None,
            model=inference.model,
            statement=str(inference.statement),
            assumed=tuple(inference.assumed),
            bounds_hit=tuple(inference.bounds_hit),
            nugget_from=str(inference.nugget_from),
            intervals=inference.intervals,
            sample_count=int(inference.sample_count),
            hole_count=int(inference.hole_count),
            measure=str(getattr(inference, "measure", "semivariogram")),
            fitted_model=getattr(inference, "fitted_model", None),
        )


@dataclass(frozen=True)
class Estimation:
    """The block estimate and its checks.

    ``settings`` : label -> value, shown as a list (method, block size, discretisation, search, frame).
    ``blocks`` : the block frame of the result folder: i, j, k, easting, northing, elevation, volume_m3,
    body_fraction, domain, dry_density_tpm3, dry_tonnes, wet_tonnes, <metals>, proposed_class; optional
    extrapolation ("drilled" | "sideways" | "downwards"), nearest_distance_m, slope columns.
    ``grid`` : origin (x0, y0, z0), size (dx, dy, dz), shape (ni, nj, nk), azimuth (degrees).
    ``means`` : metal, domain, composite_mean, declustered_mean, block_mean, difference_pct.
    ``swaths`` : axis ("easting" | "northing" | "elevation" | "along" | "across"), column (metal), centre_m,
    sample_count, sample_mean, declustered_mean, block_mean, and ``<name>_mean`` of other estimators.
    ``leave_one_out`` : column, true, estimate, error, standardised_error, optional domain, hole_id.
    ``leave_one_out_summary`` : free columns. ``estimators`` : metal, then one column an estimator (mean grade).
    ``change_of_support`` : metal, cutoff, support ("blocks" | "discrete gaussian" | "affine" | "composites"),
    proportion, grade. ``support_variance`` : metal, domain, realised, theoretical, ratio.
    ``neighbourhood`` : varied ("samples" | "block_size" | "discretisation"), setting (text), used (bool), slope,
    efficiency, negative_weight_sum, operations_per_target; free otherwise.
    ``neighbourhood_note`` : its recommendation. ``frames_effect`` : frame, <metals> or error columns.
    ``checks`` : check, subject, value, limit, verdict ("pass" | "flag" | "fail").
    """

    settings: Mapping[str, Any] | None = None
    blocks: Frame | None = None
    grid: Mapping[str, Any] | None = None
    means: Frame | None = None
    swaths: Frame | None = None
    leave_one_out: Frame | None = None
    leave_one_out_summary: Frame | None = None
    estimators: Frame | None = None
    change_of_support: Frame | None = None
    support_variance: Frame | None = None
    neighbourhood: Frame | None = None
    neighbourhood_note: str = ""
    frames_effect: Frame | None = None
    checks: Frame | None = None


@dataclass(frozen=True)
class Classes:
    """Proposed classes.

    ``criteria`` : label -> value. ``reasons`` : proposed_class, reason, blocks, dry_tonnes.
    ``before_after`` : proposed_class, by_criteria_dry_tonnes, after_rules_dry_tonnes, smoothed_dry_tonnes,
    final_dry_tonnes. ``overrides`` : name, proposed_class, by, reason, blocks, dry_tonnes. ``flags`` : sentences.
    ``exploration_target`` : dry_tonnes_low, dry_tonnes_high, grades {metal: (low, high)}, basis.
    """

    criteria: Mapping[str, Any] | None = None
    reasons: Frame | None = None
    before_after: Frame | None = None
    overrides: Frame | None = None
    flags: tuple[str, ...] = ()
    exploration_target: Mapping[str, Any] | None = None


@dataclass(frozen=True)
class ValueEvidence:
    """Tonnes above cut-offs, value and scenarios.

    ``grade_tonnage`` : cutoff_variable, cutoff, proposed_class (and "all"), dry_tonnes, wet_tonnes, <metals>;
    optional domain ("all" rows are used).
    ``beside_support`` : cutoff, block_dry_tonnes, block_grade, support_dry_tonnes, support_grade, tonnes_difference_pct
    (all classes; the blocks beside a model of change of support). ``by_value`` : cutoff, dry_tonnes, value_by_grade,
    value_by_value, gain (the same tonnes chosen by grade and by value).
    ``mineable_shape`` : method ("cut-off alone" and each shape), dry_tonnes, wet_tonnes, <metals>, below_dry_tonnes (taken
    though below the cut-off), left_dry_tonnes (above it and left).
    ``equivalent`` : name, formula, statements, table (metal, price, price_unit, price_date, price_source, recovery_pct,
    recovery_basis, payable_pct, factor). ``cutoff_costs`` : item, value, unit, inside (which costs are inside).
    ``scenarios`` : scenario, dry_tonnes, <metals>, free columns (one row a scenario).
    ``tornado`` : decision, low_label, high_label, measure ("dry_tonnes" | a metal column | "<metal> content"),
    low, base, high. ``heat_maps`` : one mapping for each grid of two keys: label, x and y (the keys), frame (x, y and
    one column a measure, dry tonnes first, then a grade).
    """

    grade_tonnage: Frame | None = None
    beside_support: Frame | None = None
    by_value: Frame | None = None
    mineable_shape: Frame | None = None
    equivalent: Mapping[str, Any] | None = None
    cutoff_costs: Frame | None = None
    scenarios: Frame | None = None
    tornado: Frame | None = None
    heat_maps: tuple[Mapping[str, Any], ...] = ()


@dataclass(frozen=True)
class RunRecord:
    """How the run came about.

    ``ledger`` : key, value, origin ("default" | "chosen" | "borrowed" | "override"), meaning, reason, by,
    alternatives, effect (text); optional effect_pct (largest change of dry tonnes or metal, for ranking).
    ``changes`` : step, dry_tonnes, kind ("total" | "change"), decision (against another run). ``against`` : what
    that run was.
    ``truth`` : file, table (quantity, unit, truth, estimate, difference_pct, cause), notes (sentences).
    ``manifest`` : inputs [{path, sha256, ...}], outputs, versions {name: version}, seed, stages [{stage, seconds}].
    ``sources`` : bibliography lines (the report adds its own).
    """

    ledger: Frame | None = None
    changes: Frame | None = None
    against: str = ""
    findings: Findings = field(default_factory=Findings)
    truth: Mapping[str, Any] | None = None
    manifest: Mapping[str, Any] | None = None
    sources: Sequence[str] = ()


@dataclass(frozen=True)
class ReportData:
    """Everything that the report, its figures and the pack are made from; see the parts for their columns."""

    subject: Subject = field(default_factory=Subject)
    evidence: Evidence = field(default_factory=Evidence)
    body: BodyEvidence = field(default_factory=BodyEvidence)
    variograms: tuple[VariogramRecord, ...] = ()
    estimation: Estimation = field(default_factory=Estimation)
    classes: Classes = field(default_factory=Classes)
    value: ValueEvidence = field(default_factory=ValueEvidence)
    record: RunRecord = field(default_factory=RunRecord)

    @property
    def prospects_judged(self) -> bool:
        """Whether the study says who judged the reasonable prospects, and on what."""
        given = self.subject.prospects or {}
        return all(str(given.get(key) or "").strip() for key in ("judged_by", "basis"))

    @property
    def tally_label(self) -> str:
        """What a table of tonnes may be called."""
        if self.prospects_judged:
            return "Mineral Resource estimate, draft for the Competent Person"
        return "block-model tally"

    @property
    def cutoff_text(self) -> str:
        """The cut-off in words, such as ``Cu ≥ 2 %``."""
        from sms_resource.reporting.rounding import cutoff_phrase

        given = self.subject.cutoff or {}
        return cutoff_phrase(given.get("variable"), given.get("value"), **_cutoff_units(given))


def cutoff_head(data: ReportData, variable: Any = None) -> str:
    """What a cut-off is on with its unit, such as ``CuEq (%)``; the study's own where no variable is given."""
    from sms_resource.reporting.rounding import cutoff_label

    given = data.subject.cutoff or {}
    own = given.get("variable") or "cut-off's variable"
    return cutoff_label(own if variable is None else variable, **_cutoff_units(given))


def _cutoff_units(given: Mapping[str, Any]) -> dict[str, str]:
    return {name: str(given.get(name) or "") for name in ("equivalent_in", "currency")}


def has(frame: Frame | None, *columns: str) -> bool:
    """Whether a frame is there, holds rows, and has the columns."""
    return frame is not None and len(frame) > 0 and all(column in frame.columns for column in columns)

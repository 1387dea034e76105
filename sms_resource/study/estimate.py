"""Sections about the body, the blocks and the estimate."""

from __future__ import annotations

from typing import Literal

from sms_resource.study.base import Section, key

Triple = tuple[float, float, float]


class Seafloor(Section):
    """[seafloor]: the grid before it bounds the body."""

    mend_within_m: float = key(3.0, "Distance within which holes of the grid are filled.", ge=0)
    sigma_m: float = key(
        0.3, "Vertical standard error of the grid, where it has no uncertainty of its own.", ge=0
    )
    footprint_m: float = key(8.0, "Footprint of a machine over which slope is measured.", gt=0)


class BodySection(Section):
    """[body]: the sulphide between seafloor and base, inside the outline."""

    outline: Literal["given", "proposed"] = key(
        "given", "Whether the outline is a file's polygons or proposed from the holes."
    )
    method: Literal["kriging", "spline", "linear"] = key(
        "kriging", "How thickness is interpolated between holes.", alternatives=("spline", "linear")
    )
    edge_thickness_m: float = key(0.0, "Thickness at the outline.", ge=0)
    extrapolate_below_m: float = key(
        5.0, "Greatest length that the body goes on below a hole that ended in sulphide.", ge=0
    )
    drilled_within_m: float = key(25.0, "Distance from a hole within which tonnage counts as drilled.", gt=0)
    cell_m: float | None = key(None, "Cell of the surfaces; that of the seafloor grid if not given.", gt=0)
    base_shift_m: float = key(
        0.0, "Vertical shift of the base, up positive; for scenarios.", alternatives=(-1.0, 1.0)
    )
    seafloor_shift_m: float = key(
        0.0, "Vertical shift of the seafloor, up positive; for scenarios.", alternatives=(-0.3, 0.3)
    )
    outline_shift_m: float = key(
        0.0, "Shift of the outline, outward positive; for scenarios.", alternatives=(-5.0, 5.0)
    )


class Chimneys(Section):
    """[chimneys]: chimneys as a domain of their own, lighter than the mound and badly seen by a grid."""

    source: Literal["none", "polygons", "relief"] = key(
        "none",
        "No such domain, polygons with a height (data.chimneys), or the grid minus a smoothed seafloor.",
    )
    domain: str = key(
        "chimney", "Domain of the chimneys; it must stand first in domains.sulphide and needs a density."
    )
    width_m: float = key(
        15.0, 'What is narrower stands out of the smoothed seafloor, for source = "relief".', gt=0
    )
    least_height_m: float = key(2.0, "What stands out less is roughness.", gt=0)


class Blocks(Section):
    """[blocks]: the block model."""

    size_m: Triple | None = key(
        None, "Size of a block: east, north, up. Proposed from the hole spacing if not given."
    )
    azimuth_deg: float | None = key(
        None, "Rotation in plan, clockwise from north; proposed from the body's axis if not given."
    )
    origin_m: Triple | None = key(None, "Lower corner of the model; proposed if not given.")
    vertical_frame: Literal["elevation", "depth", "proportional"] = key(
        "depth", "Coordinate in which samples and blocks are compared: elevation, depth below seafloor, or position "
        "between seafloor and base.", alternatives=("elevation", "proportional"),
    )  # fmt: skip


class StructureChoice(Section):
    """One structure of a variogram that the study gives."""

    shape: Literal["spherical", "exponential", "gaussian"] = key("spherical", "Shape of the structure.")
    sill: float = key(..., "Sill of the structure, in squared grade.", ge=0)
    ranges_m: Triple = key(..., "Practical ranges: major, semi-major, minor.")


class VariogramChoice(Section):
    """What the study says of one variogram; anything left out is inferred."""

    shape: Literal["spherical", "exponential", "gaussian"] | None = key(
        None, "Shape of the fitted structures."
    )
    nugget: float | None = key(None, "Nugget, in squared grade.", ge=0)
    nugget_share: float | None = key(None, "Nugget as a share of the total sill.", ge=0, le=1)
    total_sill: float | None = key(None, "Total sill, in squared grade.", gt=0)
    ranges_m: Triple | None = key(None, "Practical ranges: major, semi-major, minor.")
    structures: tuple[StructureChoice, ...] | None = key(
        None, "All structures given; then nothing is fitted."
    )


class Variograms(Section):
    """[variograms]: continuity of grade."""

    shape: Literal["spherical", "exponential", "gaussian"] = key(
        "spherical", "Shape of the fitted structure.", alternatives=("exponential",)
    )
    measure: Literal["auto", "semivariogram", "normal_scores", "logs", "pairwise_relative", "correlogram"] = (
        key(
            "auto",
            "Measure of the experimental variogram that is fitted.",
            alternatives=("semivariogram", "normal_scores"),
        )
    )
    estimator: str = key("matheron", "Estimator of the semivariance, such as matheron, cressie or dowd.")
    lag_horizontal_m: float | None = key(
        None, "Width of horizontal lags; from the hole spacing if not given.", gt=0
    )
    lag_vertical_m: float | None = key(
        None, "Width of down-hole lags; the composite length if not given.", gt=0
    )
    least_pairs: int = key(30, "Pairs under which a lag is not fitted.", ge=1)
    least_composites: int = key(50, "Composites under which no horizontal variogram is inferred.", ge=2)
    least_holes: int = key(6, "Holes under which no horizontal variogram is inferred.", ge=2)
    total_sill: Literal["sample_variance", "over_pairs", "free"] = key(
        "sample_variance", "Total sill: the declustered variance, that with which the model has this variance over all "
        "pairs, or fitted.", alternatives=("free",),
    )  # fmt: skip
    continuity: Literal["level", "directional"] = key(
        "level", "One range in the plane of major and semi-major axis, or two."
    )
    bandwidth_m: float | None = key(
        None, "Greatest distance of a pair from the plane; the sample spacing if not given.", gt=0
    )
    azimuth_deg: float = key(0.0, "Azimuth of the major axis.")
    plunge_deg: float = key(0.0, "Plunge of the major axis, positive down.")
    tilt_deg: float = key(0.0, "Rotation about the major axis.")
    assumed_ratio: float = key(
        6.0,
        "Horizontal over vertical range, assumed where the data cannot tell.",
        gt=0,
        alternatives=(3.0, 12.0),
    )
    assumed_vertical_m: float = key(4.0, "Vertical range assumed where none can be inferred.", gt=0)
    assumed_nugget_share: float = key(0.4, "Nugget share assumed where none can be inferred.", ge=0, le=1)
    intervals: bool = key(True, "Whether the uncertainty of the parameters is found by leaving out holes.")
    range_factor: float = key(1.0, "Factor on every range; for scenarios.", gt=0, alternatives=(0.7, 1.4))
    models: dict[str, dict[str, VariogramChoice]] = key({}, "What the study fixes, by domain and element.")


class Search(Section):
    """[search]: which samples an estimate may see."""

    radii_m: Triple | None = key(
        None,
        "Radii of the first pass: major, semi-major, minor; from the ranges and the hole spacing if not given.",
    )
    range_factor: float = key(1.0, "First radii as a multiple of the ranges, where no radii are given.", gt=0)
    passes: tuple[float, ...] = key((1.0, 2.0), "Factors on the radii, one a pass.", min_length=1)
    most_samples: int = key(16, "Most samples of an estimate.", ge=1, le=200, alternatives=(8, 24))
    least_samples: int = key(4, "Fewest samples of an estimate.", ge=1)
    most_per_hole: int | None = key(4, "Most samples of one hole.", ge=1)
    least_holes: int = key(2, "Fewest holes of an estimate; the last pass takes one.", ge=1)
    sectors: Literal["none", "quadrants", "octants"] = key(
        "none", "Sectors of the search.", alternatives=("quadrants",)
    )
    most_per_sector: int | None = key(None, "Most samples of one sector.", ge=1)
    restrain_above: dict[str, float] = key(
        {}, "Grade of each element above which a sample is restrained with distance."
    )
    restrain_beyond: float = key(0.5, "Share of the radius beyond which it is restrained.", gt=0, le=1)
    fill: bool = key(
        True,
        "Whether blocks that no pass reaches take one more pass without limits of distance; they are marked so.",
    )


class Kriging(Section):
    """[kriging]: ordinary kriging of blocks, and its companions."""

    discretisation: tuple[int, int, int] = key((3, 3, 3), "Points that stand for a block, east, north, up.")
    coincident: Literal["error", "average", "keep_first"] = key(
        "average", "What becomes of samples at the same place.", alternatives=("keep_first",)
    )
    estimator: Literal["ordinary_kriging", "inverse_distance", "nearest"] = key(
        "ordinary_kriging", "Estimator whose grades go into the table of tonnes; the others are shown beside it.",
        alternatives=("inverse_distance", "nearest"),
    )  # fmt: skip
    power: float = key(2.0, "Power of the inverse distance.", gt=0)
    threads: int | None = key(
        None,
        "Threads of the kernels; all cores if not given. Results do not depend on it.",
        ge=1,
        decision=False,
    )


class Validation(Section):
    """[validation]: limits of the checks of the estimate."""

    mean_warn_pct: float = key(5.0, "Difference of block and declustered mean that is noted.", gt=0)
    mean_flag_pct: float = key(10.0, "Difference of block and declustered mean that is flagged.", gt=0)
    swath_m: float | None = key(None, "Width of a swath; twice the block if not given.", gt=0)
    neighbourhood_study: bool = key(
        True, "Whether the study of neighbourhoods is run as well.", decision=False
    )


class Screens(Section):
    """[screens]: what practice takes from the body; what is taken is reported."""

    slope_max_deg: float | None = key(None, "Steepest seafloor that a machine may stand on.", gt=0, lt=90)
    least_thickness_m: float | None = key(None, "Least thickness of a column.", ge=0)
    least_thickness_grade: float | None = key(
        None, "Least thickness times grade of a column, in m times the unit of thickness_grade_of.", ge=0
    )
    thickness_grade_of: str = key("cu", "Element of the thickness times grade.")
    least_patch_m2: float | None = key(None, "Least area of a connected patch.", ge=0)
    bench_m: float | None = key(
        None,
        "Height of a bench, of the mineable shape and of the table by bench; that of a block if not given.",
        gt=0,
    )
    over_cut_m: float = key(
        0.0,
        "Depth cut beyond what is taken, upright under the base and level beside it: dilution. 0 is none; 0.2 to 0.5 "
        "is common practice.",
        ge=0,
        le=10,
    )
    under_cut_m: float = key(
        0.0, "Depth left of what should be taken, on the same faces: loss. 0 is none.", ge=0, le=10
    )
    host_dry_density_tpm3: float | None = key(
        None,
        "Dry density of the rock that over-cutting takes; mean of what is measured outside the sulphide if not given.",
        gt=0,
        le=7.6,
    )
    host_wet_density_tpm3: float | None = key(
        None, "Its wet density; mean of what is measured outside the sulphide if not given.", gt=0, le=7.6
    )
    host_grades: dict[str, float] = key(
        {}, "Grade of each element in that rock, in the unit it is estimated in; none where not named."
    )
    exclude_status: tuple[str, ...] = key(
        ("active_vent", "set_aside", "preservation"), "Status of zones whose tonnes are excluded."
    )
    vent_buffer_m: float | None = key(
        None, "Buffer round active vents, in place of the file's.", ge=0, alternatives=(0, 50, 100, 200)
    )

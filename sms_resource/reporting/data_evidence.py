"""What a report is made from, the samples: plain frames, as in `data`, which passes these classes on."""

from __future__ import annotations

from dataclasses import dataclass, field

import pandas as pd

Frame = pd.DataFrame


@dataclass(frozen=True)
class LaboratoryEvidence:
    """Laboratory quality.

    ``table`` : the long table of inserts as loaded: kind ("reference" | "blank" | "duplicate" | "check"), batch,
    sequence, sample_id, original_sample_id, material, stage, element, value, expected, expected_sd.
    ``verdicts`` : element, aspect ("references" | "blanks" | "duplicates" | "checks"), verdict ("good" |
    "caution" | "failed" | "missing"), figures (text).
    ``references``, ``blanks``, ``duplicates``, ``checks`` : the statistics, one row a material, stage or element.
    ``pairs``, ``check_pairs`` : stage, element, original, repeat (one row a pair of duplicates, or of a result and that
    of the check laboratory), for the scatter. ``materials`` : element, material, n, expected, mean, bias_pct,
    bias_low_pct, bias_high_pct, failures. ``batches`` : element, batch, n, mean_z, p_adjusted, failures, verdict.
    ``rates`` : kind, stage, element, inserts, share_pct.
    """

    table: Frame | None = None
    verdicts: Frame | None = None
    references: Frame | None = None
    blanks: Frame | None = None
    duplicates: Frame | None = None
    checks: Frame | None = None
    pairs: Frame | None = None
    check_pairs: Frame | None = None
    materials: Frame | None = None
    batches: Frame | None = None
    rates: Frame | None = None


@dataclass(frozen=True)
class Evidence:
    """Samples and what they are worth.

    ``collars`` : hole_id, easting, northing, elevation, length_m, ended_in, position_method, position_sigma_m;
    optional sigma_assumed (the study's own put for a missing one);
    optional original_elevation, dz_m (collar minus seafloor before any shift), dz_after_m, limit_m, flagged_before,
    flagged, assumed_vertical (bool). ``collar_match`` : quantity, before, after. ``hole_ends`` : ended_in, holes,
    share_pct, length_m. ``positions`` : table, method, positions, with_sigma, sigma_min_m, sigma_median_m, sigma_max_m.
    ``collar_shift_m`` : what was added to every collar (0 where nothing was).
    ``sticks`` : hole_id, from_m, to_m, recovery_pct (0 = lost), domain, <metals>, x_from, y_from, z_from, x_to,
    y_to, z_to; one row an interval (world coordinates, m).
    ``runs`` : hole_id, from_m, to_m, recovered_length_m, recovery_pct. ``lithology`` : hole_id, from_m, to_m, code.
    ``composites`` : hole_id, from_m, to_m, length_m, recovered_length_m, recovery_pct, domain, easting, northing,
    elevation, <metals>, weight (declustering weight where there is one).
    ``composite_audit`` : free columns (how intervals became composites); ``composite_rule`` : how, in words
    (length, short rests, weighting).
    ``surface`` : sample_id, sample_type, easting, northing, elevation, <metals>. ``surface_use`` : how the study
    used them, in words; empty when they are kept out. ``dredges`` : as loaded. ``dredge_tracks`` : dredge_id,
    length_m, azimuth, half_length_m.
    ``surface_bias`` : metal, n, surface_mean, nearest_core_mean, top_metre_mean, ratio, ratio_low, ratio_high.
    ``recovery_bias`` : domain, metal, n, spearman, p_value (of one test), p_adjusted (of all), verdict.
    ``lost_core`` : treatment, <metals> (mean grade of the blocks), composites, dry_tonnes, wet_tonnes.
    ``lost_core_composites`` : treatment, domain, <metals> (mean grade of the composites), n.
    ``lost_core_default`` : the treatment that the estimate uses.
    ``densities`` : hole_id, domain, dry_density_tpm3, wet_density_tpm3 (one row a measurement).
    ``density_by_domain`` : domain, dry_low, dry_base, dry_high, wet_base (t/m3), n, basis.
    ``top_cuts`` : domain, metal, n, cut (in use; NaN where none), proposed (NaN where none), effect_of ("cut in use" |
    "proposed, not used" | "none"), n_cut, mean_before, mean_after, cv_before, cv_after, metal_removed_pct, holes_cut,
    reason. ``top_cut_curves`` : domain, metal, cut, mean, cv, metal_removed_pct, n_cut (all by ``weighting``).
    ``weighting`` : what composites are weighted by in means, in words.
    ``assay_summary`` : free columns (below detection, over limit, blank, by element).
    ``handheld_used`` : whether handheld readings entered the estimate.
    ``contact_verdicts`` : contact, metal, n_first, n_second, mean_first, mean_second, ratio, p_value, verdict, reason.
    ``deleterious`` : elements that are read and not estimated, with their statistics.
    ``twin_pairs`` : hole_a, hole_b, distance_m, dz_m. ``twin_clusters`` : site, holes, hole_ids, spread_m. ``twins`` :
    hole_a, hole_b, metal, shared_m, mean_a, mean_b, relative_pct. ``tracers`` : ratio, depth_from_m, depth_to_m, n,
    geometric_mean, threshold, whole.
    ``contact_analysis`` (distance_m, metal, mean, n, contact), ``associations``, ``lognormal``,
    ``statistics`` : free columns, shown as tables. ``declustering_scan`` : cell_size_m, metal, mean.
    """

    collars: Frame | None = None
    collar_shift_m: float | None = None
    collar_match: Frame | None = None
    hole_ends: Frame | None = None
    positions: Frame | None = None
    sticks: Frame | None = None
    runs: Frame | None = None
    lithology: Frame | None = None
    composites: Frame | None = None
    composite_audit: Frame | None = None
    composite_rule: str = ""
    surface: Frame | None = None
    surface_use: str = ""
    dredges: Frame | None = None
    dredge_tracks: Frame | None = None
    surface_bias: Frame | None = None
    recovery_bias: Frame | None = None
    lost_core: Frame | None = None
    lost_core_composites: Frame | None = None
    lost_core_default: str = "unknown"
    densities: Frame | None = None
    density_by_domain: Frame | None = None
    top_cuts: Frame | None = None
    top_cut_curves: Frame | None = None
    weighting: str = "length"
    assay_summary: Frame | None = None
    handheld_used: bool = False
    twins: Frame | None = None
    twin_pairs: Frame | None = None
    twin_clusters: Frame | None = None
    tracers: Frame | None = None
    contact_analysis: Frame | None = None
    contact_verdicts: Frame | None = None
    deleterious: Frame | None = None
    associations: Frame | None = None
    lognormal: Frame | None = None
    statistics: Frame | None = None
    declustering_scan: Frame | None = None
    laboratory: LaboratoryEvidence = field(default_factory=LaboratoryEvidence)

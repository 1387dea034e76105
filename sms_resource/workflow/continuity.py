"""Stage variograms: cut grades, weights against clusters, and a variogram for each metal in each domain."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from sms_resource.samples.topcuts import top_cut_findings
from sms_resource.units import element_column
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.stage import Context
from sms_resource.workflow.state import BlockState, BodyState, EvidenceState, VariogramState

SCAN = np.array([0.25, 0.5, 0.75, 1.0, 1.25, 1.5, 2.0, 3.0, 4.0])


def variograms(context: Context) -> VariogramState:
    """Infer the continuity of every metal in every domain of the body."""
    evidence: EvidenceState = context.done["composite"]
    block_state: BlockState = context.done["blocks"]
    body_state: BodyState = context.done["body"]
    config = context.config
    metals = metal_columns(config)
    samples = body_samples(evidence.composites, block_state.frame, config)
    samples, cuts = cut_grades(samples, evidence.tables["top_cut_study"], config)
    context.findings.extend(top_cut_findings(cuts))
    if config.top_cuts.apply != "given" and config.top_cuts.cuts:
        context.findings.warning(
            "top-cut-not-applied", f"the study gives top cuts and does not apply them (apply = \"{config.top_cuts.apply}\")",
            "Set top_cuts.apply = \"given\", or take the cuts out.", file=context.study.path.name,
        )  # fmt: skip
    spacing = hole_spacing(evidence.collars, body_state.outline)
    scans: list[pd.DataFrame] = []
    inferences: dict[tuple[str, str], Any] = {}
    weights = np.ones(len(samples))
    for domain in config.domains.sulphide:
        chosen = (samples["domain"] == domain).to_numpy()
        part = samples[chosen]
        chimney = config.chimneys.source != "none" and domain == config.chimneys.domain
        shape_alone = chimney or domain not in config.domains.codes.values()
        if shape_alone and not part[metals].notna().any(axis=None):
            context.findings.warning(
                "domain-without-samples",
                f"domain '{domain}' comes from its shape alone and has no sample: its tonnes have no grade, and a block "
                "that it shares takes the grade of the rest",
                "Map a logged code to it in domains.codes, if any core is of it.", file=context.study.path.name,
            )  # fmt: skip
            continue
        places = part[["x", "y", "z"]].to_numpy(dtype=float)
        weights[chosen], scan = decluster(part, metals[0], spacing, domain)
        scans.append(scan)
        for metal in metals:
            known = part[metal].notna().to_numpy()
            if not known.any():
                context.findings.error(
                    "no-composites", f"domain '{domain}' has no {metal} sample",
                    f"Take {metal.partition('_')[0]} out of metals.estimate, or "
                    + ("its code out of domains.codes: chimneys then have tonnes and no grade." if chimney
                       else "the domain out of domains.sulphide."),
                    file=context.study.path.name,
                )  # fmt: skip
                continue
            inference = infer(part, places, metal, known, weights[chosen], spacing, config)
            for item in inference.findings:
                context.findings.extend([replace(item, message=f"{domain}, {metal}: {item.message}")])
            inferences[(domain, metal)] = inference
    samples = samples.assign(declustering_weight=weights)
    maps = plane_maps(samples, weights, spacing, config)
    assumed = sum(1 for item in inferences.values() if item.assumed)
    context.detail = (
        f"{len(inferences)} variograms, {assumed} with assumed parts; hole spacing {spacing:.0f} m"
    )
    return VariogramState(
        samples=samples, inferences=inferences, cuts=cuts, scans=pd.concat(scans, ignore_index=True),
        facts={"hole_spacing_m": spacing, "plane_maps": maps},
    )  # fmt: skip


def plane_maps(
    samples: pd.DataFrame, weights: np.ndarray, spacing: float, config: Any
) -> dict[tuple[str, str], pd.DataFrame]:
    """Map of the variogram in the plane of each domain, of normal scores of its first metal, for choosing directions."""
    from sms_resource.geostatistics import variogram_map

    choice = config.variograms
    metal = metal_columns(config)[0]
    found = {}
    for domain in config.domains.sulphide:
        chosen = (samples["domain"] == domain).to_numpy() & samples[metal].notna().to_numpy()
        part = samples[chosen]
        if len(part) < choice.least_composites or part[metal].nunique() < 3:
            continue
        made = variogram_map(
            part[["x", "y", "z"]].to_numpy(dtype=float),
            part[metal].to_numpy(dtype=float),
            cell_m=spacing,
            cells=5,
            azimuth=choice.azimuth_deg,
            plunge=choice.plunge_deg,
            tilt=choice.tilt_deg,
            bandwidth_m=choice.bandwidth_m or config.composites.length_m,
            measure="normal_scores",
            weights=weights[chosen],
            min_pairs=choice.least_pairs,
            hole_ids=part["hole_id"].to_numpy(dtype=object),
            across_holes=True,
        )
        found[(domain, metal)] = made.to_frame()
    return found


def body_samples(composites: pd.DataFrame, frame: Any, config: Any) -> pd.DataFrame:
    """Composites of the body, with their place in the vertical frame as x, y, z."""
    inside = composites[composites["domain"].isin(config.domains.sulphide) & (composites["weight"] > 0)]
    inside = inside.reset_index(drop=True)
    places = frame.forward(inside[["easting", "northing", "elevation"]].to_numpy(dtype=float))
    inside = inside.assign(x=places[:, 0], y=places[:, 1], z=places[:, 2])
    return inside[np.isfinite(places).all(axis=1)].reset_index(drop=True)


def cut_grades(
    samples: pd.DataFrame, proposals: pd.DataFrame, config: Any
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Apply the top cuts that the study decides on."""
    from sms_resource.samples.topcuts import apply_top_cuts

    choice = config.top_cuts
    cuts: dict[tuple[str, str], float] = {}
    if choice.apply == "given":
        cuts = {
            (domain, element_column(element)): value
            for domain, elements in choice.cuts.items()
            for element, value in elements.items()
        }
    elif choice.apply == "proposed":
        rows = proposals.dropna(subset=["cut"])
        cuts = {(str(row["domain"]), str(row["metal"])): float(row["cut"]) for row in rows.to_dict("records")}
    return apply_top_cuts(samples, cuts)


def hole_spacing(collars: pd.DataFrame, outline: Any) -> float:
    """Typical distance between drill sites inside the outline: median of nearest sites, twins left out."""
    from scipy.spatial import cKDTree
    from shapely import contains_xy

    places = collars[["easting", "northing"]].drop_duplicates().to_numpy(dtype=float)
    near = contains_xy(outline.buffer(25.0), places[:, 0], places[:, 1])
    places = places[near] if near.sum() >= 3 else places
    if len(places) < 2:
        return 20.0
    distances = cKDTree(places).query(places, k=min(6, len(places)))[0][:, 1:]
    distances = np.where(distances < 5.0, np.nan, distances)
    first = np.nanmin(np.where(np.isnan(distances), np.inf, distances), axis=1)
    first = first[np.isfinite(first)]
    return float(np.median(first)) if len(first) else 20.0


def decluster(part: pd.DataFrame, metal: str, spacing: float, domain: str) -> tuple[np.ndarray, pd.DataFrame]:
    """Weights against clusters of holes, from cells of the hole spacing; the scan of sizes is kept for the report."""
    from sms_resource.samples.declustering import cell_declustering

    known = part[metal].notna().to_numpy()
    weights = np.ones(len(part))
    if known.sum() < 3:
        return weights, pd.DataFrame({"domain": [], "metal": [], "cell_size_m": [], "mean": []})
    places = part.loc[known, ["x", "y", "z"]].to_numpy(dtype=float)
    values = part.loc[known, metal].to_numpy(dtype=float)
    # A cell as wide as the spacing and a few composites high: clusters of holes are thinned out, and a thick part of
    # the body keeps the weight of its thickness.
    tall = (1.0, 1.0, 3.0 * float(part["length_m"].median()) / spacing)
    made = cell_declustering(places, values, sizes=[spacing], anisotropy=tall)
    scan = cell_declustering(places, values, sizes=spacing * SCAN, anisotropy=tall).scan
    weights[known] = made.weights
    return weights, scan.assign(domain=domain, metal=metal)


def infer(
    part: pd.DataFrame,
    places: np.ndarray,
    metal: str,
    known: np.ndarray,
    weights: np.ndarray,
    spacing: float,
    config: Any,
) -> Any:
    """Variogram of one metal in one domain, with what the study fixes."""
    from sms_resource.geostatistics.inference import infer_variogram
    from sms_resource.geostatistics.variogram_settings import VariogramSettings

    choice = config.variograms
    element = metal.partition("_")[0]
    domain = str(part["domain"].iloc[0])
    fixed = choice.models.get(domain, {}).get(element)
    ratio = choice.assumed_ratio
    given = fixed.structures if fixed and fixed.structures else ()
    one: tuple[Any, ...] = ()
    if fixed and fixed.ranges_m:
        one = (fixed.ranges_m,)
    settings = VariogramSettings(
        measure=choice.measure,
        estimator=choice.estimator,
        shapes=tuple(item.shape for item in given)
        or (fixed.shape if fixed and fixed.shape else choice.shape,),
        nugget=fixed.nugget if fixed else None,
        nugget_share=fixed.nugget_share if fixed else None,
        total_sill=fixed.total_sill if fixed and fixed.total_sill else choice.total_sill,
        sills=tuple(item.sill for item in given) or None,
        ranges=tuple(item.ranges_m for item in given) or one or None,
        azimuth=choice.azimuth_deg,
        plunge=choice.plunge_deg,
        tilt=choice.tilt_deg,
        continuity=choice.continuity,
        lag_width_m=choice.lag_horizontal_m or spacing,
        down_hole_lag_m=choice.lag_vertical_m or config.composites.length_m,
        bandwidth_m=choice.bandwidth_m,
        min_pairs=choice.least_pairs,
        min_composites_horizontal=choice.least_composites,
        min_holes_horizontal=choice.least_holes,
        assumed_ratio=(0.5 * ratio, ratio, 2.0 * ratio),
        assumed_vertical_range_m=choice.assumed_vertical_m,
        assumed_nugget_share=choice.assumed_nugget_share,
        jackknife=choice.intervals,
    )
    places, values, holes, weights = one_sample_an_assay(part[known], places[known], metal, weights[known])
    found = infer_variogram(places, values, holes, settings, weights=weights)
    return scaled(found, choice.range_factor) if choice.range_factor != 1.0 else found


def one_sample_an_assay(
    part: pd.DataFrame, places: np.ndarray, metal: str, weights: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Places, values, holes and weights with composites of one assay as one sample in their middle.

    Two composites out of one assay have the same grade: as a pair they would show continuity that nobody measured.
    """
    from sms_resource.samples.shared_assays import one_sample_each

    values, holes = part[metal].to_numpy(dtype=float), part["hole_id"].to_numpy(dtype=object)
    group, size = one_sample_each(part["shared_assay"].to_numpy(dtype=np.int64))
    if size.max(initial=1) == 1:
        return places, values, holes, weights
    first = np.unique(group, return_index=True)[1]
    middle = np.column_stack([np.bincount(group, axis) / size for axis in places.T])
    return middle, np.bincount(group, values) / size, holes[first], np.bincount(group, weights) / size


def scaled(found: Any, factor: float) -> Any:
    """The same inference with every range times a factor, for a scenario."""
    model = found.model
    structures = tuple(
        replace(item, ranges=tuple(factor * reach for reach in item.ranges)) for item in model.structures
    )
    note = f"all ranges times {factor:g} (scenario)"
    return replace(found, model=replace(model, structures=structures), assumed=(*found.assumed, note))

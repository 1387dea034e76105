"""Stage estimate: grades of every block by kriging, with the nearest sample and inverse distance beside it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.units import element_column
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.geometry import domain_shares
from sms_resource.workflow.stage import Context, StageStop
from sms_resource.workflow.state import BlockState, DensityState, EstimateState, VariogramState

DETAILS = ("variance", "lagrange", "slope_of_regression", "kriging_efficiency", "sample_count", "hole_count",
           "nearest_distance", "negative_weight_sum", "pass_number")  # fmt: skip
COMPANIONS = ("nearest", "inverse_distance", "moving_average")
_SHORT = {
    "slope_of_regression": "slope",
    "kriging_efficiency": "efficiency",
    "nearest_distance": "nearest_distance_m",
}


def estimate(context: Context) -> EstimateState:
    """Estimate every metal in every domain, join domains inside blocks by dry mass, and give blocks their density."""
    blocks: BlockState = context.done["blocks"]
    state: VariogramState = context.done["variograms"]
    density: DensityState = context.done["density"]
    config = context.config
    targets = block_targets(blocks)
    hoods = {domain: neighbourhoods(state, domain, config) for domain in config.domains.sulphide}
    grades, parts, details = krige_domains(state.samples, blocks, state, hoods, config, context.threads)
    frame = join_domains(blocks, grades, density, config)
    context.findings.extend(density.model.extrapolation_findings(frame))
    metals = metal_columns(config)
    companions: dict[str, pd.DataFrame] = {}
    means = domain_means(blocks, grades, density, config)
    if config.kriging.estimator != "ordinary_kriging":
        wanted = (config.kriging.estimator,)
        companions, others = companion_grades(
            state.samples, blocks, hoods, density, config, context.threads, wanted
        )
        frame[metals] = companions[config.kriging.estimator][metals]
        means = others[config.kriging.estimator]
    for name, values in details.items():
        frame[name] = values
    failed = int(frame[metals].isna().any(axis=1).sum())
    nowhere = [metal for metal in metals if not frame[metal].notna().any()]
    if nowhere:
        context.findings.error(
            "blocks-not-estimated", f"no block has an estimate of {', '.join(nowhere)}",
            "Widen search.radii_m and search.passes, lower search.least_samples, or set search.fill = true.",
            file=context.study.path.name,
        )  # fmt: skip
        raise StageStop
    if failed:
        context.findings.warning(
            "blocks-not-estimated", f"{failed:,} of {len(frame):,} blocks have no estimate of some metal",
            "Widen search.passes, lower search.least_samples, or set search.fill = true.", file=context.study.path.name,
        )  # fmt: skip
    filled = frame["pass_number"].to_numpy() > len(config.search.passes)
    if filled.any():
        share = frame.loc[filled, "dry_tonnes"].sum() / frame["dry_tonnes"].sum()
        context.findings.note(
            "blocks-beyond-search", f"{int(filled.sum()):,} blocks ({share:.0%} of dry tonnes) lie beyond every search pass "
            "and were estimated without a limit of distance", "They are marked by pass_number in the block model.",
            file=context.study.path.name,
        )  # fmt: skip
    context.detail = f"{len(frame):,} blocks, {len(metals)} metals, {len(config.domains.sulphide)} domains"
    return EstimateState(
        frame=frame,
        companions=companions,
        targets=targets,
        statistics=pass_statistics(frame),
        neighbourhoods=parts,
        domain_means=means,
        density_cases={case: dry_case(blocks, grades, density, config, case) for case in ("low", "high")},
    )


def block_targets(blocks: BlockState) -> NDArray[np.float64]:
    """Centres of the blocks in the vertical frame, (b, 3).

    The height that counts is that of the part inside the body, so that a block cut by the seafloor is not placed
    above it.
    """
    frame = blocks.model.frame
    places = frame[["easting", "northing"]].to_numpy(dtype=float)
    seafloor = blocks.seafloor.sample(places[:, 0], places[:, 1])
    height = seafloor - frame["depth_below_seafloor_m"].to_numpy(dtype=float)
    height = np.where(np.isfinite(height), height, frame["elevation"].to_numpy(dtype=float))
    return blocks.frame.forward(np.column_stack([places, height]))


def neighbourhoods(state: VariogramState, domain: str, config: Any) -> list[Any]:
    """Search of each pass in a domain; radii from the mean ranges of its metals where the study gives none."""
    from sms_resource.geostatistics import Neighbourhood

    choice, angles = config.search, config.variograms
    radii = choice.radii_m or proposed_radii(state, domain, config)
    common: dict[str, Any] = {
        "max_samples": choice.most_samples,
        "max_per_hole": choice.most_per_hole,
        "sectors": choice.sectors,
        "max_per_sector": choice.most_per_sector,
        "azimuth": angles.azimuth_deg,
        "plunge": angles.plunge_deg,
        "tilt": angles.tilt_deg,
    }
    hoods = [
        Neighbourhood(
            _times(radii, factor),
            min_samples=choice.least_samples,
            min_holes=choice.least_holes if number + 1 < len(choice.passes) else 1,
            **common,
        )
        for number, factor in enumerate(choice.passes)
    ]
    if choice.fill:
        far = 1e4 / max(radii)
        hoods.append(Neighbourhood(_times(radii, far), min_samples=1, min_holes=1, **common))
    return hoods


def _times(radii: tuple[float, float, float], factor: float) -> tuple[float, float, float]:
    return (factor * radii[0], factor * radii[1], factor * radii[2])


def proposed_radii(state: VariogramState, domain: str, config: Any) -> tuple[float, float, float]:
    """Median range of the domain's metals times the study's factor, but never so short that no neighbour is seen.

    The floor is two hole spacings in the plane and three composites upright (common practice, no source).
    """
    ranges = [
        item.ranges
        for (name, _), item in state.inferences.items()
        if name == domain and item.model.structures
    ]
    level, upright = 2.0 * state.facts["hole_spacing_m"], 3.0 * config.composites.length_m
    found = np.median(ranges, axis=0) if ranges else np.zeros(3)
    major, semi, minor = np.maximum(config.search.range_factor * found, [level, level, upright])
    return float(major), float(semi), float(minor)


def search_text(state: VariogramState, config: Any) -> str:
    """Factors of the passes and the radii that they multiply, with the domains where those were proposed."""
    passes = ", ".join(f"{factor:g} ×" for factor in config.search.passes)
    given = config.search.radii_m
    domains = dict.fromkeys(domain for domain, _ in state.inferences)
    radii = {"": given} if given else {f" in {name}": proposed_radii(state, name, config) for name in domains}
    said = ", ".join(f"{' × '.join(f'{r:.3g}' for r in value)} m{where}" for where, value in radii.items())
    return f"{passes} {said}"


def _domain_rows(samples: pd.DataFrame, domain: str, boundaries: str) -> NDArray[np.bool_]:
    if boundaries == "soft":
        return np.ones(len(samples), dtype=bool)
    return (samples["domain"] == domain).to_numpy()


def _restraint(config: Any, metals: list[str]) -> Any:
    from sms_resource.geostatistics import HighGradeRestraint

    above = {element_column(name): value for name, value in config.search.restrain_above.items()}
    if not above:
        return None
    return HighGradeRestraint(
        thresholds=[above.get(metal, np.nan) for metal in metals],
        fraction=config.search.restrain_beyond,
    )


def frame_size(blocks: BlockState, config: Any) -> tuple[float, float, float]:
    """Size of a block in the vertical frame: heights keep their metres in every frame."""
    return tuple(blocks.model.grid.size)


def krige_domains(
    samples: pd.DataFrame, blocks: BlockState, state: VariogramState, hoods: dict[str, list[Any]], config: Any,
    threads: int | None,
) -> tuple[dict[str, pd.DataFrame], dict[tuple[str, str], Any], dict[str, NDArray[Any]]]:  # fmt: skip
    """Krige each domain into the blocks that hold some of it.

    Returns
    -------
    grades : dict of DataFrame
        By domain, one row a block (NaN where the block holds none of the domain).
    hoods : dict
        Neighbourhoods by domain and pass.
    details : dict of ndarray (b,)
        Figures of the kriging of the block's leading domain: ``<metal>_variance``, ``<metal>_slope``, and for the
        first metal the counts and distances.
    """
    from sms_resource.geostatistics import ordinary_kriging

    metals = metal_columns(config)
    targets = block_targets(blocks)
    shares = domain_shares(blocks.model.frame, config.domains.sulphide)
    leading = blocks.model.frame["domain"].to_numpy(dtype=object)
    grades: dict[str, pd.DataFrame] = {}
    details: dict[str, NDArray[Any]] = {}
    for domain in config.domains.sulphide:
        rows = _domain_rows(samples, domain, config.domains.boundaries)
        used = shares[domain] > 0
        table = np.full((len(targets), len(metals)), np.nan)
        if used.any() and rows.any() and (domain, metals[0]) in state.inferences:
            part = samples[rows]
            result = ordinary_kriging(
                part[["x", "y", "z"]].to_numpy(dtype=float),
                part[metals].to_numpy(dtype=float),
                targets[used],
                [state.inferences[(domain, metal)].model for metal in metals],
                hoods[domain],
                hole_ids=part["hole_id"].to_numpy(dtype=object),
                block_size=frame_size(blocks, config),
                discretisation=config.kriging.discretisation,
                block_azimuth=blocks.model.grid.azimuth,
                coincident=config.kriging.coincident,
                threads=threads,
                high_grade_restraint=_restraint(config, metals),
            )
            table[used] = result.estimate
            lead = leading[used] == domain
            _keep_details(details, result, used, lead, metals, len(targets))
        grades[domain] = pd.DataFrame(table, columns=metals)
    return (
        grades,
        {(domain, str(n)): hood for domain, list_ in hoods.items() for n, hood in enumerate(list_)},
        details,
    )


def _keep_details(
    details: dict[str, NDArray[Any]], result: Any, used: NDArray[np.bool_], lead: NDArray[np.bool_], metals: list[str],
    count: int,
) -> None:  # fmt: skip
    rows = np.flatnonzero(used)[lead]
    for name in DETAILS:
        values = np.asarray(getattr(result, name), dtype=float)
        if values.ndim == 1:
            values = np.repeat(values[:, None], len(metals), axis=1)
        for number, metal in enumerate(metals):
            title = f"{metal}_{_SHORT.get(name, name)}"
            details.setdefault(title, np.full(count, np.nan))[rows] = values[lead, number]
    for name in ("sample_count", "hole_count", "nearest_distance_m", "pass_number"):
        details[name] = details[f"{metals[0]}_{name}"]


def join_domains(
    blocks: BlockState, grades: dict[str, pd.DataFrame], density: DensityState, config: Any
) -> pd.DataFrame:
    """Block grades as the dry-mass mean of the domains inside each block, with density and tonnes, dry and wet."""
    frame = blocks.model.frame.copy()
    metals = metal_columns(config)
    shares = domain_shares(frame, config.domains.sulphide)
    dry = np.zeros(len(frame))
    wet = np.zeros(len(frame))
    masses: dict[str, NDArray[np.float64]] = {}
    for domain, share in shares.items():
        names = np.full(len(frame), domain, dtype=object)
        dry_density, wet_density = density.model.predict(names, grades[domain])
        masses[domain] = share * dry_density
        dry += np.where(share > 0, share * dry_density, 0.0)
        wet += np.where(share > 0, share * wet_density, 0.0)
    frame["dry_density_tpm3"] = dry
    frame["wet_density_tpm3"] = wet
    frame["dry_tonnes"] = frame["volume_m3"] * dry
    frame["wet_tonnes"] = frame["volume_m3"] * wet
    for metal in metals:
        total, weight = np.zeros(len(frame)), np.zeros(len(frame))
        for domain, share in shares.items():
            values = grades[domain][metal].to_numpy()
            known = (share > 0) & np.isfinite(values)
            total += np.where(known, masses[domain] * values, 0.0)
            weight += np.where(known, masses[domain], 0.0)
        frame[metal] = np.divide(total, weight, out=np.full(len(frame), np.nan), where=weight > 0)
    return frame


def domain_means(
    blocks: BlockState, grades: dict[str, pd.DataFrame], density: DensityState, config: Any
) -> pd.DataFrame:
    """Mean grade of each domain over its own part of every block, weighted by dry mass: domain, metal, mean, dry_tonnes.

    A block that holds several domains has a mixed grade, which must not be held against one domain's samples.
    """
    frame = blocks.model.frame
    volume = frame["volume_m3"].to_numpy(dtype=float)
    rows = []
    for domain, share in domain_shares(frame, config.domains.sulphide).items():
        names = np.full(len(frame), domain, dtype=object)
        dry, _ = density.model.predict(names, grades[domain])
        mass = np.where(share > 0, volume * share * dry, 0.0)
        for metal in metal_columns(config):
            values = grades[domain][metal].to_numpy(dtype=float)
            known = np.isfinite(values) & (mass > 0)
            mean = float(np.average(values[known], weights=mass[known])) if known.any() else np.nan
            rows.append(
                {"domain": domain, "metal": metal, "mean": mean, "dry_tonnes": float(mass[known].sum())}
            )
    return pd.DataFrame(rows)


def dry_case(
    blocks: BlockState, grades: dict[str, pd.DataFrame], density: DensityState, config: Any, case: str
) -> NDArray[np.float64]:
    """Dry tonnes of each block at the low or the high density of its domains."""
    frame = blocks.model.frame
    total = np.zeros(len(frame))
    for domain, share in domain_shares(frame, config.domains.sulphide).items():
        names = np.full(len(frame), domain, dtype=object)
        dry, _ = density.model.predict(names, grades[domain], case=case)
        total += np.where(share > 0, share * dry, 0.0)
    return total * frame["volume_m3"].to_numpy(dtype=float)


def companion_grades(
    samples: pd.DataFrame, blocks: BlockState, hoods: dict[str, list[Any]], density: DensityState, config: Any,
    threads: int | None, methods: tuple[str, ...] = COMPANIONS,
) -> tuple[dict[str, pd.DataFrame], dict[str, pd.DataFrame]]:  # fmt: skip
    """Block grades, and means by domain, of nearest sample, inverse distance and moving average on the widest search."""
    from sms_resource.geostatistics import companion_estimates

    metals = metal_columns(config)
    targets = block_targets(blocks)
    shares = domain_shares(blocks.model.frame, config.domains.sulphide)
    tables: dict[str, dict[str, pd.DataFrame]] = {method: {} for method in methods}
    for domain in config.domains.sulphide:
        rows = _domain_rows(samples, domain, config.domains.boundaries)
        used = shares[domain] > 0
        made = {method: np.full((len(targets), len(metals)), np.nan) for method in methods}
        if used.any() and rows.any():
            part = samples[rows]
            found = companion_estimates(
                part[["x", "y", "z"]].to_numpy(dtype=float),
                part[metals].to_numpy(dtype=float),
                targets[used],
                hoods[domain][-1],
                hole_ids=part["hole_id"].to_numpy(dtype=object),
                methods=methods,
                power=config.kriging.power,
                block_size=frame_size(blocks, config),
                discretisation=config.kriging.discretisation,
                block_azimuth=blocks.model.grid.azimuth,
                coincident=config.kriging.coincident,
                threads=threads,
            )
            for method in methods:
                made[method][used] = found[method]
        for method in methods:
            tables[method][domain] = pd.DataFrame(made[method], columns=metals)
    return (
        {method: join_domains(blocks, table, density, config)[metals] for method, table in tables.items()},
        {method: domain_means(blocks, table, density, config) for method, table in tables.items()},
    )


def pass_statistics(frame: pd.DataFrame) -> pd.DataFrame:
    """Blocks, dry tonnes and quality of the estimate by search pass."""
    groups = frame.groupby("pass_number", dropna=False)
    table = groups.agg(
        blocks=("volume_m3", "size"), dry_tonnes=("dry_tonnes", "sum"), mean_samples=("sample_count", "mean"),
        mean_holes=("hole_count", "mean"), mean_nearest_m=("nearest_distance_m", "mean"),
    )  # fmt: skip
    return table.reset_index()

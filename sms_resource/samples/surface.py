"""Surface samples: richer than the body below, so compared with its core and kept apart by type."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import lines, names, numbers

Floats = NDArray[np.float64]

SAMPLE_TYPES = ("grab", "chimney", "push_core", "gravity_core", "dredge")
TOP_M = 1.0


def surface_bias(
    surface: pd.DataFrame,
    composites: pd.DataFrame,
    metals: Sequence[str],
    seed: int | np.random.Generator = 0,
    *,
    distance_m: float = 30.0,
    repeats: int = 2000,
    confidence: float = 0.95,
    by_type: bool = False,
    domains: Sequence[str] | None = None,
) -> pd.DataFrame:
    """Surface samples against the nearest core and against its top metre, by metal.

    Parameters
    ----------
    surface : DataFrame
        sample_type, easting, northing and the metals as plain numbers; dredges are left out, being tracks.
    composites : DataFrame
        hole_id, from_m, to_m, easting, northing, length_m, domain and the metals.
    metals : sequence of str
    seed : int or Generator
        Of the bootstrap.
    distance_m : float
        Surface samples farther than this, in plan, from any hole with grades are left out.
    repeats, confidence : int, float
        Of the bootstrap interval.
    by_type : bool
        Add one row a metal and sample type.
    domains : sequence of str, optional
        Only core of these domains counts.

    Returns
    -------
    DataFrame
        metal, sample_type ("all" or one), n, holes, surface_mean, nearest_core_mean, top_metre_mean, ratio (surface over
        nearest core), ratio_low, ratio_high, top_ratio (over the top metre), top_ratio_low, top_ratio_high.

    Notes
    -----
    Samples that share a nearest hole are not independent: the bootstrap (Efron & Tibshirani 1993) draws holes, each with
    its samples. Ratios are ratios of means, as tonnage weighs them.
    """
    generator = np.random.default_rng(seed)
    columns = [
        "metal", "sample_type", "n", "holes", "surface_mean", "nearest_core_mean", "top_metre_mean", "ratio",
        "ratio_low", "ratio_high", "top_ratio", "top_ratio_low", "top_ratio_high",
    ]  # fmt: skip
    core = composites if domains is None else composites.loc[composites["domain"].isin(list(domains))]
    points = surface.loc[surface["sample_type"] != "dredge"]
    types = ["all", *sorted(set(points["sample_type"]))] if by_type else ["all"]
    rows = []
    pairs_of = {metal: _pairs(points, core, metal, distance_m) for metal in metals}
    # all samples first, so that their intervals are the same whether or not the types are asked for
    for kind in types:
        for metal in metals:
            pairs = pairs_of[metal]
            chosen = pairs if kind == "all" else pairs.loc[pairs["sample_type"] == kind]
            row = _compare(chosen, generator, repeats, confidence)
            rows.append({"metal": metal, "sample_type": kind, **row})
    return pd.DataFrame(rows, columns=columns)


def surface_findings(bias: pd.DataFrame) -> Findings:
    """Say which metals are richer or poorer at the surface, and whether that is beyond chance."""
    findings = Findings()
    for row in lines(bias.loc[bias["sample_type"] == "all"]):
        if not row.n:
            findings.note("surface-none", f"No surface sample with {row.metal} lies near core with it")
        elif np.isfinite(row.ratio_low) and (row.ratio_low > 1.0 or row.ratio_high < 1.0):
            findings.warning(
                "surface-bias",
                f"{row.metal}: {row.n} surface samples are {row.ratio:.1f} times as rich as the core beside them "
                f"({row.ratio_low:.1f} to {row.ratio_high:.1f})",
                "Keep surface samples out of the estimate of the body.",
            )
    return findings


def dredge_tracks(dredges: pd.DataFrame) -> tuple[pd.DataFrame, Findings]:
    """Dredges as tracks: length, direction and the spread of position that a point would hide.

    Returns
    -------
    table : DataFrame
        dredge_id, start and end coordinates, length_m, azimuth, rise_m, half_length_m (how far a piece may come from
        the middle).
    findings : Findings
    """
    findings = Findings()
    east = numbers(dredges, "end_easting") - numbers(dredges, "start_easting")
    north = numbers(dredges, "end_northing") - numbers(dredges, "start_northing")
    length = np.hypot(east, north)
    table = dredges[
        ["dredge_id", "start_easting", "start_northing", "end_easting", "end_northing"]
    ].reset_index(drop=True)
    table["length_m"] = length
    table["azimuth"] = np.degrees(np.arctan2(east, north)) % 360.0
    table["rise_m"] = numbers(dredges, "end_elevation") - numbers(dredges, "start_elevation")
    table["half_length_m"] = length / 2.0
    for row in lines(table):
        findings.note(
            "dredge-spread",
            f"Dredge {row.dredge_id} is a track of {row.length_m:.0f} m: its rock may come from anywhere along it",
        )
    return table, findings


def cap_samples(
    surface: pd.DataFrame,
    metals: Sequence[str],
    *,
    thickness_m: float,
    types: Sequence[str],
    domain: str = "cap",
    core: pd.DataFrame | None = None,
) -> tuple[pd.DataFrame, Findings]:
    """Surface samples as the samples of a thin cap, which ought to be a domain of its own.

    Parameters
    ----------
    surface : DataFrame
    metals : sequence of str
    thickness_m : float
        Stated thickness of the cap in m.
    types : sequence of str
        Sample types that the study lets in; never "dredge".
    domain : str
        Domain that they estimate.
    core : DataFrame, optional
        Composites of the core with their domain: where some are of the same domain, that is a finding.

    Returns
    -------
    frame : DataFrame
        Columns of composites: the sample stands in the middle of the cap below its position.
    findings : Findings

    Raises
    ------
    ValueError
        If the thickness is not positive, a type is not known, or a dredge is asked for.
    """
    if not thickness_m > 0:
        raise ValueError(f"thickness_m must be positive, not {thickness_m}")
    for kind in types:
        if kind not in SAMPLE_TYPES or kind == "dredge":
            raise ValueError(f"types may hold {', '.join(SAMPLE_TYPES[:-1])}, not {kind!r}")
    chosen = surface.loc[surface["sample_type"].isin(list(types))].reset_index(drop=True)
    frame = pd.DataFrame(
        {
            "composite_id": "surface-" + chosen["sample_id"].astype(str),
            "hole_id": "surface-" + chosen["sample_id"].astype(str),
            "from_m": 0.0, "to_m": thickness_m, "mid_depth_m": thickness_m / 2, "length_m": thickness_m,
            "assayed_length_m": np.nan, "recovered_length_m": np.nan, "recovery_pct": np.nan, "domain": domain,
            "easting": numbers(chosen, "easting"), "northing": numbers(chosen, "northing"),
            "elevation": numbers(chosen, "elevation") - thickness_m / 2,
            **{metal: numbers(chosen, metal) for metal in metals},
            "weight": thickness_m,
        }
    )  # fmt: skip
    findings = Findings()
    findings.warning(
        "surface-used",
        f"{len(frame)} surface samples ({', '.join(types)}) estimate domain {domain}, a cap of {thickness_m:g} m",
        "The report names this use; surface samples alone support no more than an exploration target.",
    )
    shared = int((names(core["domain"]) == domain).sum()) if core is not None else 0
    if shared and len(frame):
        findings.warning(
            "surface-mixed",
            f"Domain {domain} is estimated from {shared} composites of core and {len(frame)} surface samples together; "
            "surface samples are commonly richer",
            "Give the cap a domain of its own: surface_samples.cap_domain, with a thickness in domains.thickness_m.",
        )
    return frame, findings


def surface_use(
    surface: pd.DataFrame, use: str, cap_types: Sequence[str] = SAMPLE_TYPES
) -> tuple[str, Findings]:
    """What the study does with surface samples, in words for the report.

    Parameters
    ----------
    surface : DataFrame
    use : "none", "outline" or "cap"
    cap_types : sequence of str
        Types that a cap takes; the others stay out of it.

    Raises
    ------
    ValueError
        If the use is not known.
    """
    findings = Findings()
    counts = surface["sample_type"].value_counts()
    types = ", ".join(f"{counts[kind]} {kind.replace('_', ' ')}" for kind in SAMPLE_TYPES if kind in counts)
    if use == "none":
        return f"{len(surface)} surface samples ({types or 'none'}) are kept out of the estimate", findings
    words = {
        "outline": "help to draw the outline of the body",
        "cap": "estimate a thin cap",
    }
    if use not in words:
        raise ValueError(f"use must be 'none', 'outline' or 'cap', not {use!r}")
    if use == "cap":
        taken = surface[surface["sample_type"].isin(list(cap_types))]
        of = [
            f"{counts[kind]} {kind.replace('_', ' ')}"
            for kind in SAMPLE_TYPES
            if kind in counts and kind in cap_types
        ]
        left = (
            f"; the other {len(surface) - len(taken)} are kept out of it" if len(taken) < len(surface) else ""
        )
        text = f"{len(taken)} surface samples ({', '.join(of) or 'none'}) {words[use]}{left}"
    else:
        text = f"{len(surface)} surface samples ({types or 'none'}) {words[use]}; their grades stay out of the body"
    findings.warning("surface-used", text, "The report names this use.")
    return text, findings


def _pairs(points: pd.DataFrame, core: pd.DataFrame, metal: str, distance_m: float) -> pd.DataFrame:
    """Each surface sample with the mean, and the top-metre mean, of its nearest hole that has the metal."""
    from scipy.spatial import cKDTree

    empty = pd.DataFrame({name: np.empty(0) for name in ("hole", "sample_type", "surface", "core", "top")})
    value = numbers(points, metal)
    use = (
        np.isfinite(value)
        & np.isfinite(numbers(points, "easting"))
        & np.isfinite(numbers(points, "northing"))
    )
    grade = numbers(core, metal)
    known = core.loc[np.isfinite(grade) & np.isfinite(numbers(core, "easting"))]
    if not use.any() or known.empty:
        return empty
    holes = _hole_means(known, metal)
    gap, at = cKDTree(holes[["easting", "northing"]].to_numpy()).query(
        points.loc[use, ["easting", "northing"]].to_numpy(np.float64), distance_upper_bound=distance_m
    )
    near = np.isfinite(gap)
    row = at[near]
    return pd.DataFrame(
        {
            "hole": row,
            "sample_type": names(points["sample_type"])[use][near],
            "surface": value[use][near],
            "core": holes["mean"].to_numpy()[row],
            "top": holes["top"].to_numpy()[row],
        }
    )


def _hole_means(known: pd.DataFrame, metal: str) -> pd.DataFrame:
    length, grade = numbers(known, "length_m"), numbers(known, metal)
    in_top = np.clip(TOP_M - numbers(known, "from_m"), 0.0, length)
    code, holes = pd.factorize(names(known["hole_id"]), sort=True)
    count = len(holes)
    # the collar end of the hole stands for its place on the seafloor
    first = known.assign(_code=code).sort_values(["_code", "from_m"], kind="stable").drop_duplicates("_code")
    top = np.bincount(code, in_top, count)
    return pd.DataFrame(
        {
            "easting": numbers(first, "easting"),
            "northing": numbers(first, "northing"),
            "mean": np.bincount(code, length * grade, count) / np.bincount(code, length, count),
            "top": np.divide(
                np.bincount(code, in_top * grade, count), top, out=np.full(count, np.nan), where=top > 0
            ),
        }
    )


def _compare(
    pairs: pd.DataFrame, generator: np.random.Generator, repeats: int, confidence: float
) -> dict[str, float]:
    row: dict[str, float] = {"n": len(pairs), "holes": int(pairs["hole"].nunique())}
    with_top = pairs.loc[pairs["top"].notna()]
    row["surface_mean"] = float(pairs["surface"].mean()) if len(pairs) else np.nan
    row["nearest_core_mean"] = float(pairs["core"].mean()) if len(pairs) else np.nan
    row["top_metre_mean"] = float(with_top["top"].mean()) if len(with_top) else np.nan
    for name, part, column in (("ratio", pairs, "core"), ("top_ratio", with_top, "top")):
        value, low, high = _ratio(part, column, generator, repeats, confidence)
        row[name], row[f"{name}_low"], row[f"{name}_high"] = value, low, high
    return row


def _ratio(
    pairs: pd.DataFrame, column: str, generator: np.random.Generator, repeats: int, confidence: float
) -> tuple[float, float, float]:
    if not len(pairs) or not pairs[column].sum() > 0:
        return np.nan, np.nan, np.nan
    value = float(pairs["surface"].sum() / pairs[column].sum())
    sums = pairs.groupby("hole", sort=True)[["surface", column]].sum().to_numpy(np.float64)
    if len(sums) < 3:
        return value, np.nan, np.nan
    drawn = generator.integers(0, len(sums), size=(repeats, len(sums)))
    total = sums[drawn].sum(axis=1)
    ratio = total[:, 0] / np.where(total[:, 1] > 0, total[:, 1], np.nan)
    low, high = np.nanquantile(ratio, [0.5 - confidence / 2, 0.5 + confidence / 2])
    return value, float(low), float(high)

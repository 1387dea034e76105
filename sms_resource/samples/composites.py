"""Composites: samples joined to one length inside one domain, with nothing lost and nothing counted twice."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.composite_audit import audit_table, report_composites
from sms_resource.samples.core_length import recovered_lengths, recovered_on_pieces
from sms_resource.samples.desurvey import HolePaths
from sms_resource.samples.intervals import (
    Pieces,
    cut_holes,
    lengths,
    names,
    numbers,
    report_overlaps,
    take,
    valid_intervals,
)
from sms_resource.samples.lost_core import LostCore, Treatment, treat_lost_core
from sms_resource.samples.shared_assays import shared_assays

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
ShortRest = Literal["merge", "keep", "drop", "spread"]
Weighting = Literal["recovered_length", "length", "recovered_length_density"]

UNLOGGED = "unlogged"
INTERVAL = ("hole_id", "from_m", "to_m")


@dataclass(frozen=True)
class Composites:
    """Composites with the account of where every metre and every gram went.

    Attributes
    ----------
    frame : DataFrame
        composite_id, hole_id, from_m, to_m, mid_depth_m, length_m, assayed_length_m, recovered_length_m,
        recovery_pct, domain, easting, northing, elevation (of the middle), each metal, weight, shared_assay (a number
        common to composites that were cut out of one assay; 0 for those that share none).
        A composite without an assay keeps its length and has NaN for grades.
    audit : DataFrame
        quantity, before, in_composites, dropped, difference.
    metal_weights : DataFrame
        For each composite and metal, the weight that its grade stands on: sums of weight x grade are kept.
    findings : Findings
    """

    frame: pd.DataFrame
    audit: pd.DataFrame
    metal_weights: pd.DataFrame
    findings: Findings = field(default_factory=Findings)

    @property
    def samples(self) -> pd.DataFrame:
        """Composites that carry at least one grade."""
        return self.frame.loc[self.metal_weights.to_numpy().max(axis=1, initial=0.0) > 0]

    def __repr__(self) -> str:
        return f"Composites({len(self.frame)} composites, {len(self.samples)} with grades)"


def composite(
    assays: pd.DataFrame,
    runs: pd.DataFrame | None,
    domains: pd.DataFrame | None,
    paths: HolePaths,
    *,
    metals: Sequence[str],
    length_m: float = 1.0,
    shortest_m: float = 0.5,
    short_rest: ShortRest = "merge",
    weighting: Weighting = "recovered_length",
    lost_core: Treatment = "unknown",
    background: Mapping | None = None,
    least_recovery_pct: float = 0.0,
    densities: pd.DataFrame | None = None,
    neighbour_recovery_pct: float = 50.0,
    neighbour_distance_m: float = 50.0,
) -> Composites:
    """Join samples to composites of one length inside domains.

    Parameters
    ----------
    assays : DataFrame
        hole_id, from_m, to_m and the metals as plain numbers (NaN is not assayed).
    runs : DataFrame or None
        hole_id, from_m, to_m, recovered_length_m and/or recovery_pct. A run without core and without assay stays.
    domains : DataFrame or None
        hole_id, from_m, to_m, domain; None or what no interval covers is "unlogged".
    paths : HolePaths
    metals : sequence of str
        Grade columns.
    length_m, shortest_m : float
        Length of a composite and of the shortest rest that stands alone, in m.
    short_rest : "merge", "keep", "drop" or "spread"
        A rest shorter than ``shortest_m`` at the end of a stretch of one domain joins the composite above it, stands
        alone, or is dropped; "spread" divides the stretch into equal parts nearest to ``length_m``. A stretch that
        is itself shorter stands alone ("drop": is dropped).
    weighting : "recovered_length", "length" or "recovered_length_density"
        What a piece of core weighs in its composite.
    lost_core, background, neighbour_recovery_pct, neighbour_distance_m
        See `lost_core.LostCore`.
    least_recovery_pct : float
        Assays of runs with less recovery count as missing.
    densities : DataFrame, optional
        hole_id, from_m, to_m, dry_density_tpm3; pieces without one take the mean of their domain.

    Raises
    ------
    ValueError
        If an option is not known or a length is not positive.

    Notes
    -----
    Within one run, core is taken to come from the assayed pieces first: where a run of 1 m gave 0.4 m of core and the
    sample is logged as 0.4 m long, the other 0.6 m are the lost ones.
    """
    _check_options(length_m, shortest_m, short_rest, weighting, least_recovery_pct)
    treatment = LostCore(lost_core, background, neighbour_recovery_pct, neighbour_distance_m)
    findings = Findings()
    assays = valid_intervals(assays, "assays", findings)
    runs = valid_intervals(_or_empty(runs), "runs", findings)
    domains = valid_intervals(_or_empty(domains, "domain"), "domains", findings)
    densities = valid_intervals(_or_empty(densities), "densities")

    first = cut_holes([assays, runs, domains])
    for table, rows, what in zip((assays, runs, domains), first.overlapping, ("assays", "runs", "domains")):
        report_overlaps(table, rows, what, findings)
    plan = _plan(first, names(domains["domain"]), length_m, shortest_m, short_rest)
    pieces = cut_holes([assays, runs, plan, densities, plan.loc[~plan["dropped"]]])
    sample, run, owner, dense, kept = pieces.rows
    inside = owner >= 0
    holes = pieces.holes[pieces.hole]

    grades = np.column_stack([take(numbers(assays, metal), sample) for metal in metals])
    run_recovery = take(recovered_lengths(runs) / lengths(runs), run)
    recovered = recovered_on_pieces(pieces.length, run, sample >= 0, recovered_lengths(runs), lengths(runs))
    poor = run_recovery * 100.0 < least_recovery_pct
    grades[poor] = np.nan
    middle = paths.positions(holes, (pieces.start + pieces.end) / 2)
    domain_codes, domain_names = pd.factorize(names(plan["domain"]))
    result = treat_lost_core(
        treatment,
        length=pieces.length,
        recovered=np.where(poor, 0.0, recovered),
        run_recovery=run_recovery,
        grades=grades,
        metals=list(metals),
        run=run,
        domain=_take_number(domain_codes, owner),
        domain_names=list(domain_names),
        hole=pieces.hole,
        positions=middle,
        by_length=weighting == "length",
        findings=findings,
    )
    weights, amounts = result
    if weighting == "recovered_length_density":
        factor = _piece_density(take(numbers(densities, "dry_density_tpm3"), dense), owner, domain_codes)
        weights, amounts = weights * factor[:, None], amounts * factor[:, None]

    count = len(plan)
    place = np.where(inside, owner, count)
    metal_weight = _sums(place, weights, count)
    metal_amount = _sums(place, amounts, count)
    with np.errstate(invalid="ignore", divide="ignore"):
        grade = np.where(metal_weight > 0, metal_amount / metal_weight, np.nan)
    assayed = np.asarray(np.isfinite(grades).any(axis=1))
    frame = plan.drop(columns="dropped")
    frame["mid_depth_m"] = (frame["from_m"] + frame["to_m"]) / 2
    frame["length_m"] = frame["to_m"] - frame["from_m"]
    frame["assayed_length_m"] = _sum(place, np.where(assayed, pieces.length, 0.0), count)
    with_run = np.isfinite(recovered)
    run_length = _sum(place, np.where(with_run, pieces.length, 0.0), count)
    got = _sum(place, np.where(with_run, recovered, 0.0), count)
    frame["recovered_length_m"] = np.where(run_length > 0, got, np.nan)
    with np.errstate(invalid="ignore", divide="ignore"):
        frame["recovery_pct"] = np.where(run_length > 0, 100.0 * got / run_length, np.nan)
    xyz = paths.positions(names(frame["hole_id"]), frame["mid_depth_m"])
    frame["easting"], frame["northing"], frame["elevation"] = xyz.T
    frame = frame.assign(**dict(zip(metals, grade.T)), weight=metal_weight.max(axis=1, initial=0.0))
    frame["shared_assay"] = shared_assays(np.where(kept >= 0, owner, -1), sample, assayed, count)

    audit = audit_table(assays, runs, first, pieces, kept >= 0, grades, recovered, metals, poor)
    keep = ~plan["dropped"].to_numpy()
    frame = frame.loc[keep].reset_index(drop=True)
    number = frame.groupby("hole_id", sort=False).cumcount() + 1
    frame.insert(0, "composite_id", frame["hole_id"].astype(str) + "-" + number.astype(str).str.zfill(3))
    order = [
        "composite_id", *INTERVAL, "mid_depth_m", "length_m", "assayed_length_m", "recovered_length_m",
        "recovery_pct", "domain", "easting", "northing", "elevation", *metals, "weight", "shared_assay",
    ]  # fmt: skip
    metal_weights = pd.DataFrame(metal_weight[keep], columns=list(metals))
    report_composites(
        frame, audit, assays, runs, paths, pieces, assayed, with_run, recovered, metal_weights, findings
    )
    return Composites(frame[order], audit, metal_weights, findings)


def _plan(
    pieces: Pieces, domain_of_row: NDArray[np.object_], length: float, shortest: float, short_rest: ShortRest
) -> pd.DataFrame:
    """Where composites begin and end: hole_id, from_m, to_m, domain, dropped."""
    labels = np.append(domain_of_row, UNLOGGED)
    codes, domain_names = pd.factorize(labels)
    domain = codes[pieces.rows[2]]  # row -1 finds the label that was appended
    touching = np.zeros(len(pieces), dtype=bool)
    touching[1:] = (
        (pieces.hole[1:] == pieces.hole[:-1])
        & (domain[1:] == domain[:-1])
        & (pieces.start[1:] == pieces.end[:-1])
    )
    covered = np.asarray((np.stack(pieces.rows) >= 0).any(axis=0))
    touching[1:] &= covered[1:] & covered[:-1]
    first = np.flatnonzero(~touching)
    last = np.append(first[1:], len(pieces)) - 1 if len(pieces) else first
    real = covered[first]
    first, last = first[real], last[real]
    start, end = pieces.start[first], pieces.end[last]
    total = end - start

    full = np.floor(total / length + 1e-9).astype(np.int64)
    rest = total - full * length
    rest = np.where(rest < 1e-9, 0.0, rest)
    alone = rest >= shortest - 1e-9
    step = np.full(len(total), length)
    if short_rest == "spread":
        count = np.maximum(np.rint(total / length).astype(np.int64), 1)
        step = total / count
    elif short_rest == "merge":
        count = np.maximum(full + (alone & (rest > 0)), 1)
    else:
        count = np.maximum(full + (rest > 0), 1)
    stretch = np.repeat(np.arange(len(total)), count)
    within = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    is_last = within == count[stretch] - 1
    begin = start[stretch] + within * step[stretch]
    finish = np.where(is_last, end[stretch], start[stretch] + (within + 1) * step[stretch])
    dropped = np.zeros(len(begin), dtype=bool)
    if short_rest == "drop":
        dropped = is_last & (rest[stretch] > 0) & ~alone[stretch]
    return pd.DataFrame(
        {
            "hole_id": pieces.holes[pieces.hole[first]][stretch],
            "from_m": begin,
            "to_m": finish,
            "domain": np.asarray(domain_names, dtype=object)[domain[first]][stretch],
            "dropped": dropped,
        }
    )


def _piece_density(density: Floats, owner: Integers, domain_codes: Integers) -> Floats:
    """Dry density of each piece; where it has none the mean of its domain, else of all, else 1."""
    known = np.isfinite(density) & (owner >= 0)
    if not known.any():
        return np.ones(len(density))
    domain = np.where(owner >= 0, domain_codes[owner], 0) if len(domain_codes) else owner
    size = int(domain.max(initial=0)) + 1
    count = np.bincount(domain[known], minlength=size)
    total = np.bincount(domain[known], density[known], size)
    mean = np.where(count > 0, total / np.maximum(count, 1), density[known].mean())
    return np.where(np.isfinite(density), density, mean[domain])


def _check_options(
    length_m: float, shortest_m: float, short_rest: str, weighting: str, least_recovery_pct: float
) -> None:
    if not length_m > 0:
        raise ValueError(f"length_m must be positive, not {length_m}")
    if not 0 <= shortest_m <= length_m:
        raise ValueError(f"shortest_m must lie between 0 and length_m ({length_m}), not {shortest_m}")
    if short_rest not in ("merge", "keep", "drop", "spread"):
        raise ValueError(f"short_rest must be 'merge', 'keep', 'drop' or 'spread', not {short_rest!r}")
    if weighting not in ("recovered_length", "length", "recovered_length_density"):
        raise ValueError(
            f"weighting must be 'recovered_length', 'length' or 'recovered_length_density', not {weighting!r}"
        )
    if not 0 <= least_recovery_pct <= 100:
        raise ValueError(f"least_recovery_pct must lie between 0 and 100, not {least_recovery_pct}")


def _or_empty(table: pd.DataFrame | None, *more: str) -> pd.DataFrame:
    if table is not None and len(table):
        return table
    return pd.DataFrame({name: np.empty(0, dtype=object) for name in (*INTERVAL, *more)})


def _take_number(values: Integers, rows: Integers) -> Integers:
    return np.append(values, -1)[rows]


def _sum(place: Integers, amount: Floats, count: int) -> Floats:
    return np.bincount(place, amount, count + 1)[:count].astype(np.float64, copy=False)


def _sums(place: Integers, amounts: Floats, count: int) -> Floats:
    return np.column_stack([_sum(place, column, count) for column in amounts.T])

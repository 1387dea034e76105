"""Contact surfaces between layered domains, from logged holes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.base import ThicknessData, interpolate_thickness
from sms_resource.blocks.body import Body
from sms_resource.blocks.contacts import Paths
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.honour import honour
from sms_resource.blocks.layers import LayeredDomains
from sms_resource.findings import Findings

__all__ = ["LayeredDomains", "layered_domains"]

Array = NDArray[Any]


def layered_domains(
    body: Body,
    domain_intervals: pd.DataFrame,
    collars: pd.DataFrame,
    paths: Paths,
    names: Sequence[str],
    *,
    thickness_m: Mapping[str, float] | None = None,
    findings: Findings | None = None,
) -> LayeredDomains:
    """Lay the contacts between domains that follow each other from the seafloor down.

    In each hole the contact between the upper and the lower domains is put at the depth that leaves the least
    length of log on the wrong side. A hole that saw only upper domains tells that the contact lies at its last
    sulphide or below; one that saw only lower domains puts the contact at the seafloor. The depths are kriged
    over the body and honoured at the holes.

    Parameters
    ----------
    body : Body
    domain_intervals : DataFrame
        hole_id, from_m, to_m, domain.
    collars : DataFrame
        hole_id of the holes to use.
    paths : object with ``positions(hole_ids, depths)``
    names : sequence of str
        Domains from the seafloor down.
    thickness_m : mapping, optional
        Stated thickness in m of domains, such as a cap; their contact then follows from it.
    findings : Findings, optional
        What was found is added to it.

    Returns
    -------
    LayeredDomains
    """
    findings = Findings() if findings is None else findings
    stated = dict(thickness_m or {})
    unknown = set(stated) - set(names)
    if unknown:
        raise ValueError(
            f"thickness_m names {', '.join(sorted(unknown))}, not among the domains {', '.join(names)}"
        )
    logged = _logged_depths(body, domain_intervals, collars, paths, list(names))
    contacts: list[SurfaceGrid] = []
    above = np.zeros(body.top.shape)
    for level, name in enumerate(names[:-1]):
        if name in stated:
            depth = above + float(stated[name])
        else:
            depth = _contact(body, logged, level, name, findings)
        above = np.maximum(depth, above)
        contacts.append(body.top.with_values(above.copy()))
    return LayeredDomains(tuple(names), tuple(contacts))


def _logged_depths(
    body: Body, intervals: pd.DataFrame, collars: pd.DataFrame, paths: Paths, names: list[str]
) -> pd.DataFrame:
    """Vertical depth below the seafloor of each interval of a named domain, with the domain's level."""
    wanted = intervals["domain"].isin(names) & intervals["hole_id"].isin(set(collars["hole_id"]))
    part = intervals[wanted].reset_index(drop=True)
    ids = part["hole_id"].to_numpy()
    seafloor = body.recipe.get("seafloor", body.top)
    ends = []
    for column in ("from_m", "to_m"):
        at = np.asarray(paths.positions(ids, part[column].to_numpy(dtype=np.float64))).reshape(-1, 3)
        ends.append((at, seafloor.sample(at[:, 0], at[:, 1]) - at[:, 2]))
    middle = 0.5 * (ends[0][0] + ends[1][0])
    frame = pd.DataFrame({
        "hole_id": ids, "level": part["domain"].map({name: n for n, name in enumerate(names)}).to_numpy(dtype=int),
        "easting": middle[:, 0], "northing": middle[:, 1], "upper": ends[0][1], "lower": ends[1][1],
        "bottom_easting": ends[1][0][:, 0], "bottom_northing": ends[1][0][:, 1],
    })  # fmt: skip
    return frame[np.isfinite(frame["upper"]) & np.isfinite(frame["lower"])]


def _contact(body: Body, logged: pd.DataFrame, level: int, name: str, findings: Findings) -> Array:
    """Depth in m of the contact under one level, on the body's lattice."""
    import shapely

    rows = []
    for _, hole in logged.groupby("hole_id", sort=True):
        is_upper = (hole["level"] <= level).to_numpy()
        upper, lower = hole["upper"].to_numpy(), hole["lower"].to_numpy()
        candidates = np.unique(np.concatenate([[0.0], upper, lower]))
        clipped_above = np.clip(lower - candidates[:, None], 0, lower - upper)  # length below each candidate
        wrong = np.where(is_upper, clipped_above, (lower - upper) - clipped_above).sum(axis=1)
        best = int(np.argmin(wrong))
        place = hole.iloc[int(np.argmin(np.abs(lower - candidates[best])))]
        depth = 0.0 if not is_upper.any() else max(float(candidates[best]), 0.0)
        rows.append((place["bottom_easting"], place["bottom_northing"], depth, bool(is_upper.all())))
    table = np.array([row[:3] for row in rows], dtype=np.float64).reshape(-1, 3)
    is_open = np.array([row[3] for row in rows], dtype=bool)
    inside = np.zeros(0, dtype=bool)
    if len(table):
        inside = shapely.covers(body.outline, shapely.points(table[:, :2]))
    table, is_open = table[inside], is_open[inside]
    if not len(table) or is_open.all():
        findings.warning(
            "domain-surface-gap",
            f"no hole shows what lies under the domain {name!r}; it fills the body down to its base",
            "state its thickness, or treat the body as one domain",
        )
        return np.full(body.top.shape, 1e6)
    data = ThicknessData(table[:, 0], table[:, 1], table[:, 2], is_open, np.zeros(len(table)))
    made = interpolate_thickness(body.top, body.outline, data, edge_thickness_m=None)
    return honour(made.thickness, data.x, data.y, data.thickness, data.is_open).values

"""Exclusion zones and tenure, made ready to cut the body."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from sms_resource.findings import Findings

TENURE = "tenure"
VENT = "active_vent"


@dataclass(frozen=True, eq=False)
class Zone:
    """One area to be taken, without what earlier zones have taken."""

    key: str
    what: str
    geometry: Any


def prepare_zones(
    zones: Any,
    tenure: Any,
    outline: Any,
    crs: Any,
    findings: Findings,
    exclude_status: tuple[str, ...] | None = None,
    vent_buffer_m: float | None = None,
) -> list[Zone]:
    """Buffered zones inside the outline, in the order given, tenure first, none overlapping an earlier one.

    Parameters
    ----------
    zones : GeoDataFrame or None
        name, status, buffer_m, geometry.
    tenure : shapely geometry or None
        Area held.
    outline : shapely geometry
        Of the body.
    crs : str or None
        Its coordinate system.
    findings : Findings
        Zones that cannot be used are added to it.
    exclude_status : tuple of str, optional
        Statuses that are taken; None takes all.
    vent_buffer_m : float, optional
        Buffer round active vents, in place of their own.
    """
    out: list[Zone] = []
    taken: Any = None
    rows = [] if zones is None else list(zones.to_dict("records"))
    if rows and not _same_system(zones, crs, findings):
        return []
    held = [
        row["geometry"] for row in rows if str(row.get("status", "")) == TENURE and _usable(row, findings)
    ]
    if tenure is not None:
        held.append(tenure)
    if held:
        import shapely

        outside = outline.difference(shapely.union_all(held))
        out.append(Zone(TENURE, "outside the tenure", outside))
        taken = outside
    keys: dict[str, int] = {}
    for row in rows:
        status = str(row.get("status", "zone") or "zone")
        if status == TENURE or (exclude_status is not None and status not in exclude_status):
            continue
        if not _usable(row, findings):
            continue
        buffer_m = row.get("buffer_m", 0.0)
        buffer_m = 0.0 if buffer_m is None or buffer_m != buffer_m else float(buffer_m)
        if status == VENT and vent_buffer_m is not None:
            buffer_m = vent_buffer_m
        name = str(row.get("name", "") or status)
        area = row["geometry"].buffer(buffer_m) if buffer_m else row["geometry"]
        area = area.intersection(outline)
        if area.is_empty or area.area == 0:
            findings.note("screen-zone-empty", f"zone {name!r} does not reach the body", "")
            area = area.buffer(0)
        elif taken is not None:
            area = area.difference(taken)
        taken = area if taken is None else taken.union(area)
        count = keys[name] = keys.get(name, 0) + 1
        key = f"zone {name}" if count == 1 else f"zone {name} ({count})"
        what = f"{status.replace('_', ' ')}: {name}" + (f", with {buffer_m:g} m around" if buffer_m else "")
        out.append(Zone(key, what, area))
    return out


def _same_system(zones: Any, crs: Any, findings: Findings) -> bool:
    """Whether zones and body share a coordinate system; geopandas itself only warns."""
    given = getattr(zones, "crs", None)
    if given is None or crs is None:
        return True
    from pyproj import CRS

    if CRS.from_user_input(given).equals(CRS.from_user_input(crs), ignore_axis_order=True):
        return True
    findings.error("screen-crs", f"the zones are in {given.name}, the body in {crs}",
                   "project the zones into the study's coordinate system")  # fmt: skip
    return False


def _usable(row: dict[Any, Any], findings: Findings) -> bool:
    geometry = row.get("geometry")
    name = str(row.get("name", "") or row.get("status", "zone"))
    if geometry is None or geometry.is_empty:
        findings.error("screen-zone-empty", f"zone {name!r} has no geometry", "draw it, or take its row out",
                       row=row.get("source_row"))  # fmt: skip
        return False
    if not geometry.is_valid:
        findings.error(
            "screen-zone-empty", f"zone {name!r} crosses itself", "redraw it", row=row.get("source_row")
        )
        return False
    return True

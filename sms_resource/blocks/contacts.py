"""Where each hole puts the base of the sulphide."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any, Protocol

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.findings import Findings

CONTACT_COLUMNS = [
    "hole_id", "easting", "northing", "elevation", "thickness_m", "kind", "base_depth_m", "reason", "source_row",
]  # fmt: skip


class Paths(Protocol):
    """What is asked of the holes' paths: positions (n, 3) of depths down holes."""

    def positions(self, hole_ids: Any, depths: ArrayLike) -> NDArray[np.float64]:
        """Easting, northing and elevation of each depth."""
        ...


def base_contacts(
    collars: pd.DataFrame,
    domain_intervals: pd.DataFrame,
    paths: Paths,
    sulphide_domains: Iterable[str],
    seafloor: SurfaceGrid,
    *,
    end_tolerance_m: float = 0.1,
    waste_note_m: float = 2.0,
    findings: Findings | None = None,
) -> pd.DataFrame:
    """Base of the sulphide in each hole, as a thickness below the seafloor.

    The base is the bottom of the deepest sulphide interval. Where the hole ended in it, the base is not
    known: it lies at the end or below (kind "open"). A hole without sulphide has thickness zero.

    Parameters
    ----------
    collars : DataFrame
        hole_id, length_m, ended_in ("sulphide" | "host" | "lost" | "unknown"), source_row.
    domain_intervals : DataFrame
        hole_id, from_m, to_m, domain; contiguous intervals already merged.
    paths : object with ``positions(hole_ids, depths)``
        Desurveyed holes.
    sulphide_domains : iterable of str
        The domains that make up the body.
    seafloor : SurfaceGrid
        Thickness is measured from it, straight down, at the position of the contact.
    end_tolerance_m : float
        A sulphide interval that stops this close to the end of the hole counts as reaching it.
    waste_note_m : float
        Waste between sulphide intervals longer than this is reported.
    findings : Findings, optional
        What was found is added to it.

    Returns
    -------
    DataFrame
        One row a hole: hole_id, easting, northing, elevation (of the contact), thickness_m (vertical depth
        below the seafloor; NaN where the grid has no value), kind ("reached" | "open"), base_depth_m (down
        the hole), reason, source_row.
    """
    findings = Findings() if findings is None else findings
    sulphide = set(sulphide_domains)
    if not sulphide:
        raise ValueError("sulphide_domains must name at least one domain")
    groups = dict(tuple(domain_intervals.groupby("hole_id", sort=False)))
    rows: list[dict[str, Any]] = []
    for collar in collars.to_dict("records"):
        logged = groups.get(collar["hole_id"])
        if logged is None or logged.empty:
            findings.warning(
                "hole-not-logged",
                f"hole {collar['hole_id']} has no logged interval, so it says nothing about the base",
                "log the hole, or leave it out on purpose",
                row=collar.get("source_row"),
            )
            continue
        rows.append(
            _contact(
                {str(k): v for k, v in collar.items()},
                logged,
                sulphide,
                end_tolerance_m,
                waste_note_m,
                findings,
            )
        )
    frame = pd.DataFrame(rows, columns=CONTACT_COLUMNS)
    if frame.empty:
        return frame
    positions = np.asarray(paths.positions(frame["hole_id"].to_numpy(), frame["base_depth_m"].to_numpy()))
    frame["easting"], frame["northing"], frame["elevation"] = positions.T
    thickness = seafloor.sample(positions[:, 0], positions[:, 1]) - positions[:, 2]
    barren = (frame["reason"] == "no sulphide").to_numpy()
    frame["thickness_m"] = np.where(barren & np.isfinite(thickness), 0.0, thickness)
    for contact in frame[~barren].to_dict("records"):
        if np.isnan(contact["thickness_m"]):
            findings.warning("contact-no-seafloor", f"hole {contact['hole_id']}: the grid has no seafloor at its base",
                             "check its position, or mend the grid", row=contact["source_row"])  # fmt: skip
        elif contact["thickness_m"] <= 0:
            findings.warning(
                "contact-above-seafloor",
                f"hole {contact['hole_id']}: the base lies {-contact['thickness_m']:.2f} m above the seafloor",
                "match the collars to the seafloor first",
                row=contact["source_row"],
            )
    return frame


def _contact(
    collar: dict[str, Any],
    logged: pd.DataFrame,
    sulphide: set[str],
    tolerance: float,
    waste_note_m: float,
    findings: Findings,
) -> dict[str, Any]:
    """One row of the contacts; positions are filled in afterwards."""
    logged = logged.sort_values("from_m")
    in_sulphide = logged["domain"].isin(sulphide).to_numpy()
    to_m, from_m = logged["to_m"].to_numpy(), logged["from_m"].to_numpy()
    length = collar.get("length_m", np.nan)
    end = float(to_m.max()) if length is None or not np.isfinite(length) else float(length)
    row = collar.get("source_row")
    contact = {"hole_id": collar["hole_id"], "source_row": row}
    if not in_sulphide.any():
        return contact | {"kind": "reached", "base_depth_m": 0.0, "reason": "no sulphide"}
    base = float(to_m[in_sulphide].max())
    first = float(from_m[in_sulphide].min())
    waste = base - first - float((to_m - from_m)[in_sulphide].sum())
    if waste > waste_note_m:
        findings.note(
            "internal-waste",
            f"hole {collar['hole_id']}: {waste:.1f} m of other rock lies between its sulphide intervals "
            "and is inside the body",
            "keep it as a domain of its own if it is continuous",
            row=row,
        )
    at_end = base >= end - tolerance
    below = bool((to_m > base + tolerance).any())
    ended = str(collar.get("ended_in", "unknown") or "unknown")
    if ended == "host" and at_end and not below:
        return contact | {
            "kind": "reached",
            "base_depth_m": base,
            "reason": "ended in host at the last sulphide",
        }
    if below:
        return contact | {"kind": "reached", "base_depth_m": base, "reason": "other rock logged below"}
    if ended == "host":
        return contact | {"kind": "reached", "base_depth_m": base, "reason": "ended in host"}
    if ended == "unknown":
        findings.note(
            "hole-end-unknown",
            f"hole {collar['hole_id']}: how it ended is not recorded; its last logged interval is sulphide, so the "
            "base is taken to lie at its end or below",
            "record ended_in for the hole",
            row=row,
        )
    reason = {"sulphide": "ended in sulphide", "lost": "lost below sulphide"}.get(
        ended, "last logged in sulphide"
    )
    # Core lost below the last sulphide says nothing: the base lies at the last sulphide or below.
    return contact | {"kind": "open", "base_depth_m": base, "reason": reason}

"""The outline against the seafloor and the holes."""

from __future__ import annotations

from typing import Any

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.tables import LoadedData

LEAST_OUTLINE_M2, MOST_OUTLINE_M2 = 100.0, 4e6
BLANK_SHARE = 0.02  # of the outline without seafloor; a few lost cells are usual


def check_outline(data: LoadedData, findings: Findings, misplaced: bool) -> None:
    """Size of the outline, whether the grid covers it, and whether holes start in it.

    Parameters
    ----------
    misplaced : bool
        Whether collars were found in the wrong place already; then holes are not looked for.
    """
    import shapely

    if data.outline is None or len(data.outline) == 0:
        return
    file = data.files.get("outline")
    whole = data.outline.geometry.union_all()
    area = float(whole.area)
    if not LEAST_OUTLINE_M2 <= area <= MOST_OUTLINE_M2:
        findings.warning(
            "outline-size", f"The outline holds {area:.0f} m2.", "Check its coordinate system and its units.", file=file
        )  # fmt: skip
    outside = 0.0
    if data.seafloor is not None:
        box = shapely.box(*data.seafloor.bounds)
        outside = float(whole.difference(box).area)
        if outside > 1e-6 * max(area, 1.0):
            findings.error(
                "outline-off-grid",
                f"{100 * outside / area:.1f} % of the outline lies outside the grid of the seafloor.",
                "Check that both are in one coordinate system, or use a larger grid.",
                file=file,
            )
    if misplaced or outside >= area:
        return
    _blank_seafloor(data, whole, area, file, findings)
    collars = data.drill.collars
    good = collars[["easting", "northing"]].notna().all(axis=1)
    places = collars.loc[good, ["easting", "northing"]].to_numpy(dtype=np.float64)
    if len(places) and not shapely.contains_xy(whole, places[:, 0], places[:, 1]).any():
        findings.error(
            "outline-without-holes", "No hole starts inside the outline.",
            "Check that outline and collars are in one coordinate system.", file=file,
        )  # fmt: skip


def _blank_seafloor(data: LoadedData, whole: Any, area: float, file: str | None, findings: Findings) -> None:
    """Say before a run how much of the outline has no seafloor: it would hold no volume."""
    import shapely

    grid = data.seafloor
    if grid is None:
        return
    rows, columns = np.nonzero(~np.isfinite(grid.values))
    inside = shapely.contains_xy(whole, grid.x0 + columns * grid.dx, grid.y0 + rows * grid.dy)
    blank = float(np.count_nonzero(inside)) * grid.dx * grid.dy
    if blank > BLANK_SHARE * area:
        findings.warning(
            "outline-no-depth",
            f"{100 * min(blank / area, 1.0):.0f} % of the outline lies where the grid of the seafloor has no value; a run "
            "fills what is near a value, and the rest holds no volume.",
            "Mend the grid there, use another one, or draw the outline inside it.",
            file=file,
        )

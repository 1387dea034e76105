"""An outline of the body, proposed by a stated rule for the user to accept."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.body_inputs import hole_spacing
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.relief import slope

Array = NDArray[Any]


def propose_outline(
    contacts: pd.DataFrame,
    seafloor: SurfaceGrid,
    *,
    surface: pd.DataFrame | None = None,
    reach_m: float | None = None,
    slope_break_deg: float = 10.0,
    footprint_m: float = 5.0,
) -> Any:
    """Propose an outline from holes, surface samples and the break of slope at the foot of the mound.

    The rule (the tool's own; a starting point for a geologist, not a substitute):

    1. Everything within ``reach_m`` of a hole that met sulphide, or of a surface sample, belongs; gaps between
       such places narrower than twice that are closed.
    2. A place nearer to a hole without sulphide than to any with it does not belong.
    3. The flank goes on outward from there while the seafloor is steeper than ``slope_break_deg``, at most
       another ``reach_m``, and not past a barren hole.
    4. Holes in the area are filled, corners are rounded, and parts without a sulphide hole or sample dropped.

    Parameters
    ----------
    contacts : DataFrame
        easting, northing, thickness_m; a thickness of zero is a hole without sulphide.
    seafloor : SurfaceGrid
    surface : DataFrame, optional
        easting, northing, sample_type of surface samples on sulphide; dredge tracks have no place and are
        left out.
    reach_m : float, optional
        None takes the spacing of the holes, at least three cells.
    slope_break_deg, footprint_m : float
        Slope over that footprint that parts the flank from the foot.

    Returns
    -------
    shapely Polygon or MultiPolygon

    Raises
    ------
    ValueError
        If no hole met sulphide and there is no surface sample, or ``reach_m`` is not positive.
    """
    import shapely

    thickness = contacts["thickness_m"].to_numpy(dtype=np.float64)
    xy = contacts[["easting", "northing"]].to_numpy(dtype=np.float64)
    placed = np.isfinite(xy).all(axis=1)
    met, barren = xy[placed & (thickness > 0)], xy[placed & (thickness == 0)]
    if surface is not None and len(surface):
        kept = surface[surface["sample_type"] != "dredge"] if "sample_type" in surface else surface
        samples = kept[["easting", "northing"]].to_numpy(dtype=np.float64)
        met = np.vstack([met, samples[np.isfinite(samples).all(axis=1)]])
    if len(met) == 0:
        raise ValueError("contacts hold no hole with sulphide, so no outline can be proposed; give one")
    if reach_m is not None and not (math.isfinite(reach_m) and reach_m > 0):
        raise ValueError(f"reach_m must be a positive length in m, not {reach_m!r}")
    cell = max(seafloor.dx, seafloor.dy)
    if reach_m is None:
        hull = shapely.MultiPoint(met).convex_hull.buffer(3 * cell)
        holes = contacts[placed & (thickness > 0)]
        reach_m = max(hole_spacing(holes, hull), 3 * cell)
    core = shapely.union_all(shapely.buffer(shapely.points(met), reach_m)).buffer(reach_m).buffer(-reach_m)
    west, south, east, north = core.buffer(2 * reach_m).bounds
    columns = (seafloor.x >= west) & (seafloor.x <= east)
    rows = (seafloor.y >= south) & (seafloor.y <= north)
    if not columns.any() or not rows.any():
        raise ValueError("contacts lie outside the seafloor grid; check the coordinate systems of both")
    part = SurfaceGrid(
        seafloor.x[columns][0], seafloor.y[rows][0], seafloor.dx, seafloor.dy,
        seafloor.values[np.ix_(rows, columns)], seafloor.crs,
    )  # fmt: skip
    area = _grow(part, core, met, barren, reach_m, slope_break_deg, footprint_m)
    return _smooth(area, part, met, cell)


def _grow(
    part: SurfaceGrid,
    core: Any,
    met: Array,
    barren: Array,
    reach_m: float,
    slope_break_deg: float,
    footprint_m: float,
) -> NDArray[np.bool_]:
    """Cells of the body after rules 1 to 3, with holes filled."""
    import shapely
    from scipy.ndimage import binary_fill_holes, binary_propagation
    from scipy.spatial import cKDTree

    x, y = part.mesh()
    nodes = np.column_stack([x.ravel(), y.ravel()])
    allowed = np.isfinite(part.values)
    if len(barren):
        nearer = cKDTree(barren).query(nodes)[0] < cKDTree(met).query(nodes)[0]
        allowed &= ~nearer.reshape(part.shape)
    shapely.prepare(core)
    seed = shapely.contains_xy(core, x, y) & allowed
    reached = core.buffer(reach_m)
    shapely.prepare(reached)
    steep = np.nan_to_num(slope(part, footprint_m).values) > slope_break_deg
    flank = steep & allowed & shapely.contains_xy(reached, x, y)
    return binary_fill_holes(binary_propagation(seed, mask=seed | flank)) & np.isfinite(part.values)


def _smooth(area: NDArray[np.bool_], part: SurfaceGrid, met: Array, cell: float) -> Any:
    """Polygons round cells, with rounded corners, that hold sulphide."""
    import shapely
    from rasterio.features import shapes
    from rasterio.transform import Affine

    transform = Affine(part.dx, 0.0, part.x0 - 0.5 * part.dx, 0.0, part.dy, part.y0 - 0.5 * part.dy)
    found = [shapely.geometry.shape(geometry) for geometry, value in
             shapes(area.astype(np.uint8), mask=area, transform=transform) if value == 1]  # fmt: skip
    whole = shapely.union_all(found).buffer(1.5 * cell).buffer(-3.0 * cell).buffer(1.5 * cell)
    west, south, east, north = part.x[0], part.y[0], part.x[-1], part.y[-1]
    whole = shapely.simplify(whole, 0.25 * cell).intersection(shapely.box(west, south, east, north))
    points = shapely.MultiPoint(met)
    kept = [
        piece
        for piece in shapely.get_parts(whole)
        if piece.geom_type == "Polygon" and piece.intersects(points)
    ]
    if not kept:  # one short hole on a coarse grid: rounding has taken everything
        kept = [shapely.union_all(found)]
    return shapely.union_all(kept)

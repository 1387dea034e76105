"""Outlines: what makes one usable, and its exact share of every cell of a lattice."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.findings import Findings

Array = NDArray[Any]


@dataclass(frozen=True, eq=False)
class CellMoments:
    """Integrals over (polygon and cell) in units of the cell, each (rows, columns).

    ``area`` is the share of the cell inside the polygon; ``s``, ``t`` and ``st`` are the integrals of the
    position across (0 to 1, along the columns), up (0 to 1, along the rows) and of their product.
    """

    area: Array
    s: Array
    t: Array
    st: Array

    def centroid(self) -> tuple[Array, Array]:
        """Centroid of the inner part of each cell, 0 to 1 along both sides; 0.5 where nothing is inside."""
        inside = self.area > 1e-12
        safe = np.where(inside, self.area, 1.0)
        s = np.where(inside, self.s / safe, 0.5)
        t = np.where(inside, self.t / safe, 0.5)
        return np.clip(s, 0.0, 1.0), np.clip(t, 0.0, 1.0)


def polygon_edges(polygon: Any) -> Array:
    """Directed edges (e, 4) of a polygon: exterior rings counter-clockwise, holes clockwise."""
    import shapely
    from shapely.geometry.polygon import orient

    pieces = []
    for part in shapely.get_parts(polygon):
        if part.geom_type != "Polygon" or part.is_empty:
            continue
        turned = orient(part, 1.0)
        for ring in (turned.exterior, *turned.interiors):
            points = shapely.get_coordinates(ring)
            pieces.append(np.hstack([points[:-1], points[1:]]))
    return np.vstack(pieces) if pieces else np.empty((0, 4))


def lattice_moments(edges: Array, rows: int, columns: int, first_row: int = 0) -> CellMoments:
    """Exact moments of a polygon in each cell of a lattice of unit cells.

    Parameters
    ----------
    edges : ndarray (e, 4)
        From :func:`polygon_edges`, in units of cells, the lattice's lower left corner at (0, 0).
    rows, columns : int
        Size of the part of the lattice that is asked for.
    first_row : int
        Row of the lattice with which that part begins.
    """
    from sms_resource.blocks.area_kernels import cell_moments

    arrays = [np.zeros((rows, columns + 1)) for _ in range(4)]
    cell_moments(np.ascontiguousarray(edges), first_row, *arrays)
    area = np.clip(arrays[0][:, :-1], 0.0, 1.0)
    area[area < 1e-12] = 0.0
    return CellMoments(area, *(array[:, :-1] for array in arrays[1:]))


def integrate_bilinear(values: Array, moments: CellMoments, cell_area: float) -> float:
    """Exact integral over a polygon of a surface that is bilinear between its nodes.

    Parameters
    ----------
    values : ndarray (ny, nx)
        At the nodes; the cells of ``moments`` lie between them, (ny - 1, nx - 1).
    moments : CellMoments
    cell_area : float
        In m2.

    Returns
    -------
    float
        NaN nodes count as zero.
    """
    nodes = np.nan_to_num(values)
    a = nodes[:-1, :-1]
    b = nodes[:-1, 1:] - a
    c = nodes[1:, :-1] - a
    d = nodes[1:, 1:] - nodes[1:, :-1] - b
    return float(np.sum(a * moments.area + b * moments.s + c * moments.t + d * moments.st) * cell_area)


def check_outline(outline: Any, bounds: tuple[float, float, float, float] | None = None) -> Findings:
    """Findings on an outline: empty, not an area, crossing itself, or outside the seafloor grid.

    Parameters
    ----------
    outline : shapely geometry
    bounds : (float, float, float, float), optional
        West, south, east and north edge of the seafloor grid.
    """
    import shapely

    findings = Findings()
    if outline is None or not shapely.is_geometry(outline) or outline.is_empty:
        findings.error("outline-missing", "the outline of the body is missing or empty",
                       "give one polygon, or several, in the coordinate system of the study")  # fmt: skip
        return findings
    if outline.geom_type not in ("Polygon", "MultiPolygon"):
        findings.error("outline-not-area", f"the outline is a {outline.geom_type}, not an area",
                       "close the line into a polygon")  # fmt: skip
        return findings
    if not outline.is_valid:
        findings.error("outline-crosses-itself", f"the outline is not valid: {shapely.is_valid_reason(outline)}",
                       "redraw it at the place that the message names")  # fmt: skip
        return findings
    if bounds is not None:
        west, south, east, north = bounds
        inside = outline.intersection(shapely.box(west, south, east, north)).area
        if inside <= 0.0:
            findings.error("outline-outside-grid", "the outline lies wholly outside the seafloor grid",
                           "check the coordinate systems and units of both files")  # fmt: skip
        elif inside < outline.area * (1 - 1e-9):
            findings.error(
                "outline-outside-grid",
                f"{100 * (1 - inside / outline.area):.2g} % of the outline lies outside the seafloor grid",
                "extend the grid or cut the outline back to it",
            )
    return findings

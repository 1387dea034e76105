"""The seafloor grid made ready: mended, resampled, with its uncertainty."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.relief import hillshade, roughness, slope
from sms_resource.findings import Findings

__all__ = ["hillshade", "prepare_seafloor", "reproject", "resample", "roughness", "slope"]

Array = NDArray[Any]
COARSE_CELL_M = 10.0  # ship sonar at depth sees 20 to 50 m; a mound is 50 to 300 m across


def prepare_seafloor(
    grid: SurfaceGrid, *, mend_within_m: float = 3.0, sigma_m: float = 0.3, file: str | None = None
) -> tuple[SurfaceGrid, Findings, dict[str, Any]]:
    """Mend small holes in the seafloor grid and give every cell an uncertainty.

    A hole is a patch of cells without a value that does not reach the edge of the grid. It is filled only
    where each of its cells lies within ``mend_within_m`` of a value; the filling is the smooth membrane
    through its rim (Laplace's equation), which adds no new high or low. Wider holes stay empty.

    Parameters
    ----------
    grid : SurfaceGrid
        Elevations in m, negative below sea level, in a projected coordinate system.
    mend_within_m : float
        Furthest distance from a value, in m, over which a hole is filled; 0 mends nothing.
    sigma_m : float
        Standard deviation in m for a grid that brings no uncertainty of its own (0.3 m is common for
        multibeam from a vehicle near the seafloor: common practice, no source).
    file : str, optional
        Named in the findings.

    Returns
    -------
    (SurfaceGrid, Findings, dict)
        The mended grid with ``uncertainty``; what was found; and the counts: ``cells``, ``empty_cells``,
        ``mended_cells``, ``holes_left``, ``sigma_from`` ("file" or "study"), ``sigma_median_m``.

    Raises
    ------
    ValueError
        If ``mend_within_m`` or ``sigma_m`` is negative or not finite.
    """
    for name, number in (("mend_within_m", mend_within_m), ("sigma_m", sigma_m)):
        if not math.isfinite(number) or number < 0:
            raise ValueError(f"{name} must be a length of at least 0 m, not {number!r}")
    findings = Findings()
    _check_projection(grid.crs, findings, file)
    info: dict[str, Any] = {"cells": grid.values.size, "empty_cells": int(np.isnan(grid.values).sum())}
    values = np.where(np.isfinite(grid.values), grid.values, np.nan)
    if not np.isfinite(values).any():
        findings.error("seafloor-empty", "the seafloor grid holds no value at all",
                       "check its nodata value and its band", file=file)  # fmt: skip
        info |= {"mended_cells": 0, "holes_left": 0, "sigma_from": "study", "sigma_median_m": sigma_m}
        return grid.with_values(values, np.full(values.shape, sigma_m)), findings, info
    if np.nanmin(values) > 0:
        findings.warning("seafloor-above-sea-level", f"every elevation is above 0 m (lowest {np.nanmin(values):.1f} m)",
                         "a file of depths needs vertical = \"depth\" in the study", file=file)  # fmt: skip
    if max(grid.dx, grid.dy) > COARSE_CELL_M:
        findings.warning(
            "seafloor-coarse",
            f"the cells are {grid.dx:g} x {grid.dy:g} m; a mound 50 to 300 m across needs cells near 1 m",
            "use a grid from a survey near the seafloor",
            file=file,
        )
    mended, holes_left, widest = _mend(values, grid.dx, grid.dy, mend_within_m)
    filled = np.isfinite(mended) & np.isnan(values)
    if filled.any():
        findings.note("seafloor-mended", f"{int(filled.sum())} cells in holes were filled, none more than "
                      f"{mend_within_m:g} m from a value", "look at them in the seafloor layer", file=file)  # fmt: skip
    if holes_left:
        findings.warning(
            "seafloor-holes",
            f"{holes_left} holes in the grid are wider than {mend_within_m:g} m from their rim "
            f"(the widest reaches {widest:.1f} m) and stay empty",
            "raise mend_within_m if that is safe, or give a fuller grid",
            file=file,
        )
    if grid.uncertainty is not None and np.isfinite(grid.uncertainty).any():
        source = "file"
        sigma = np.where(np.isfinite(grid.uncertainty), grid.uncertainty, np.nanmedian(grid.uncertainty))
    else:
        source, sigma = "study", np.full(values.shape, sigma_m)
    info |= {
        "mended_cells": int(filled.sum()),
        "holes_left": holes_left,
        "sigma_from": source,
        "sigma_median_m": float(np.median(sigma)),
    }
    return grid.with_values(mended, sigma), findings, info


def _check_projection(crs: str | None, findings: Findings, file: str | None) -> None:
    if not crs:
        findings.error("seafloor-crs-missing", "the seafloor grid names no coordinate reference system",
                       "name it in the study, for example crs = \"EPSG:32756\"", file=file)  # fmt: skip
        return
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    try:
        system = CRS.from_user_input(crs)
    except CRSError as error:
        findings.error("seafloor-crs-missing", f"the coordinate reference system {crs!r} is not known: {error}",
                       "give an EPSG code or WKT of a projected system", file=file)  # fmt: skip
        return
    if system.is_geographic:
        findings.error(
            "seafloor-crs-geographic",
            f"the seafloor grid is in degrees ({system.name}); a volume needs metres",
            "name a projected system in the study: the grid is then projected into it",
            file=file,
        )


def _mend(values: Array, dx: float, dy: float, within_m: float) -> tuple[Array, int, float]:
    """Fill narrow holes; return the values, how many holes are left and the reach of the widest, in m."""
    from scipy import ndimage

    empty = np.isnan(values)
    labels, count = ndimage.label(empty)
    if count == 0:
        return values, 0, 0.0
    edge = np.unique(np.concatenate([labels[0], labels[-1], labels[:, 0], labels[:, -1]]))
    distance = ndimage.distance_transform_edt(empty, sampling=(dy, dx))
    reach = ndimage.maximum(distance, labels, index=np.arange(1, count + 1))
    inner = ~np.isin(np.arange(1, count + 1), edge)
    narrow = inner & (reach <= within_m * (1 + 1e-9))
    wide = inner & ~narrow
    mask = np.isin(labels, np.flatnonzero(narrow) + 1)
    filled = _membrane(values, mask) if mask.any() else values
    return filled, int(wide.sum()), float(reach[wide].max()) if wide.any() else 0.0


def _membrane(values: Array, mask: NDArray[np.bool_]) -> Array:
    """Solve Laplace's equation on the masked cells, with their neighbours as the rim."""
    from scipy import sparse
    from scipy.sparse.linalg import spsolve

    rows, cols = np.nonzero(mask)
    number = np.full(values.shape, -1)
    number[rows, cols] = np.arange(rows.size)
    right = np.zeros(rows.size)
    entries_i, entries_j = [], []
    degree = np.zeros(rows.size)
    for shift_row, shift_col in ((-1, 0), (1, 0), (0, -1), (0, 1)):
        other = number[rows + shift_row, cols + shift_col]
        neighbour = values[rows + shift_row, cols + shift_col]
        unknown = other >= 0
        usable = unknown | np.isfinite(neighbour)
        degree += usable
        entries_i.append(np.flatnonzero(unknown))
        entries_j.append(other[unknown])
        right += np.where(usable & ~unknown, np.nan_to_num(neighbour), 0.0)
    i, j = np.concatenate(entries_i), np.concatenate(entries_j)
    matrix = sparse.csc_matrix((-np.ones(i.size), (i, j)), shape=(rows.size, rows.size))
    matrix = matrix + sparse.diags(degree, format="csc")
    filled = values.copy()
    filled[rows, cols] = spsolve(matrix.tocsc(), right)
    return filled


def resample(grid: SurfaceGrid, cell_m: float, *, kind: str = "bilinear") -> SurfaceGrid:
    """The same surface on cells of another size.

    Parameters
    ----------
    grid : SurfaceGrid
    cell_m : float
        New cell edge in m.
    kind : "bilinear" | "average"
        ``average`` is the mean over the new cell, of the cells that have a value (for coarser cells).

    Raises
    ------
    ValueError
        If ``cell_m`` is not positive or ``kind`` is unknown.
    """
    if not math.isfinite(cell_m) or cell_m <= 0:
        raise ValueError(f"cell_m must be a positive length in m, not {cell_m!r}")
    if kind not in ("bilinear", "average"):
        raise ValueError(f"kind must be 'bilinear' or 'average', not {kind!r}")
    west, south, east, north = grid.bounds
    nx = max(1, math.floor((east - west) / cell_m + 1e-9))
    ny = max(1, math.floor((north - south) / cell_m + 1e-9))
    x0, y0 = west + 0.5 * cell_m, south + 0.5 * cell_m
    x, y = np.meshgrid(x0 + cell_m * np.arange(nx), y0 + cell_m * np.arange(ny))
    if kind == "average" and cell_m > min(grid.dx, grid.dy):
        values = _cell_means(grid, grid.values, x0, y0, cell_m, ny, nx)
        sigma = (
            None if grid.uncertainty is None else _cell_means(grid, grid.uncertainty, x0, y0, cell_m, ny, nx)
        )
        return SurfaceGrid(x0, y0, cell_m, cell_m, values, grid.crs, sigma)
    # The outer half cell has no cell centre beyond it: the nearest centre stands for it.
    xs = np.clip(x, grid.x[0], grid.x[-1])
    ys = np.clip(y, grid.y[0], grid.y[-1])
    sigma = None if grid.uncertainty is None else grid.sample_uncertainty(xs, ys)
    return SurfaceGrid(x0, y0, cell_m, cell_m, grid.sample(xs, ys), grid.crs, sigma)


def _cell_means(
    grid: SurfaceGrid, values: Array, x0: float, y0: float, cell_m: float, ny: int, nx: int
) -> Array:
    x, y = grid.mesh()
    col = np.floor((x - x0) / cell_m + 0.5).astype(np.int64)
    row = np.floor((y - y0) / cell_m + 0.5).astype(np.int64)
    good = np.isfinite(values) & (col >= 0) & (col < nx) & (row >= 0) & (row < ny)
    cell = row[good] * nx + col[good]
    count = np.bincount(cell, minlength=ny * nx)
    total = np.bincount(cell, weights=values[good], minlength=ny * nx)
    means = np.full(ny * nx, np.nan)
    np.divide(total, count, out=means, where=count > 0)
    return means.reshape(ny, nx)


def reproject(grid: SurfaceGrid, crs: str, *, cell_m: float | None = None) -> SurfaceGrid:
    """Project a grid, for example one in degrees, into another coordinate system (bilinear).

    Parameters
    ----------
    grid : SurfaceGrid
        With a ``crs``.
    crs : str
        The projected system wanted.
    cell_m : float, optional
        Cell edge in m; None keeps about the resolution of the grid.

    Raises
    ------
    ValueError
        If the grid names no coordinate system.
    """
    if not grid.crs:
        raise ValueError("grid names no coordinate system, so it cannot be projected; give its crs")
    from rasterio.transform import Affine
    from rasterio.warp import Resampling, calculate_default_transform
    from rasterio.warp import reproject as warp

    west, south, east, north = grid.bounds
    ny, nx = grid.shape
    source = Affine(grid.dx, 0.0, west, 0.0, -grid.dy, north)
    resolution = {} if cell_m is None else {"resolution": cell_m}
    target, width, height = calculate_default_transform(
        grid.crs, crs, nx, ny, west, south, east, north, **resolution
    )

    def project(values: Array) -> Array:
        out = np.full((height, width), np.nan)
        warp(np.ascontiguousarray(values[::-1]), out, src_transform=source, src_crs=grid.crs,
             dst_transform=target, dst_crs=crs, src_nodata=np.nan, dst_nodata=np.nan,
             resampling=Resampling.bilinear)  # fmt: skip
        return out[::-1].copy()

    sigma = None if grid.uncertainty is None else project(grid.uncertainty)
    return SurfaceGrid(
        target.c + 0.5 * target.a, target.f + (height - 0.5) * target.e, target.a, -target.e,
        project(grid.values), crs, sigma,
    )  # fmt: skip

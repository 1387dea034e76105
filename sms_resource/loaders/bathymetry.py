"""Grids of the seafloor, or of a base surface, as the package keeps them."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any, Literal

import numpy as np

from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.findings import Findings
from sms_resource.loaders.coordinate_systems import agree_crs, crs_name, metric, same_crs
from sms_resource.loaders.netcdf import is_classic, read_netcdf
from sms_resource.loaders.raster import DEEPEST_M, RasterCells, blank_fill_values, read_raster, warp
from sms_resource.loaders.reading import readable
from sms_resource.loaders.xyz import looks_like_xyz, read_xyz

COARSE_M = 10.0  # beyond this a cell is of the size of the mound's own relief


def load_grid(
    path: Path,
    *,
    shown_as: str = "",
    crs: str | None = None,
    declared_crs: str | None = None,
    vertical: Literal["elevation", "depth"] = "elevation",
    band: int = 1,
    uncertainty_band: int | None = None,
    variable: str | None = None,
    reproject: bool = False,
) -> tuple[SurfaceGrid | None, Findings]:
    """Read a grid: GeoTIFF, text grid, NetCDF, BAG and whatever else rasterio opens, or XYZ text.

    Cells keep their centres, whether the file registers pixels or nodes. A grid in degrees is brought into
    the study's system; one in another projected system is refused unless ``reproject`` is set, because
    bathymetry that was projected twice is no longer what was surveyed.

    Parameters
    ----------
    path : Path
    shown_as : str
        Name of the file in findings.
    crs : str, optional
        System of the study; the file's own if None.
    declared_crs : str, optional
        System of the file on the user's word, where the file has none inside.
    vertical : "elevation" | "depth"
        Whether cells hold elevations (negative below sea level) or depths (positive downwards).
    band, uncertainty_band : int
        Bands of elevation and of its standard deviation, counted from 1. A BAG's second band is taken as
        its uncertainty.
    variable : str, optional
        Variable of a NetCDF file that has several.
    reproject : bool
        Whether a grid in another projected system, or a rotated one, may be resampled.

    Returns
    -------
    grid : SurfaceGrid or None
        Elevations; None where the file cannot be used.
    findings : Findings
    """
    findings = Findings()
    name = shown_as or path.name
    if not readable(path, name, findings):
        return None, findings
    if path.stat().st_size == 0:
        findings.error("file-empty", "The file has no content.", "Export the grid again.", file=name)
        return None, findings
    if looks_like_xyz(path):
        cells = read_xyz(path, name, findings)
    elif is_classic(path):
        cells = read_netcdf(path, name, variable, findings)
    else:
        tried = Findings()
        cells = read_raster(path, name, band, uncertainty_band, variable, tried)
        plain = cells is None and band == 1 and uncertainty_band is None and _is_netcdf(path)
        if plain and any(item.code == "grid-no-position" for item in tried):
            cells = read_netcdf(path, name, variable, findings)
        else:
            findings.extend(tried)
    if cells is None or findings.has_errors:
        return None, findings
    cells = blank_fill_values(cells, name, findings)
    if not np.isfinite(cells.values).any():
        findings.error(
            "grid-empty",
            "No cell of the grid has a value.",
            "Check the nodata value and the area.",
            file=name,
        )
        return None, findings
    placed = _place(cells, crs, declared_crs, reproject, name, findings)
    if placed is None:
        return None, findings
    grid = _surface(placed, crs)
    return _signed(grid, vertical, name, findings), findings


def _is_netcdf(path: Path) -> bool:
    with path.open("rb") as stream:
        return stream.read(4) in (b"CDF\x01", b"CDF\x02", b"CDF\x05", b"\x89HDF")


def _place(
    cells: RasterCells, crs: str | None, declared: str | None, reproject: bool, name: str, findings: Findings
) -> RasterCells | None:
    """The cells in the study's system, north up."""
    agreed = agree_crs(cells.crs, declared, crs, "grid", name, findings)
    if agreed is None:
        return None
    source, target = agreed
    cells = replace(cells, crs=source)
    if target.is_geographic:
        findings.error(
            "crs-geographic",
            f"The grid is in degrees ({crs_name(source)}) and the study names no projected system.",
            'State a projected system in metres in the study, such as crs = "EPSG:32702".',
            file=name,
        )
        return None
    if not metric(source, "grid", name, findings) or not metric(target, "grid", name, findings):
        return None
    rotated = abs(cells.transform.b) > 1e-9 or abs(cells.transform.d) > 1e-9
    same = same_crs(source, target)
    if same and not rotated:
        return cells
    if not reproject and (rotated or source.is_projected):
        what = (
            "The grid is rotated"
            if same
            else f"The grid is in {crs_name(source)}, the study in {crs_name(target)}"
        )
        findings.error(
            "grid-rotated" if same else "crs-different",
            f"{what}.",
            "Resample it in a GIS and look at the result, or allow it with reproject = true.",
            file=name,
        )
        return None
    warped = warp(cells, target, name, findings)
    if warped is not None and not np.isfinite(warped.values).any():
        findings.error(
            "grid-empty",
            f"No cell is left when the grid is brought from {crs_name(source)} into {crs_name(target)}.",
            "Check that its coordinates and its system belong together.",
            file=name,
        )
        return None
    if warped is not None:
        findings.note(
            "grid-reprojected",
            f"The grid was brought from {crs_name(source)} into {crs_name(target)}: "
            f"{warped.values.shape[1]} x {warped.values.shape[0]} cells of {warped.transform.a:.3f} m, bilinear.",
            "Heights were not transformed; holes and grid must share one vertical datum.",
            file=name,
        )
    return warped


def _surface(cells: RasterCells, crs: str | None) -> SurfaceGrid:
    """Cells with the southernmost row and the westernmost column first."""
    t: Any = cells.transform
    layers = []
    for layer in (cells.values, cells.uncertainty):
        if layer is not None:
            layer = layer[::-1] if t.e < 0 else layer
            layer = np.ascontiguousarray(layer if t.a > 0 else layer[:, ::-1])
        layers.append(layer)
    ny, nx = cells.values.shape
    x0 = t.c + t.a * (0.5 if t.a > 0 else nx - 0.5)
    y0 = t.f + t.e * (0.5 if t.e > 0 else ny - 0.5)
    values = layers[0]
    assert values is not None
    return SurfaceGrid(x0, y0, abs(t.a), abs(t.e), values, crs or crs_name(cells.crs), layers[1])


def _signed(grid: SurfaceGrid, vertical: str, name: str, findings: Findings) -> SurfaceGrid | None:
    """Elevations, negative below sea level; a finding where the sign contradicts what the study says."""
    values = grid.values
    middle = float(np.nanmedian(values))
    if vertical == "depth":
        if middle < 0:
            findings.error(
                "elevation-sign",
                f"The study says that the grid holds depths, positive downwards, but its median is {middle:.1f} m.",
                'Write vertical = "elevation" for this grid.',
                file=name,
            )
            return None
        grid = grid.with_values(-values + 0.0, grid.uncertainty)
    elif middle > 0:
        findings.error(
            "elevation-sign",
            f"The grid should hold elevations, negative below sea level, but its median is {middle:.1f} m.",
            'Write vertical = "depth" for this grid if it holds depths, positive downwards.',
            file=name,
        )
        return None
    deepest = float(np.nanmin(grid.values))
    if deepest < -DEEPEST_M:
        findings.error(
            "grid-impossible",
            f"The lowest cell is at {deepest:.0f} m, deeper than any sea.",
            "Check the unit and the nodata value of the grid.",
            file=name,
        )
        return None
    if max(grid.dx, grid.dy) > COARSE_M:
        findings.warning(
            "grid-coarse",
            f"The cells are {grid.dx:.1f} x {grid.dy:.1f} m; a mound needs a grid of about a metre.",
            "Use bathymetry from a vehicle near the seafloor; sonar from the ship sees 20 to 50 m.",
            file=name,
        )
    return grid

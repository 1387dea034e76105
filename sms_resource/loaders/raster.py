"""A grid as it lies in its file: cells, where they are, and in which coordinate system."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.loaders.coordinate_systems import parse_crs
from sms_resource.loaders.vectors import first_line

MOST_CELLS = 25_000_000  # 5 km x 5 km at 1 m; 200 MB as float64
FILL_VALUES = (-9999.0, -99999.0, 9999.0, 99999.0, -32767.0, -32768.0, 1_000_000.0, -1_000_000.0)
DEEPEST_M = 12_000.0
_ELEVATION_NAMES = frozenset({"elevation", "z", "depth", "bathymetry", "topo", "altitude", "band1"})


@dataclass(frozen=True, eq=False)
class RasterCells:
    """Cells of one band, first row northernmost, with the affine transform of their corners.

    Parameters
    ----------
    values : ndarray (rows, columns)
        NaN where there is no value.
    transform : Affine
        Pixel corner to world.
    crs : pyproj CRS or None
    uncertainty : ndarray, optional
        One standard deviation, of the same shape.
    """

    values: NDArray[np.float64]
    transform: Any
    crs: Any
    uncertainty: NDArray[np.float64] | None = None


def too_large(columns: int, rows: int, name: str, findings: Findings) -> bool:
    """Whether a grid has more cells than are read; a finding if so."""
    if columns * rows <= MOST_CELLS:
        return False
    findings.error(
        "grid-too-large",
        f"The grid has {columns} x {rows} = {columns * rows / 1e6:.0f} million cells; "
        f"up to {MOST_CELLS / 1e6:.0f} million are read.",
        "Cut it to the deposit and its surroundings (a kilometre or two), or resample it.",
        file=name,
    )
    return True


def read_raster(
    path: Path, name: str, band: int, uncertainty_band: int | None, variable: str | None, findings: Findings
) -> RasterCells | None:
    """Read one band with rasterio, and the uncertainty band where there is one.

    Band 2 of a BAG is its uncertainty, by the format's definition, and is taken without being asked for.
    """
    try:
        with quiet_libraries(), _open(path, name, variable, findings) as data:
            if data is None:
                return None
            return _read_open(data, name, band, uncertainty_band, findings)
    except _raster_errors() as error:
        findings.error(
            "grid-unreadable",
            f"The grid cannot be read: {first_line(error)}.",
            "It may be cut short or damaged: copy or export it again, for example as GeoTIFF.",
            file=name,
        )
        return None


def _raster_errors() -> tuple[type[BaseException], ...]:
    from rasterio._err import CPLE_BaseError
    from rasterio.errors import RasterioError

    return RasterioError, CPLE_BaseError, OSError, ValueError, MemoryError, RuntimeError


def no_position(name: str, findings: Findings) -> None:
    """The finding of a grid that does not say where its cells are."""
    findings.error(
        "grid-no-position",
        "The file does not say where its cells are.",
        "Export the grid with its position (a GeoTIFF, or a text grid with its header).",
        file=name,
    )


@contextmanager
def quiet_libraries() -> Iterator[None]:
    """What native libraries print about a damaged file is silenced: it becomes a finding instead."""
    import logging
    import sys

    import rasterio

    log = logging.getLogger("rasterio")
    level, hooks = log.level, (sys.excepthook, sys.unraisablehook)
    log.setLevel(logging.CRITICAL)
    # rasterio's log callback trips over messages that quote the bytes of a damaged file, and Python prints that;
    # exceptions of our own are caught outside and never reach these hooks
    sys.excepthook = lambda *event: None
    sys.unraisablehook = lambda event: None
    try:
        with warnings.catch_warnings(), rasterio.Env(GDAL_PAM_ENABLED="NO"):
            warnings.simplefilter("ignore")
            yield
    finally:
        log.setLevel(level)
        sys.excepthook, sys.unraisablehook = hooks


@contextmanager
def _open(path: Path, name: str, variable: str | None, findings: Findings) -> Iterator[Any]:
    import rasterio

    with rasterio.open(path) as data:
        if data.count > 0 or not data.subdatasets:
            yield data
            return
        names = {text.rsplit(":", 1)[-1].strip("/").rsplit("/", 1)[-1]: text for text in data.subdatasets}
        chosen = pick_variable(names, variable, name, findings)
    if chosen is None:
        yield None
        return
    with rasterio.open(chosen) as data:
        yield data


def pick_variable(names: dict[str, str], variable: str | None, name: str, findings: Findings) -> str | None:
    """What stands in ``names`` for the variable that is meant; a finding where that is unclear."""
    if variable is not None and variable in names:
        return names[variable]
    likely = [key for key in names if key.casefold() in _ELEVATION_NAMES]
    if variable is None and len(likely) == 1:
        findings.note(
            "grid-variable-chosen",
            f"The file has several grids ({', '.join(sorted(names))}); {likely[0]!r} was read.",
            "Name the variable in the study if another is meant.",
            file=name,
        )
        return names[likely[0]]
    findings.error(
        "grid-variable-unclear",
        f"The file has several grids: {', '.join(sorted(names))}.",
        "Name the variable in the study, or export one grid.",
        file=name,
    )
    return None


def _read_open(
    data: Any, name: str, band: int, uncertainty_band: int | None, findings: Findings
) -> RasterCells | None:
    if uncertainty_band is None and data.driver == "BAG" and data.count >= 2 and band == 1:
        uncertainty_band = 2
    for wanted, what in ((band, "elevation"), (uncertainty_band, "uncertainty")):
        if wanted is not None and not 1 <= wanted <= data.count:
            findings.error(
                "grid-band-missing",
                f"Band {wanted}, meant for {what}, is not there; the grid has {data.count}.",
                "Correct the band in the study.",
                file=name,
            )
            return None
    if too_large(data.width, data.height, name, findings):
        return None
    if data.transform.is_identity or data.transform.determinant == 0:
        no_position(name, findings)
        return None
    unit = (data.units[band - 1] or "").strip().casefold() if data.units else ""
    if unit not in ("", "m", "metre", "metres", "meter", "meters", "unknown", "1"):
        findings.error(
            "grid-unit",
            f"The band says that it is in {unit!r}.",
            "Export the grid in metres.",
            file=name,
            column=f"band {band}",
        )
    values = _band(data, band)
    sigma = _band(data, uncertainty_band) if uncertainty_band is not None else None
    if sigma is not None and (sigma < 0).any():
        findings.error(
            "grid-uncertainty-negative",
            f"Band {uncertainty_band}, meant for uncertainty, holds values below zero.",
            "Correct uncertainty_band in the study: an uncertainty is a standard error in metres.",
            file=name,
            column=f"band {uncertainty_band}",
        )
    crs = parse_crs(data.crs.to_wkt() if data.crs else None)
    return RasterCells(values, data.transform, crs, sigma)


def _band(data: Any, band: int) -> NDArray[np.float64]:
    values = data.read(band, masked=True, out_dtype="float64").filled(np.nan)
    scale, offset = data.scales[band - 1], data.offsets[band - 1]
    if scale != 1.0 or offset != 0.0:
        values = values * scale + offset
    return np.asarray(values, dtype=np.float64)


def blank_fill_values(cells: RasterCells, name: str, findings: Findings) -> RasterCells:
    """Values that are used for "no data" but not declared so become NaN, with a warning."""
    values = cells.values
    with np.errstate(invalid="ignore"):
        bad = np.isin(values, FILL_VALUES) | (np.abs(values) > 1e5) | np.isinf(values)
    if not bad.any():
        return cells
    found = sorted({float(f"{value:.6g}") for value in np.unique(values[bad])[:5]})
    findings.warning(
        "grid-fill-undeclared",
        f"{int(bad.sum())} cells hold {', '.join(f'{value:g}' for value in found)}, which stands for no data but "
        "is not declared so; they were read as empty.",
        "Declare the nodata value in the file.",
        file=name,
    )
    values = values.copy()
    values[bad] = np.nan
    return replace(cells, values=values)


def warp(cells: RasterCells, target: Any, name: str, findings: Findings) -> RasterCells | None:
    """The cells on a north-up grid of square cells in another system, bilinear.

    Cells whose neighbours are empty stay empty rather than take a value from one side.
    """
    from rasterio.crs import CRS
    from rasterio.transform import array_bounds
    from rasterio.warp import Resampling, calculate_default_transform, reproject

    rows, columns = cells.values.shape
    source, goal = CRS.from_wkt(cells.crs.to_wkt()), CRS.from_wkt(target.to_wkt())
    try:
        with quiet_libraries():
            bounds = array_bounds(rows, columns, cells.transform)
            transform, width, height = calculate_default_transform(source, goal, columns, rows, *bounds)
            if too_large(width, height, name, findings):
                return None
            layers: list[NDArray[np.float64] | None] = []
            for layer in (cells.values, cells.uncertainty):
                if layer is None:
                    layers.append(None)
                    continue
                out = np.full((height, width), np.nan)
                reproject(
                    layer, out, src_transform=cells.transform, src_crs=source, src_nodata=np.nan,
                    dst_transform=transform, dst_crs=goal, dst_nodata=np.nan,
                    resampling=Resampling.bilinear, num_threads=1,
                )  # fmt: skip
                layers.append(out)
    except _raster_errors() as error:
        findings.error(
            "grid-not-reprojected",
            f"The grid cannot be brought into the study's coordinate system: {first_line(error)}.",
            "Check that its coordinates and its system belong together.",
            file=name,
        )
        return None
    values = layers[0]
    return None if values is None else RasterCells(values, transform, target, layers[1])

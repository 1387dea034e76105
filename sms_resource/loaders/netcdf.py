"""NetCDF grids through xarray: those of the classic form, and those whose x and y lack what GDAL looks for.

The NetCDF library inside GDAL may crash on a damaged header of the classic form; SciPy's reader does not.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any, Literal

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.coordinate_systems import parse_crs
from sms_resource.loaders.raster import RasterCells, no_position, pick_variable, quiet_libraries, too_large
from sms_resource.loaders.vectors import first_line

EVEN = 1e-3  # share of the spacing by which a coordinate may miss its node


def read_netcdf(path: Path, name: str, variable: str | None, findings: Findings) -> RasterCells | None:
    """Cells of a two-dimensional variable; its coordinates are the cell centres, as in every NetCDF grid."""
    with quiet_libraries():
        return _read(path, name, variable, findings)


def _read(path: Path, name: str, variable: str | None, findings: Findings) -> RasterCells | None:
    import xarray as xr
    from affine import Affine

    engine: Literal["scipy", "h5netcdf"] = "scipy" if is_classic(path) else "h5netcdf"
    try:
        with xr.open_dataset(path, decode_times=False, engine=engine) as data:
            grids = {str(key): str(key) for key, item in data.data_vars.items() if item.ndim == 2}
            if not grids or (len(grids) == 1 and variable is None):
                key = next(iter(grids), None)
            else:
                key = pick_variable(grids, variable, name, findings)
                if key is None:
                    return None
            if key is None or any(dim not in data.variables for dim in data[key].dims):
                no_position(name, findings)
                return None
            if too_large(data[key].shape[1], data[key].shape[0], name, findings):
                return None
            values = np.array(data[key].values, dtype=np.float64)
            crs = _crs(data, data[key])
            y, x = (np.array(data[dim].values, dtype=np.float64) for dim in data[key].dims)
    except (
        OSError,
        ValueError,
        KeyError,
        TypeError,
        RuntimeError,
        IndexError,
        OverflowError,
        MemoryError,
    ) as error:
        findings.error(
            "grid-unreadable",
            f"The grid cannot be read: {first_line(error)}.",
            "Export it again, for example as GeoTIFF.",
            file=name,
        )
        return None
    if not (_even(x) and _even(y)):
        findings.error(
            "grid-uneven",
            "The coordinates of the grid are not evenly spaced.",
            "Resample it to even cells.",
            file=name,
        )
        return None
    dx, dy = (x[-1] - x[0]) / (len(x) - 1), (y[-1] - y[0]) / (len(y) - 1)
    transform = Affine(dx, 0.0, x[0] - 0.5 * dx, 0.0, dy, y[0] - 0.5 * dy)
    return RasterCells(values, transform, crs)


def is_classic(path: Path) -> bool:
    """Whether a file is NetCDF of the classic form."""
    with path.open("rb") as stream:
        return stream.read(4) in (b"CDF\x01", b"CDF\x02")


def _crs(data: Any, grid: Any) -> Any:
    """System that the grid mapping of the CF conventions states, as a pyproj system; None if it states none."""
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    name = grid.attrs.get("grid_mapping", grid.encoding.get("grid_mapping"))
    if name is None or name not in data.variables:
        return None
    attributes = data[name].attrs
    text = attributes.get("crs_wkt", attributes.get("spatial_ref"))
    if text is not None:
        return parse_crs(text)
    try:
        return parse_crs(CRS.from_cf(attributes))
    except (CRSError, KeyError, TypeError, ValueError):
        return None


def _even(centres: np.ndarray) -> bool:
    if centres.ndim != 1 or len(centres) < 2 or not np.isfinite(centres).all():
        return False
    step = (centres[-1] - centres[0]) / (len(centres) - 1)
    nodes = centres[0] + step * np.arange(len(centres))
    return bool(step != 0 and np.abs(centres - nodes).max() <= EVEN * abs(step) * max(1, len(centres) ** 0.5))

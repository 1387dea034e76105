"""NetCDF grids whose x and y are plain columns of numbers, without the attributes that GDAL looks for."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.raster import RasterCells, no_position, pick_variable, too_large
from sms_resource.loaders.vectors import first_line

EVEN = 1e-3  # share of the spacing by which a coordinate may miss its node


def read_netcdf(path: Path, name: str, variable: str | None, findings: Findings) -> RasterCells | None:
    """Cells of a two-dimensional variable; its coordinates are the cell centres, as in every NetCDF grid."""
    import xarray as xr
    from affine import Affine

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            with xr.open_dataset(path, decode_times=False) as data:
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
                y, x = (np.array(data[dim].values, dtype=np.float64) for dim in data[key].dims)
    except (OSError, ValueError, KeyError, TypeError, RuntimeError, IndexError) as error:
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
    return RasterCells(values, transform, None)


def _even(centres: np.ndarray) -> bool:
    if centres.ndim != 1 or len(centres) < 2 or not np.isfinite(centres).all():
        return False
    step = (centres[-1] - centres[0]) / (len(centres) - 1)
    nodes = centres[0] + step * np.arange(len(centres))
    return bool(step != 0 and np.abs(centres - nodes).max() <= EVEN * abs(step) * max(1, len(centres) ** 0.5))

"""Every exchange format of a finished estimate, in one folder."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from sms_resource.blocks.exchange_common import ExchangeError
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.model import BlockModel
from sms_resource.findings import Findings

FORMATS = ("parquet", "csv", "vtu", "vti", "gpkg", "geotiff", "netcdf", "omf")


def write_exchange(
    folder: str | Path,
    model: BlockModel,
    *,
    formats: Sequence[str] = FORMATS,
    metals: Sequence[str] | None = None,
    outline: Any = None,
    exclusions: Any = None,
    collars: pd.DataFrame | None = None,
    sticks: pd.DataFrame | None = None,
    composites: pd.DataFrame | None = None,
    surface: pd.DataFrame | None = None,
    seafloor: SurfaceGrid | None = None,
    base: SurfaceGrid | None = None,
) -> tuple[list[Path], Findings]:
    """Write a model, and what belongs to it, in the formats that are asked for.

    A format that cannot be written is a finding; the others are written all the same.

    Parameters
    ----------
    folder : path
        Made where it is missing.
    model : BlockModel
    formats : sequence of str
        Of ``FORMATS``.
    metals : sequence of str, optional
        Grade columns of the rasters; None takes all.
    outline, exclusions, collars, sticks, composites, surface, seafloor, base : optional
        For the formats that hold layers.

    Returns
    -------
    list of Path, Findings

    Raises
    ------
    ValueError
        If a format is not known.
    """
    from sms_resource.blocks import (
        exchange_gis,
        exchange_netcdf,
        exchange_omf,
        exchange_plan,
        exchange_tables,
        exchange_vtk,
    )

    unknown = [name for name in formats if name not in FORMATS]
    if unknown:
        raise ValueError(f"format {unknown[0]!r} is not one of {', '.join(FORMATS)}")
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)

    def layers() -> list[Path]:
        path = folder / "layers.gpkg"
        exchange_gis.write_geopackage(path, model=model, outline=outline, exclusions=exclusions, collars=collars,
                                      sticks=sticks, composites=composites, surface=surface,
                                      variable=metals[0] if metals else None)  # fmt: skip
        return [path]

    writers = {
        "parquet": lambda: [exchange_tables.write_parquet(model, folder / "blocks.parquet")],
        "csv": lambda: exchange_tables.write_csv(model, folder / "blocks.csv"),
        "vtu": lambda: [exchange_vtk.write_vtu(model, folder / "blocks.vtu")],
        "vti": lambda: [exchange_vtk.write_vti(model, folder / "blocks.vti")],
        "gpkg": layers,
        "geotiff": lambda: exchange_plan.write_plan_rasters(model, folder / "plan", metals=metals),
        "netcdf": lambda: [exchange_netcdf.write_netcdf(model, folder / "blocks.nc")],
        "omf": lambda: [exchange_omf.write_omf(folder / "estimate.omf", model, seafloor=seafloor, base=base,
                                               sticks=sticks, composites=composites)],
    }  # fmt: skip
    paths: list[Path] = []
    findings = Findings()
    for name in formats:
        try:
            paths += writers[name]()
        except ExchangeError as error:
            found = error.finding
            findings.warning(
                found.code, f"{name} was not written: {found.message}", found.remedy, file=found.file
            )
    return paths, findings

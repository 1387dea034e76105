"""Hand results on to other programs, in open formats."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd

from sms_resource.findings import Findings
from sms_resource.workflow.folder import has_blocks, is_results, recover
from sms_resource.workflow.manifest import read_manifest


def export_results(results: Path, out: Path, formats: tuple[str, ...] = ()) -> tuple[list[Path], Findings]:
    """Write the block model and its layers of some results in exchange formats.

    Parameters
    ----------
    results : Path
        Folder of results of a run.
    out : Path
        Folder to write to.
    formats : tuple of str
        Of ``sms_resource.blocks.exchange.FORMATS``; all if empty.

    Returns
    -------
    list of Path, Findings

    Raises
    ------
    FileNotFoundError
        If the folder holds no results, or none with a block model.
    ValueError
        If a format is not known.
    """
    import geopandas as gpd

    from sms_resource.blocks.exchange import FORMATS, write_exchange
    from sms_resource.blocks.grid import BlockGrid
    from sms_resource.blocks.model import BlockModel
    from sms_resource.loaders.bathymetry import load_grid

    recover(results.absolute())
    if not is_results(results):
        raise FileNotFoundError(f"{results} holds no results")
    if not has_blocks(results):
        raise FileNotFoundError(f"{results} holds no block model; a study without drilling has none")
    manifest = read_manifest(results)
    layers = results / "layers"
    record = json.loads((layers / "block_grid.json").read_text(encoding="utf-8"))
    crs = record["crs"]
    model = BlockModel(BlockGrid.from_record(record), pd.read_parquet(results / "block_model.parquet"), crs)
    sticks = pd.read_parquet(layers / "holes.parquet")
    composites = pd.read_csv(
        results / "composites.csv", dtype={"hole_id": str, "composite_id": str}, keep_default_na=True
    )
    surfaces = {}
    findings = Findings()
    for name in ("seafloor", "base"):
        surfaces[name], found = load_grid(layers / f"{name}.tif", shown_as=f"layers/{name}.tif", crs=crs)
        findings.extend(found)
    zones = layers / "exclusions.gpkg"
    written, found = write_exchange(
        out,
        model,
        formats=formats or FORMATS,
        metals=manifest["metals"],
        outline=gpd.read_file(layers / "outline.gpkg"),
        exclusions=gpd.read_file(zones) if zones.is_file() else None,
        collars=collar_points(sticks),
        sticks=sticks,
        composites=composites,
        seafloor=surfaces["seafloor"],
        base=surfaces["base"],
    )
    findings.extend(found)
    return written, findings


def collar_points(sticks: pd.DataFrame) -> pd.DataFrame:
    """Tops of the holes with their length: in plan an upright hole is a point, and its line has no length there."""
    first = sticks.sort_values(["hole_id", "from_m"], kind="stable").drop_duplicates("hole_id")
    length = sticks.groupby("hole_id")["to_m"].max()
    return pd.DataFrame(
        {"hole_id": first["hole_id"].to_numpy(), "easting": first["x_from"].to_numpy(),
         "northing": first["y_from"].to_numpy(), "elevation": first["z_from"].to_numpy(),
         "length_m": first["hole_id"].map(length).to_numpy()}
    )  # fmt: skip

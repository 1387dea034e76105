"""What the scene needs from a folder of results: tables, surfaces, sticks and a few facts."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.grid import BlockGrid, SurfaceGrid
from sms_resource.units import column_element
from sms_resource.viewer.errors import ResultsError

NEEDED = ("i", "j", "k", "easting", "northing", "elevation", "volume_m3", "dry_tonnes")


@dataclass(frozen=True, eq=False)
class Results:
    """A folder of results, read.

    Attributes
    ----------
    folder : Path
    grid : BlockGrid
    blocks : DataFrame
        One row a block that touches the body.
    metals : tuple of str
        Grade columns, in their order.
    variable, cutoff : str, float
        Column of the cut-off, and the study's value.
    label : str
        What the study may call its tonnes.
    title : str
    seafloor, base, thickness : SurfaceGrid or None
    sticks : DataFrame or None
        Intervals of the holes.
    outline : shapely geometry or None
    """

    folder: Path
    grid: BlockGrid
    blocks: pd.DataFrame
    metals: tuple[str, ...]
    variable: str
    cutoff: float
    label: str
    title: str
    seafloor: SurfaceGrid | None
    base: SurfaceGrid | None
    thickness: SurfaceGrid | None
    sticks: pd.DataFrame | None
    outline: Any = None

    def numbers(self, name: str) -> NDArray[np.float64]:
        """One column of the blocks as numbers."""
        return self.blocks[name].to_numpy(dtype=float)


def read_results(folder: str | Path, *, variable: str | None = None, cutoff: float | None = None) -> Results:
    """Read a folder that a run left.

    Parameters
    ----------
    folder : path
    variable : str, optional
        Column of the cut-off; an element such as "cu" will do. None takes the study's.
    cutoff : float, optional
        None takes the study's where ``variable`` is the study's, else the median of the blocks.

    Raises
    ------
    ResultsError
        If a file is missing, broken or empty, or the variable is not in the blocks.
    """
    folder = Path(folder)
    layers = folder / "layers"
    blocks = _table(folder / "block_model.parquet")
    absent = [name for name in NEEDED if name not in blocks]
    if absent:
        raise ResultsError(folder / "block_model.parquet", f"column {absent[0]} is missing")
    if blocks.empty:
        raise ResultsError(folder / "block_model.parquet", "it holds no block")
    grid_path = layers / "block_grid.json"
    record = _json(grid_path)
    try:
        grid = BlockGrid.from_record(record)
    except (KeyError, TypeError, ValueError) as error:
        raise ResultsError(grid_path, f"it does not describe a block grid ({error})") from error
    facts = _json(folder / "manifest.json") if (folder / "manifest.json").is_file() else {}
    metals = tuple(str(m) for m in facts.get("metals") or () if m in blocks) or tuple(
        str(name) for name in blocks.columns if column_element(str(name))
    )
    study = facts.get("cutoff") or {}
    chosen = _variable(blocks, metals, variable or study.get("variable"), folder)
    if cutoff is None:
        if chosen == study.get("variable") and study.get("value") is not None:
            cutoff = float(study["value"])
        else:
            cutoff = float(np.nanmedian(blocks[chosen].to_numpy(dtype=float)))
    return Results(
        folder=folder, grid=grid, blocks=blocks, metals=metals, variable=chosen, cutoff=float(cutoff),
        label=str(facts.get("tally_label") or "Block-model tally"), title=_title(facts, folder),
        seafloor=_surface(layers / "seafloor.tif"), base=_surface(layers / "base.tif"),
        thickness=_surface(layers / "thickness.tif"), sticks=_sticks(layers / "holes.parquet"),
        outline=_outline(layers / "outline.gpkg"),
    )  # fmt: skip


def _title(facts: dict[str, Any], folder: Path) -> str:
    study = facts.get("study")
    if isinstance(study, dict):
        about = study.get("study")
        name = about.get("name") if isinstance(about, dict) else study.get("name")
        if isinstance(name, str) and name:
            return name
    shown = str((facts.get("summary") or {}).get("title") or "")
    return shown.split(":")[0] if shown else folder.absolute().name


def _variable(blocks: pd.DataFrame, metals: tuple[str, ...], name: str | None, folder: Path) -> str:
    if name is None:
        if metals:
            return metals[0]
        raise ResultsError(folder / "block_model.parquet", "it has no grade column")
    by_element = {column_element(str(column)): str(column) for column in blocks.columns}
    found = str(name) if name in blocks else by_element.get(str(name).lower())
    if found is None or not pd.api.types.is_numeric_dtype(blocks[found].dtype):
        known = ", ".join(metals)
        raise ResultsError(
            folder / "block_model.parquet", f"there is no variable {name!r}", f"Choose one of {known}."
        )
    return found


def _table(path: Path) -> pd.DataFrame:
    import pyarrow as pa

    if not path.is_file():
        raise ResultsError(path, "the file is missing")
    try:
        return pd.read_parquet(path)
    except (OSError, ValueError, pa.ArrowException) as error:
        raise ResultsError(path, f"the file is broken ({_first_line(error)})") from error


def _json(path: Path) -> dict[str, Any]:
    if not path.is_file():
        raise ResultsError(path, "the file is missing")
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise ResultsError(path, f"the file is broken ({_first_line(error)})") from error
    if not isinstance(content, dict):
        raise ResultsError(path, "the file is broken (not a JSON object)")
    return content


def _sticks(path: Path) -> pd.DataFrame | None:
    if not path.is_file():
        return None
    table = _table(path)
    ends = ["x_from", "y_from", "z_from", "x_to", "y_to", "z_to"]
    absent = [name for name in ("hole_id", *ends) if name not in table]
    if absent:
        raise ResultsError(path, f"column {absent[0]} is missing")
    table = table[np.isfinite(table[ends].to_numpy(dtype=float)).all(axis=1)]
    return table if len(table) else None


def _surface(path: Path) -> SurfaceGrid | None:
    """A north-up raster; None where the file is absent."""
    import rasterio

    if not path.is_file():
        return None
    try:
        with rasterio.open(path) as source:
            values = np.ma.filled(source.read(1, masked=True).astype(float), np.nan)
            t, crs = source.transform, source.crs
    except rasterio.errors.RasterioError as error:
        raise ResultsError(path, f"the file is broken ({_first_line(error)})") from error
    if not np.isfinite(values).any():
        raise ResultsError(path, "it holds no value")
    rows = values.shape[0]
    x0, y0 = t.c + 0.5 * t.a, t.f + (rows - 0.5) * t.e
    return SurfaceGrid(x0, y0, t.a, -t.e, np.flipud(values).copy(), None if crs is None else crs.to_string())


def _outline(path: Path) -> Any:
    import geopandas as gpd
    import pyogrio

    if not path.is_file():
        return None
    try:
        frame = gpd.read_file(path)
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, OSError) as error:
        raise ResultsError(path, f"the file is broken ({_first_line(error)})") from error
    return frame.geometry.union_all() if len(frame) else None


def _first_line(error: BaseException) -> str:
    text = str(error).strip()
    return text.splitlines()[0][:200] if text else type(error).__name__

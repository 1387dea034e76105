"""Polygons of the body and of zones that are set aside."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.parsing import parse_numbers
from sms_resource.loaders.places import report_rows
from sms_resource.loaders.shapes import AREAS, layer_columns, read_shapes
from sms_resource.loaders.words import STATUS_WORDS, plain_word

if TYPE_CHECKING:
    import geopandas as gpd

# Heights of a chimney that are doubted and refused (common practice, no source; chimneys stand 2 to 18 m as a rule).
TALL_CHIMNEY_M, TALLEST_CHIMNEY_M = 60.0, 300.0
CLASSES = ("measured", "indicated", "inferred", "unclassified")


@dataclass(frozen=True)
class LayerSource:
    """A file that holds a layer of shapes, and how to read it.

    Parameters
    ----------
    path : Path
        GeoPackage, Shapefile, GeoJSON or whatever else pyogrio opens.
    shown_as : str
        Name of the file in findings; the file's own name if empty.
    layer : str, optional
        Layer; the only one if not given.
    crs : str, optional
        System of the study. A layer in another one is an error unless ``reproject`` is set.
    declared_crs : str, optional
        System of the layer on the user's word, where it has none inside.
    reproject : bool
    columns : mapping
        Column as its reader names it to the file's column. One that is not mentioned is looked up under its own name.
    """

    path: Path
    shown_as: str = ""
    layer: str | None = None
    crs: str | None = None
    declared_crs: str | None = None
    reproject: bool = False
    columns: Mapping[str, str] = field(default_factory=dict)

    @property
    def name(self) -> str:
        """Name of the file in findings."""
        return self.shown_as or self.path.name


def load_outline(source: LayerSource) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read the polygons that bound the body in plan.

    Parameters
    ----------
    source : LayerSource
        Its ``columns`` may map ``name``.

    Returns
    -------
    outline : GeoDataFrame or None
        geometry (polygons, 2D), name, source_row.
    findings : Findings
    """
    frame, found, findings = _read(source, ("name",))
    if frame is None:
        return None, findings
    frame = _close_lines(frame, source.name, findings)
    areas = _areas(
        frame, "outline-not-polygon", "An outline", "Draw it as a polygon; lines must be closed.", source.name, findings
    )  # fmt: skip
    out = frame[areas].reset_index(drop=True)
    if out.empty:
        return None, findings
    out["name"] = _text(out, found.get("name"))
    return out[["name", "source_row", "geometry"]], findings


def load_chimneys(source: LayerSource) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read polygons of chimneys with the height of each.

    Parameters
    ----------
    source : LayerSource
        Its ``columns`` map ``name`` and ``height_m``.

    Returns
    -------
    chimneys : GeoDataFrame or None
        name, height_m (above zero), geometry (polygons, 2D), source_row. A polygon without a height above zero, or
        higher than 300 m, is an error and is left out.
    findings : Findings
    """
    frame, found, findings = _read(source, ("name", "height_m"), ("height_m",))
    if frame is None or "height_m" not in found:
        return None, findings
    name, rows, header = source.name, frame["source_row"].to_numpy(), found["height_m"]
    areas = _areas(frame, "chimney-not-polygon", "A chimney", "Draw its foot as a polygon.", name, findings)
    height = _numbers(frame, rows, header, "Write the height in metres.", name, findings)
    with np.errstate(invalid="ignore"):
        high = height > 0
    report_rows(
        findings, "error", "chimney-without-height", rows[~high],
        "The chimney has no height above zero.", "Give each its height in metres.", file=name, column=header,
    )  # fmt: skip
    for severity, code, wrong in (
        ("error", "chimney-too-high", height > TALLEST_CHIMNEY_M),
        ("warning", "chimney-high", (height > TALL_CHIMNEY_M) & (height <= TALLEST_CHIMNEY_M)),
    ):
        limit = TALLEST_CHIMNEY_M if severity == "error" else TALL_CHIMNEY_M
        report_rows(
            findings, severity, code, rows[wrong],  # type: ignore[arg-type]
            [f"The chimney is {value:g} m high, above {limit:g} m." for value in height[wrong]],
            "Give its height above the seafloor in metres, not its depth or elevation.", file=name, column=header,
        )  # fmt: skip
    high &= height <= TALLEST_CHIMNEY_M
    out = frame[["geometry", "source_row"]]
    out["name"] = _text(frame, found.get("name"))
    out["height_m"] = height
    out = out[areas & high].reset_index(drop=True)
    return (None if out.empty else out[["name", "height_m", "geometry", "source_row"]]), findings


def load_exclusions(source: LayerSource) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read zones that are set aside: polygons, or points and lines with a buffer.

    Parameters
    ----------
    source : LayerSource
        Its ``columns`` map ``name``, ``status`` and ``buffer_m``.

    Returns
    -------
    exclusions : GeoDataFrame or None
        name, status ("active_vent", "set_aside", "preservation", "tenure", or the file's own word), buffer_m
        (0 where not given; the geometry is not buffered), geometry (2D), source_row.
    findings : Findings
    """
    frame, found, findings = _read(source, ("name", "status", "buffer_m"), ("status",))
    if frame is None:
        return None, findings
    out = frame[["geometry", "source_row"]]
    rows = out["source_row"].to_numpy()
    out["name"] = _text(frame, found.get("name"))
    raw = _text(frame, found.get("status")).to_numpy()
    out["status"] = _statuses(raw, rows, found.get("status", "status"), source.name, findings)
    out["buffer_m"] = _buffers(frame, out, found.get("buffer_m"), source.name, findings)
    return out[["name", "status", "buffer_m", "geometry", "source_row"]], findings


def load_overrides(source: LayerSource) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read polygons in which a Competent Person sets the class.

    A polygon without a reason or a name is an error: an override must be owned. So is a class that there is not.

    Parameters
    ----------
    source : LayerSource
        Its ``columns`` map ``class``, ``reason`` and ``by``.

    Returns
    -------
    overrides : GeoDataFrame or None
        class, reason, by (text as in the file, "" where there is none), geometry (2D), source_row.
    findings : Findings
    """
    wanted = ("class", "reason", "by")
    frame, found, findings = _read(source, wanted, wanted)
    if frame is None:
        return None, findings
    out = frame[["geometry", "source_row"]]
    for column in wanted:
        out[column] = _text(frame, found.get(column)).str.strip()
        blank = (out[column] == "").to_numpy()
        if column in found:
            report_rows(
                findings, "error", "override-incomplete", out["source_row"].to_numpy()[blank],
                f"The polygon has no {column}.", "An override needs its class, its reason and who gave it.",
                file=source.name, column=found[column],
            )  # fmt: skip
    if "class" in found:
        other = (~out["class"].str.lower().isin([*CLASSES, ""])).to_numpy()
        report_rows(
            findings, "error", "override-class", out["source_row"].to_numpy()[other],
            [f"“{text}” is not a class." for text in out["class"].to_numpy()[other]],
            f"Use one of: {', '.join(CLASSES)}.", file=source.name, column=found["class"],
        )  # fmt: skip
    return out[[*wanted, "geometry", "source_row"]], findings


def _read(
    source: LayerSource, wanted: tuple[str, ...] = (), needed: tuple[str, ...] = ()
) -> tuple[Any, dict[str, str], Findings]:
    """The layer (None where it cannot be used), its columns by their name here, and what is wrong with either."""
    findings = Findings()
    frame = read_shapes(
        source.path, source.name, source.layer, source.crs, source.declared_crs, source.reproject, findings
    )
    found: dict[str, str] = {}
    if frame is not None and wanted:
        found = layer_columns(frame, wanted, needed, source.columns, source.name, findings)
    return frame, found, findings


def _areas(frame: Any, code: str, thing: str, remedy: str, name: str, findings: Findings) -> np.ndarray:
    """Which shapes are polygons (n,); any other is an error."""
    areas: np.ndarray = frame.geom_type.isin(AREAS).to_numpy()
    report_rows(
        findings, "error", code, frame["source_row"].to_numpy()[~areas],
        [f"{thing} is a polygon, and this is a {kind}." for kind in frame.geom_type.to_numpy()[~areas]],
        remedy, file=name, column="geometry",
    )  # fmt: skip
    return areas


def _text(frame: Any, header: str | None) -> pd.Series:
    """A column of a layer as text, "" where it has none."""
    return pd.Series("", index=frame.index) if header is None else frame[header].fillna("").astype(str)


def _close_lines(frame: Any, name: str, findings: Findings) -> Any:
    """Closed lines become polygons, with a warning."""
    import shapely

    shapes = list(frame.geometry)
    changed = []
    for i, shape in enumerate(shapes):
        if shape.geom_type == "MultiLineString" and len(shape.geoms) == 1:
            shape = shape.geoms[0]
        if shape.geom_type == "LineString" and shape.is_ring:
            shapes[i] = shapely.Polygon(shape)
            changed.append(int(frame["source_row"].iloc[i]))
        elif shape.geom_type == "GeometryCollection":
            parts = [part for part in shape.geoms if part.geom_type in AREAS]
            shapes[i] = shapely.union_all(parts) if parts else shape
    report_rows(
        findings, "warning", "outline-line-closed", changed, "The outline is a closed line; it was read as a polygon.",
        "Save it as a polygon.", file=name, column="geometry",
    )  # fmt: skip
    return frame.set_geometry(shapes, crs=frame.crs)


def _statuses(raw: np.ndarray, rows: np.ndarray, header: str, name: str, findings: Findings) -> list[str]:
    words = [STATUS_WORDS.get(plain_word(text), plain_word(text).replace(" ", "_")) for text in raw]
    unknown = [i for i, word in enumerate(words) if word not in set(STATUS_WORDS.values())]
    known = ", ".join(sorted(set(STATUS_WORDS.values())))
    report_rows(
        findings, "warning", "status-unknown", rows[unknown],
        [f"“{raw[i]}” is not a status that is known; it was kept." for i in unknown],
        f"Use one of: {known}; or name it in screens.exclude_status.", file=name, column=header,
    )  # fmt: skip
    return words


def _buffers(frame: Any, out: Any, header: str | None, name: str, findings: Findings) -> np.ndarray:
    rows = out["source_row"].to_numpy()
    values = np.full(len(out), np.nan)
    if header is not None:
        values = _numbers(frame, rows, header, "Write the buffer in metres.", name, findings)
    flat = ~out.geom_type.isin(AREAS).to_numpy()
    with np.errstate(invalid="ignore"):
        none = flat & ~(values > 0)
        negative = values < 0
    report_rows(
        findings, "error", "buffer-missing", rows[none], "A point or a line needs a buffer to have an area.",
        "Give it a buffer_m above zero, or draw a polygon.", file=name, column=header or "buffer_m",
    )  # fmt: skip
    report_rows(
        findings, "error", "buffer-negative", rows[negative & ~flat], "A buffer is a distance and not negative.",
        "Write the buffer in metres, zero or more.", file=name, column=header or "buffer_m",
    )  # fmt: skip
    return np.where(np.isfinite(values), values, 0.0)


def _numbers(
    frame: Any, rows: np.ndarray, header: str, remedy: str, name: str, findings: Findings
) -> np.ndarray:
    """A column of a layer as numbers, NaN where it has none; text is an error."""
    parsed = parse_numbers(pd.Series(frame[header].to_numpy(), dtype=object), decimal=".")
    bad = sorted(parsed.problems)
    report_rows(
        findings, "error", "not-a-number", rows[bad], [parsed.problems[i][1] for i in bad], remedy,
        file=name, column=header,
    )  # fmt: skip
    return np.asarray(parsed.values, dtype=float)

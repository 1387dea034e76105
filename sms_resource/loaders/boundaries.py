"""Polygons of the body and of zones that are set aside."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.coordinate_systems import agree_crs, crs_name, metric, parse_crs, same_crs
from sms_resource.loaders.headers import find_header, nearest
from sms_resource.loaders.parsing import parse_numbers
from sms_resource.loaders.places import report_rows
from sms_resource.loaders.reading import readable
from sms_resource.loaders.vectors import read_layer
from sms_resource.loaders.words import STATUS_WORDS, plain_word

if TYPE_CHECKING:
    import geopandas as gpd

_AREAS = frozenset({"Polygon", "MultiPolygon"})


def load_outline(
    path: Path,
    *,
    shown_as: str = "",
    layer: str | None = None,
    crs: str | None = None,
    declared_crs: str | None = None,
    reproject: bool = False,
) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read the polygons that bound the body in plan.

    Parameters
    ----------
    path : Path
        GeoPackage, Shapefile, GeoJSON or whatever else pyogrio opens.
    shown_as : str
        Name of the file in findings.
    layer : str, optional
        Layer; the only one if not given.
    crs : str, optional
        System of the study. A layer in another one is an error unless ``reproject`` is set.
    declared_crs : str, optional
        System of the layer on the user's word, where it has none inside.
    reproject : bool

    Returns
    -------
    outline : GeoDataFrame or None
        geometry (polygons, 2D), name, source_row.
    findings : Findings
    """
    findings = Findings()
    name = shown_as or path.name
    frame = _read(path, name, layer, crs, declared_crs, reproject, findings)
    if frame is None:
        return None, findings
    frame = _close_lines(frame, name, findings)
    wrong = ~frame.geom_type.isin(_AREAS).to_numpy()
    kinds = frame.geom_type.to_numpy()[wrong]
    report_rows(
        findings, "error", "outline-not-polygon", frame["source_row"].to_numpy()[wrong],
        [f"An outline is a polygon, and this is a {kind}." for kind in kinds],
        "Draw it as a polygon; lines must be closed.", file=name, column="geometry",
    )  # fmt: skip
    out = frame[~wrong].reset_index(drop=True)
    if out.empty:
        return None, findings
    names = find_header("name", [str(column) for column in out.columns])
    out["name"] = out[names[0]].fillna("").astype(str) if names else ""
    return out[["name", "source_row", "geometry"]], findings


def load_exclusions(
    path: Path,
    *,
    shown_as: str = "",
    layer: str | None = None,
    crs: str | None = None,
    declared_crs: str | None = None,
    reproject: bool = False,
    columns: Mapping[str, str] | None = None,
) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read zones that are set aside: polygons, or points and lines with a buffer.

    Parameters
    ----------
    columns : mapping, optional
        ``name``, ``status`` and ``buffer_m`` to the file's columns.

    Returns
    -------
    exclusions : GeoDataFrame or None
        name, status ("active_vent", "set_aside", "preservation", "tenure", or the file's own word), buffer_m
        (0 where not given; the geometry is not buffered), geometry (2D), source_row.
    findings : Findings
    """
    findings = Findings()
    name = shown_as or path.name
    frame = _read(path, name, layer, crs, declared_crs, reproject, findings)
    if frame is None:
        return None, findings
    found = _columns(frame, ("name", "status", "buffer_m"), ("status",), columns or {}, name, findings)
    out = frame[["geometry", "source_row"]]
    rows = out["source_row"].to_numpy()
    out["name"] = frame[found["name"]].fillna("").astype(str).to_numpy() if "name" in found else ""
    raw = (
        frame[found["status"]].fillna("").astype(str).to_numpy()
        if "status" in found
        else np.full(len(out), "")
    )
    out["status"] = _statuses(raw, rows, found.get("status", "status"), name, findings)
    out["buffer_m"] = _buffers(frame, out, found.get("buffer_m"), name, findings)
    return out[["name", "status", "buffer_m", "geometry", "source_row"]], findings


def load_overrides(
    path: Path,
    *,
    shown_as: str = "",
    layer: str | None = None,
    crs: str | None = None,
    declared_crs: str | None = None,
    reproject: bool = False,
    columns: Mapping[str, str] | None = None,
) -> tuple[gpd.GeoDataFrame | None, Findings]:
    """Read polygons in which a Competent Person sets the class: columns class, reason, by.

    A polygon without a reason or a name is an error: an override must be owned.
    """
    findings = Findings()
    name = shown_as or path.name
    frame = _read(path, name, layer, crs, declared_crs, reproject, findings)
    if frame is None:
        return None, findings
    wanted = ("class", "reason", "by")
    found = _columns(frame, wanted, wanted, columns or {}, name, findings)
    out = frame[["geometry", "source_row"]]
    for column in wanted:
        out[column] = frame[found[column]].fillna("").astype(str).str.strip() if column in found else ""
        blank = (out[column] == "").to_numpy()
        if column in found:
            report_rows(
                findings, "error", "override-incomplete", out["source_row"].to_numpy()[blank],
                f"The polygon has no {column}.", "An override needs its class, its reason and who gave it.",
                file=name, column=found[column],
            )  # fmt: skip
    return out[[*wanted, "geometry", "source_row"]], findings


def _read(
    path: Path,
    name: str,
    layer: str | None,
    crs: str | None,
    declared: str | None,
    reproject: bool,
    findings: Findings,
) -> Any:
    """Layer in the study's system, valid and flat, with source_row."""
    import shapely

    if not readable(path, name, findings):
        return None
    frame = read_layer(path, name, layer, findings)
    if frame is None:
        return None
    if not hasattr(frame, "geom_type") or len(frame) == 0:
        findings.error(
            "layer-empty",
            "The layer has no shapes." if len(frame) == 0 else "The layer has no geometry.",
            "Check the layer, and export it again.",
            file=name,
        )
        return None
    if frame.geometry.name != "geometry":
        frame = frame.rename_geometry("geometry")
    frame["source_row"] = np.arange(2, len(frame) + 2)
    agreed = agree_crs(parse_crs(frame.crs), declared, crs, "layer", name, findings)
    if agreed is None:
        return None
    source, target = agreed
    frame = frame.set_crs(source, allow_override=True)
    if not same_crs(source, target):
        if not reproject:
            findings.error(
                "crs-different",
                f"The layer is in {crs_name(source)}, the study in {crs_name(target)}.",
                "Export the layer in the study's system, or allow it with reproject = true.",
                file=name,
            )
            return None
        frame = frame.to_crs(target)
        findings.note(
            "layer-reprojected",
            f"The layer was brought from {crs_name(source)} into {crs_name(target)}.",
            file=name,
        )
    elif target.is_geographic:
        findings.error(
            "crs-geographic",
            f"The layer is in degrees ({crs_name(source)}).",
            "Export it in metres.",
            file=name,
        )
        return None
    elif not metric(target, "layer", name, findings):
        return None
    if crs:
        frame = frame.set_crs(crs, allow_override=True)
    empty = (frame.geometry.isna() | frame.geometry.is_empty).to_numpy()
    report_rows(
        findings, "error", "geometry-empty", frame["source_row"].to_numpy()[empty],
        "The record has no shape.", "Draw it, or remove the record.", file=name, column="geometry",
    )  # fmt: skip
    frame = frame[~empty].reset_index(drop=True)
    shapes = shapely.force_2d(frame.geometry.to_numpy())
    finite = np.array(
        [bool(np.isfinite(shapely.get_coordinates(shape)).all()) for shape in shapes], dtype=bool
    )
    report_rows(
        findings, "error", "geometry-empty", frame["source_row"].to_numpy()[~finite],
        "The shape has coordinates that are not finite numbers.", "Draw it again.", file=name, column="geometry",
    )  # fmt: skip
    frame, shapes = frame[finite].reset_index(drop=True), shapes[finite]
    if frame.empty:
        return None
    return _repair(frame, shapes, name, findings)


def _repair(frame: Any, shapes: np.ndarray, name: str, findings: Findings) -> Any:
    import shapely

    broken = np.flatnonzero(~shapely.is_valid(shapes))
    for i in broken:
        why = shapely.is_valid_reason(shapes[i]).split("[")[0].strip().lower()
        before = shapes[i].area
        mended = shapely.make_valid(shapes[i])
        if shapes[i].geom_type in _AREAS and mended.geom_type == "GeometryCollection":
            parts = [part for part in mended.geoms if part.geom_type in _AREAS]
            mended = shapely.union_all(parts)
        findings.warning(
            "geometry-repaired",
            f"The shape is not sound ({why}); it was repaired, and its area went from {before:.1f} to "
            f"{mended.area:.1f} m2.",
            "Look at it in a GIS and draw it again.",
            file=name,
            row=int(frame["source_row"].iloc[i]),
            column="geometry",
        )
        shapes[i] = mended
    return frame.set_geometry(list(shapes), crs=frame.crs)


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
            parts = [part for part in shape.geoms if part.geom_type in _AREAS]
            shapes[i] = shapely.union_all(parts) if parts else shape
    report_rows(
        findings, "warning", "outline-line-closed", changed, "The outline is a closed line; it was read as a polygon.",
        "Save it as a polygon.", file=name, column="geometry",
    )  # fmt: skip
    return frame.set_geometry(shapes, crs=frame.crs)


def _columns(
    frame: Any, wanted: tuple[str, ...], needed: tuple[str, ...], mapping: Mapping[str, str], name: str,
    findings: Findings,
) -> dict[str, str]:  # fmt: skip
    headers = [str(column) for column in frame.columns if column not in ("geometry", "source_row")]
    found: dict[str, str] = {}
    for key in mapping:
        if key not in wanted:
            findings.error(
                "mapping-unknown",
                f"The study maps {key!r}, which is no column of this layer.",
                f"Columns are: {', '.join(wanted)}.",
                file=name,
                column=key,
            )
    for column in wanted:
        match = find_header(mapping.get(column, column), headers)
        if match:
            found[column] = match[0]
        elif column in mapping or column in needed:
            near = nearest(mapping.get(column, column), headers)
            findings.error(
                "column-missing",
                f"The layer has no column {mapping.get(column, column)!r}; it has {', '.join(headers) or 'none'}.",
                (f"The nearest is {near!r}: " if near else "")
                + f'map it with columns = {{ {column} = "..." }}.',
                file=name,
                row=1,
                column=mapping.get(column, column),
            )
    return found


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
        parsed = parse_numbers(pd.Series(frame[header].to_numpy(), dtype=object), decimal=".")
        values = parsed.values
        bad = sorted(parsed.problems)
        report_rows(
            findings, "error", "not-a-number", rows[bad], [parsed.problems[i][1] for i in bad],
            "Write the buffer in metres.", file=name, column=header,
        )  # fmt: skip
    flat = ~out.geom_type.isin(_AREAS).to_numpy()
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

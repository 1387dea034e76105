"""Layers of shapes in the study's coordinate system: sound, flat, with the row that each came from."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.coordinate_systems import agree_crs, crs_name, metric, parse_crs, same_crs
from sms_resource.loaders.headers import find_header, nearest
from sms_resource.loaders.places import report_rows
from sms_resource.loaders.reading import readable
from sms_resource.loaders.vectors import read_layer

AREAS = frozenset({"Polygon", "MultiPolygon"})
"""Kinds of shape that have an area."""


def read_shapes(
    path: Path,
    name: str,
    layer: str | None,
    crs: str | None,
    declared: str | None,
    reproject: bool,
    findings: Findings,
) -> Any:
    """Read a layer in the study's system, valid and flat, with source_row.

    Returns
    -------
    GeoDataFrame or None
        All columns of the layer, geometry (2D, not empty) and source_row; None where it cannot be used, with an
        error in ``findings``.
    """
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
        if shapes[i].geom_type in AREAS and mended.geom_type == "GeometryCollection":
            parts = [part for part in mended.geoms if part.geom_type in AREAS]
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


def layer_columns(
    frame: Any, wanted: tuple[str, ...], needed: tuple[str, ...], mapping: Mapping[str, str], name: str,
    findings: Findings,
) -> dict[str, str]:  # fmt: skip
    """Columns of a layer by their name here; a needed or mapped one that is not there is an error."""
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

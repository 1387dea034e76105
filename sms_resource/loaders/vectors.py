"""Layers of vector files, read with pyogrio; what GDAL says against a file becomes a finding."""

from __future__ import annotations

import re
import warnings
from difflib import get_close_matches
from pathlib import Path
from typing import Any

from sms_resource.findings import Findings


def first_line(error: BaseException) -> str:
    """First line of what a native library said, short enough to print."""
    text = str(error).strip().splitlines()
    # a path of this machine says nothing that the name of the file does not
    said = re.sub(r"(?:[A-Za-z]:)?[\\/](?:[^'\"\\/:]+[\\/])+", "", text[0]).rstrip(". ") if text else ""
    return said[:160] or type(error).__name__


def layer_names(path: Path) -> list[str]:
    """Names of the layers of a vector file; empty where it is none."""
    import pyogrio
    from pyogrio.errors import DataLayerError, DataSourceError

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            return [str(row[0]) for row in pyogrio.list_layers(path)]
    except (DataSourceError, DataLayerError, ValueError, OSError):
        return []


def read_layer(path: Path, name: str, layer: str | None, findings: Findings) -> Any:
    """Frame of one layer, with geometry where it has one; None, with a finding, where it cannot be read."""
    import pyogrio
    from pyogrio.errors import DataLayerError, DataSourceError, FieldError, GeometryError
    from shapely.errors import ShapelyError

    if path.stat().st_size == 0:
        findings.error("file-empty", "The file has no content.", "Export the layer again.", file=name)
        return None
    names = layer_names(path)
    if not names:
        findings.error(
            "file-unreadable",
            "No layer can be read from this file; it may be cut short or of another kind.",
            "Export the layer again, for example as GeoPackage.",
            file=name,
        )
        return None
    if layer is not None and layer not in names:
        near = get_close_matches(layer, names, 1, 0.5)
        findings.error(
            "layer-unknown",
            f"There is no layer {layer!r}; the file has {', '.join(names)}.",
            f"Write {near[0]!r}." if near else "Correct the name of the layer in the study.",
            file=name,
        )
        return None
    if layer is None and len(names) > 1:
        findings.error(
            "layer-not-named",
            f"The file has {len(names)} layers and the study names none: {', '.join(names)}.",
            "Name the layer in the study.",
            file=name,
        )
        return None
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            return pyogrio.read_dataframe(path, layer=layer or names[0])
    except (
        DataSourceError,
        DataLayerError,
        FieldError,
        GeometryError,
        ShapelyError,
        ValueError,
        OSError,
    ) as error:
        findings.error(
            "file-unreadable",
            f"The layer cannot be read: {first_line(error)}.",
            "Export the layer again, for example as GeoPackage.",
            file=name,
        )
        return None

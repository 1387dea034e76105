"""The role of a grid or a layer, and the coordinate system that files state."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.coordinate_systems import crs_name, parse_crs, same_crs
from sms_resource.loaders.guess_types import Confidence, Guess, GuessedFile
from sms_resource.loaders.headers import find_header
from sms_resource.loaders.netcdf import is_classic, read_netcdf
from sms_resource.loaders.raster import RasterCells, read_raster
from sms_resource.loaders.shapes import AREAS
from sms_resource.loaders.synonyms import bare_name
from sms_resource.loaders.vectors import layer_names, read_layer
from sms_resource.loaders.xyz import looks_like_xyz, read_xyz

RASTER_ENDINGS = frozenset({
    ".tif", ".tiff", ".asc", ".grd", ".nc", ".bag", ".img", ".flt", ".vrt", ".xyz", ".agr", ".adf", ".bil", ".pts",
})  # fmt: skip
_ZONE_COLUMNS = {
    "name": "name zone zonename label title id",
    "status": "status zonestatus kind type category reason",
    "buffer_m": "buffer bufferm bufferdistance radius distance",
}
_CLASS_COLUMNS = {
    "class": "class proposedclass category",
    "reason": "reason why",
    "by": "by who author person",
}
_CHIMNEY_COLUMNS = {
    "name": "name chimney chimneyname label title id",
    "height_m": "height heightm chimneyheight h",
}


def is_raster(path: Path) -> bool:
    """Whether a file holds a grid, by its ending or by the first words of a text grid."""
    if path.suffix.lower() in RASTER_ENDINGS:
        return True
    if path.suffix.lower() in (".txt", ".dat"):
        with path.open("rb") as stream:
            return stream.read(64).lstrip().lower().startswith((b"ncols", b"nrows", b"dsaa"))
    return False


def guess_grid(path: Path) -> tuple[GuessedFile | None, str]:
    """The role of a grid; the reason where it has none."""
    findings = Findings()
    cells: RasterCells | None
    if looks_like_xyz(path):
        cells = read_xyz(path, path.name, findings)
    elif is_classic(path):
        cells = read_netcdf(path, path.name, None, findings)
    else:
        cells = read_raster(path, path.name, 1, None, None, findings)
        if cells is None and path.suffix.lower() in (".nc", ".grd"):
            findings = Findings()
            cells = read_netcdf(path, path.name, None, findings)
    if cells is None:
        return None, next((item.message for item in findings.errors), "it cannot be read as a grid")
    known = cells.values[np.isfinite(cells.values) & (np.abs(cells.values) < 1e5)]
    if not len(known):
        return None, "no cell of the grid has a value"
    middle = float(np.median(known))
    form = []
    if middle > 0:
        form.append(
            Guess("vertical", "depth", f"the median of its cells is {middle:.1f}, above zero", "likely")
        )
    if cells.crs is not None:
        form.append(Guess("crs_inside", crs_name(cells.crs), "the file states it", "sure"))
    form += _uncertainty(path)
    degrees = cells.crs is not None and cells.crs.is_geographic
    zone = _utm_zone(cells) if degrees else None
    because = f"{path.name} is in degrees and lies in this zone"
    hint = Guess("crs", zone, because, "doubtful") if zone else None
    base = "base" in path.stem.casefold()
    role = "base_grid" if base else "bathymetry"
    step = abs(float(cells.transform.a))
    rows, columns = cells.values.shape
    because = f"it is a grid of {columns} x {rows} cells of {step:.3g}{' degrees' if degrees else ''}" + (
        " and its name says base" if base else ""
    )
    # a grid that states its system and covers more ground is the safer choice
    area = math.log10(max(columns * rows * step * step, 1e-12))
    score = (3.0 if cells.crs is not None else 0.0) + 0.1 * area
    return GuessedFile(
        path, "grid", Guess("role", role, because, "likely"), form=tuple(form), hint=hint, score=score
    ), ""


def _uncertainty(path: Path) -> list[Guess]:
    """The band that a raster itself calls an uncertainty."""
    import rasterio
    from rasterio.errors import RasterioError

    try:
        with rasterio.open(path) as source:
            names = [str(name or "").casefold() for name in source.descriptions]
    except (RasterioError, OSError, ValueError):
        return []
    for band, name in enumerate(names, start=1):
        if band > 1 and any(word in name for word in ("uncert", "sigma", "std")):
            return [Guess("uncertainty_band", str(band), f"the file calls its band {band} “{name}”", "sure")]
    return []


def guess_layers(path: Path) -> tuple[list[GuessedFile], list[str | None], str]:
    """Layers of polygons with a role; names of the layers that may be tables; why others were left out."""
    names = layer_names(path)
    found: list[GuessedFile] = []
    tables: list[str | None] = []
    why = "" if names else "no layer can be read from it"
    for name in names:
        layer = name if len(names) > 1 else None
        findings = Findings()
        frame = read_layer(path, path.name, name, findings)
        if frame is None or len(frame) == 0:
            why = next((item.message for item in findings), f"its layer {name} has no shapes")
            continue
        kinds = set(frame.geom_type.dropna()) if hasattr(frame, "geom_type") else set()
        guess = _zones(path, frame, kinds, layer)
        if guess is not None:
            found.append(guess)
        elif not kinds or kinds == {"Point"}:
            tables.append(layer)
        else:
            why = f"its layer {name} holds {', '.join(sorted(kinds))}"
    return found, tables, why


def _match(headers: list[str], wanted: dict[str, str]) -> tuple[Guess, ...]:
    out = []
    for key, synonyms in wanted.items():
        exact = find_header(key, headers)
        near = [header for header in headers if bare_name(header) in synonyms.split()]
        if exact:
            out.append(Guess(key, exact[0], "the layer uses the tool's own name", "sure"))
        elif near:
            out.append(Guess(key, near[0], f"“{near[0]}” is a usual name for it", "likely"))
    return tuple(out)


def _zones(path: Path, frame: Any, kinds: set[str], layer: str | None) -> GuessedFile | None:
    headers = [
        str(column) for column in frame.columns if column != getattr(frame, "_geometry_column_name", None)
    ]
    text = f"{path.stem} {layer or ''}".casefold()
    form = [Guess("layer", layer, "the file has several layers", "sure")] if layer else []
    crs = parse_crs(getattr(frame, "crs", None))
    if crs is not None:
        form.append(Guess("crs_inside", crs_name(crs), "the layer states it", "sure"))
    zones, classes = _match(headers, _ZONE_COLUMNS), _match(headers, _CLASS_COLUMNS)
    keys = {guess.key for guess in zones}
    named = any(word in text for word in ("exclu", "zone", "vent", "set_aside", "setaside", "preserv"))
    if kinds and {guess.key for guess in classes} == {"class", "reason", "by"}:
        role = Guess("role", "class_overrides", "its polygons have a class, a reason and a name", "likely")
        return GuessedFile(path, "layer", role, classes, form=tuple(form), score=2.0)
    if kinds and ("status" in keys or "buffer_m" in keys) and (kinds & AREAS or named or "buffer_m" in keys):
        confidence: Confidence = "likely" if named else "doubtful"
        because = f"it has {', '.join(guess.value for guess in zones)}" + (
            " and its name says so" if named else ""
        )
        missing = () if "status" in keys else ("status",)
        role = Guess("role", "exclusions", because, confidence)
        return GuessedFile(
            path, "layer", role, zones, form=tuple(form), missing=missing, score=2.0 + named, unused=()
        )
    heights = _match(headers, _CHIMNEY_COLUMNS)
    chimneys = any(word in text for word in ("chimney", "spire", "edifice"))
    if kinds and kinds <= AREAS and chimneys:
        tall = "height_m" in {guess.key for guess in heights}
        because = "it holds polygons" + (" with a height" if tall else "") + " and its name says so"
        role = Guess("role", "chimneys", because, "likely" if tall else "doubtful")
        return GuessedFile(
            path, "layer", role, heights, form=tuple(form), missing=() if tall else ("height_m",), score=2.0
        )
    if kinds and kinds <= AREAS | {"LineString", "MultiLineString"}:
        outlined = any(word in text for word in ("outline", "body", "boundary", "limit", "domain"))
        because = (
            "it holds "
            + ("polygons" if kinds <= AREAS else "lines")
            + (" and its name says so" if outlined else "")
        )
        role = Guess("role", "outline", because, "likely" if outlined and kinds <= AREAS else "doubtful")
        return GuessedFile(path, "layer", role, form=tuple(form), score=1.0 + outlined + bool(kinds <= AREAS))
    return None


def guess_crs(files: list[GuessedFile]) -> Guess | None:
    """The projected system that grids and layers state, the grid's first."""
    stated = [(file, parse_crs(file.form_map.get("crs_inside"))) for file in files]
    known = [(file, crs) for file, crs in stated if crs is not None]
    projected = [(file, crs) for file, crs in known if crs.is_projected]
    if projected:
        file, crs = min(projected, key=lambda item: item[0].kind != "grid")
        different = [other.path.name for other, system in projected if not same_crs(system, crs)]
        if different:
            because = f"{file.path.name} states it, but {', '.join(different)} states another"
            return Guess("crs", crs_name(crs), because, "doubtful")
        return Guess("crs", crs_name(crs), f"{file.path.name} states it", "sure")
    return next((file.hint for file in files if file.hint is not None), None)


def _utm_zone(cells: RasterCells) -> str | None:
    """EPSG code of the UTM zone of the middle of a grid in degrees."""
    rows, columns = cells.values.shape
    longitude, latitude = cells.transform @ (columns / 2, rows / 2)
    if not (-180 <= longitude <= 180 and -80 <= latitude <= 84):
        return None
    zone = min(int((longitude + 180) // 6) + 1, 60)
    return f"EPSG:{32600 + zone if latitude >= 0 else 32700 + zone}"

"""Styles that a desktop GIS finds inside a GeoPackage: the open table ``layer_styles`` with QML and SLD.

The table is a convention of GIS programs, not part of the GeoPackage standard: a program that does not know it
shows the layers in colours of its own. SLD follows OGC 02-070 (Styled Layer Descriptor 1.0).
"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from xml.sax.saxutils import escape, quoteattr

import numpy as np

# Viridis at seven even steps (Nuñez et al. 2018, doi:10.1371/journal.pone.0199239, on maps of this kind).
RAMP = ("#440154", "#443983", "#31688e", "#21918c", "#35b779", "#90d743", "#fde725")
STAMP = "2000-01-01T00:00:00.000Z"  # constant, so that the same run gives the same bytes
_SIMPLE = {"polygon": "SimpleFill", "line": "SimpleLine", "point": "SimpleMarker"}
_QML_TYPE = {"polygon": "fill", "line": "line", "point": "marker"}

TABLE = """CREATE TABLE layer_styles (id INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL, f_table_catalog TEXT(256),
f_table_schema TEXT(256), f_table_name TEXT(256), f_geometry_column TEXT(256), styleName TEXT(30), styleQML TEXT,
styleSLD TEXT, useAsDefault BOOLEAN, description TEXT, owner TEXT(30), ui TEXT(30), update_time DATETIME)"""
GEOMETRY = "SELECT column_name FROM gpkg_geometry_columns WHERE table_name = ?"
INSERT = """INSERT INTO layer_styles (f_table_catalog, f_table_schema, f_table_name, f_geometry_column, styleName,
styleQML, styleSLD, useAsDefault, description, owner, update_time) VALUES ('', '', ?, ?, ?, ?, ?, 1, ?, '', ?)"""


@dataclass(frozen=True)
class Style:
    """How one layer is drawn: in one colour, or graduated by a column.

    Parameters
    ----------
    layer : str
    shape : "polygon" | "line" | "point"
    column : str, optional
        Column of the classes; None draws everything in ``colour``.
    limits : tuple of float
        Edges of the classes, rising; one more than there are colours used.
    colour : str
        Colour of a layer without classes.
    outline_only : bool
        Polygons without a fill.
    label : str
        What the legend says of the column, with its unit.
    names : str, optional
        Column whose texts stand beside the features.
    """

    layer: str
    shape: str
    column: str | None = None
    limits: tuple[float, ...] = ()
    colour: str = "#1f2328"
    outline_only: bool = False
    label: str = ""
    names: str | None = None

    @property
    def classes(self) -> list[tuple[float, float, str, str]]:
        """Lower and upper edge, colour and words of each class; the ends are open, being no round numbers."""
        count = len(self.limits) - 1
        steps = np.linspace(0, len(RAMP) - 1, max(count, 1)).round().astype(int)
        found = []
        for n, (low, high) in enumerate(pairwise(self.limits)):
            words = f"{low:.3g} to {high:.3g}"
            if count > 1 and n in (0, count - 1):
                words = f"under {high:.3g}" if n == 0 else f"{low:.3g} and over"
            found.append((low, high, RAMP[steps[n]], words))
        return found


def class_limits(values: np.ndarray, count: int = 7) -> tuple[float, ...]:
    """Round edges of classes that follow the quantiles; () where there is nothing to class."""
    known = np.asarray(values, dtype=float)
    known = known[np.isfinite(known)]
    if known.size == 0 or known.min() == known.max():
        return ()
    edges = np.quantile(known, np.linspace(0, 1, count + 1))
    inner = {float(f"{edge:.2g}") for edge in edges[1:-1]}
    low, high = float(known.min()), float(known.max())
    return (low, *sorted(edge for edge in inner if low < edge < high), high)


def _symbol(style: Style, name: str, colour: str) -> str:
    red, green, blue = (int(colour[n : n + 2], 16) for n in (1, 3, 5))
    rgba = f"{red},{green},{blue},255"
    options = {
        "polygon": {"color": rgba, "style": "no" if style.outline_only else "solid", "outline_color": rgba,
                    "outline_width": "0.5" if style.outline_only else "0", "outline_style": "solid"},
        "line": {"line_color": rgba, "line_width": "0.8", "line_style": "solid"},
        "point": {"color": rgba, "name": "circle", "size": "2", "outline_color": "31,35,40,255", "outline_width": "0.2"},
    }[style.shape]  # fmt: skip
    inner = "".join(
        f"<Option type={quoteattr('QString')} name={quoteattr(k)} value={quoteattr(v)}/>"
        for k, v in options.items()
    )
    props = "".join(f"<prop k={quoteattr(k)} v={quoteattr(v)}/>" for k, v in options.items())
    return (
        f'<symbol type="{_QML_TYPE[style.shape]}" name="{name}" alpha="1" clip_to_extent="1" force_rhr="0">'
        f'<layer class="{_SIMPLE[style.shape]}" enabled="1" locked="0" pass="0">'
        f'<Option type="Map">{inner}</Option>{props}</layer></symbol>'
    )


def qml(style: Style) -> str:
    """The style as QML."""
    if style.column is None or not style.classes:
        symbol = _symbol(style, "0", style.colour)
        head = '<renderer-v2 type="singleSymbol" enableorderby="0" forceraster="0">'
        body = f"{head}<symbols>{symbol}</symbols></renderer-v2>"
    else:
        ranges = "".join(
            f'<range lower="{low:.15g}" upper="{high:.15g}" symbol="{n}" label={quoteattr(words)} render="true"/>'
            for n, (low, high, _, words) in enumerate(style.classes)
        )
        symbols = "".join(_symbol(style, str(n), colour) for n, (_, _, colour, _) in enumerate(style.classes))
        body = (
            f'<renderer-v2 type="graduatedSymbol" graduatedMethod="GraduatedColor" attr={quoteattr(style.column)} '
            f'enableorderby="0" forceraster="0"><ranges>{ranges}</ranges><symbols>{symbols}</symbols></renderer-v2>'
        )
    doctype = "<!DOCTYPE qgis PUBLIC 'http://mrcc.com/qgis.dtd' 'SYSTEM'>"
    if style.names is None:
        return f'{doctype}<qgis version="3.22.0" styleCategories="Symbology">{body}</qgis>'
    text = f'<text-style fieldName={quoteattr(style.names)} isExpression="0" fontSize="7" textColor="31,35,40,255">'
    halo = '<text-buffer bufferDraw="1" bufferSize="0.7" bufferColor="255,255,255,255"/></text-style>'
    names = f'<labeling type="simple"><settings calloutType="simple">{text}{halo}</settings></labeling>'
    return f'{doctype}<qgis version="3.22.0" styleCategories="Symbology|Labeling" labelsEnabled="1">{body}{names}</qgis>'


def _sld_symbol(style: Style, colour: str) -> str:
    width = '<CssParameter name="stroke-width">1.5</CssParameter>'
    stroke = f'<Stroke><CssParameter name="stroke">{colour}</CssParameter>{width}</Stroke>'
    fill = f'<Fill><CssParameter name="fill">{colour}</CssParameter></Fill>'
    if style.shape == "polygon":
        return f"<PolygonSymbolizer>{stroke if style.outline_only else fill}</PolygonSymbolizer>"
    if style.shape == "line":
        return f"<LineSymbolizer>{stroke}</LineSymbolizer>"
    mark = f"<Mark><WellKnownName>circle</WellKnownName>{fill}</Mark>"
    return f"<PointSymbolizer><Graphic>{mark}<Size>7</Size></Graphic></PointSymbolizer>"


def sld(style: Style) -> str:
    """The style as SLD 1.0."""
    if style.column is None or not style.classes:
        rules = f"<Rule>{_sld_symbol(style, style.colour)}</Rule>"
    else:
        name = f"<ogc:PropertyName>{escape(style.column)}</ogc:PropertyName>"
        rules = ""
        for n, (low, high, colour, words) in enumerate(style.classes):
            last = n == len(style.classes) - 1
            upper = "PropertyIsLessThanOrEqualTo" if last else "PropertyIsLessThan"
            rules += (
                f"<Rule><Title>{escape(words)}</Title><ogc:Filter><ogc:And>"
                f"<ogc:PropertyIsGreaterThanOrEqualTo>{name}<ogc:Literal>{low:.15g}</ogc:Literal></ogc:PropertyIsGreaterThanOrEqualTo>"
                f"<ogc:{upper}>{name}<ogc:Literal>{high:.15g}</ogc:Literal></ogc:{upper}>"
                f"</ogc:And></ogc:Filter>{_sld_symbol(style, colour)}</Rule>"
            )
    return (
        '<?xml version="1.0" encoding="UTF-8"?><StyledLayerDescriptor xmlns="http://www.opengis.net/sld" '
        'xmlns:ogc="http://www.opengis.net/ogc" version="1.0.0"><NamedLayer>'
        f"<Name>{escape(style.layer)}</Name><UserStyle><Title>{escape(style.label or style.layer)}</Title>"
        f"<FeatureTypeStyle>{rules}</FeatureTypeStyle></UserStyle></NamedLayer></StyledLayerDescriptor>"
    )


def embed_styles(path: Path, styles: list[Style]) -> None:
    """Add ``layer_styles`` to a GeoPackage, and set every time stamp in it to a constant."""
    with sqlite3.connect(path) as base:
        base.execute("DROP TABLE IF EXISTS layer_styles")
        base.execute(TABLE)
        for style in styles:
            row = base.execute(
                "SELECT column_name FROM gpkg_geometry_columns WHERE table_name = ?", (style.layer,)
            ).fetchone()
            if row is None:
                continue
            base.execute(
                INSERT,
                (style.layer, row[0], style.layer[:30], qml(style), sld(style), style.label, STAMP),
            )
        base.execute(
            "INSERT OR REPLACE INTO gpkg_contents (table_name, data_type, identifier, description, last_change) "
            "VALUES ('layer_styles', 'attributes', 'layer_styles', '', ?)", (STAMP,),
        )  # fmt: skip
        base.execute("UPDATE gpkg_contents SET last_change = ?", (STAMP,))
    base.close()

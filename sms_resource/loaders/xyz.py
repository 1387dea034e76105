"""Text of three columns, x, y and z, that stand on a regular grid."""

from __future__ import annotations

from io import StringIO
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.loaders.parsing import parse_numbers
from sms_resource.loaders.places import report_rows
from sms_resource.loaders.raster import RasterCells, too_large
from sms_resource.loaders.text_table import decode, find_delimiter, read_bytes

LARGEST_XYZ = 300_000_000  # bytes; some ten million nodes, held as text while they are read
ON_NODE = 0.05  # share of the spacing within which a point stands on its node
_SPARSE = 0.3


def looks_like_xyz(path: Path) -> bool:
    """Whether a text file is rows of numbers and not a text grid with its header."""
    if path.suffix.lower() not in (".xyz", ".txt", ".csv", ".dat", ".pts", ".tsv"):
        return False
    with path.open("rb") as stream:
        head = stream.read(64).lstrip().lower()
    return not head.startswith((b"ncols", b"nrows", b"dsaa", b"north:", b"xllc", b"cellsize"))


def read_xyz(path: Path, name: str, findings: Findings) -> RasterCells | None:
    """Cells of an XYZ file; None, with findings, where its points are not on a regular grid.

    The first three columns are x, y and z, with or without a header.
    """
    data = read_bytes(path, name, findings, LARGEST_XYZ)
    decoded = decode(data, None, name, findings) if data is not None else None
    if decoded is None:
        return None
    text = decoded[0]
    points = _points(text, name, findings)
    if points is None:
        return None
    x, y, z = points
    good = np.isfinite(x) & np.isfinite(y)
    x, y, z = x[good], y[good], z[good]
    if len(x) < 4:
        findings.error(
            "xyz-too-few",
            f"The file has {len(x)} points; a grid needs four.",
            "Export the grid again.",
            file=name,
        )
        return None
    across, up = _spacing(x), _spacing(y)
    if across is None or up is None:
        _irregular(name, findings)
        return None
    (x0, dx, nx), (y0, dy, ny) = across, up
    if nx * ny > 50 * len(x):
        _irregular(name, findings)
        return None
    if too_large(nx, ny, name, findings):
        return None
    return _fill(x, y, z, (x0, dx, nx), (y0, dy, ny), name, findings)


def _points(text: str, name: str, findings: Findings) -> tuple[NDArray[np.float64], ...] | None:
    first = text.lstrip("\ufeff").lstrip().split("\n", 1)[0]
    delimiter = find_delimiter(text)
    cells = first.split() if delimiter == " " else first.split(delimiter)
    numbers = parse_numbers([cell.strip().lstrip("#") for cell in cells])
    header = bool(numbers.problems)
    if len(cells) < 3:
        findings.error(
            "xyz-columns",
            f"The first row has {len(cells)} columns; x, y and z are needed.",
            "Export the grid as three columns of numbers.",
            file=name,
            row=1,
        )
        return None
    form: dict[str, Any] = {
        "sep": r"\s+" if delimiter == " " else delimiter, "header": None, "skiprows": 1 if header else 0,
        "usecols": [0, 1, 2], "skip_blank_lines": False, "names": ["x", "y", "z"], "skipinitialspace": True,
    }  # fmt: skip
    try:
        frame = pd.read_csv(StringIO(text), dtype=np.float64, comment="#", na_values=["-"], **form)
        return tuple(frame[column].to_numpy(dtype=np.float64) for column in "xyz")
    except (ValueError, IndexError, OverflowError, pd.errors.ParserError):
        pass  # some cell is no number: read as text to say which
    try:
        texts = pd.read_csv(StringIO(text), dtype=object, keep_default_na=False, on_bad_lines="skip", **form)
    except (ValueError, IndexError, OverflowError, pd.errors.ParserError) as error:
        findings.error(
            "xyz-columns",
            f"The rows are not x, y and z ({str(error).splitlines()[0][:100]}).",
            "Export the grid as three columns of numbers.",
            file=name,
        )
        return None
    for column in "xyz":
        parsed = parse_numbers(texts[column], codes=np.array([]))
        bad = sorted(parsed.problems)
        report_rows(
            findings, "error", "not-a-number", np.array(bad, dtype=np.int64) + (2 if header else 1),
            [parsed.problems[i][1] for i in bad], "Write plain numbers with a decimal point.", file=name, column=column,
        )  # fmt: skip
    if not findings.has_errors:
        findings.error(
            "xyz-columns",
            "The rows are not x, y and z.",
            "Export the grid as three columns of numbers.",
            file=name,
        )
    return None


def _spacing(values: NDArray[np.float64]) -> tuple[float, float, int] | None:
    """First node, spacing and count of the nodes of one axis; None where there is no even spacing."""
    unique = np.unique(values)
    span = unique[-1] - unique[0]
    if not np.isfinite(span) or span <= 0:
        return None
    steps = np.diff(unique)
    steps = steps[steps > max(1e-7 * span, 1e-11 * abs(unique[-1]))]
    steps = steps[steps > 0.5 * np.quantile(steps, 0.1)] if len(steps) else steps
    if not len(steps):
        return None
    step = float(np.median(steps[steps < 1.5 * steps.min()]))
    count = round(span / step)
    if count < 1 or count > 10_000_000:
        return None
    step = span / count
    off = np.abs((unique - unique[0]) / step - np.rint((unique - unique[0]) / step))
    return (float(unique[0]), float(step), count + 1) if off.max() <= ON_NODE else None


def _irregular(name: str, findings: Findings) -> None:
    findings.error(
        "xyz-irregular",
        "The points do not stand on a regular grid.",
        "Grid the soundings first, and give the grid (GeoTIFF, text grid, NetCDF or regular XYZ).",
        file=name,
    )


def _fill(
    x: NDArray[np.float64],
    y: NDArray[np.float64],
    z: NDArray[np.float64],
    across: tuple[float, float, int],
    up: tuple[float, float, int],
    name: str,
    findings: Findings,
) -> RasterCells | None:
    from affine import Affine

    (x0, dx, nx), (y0, dy, ny) = across, up
    column = np.rint((x - x0) / dx).astype(np.int64)
    row = ny - 1 - np.rint((y - y0) / dy).astype(np.int64)
    place = row * nx + column
    order = np.argsort(place, kind="stable")
    same = np.flatnonzero(np.diff(place[order]) == 0)
    differ = same[np.abs(z[order][same] - z[order][same + 1]) > 1e-6]
    if len(differ):
        findings.error(
            "xyz-duplicate-node",
            f"{len(differ)} nodes have two different values, the first at {x[order][differ[0]]:.2f}, "
            f"{y[order][differ[0]]:.2f}.",
            "Keep one value for each node.",
            file=name,
        )
        return None
    values = np.full(ny * nx, np.nan)
    values[place] = z
    filled = len(np.unique(place)) / (nx * ny)
    if filled < _SPARSE:
        findings.warning(
            "xyz-sparse",
            f"Only {100 * filled:.0f} % of the nodes of the {nx} x {ny} grid have a value.",
            "Check that the file is a grid and not lines of soundings.",
            file=name,
        )
    transform = Affine(dx, 0.0, x0 - 0.5 * dx, 0.0, -dy, y0 + (ny - 0.5) * dy)
    return RasterCells(values.reshape(ny, nx), transform, None)

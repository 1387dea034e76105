"""How every figure looks, and how it is saved: same study, same bytes.

matplotlib's object interface only; its settings are borrowed for the time of drawing and given back.
Colours: viridis and cividis (perceptually even, read in grey and by colour-blind eyes; Nuñez et al. 2018,
doi:10.1371/journal.pone.0199239) and the set of Okabe & Ito (2008) for lines; markers and hatches repeat
what a colour says.
"""

from __future__ import annotations

import gc
import math
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.reporting.settled import settled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

DPI = 130
DENSE = 1500  # points; a vector of each is slower to write and to open than the picture
GRADE_MAP = "viridis"
SURFACE_MAP = "cividis"
INK = "#1f2328"
QUIET = "#6b7177"
RULE = "#c9cdd1"
LINES = ("#0072b2", "#d55e00", "#009e73", "#cc79a7", "#56b4e9", "#e69f00", "#5b5b5b")
MARKERS = ("o", "s", "^", "D", "v", "P", "X")
CLASS_ORDER = ("Measured", "Indicated", "Inferred", "unclassified")
CLASS_COLOURS = {
    "measured": "#0b3c49",
    "indicated": "#1f7a8c",
    "inferred": "#9cc9cf",
    "unclassified": "#dedad2",
}
CLASS_HATCHES = {"measured": "", "indicated": "", "inferred": "//", "unclassified": ".."}
VERDICT_COLOURS = {"good": "#009e73", "caution": "#e69f00", "failed": "#d55e00", "missing": "#8a8f94"}

SETTINGS: Any = {
    "svg.hashsalt": "sms_resource",
    "svg.fonttype": "path",
    "font.family": ["DejaVu Sans"],
    "font.size": 8.5,
    "axes.titlesize": 9.0,
    "axes.titleweight": "normal",
    "axes.titlelocation": "left",
    "axes.labelsize": 8.5,
    "axes.edgecolor": QUIET,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "xtick.major.width": 0.7,
    "ytick.major.width": 0.7,
    "grid.color": "#e6e8ea",
    "grid.linewidth": 0.6,
    "legend.fontsize": 7.5,
    "legend.frameon": False,
    "lines.linewidth": 1.4,
    "hatch.linewidth": 0.5,
    "hatch.color": "#7d8489",
    "text.parse_math": False,  # a dollar sign in a name is a dollar sign
    "path.simplify": True,
    "axes.formatter.useoffset": False,
    "axes.formatter.limits": (-5, 9),
    "figure.constrained_layout.w_pad": 0.08,
    "figure.constrained_layout.h_pad": 0.08,
}


@dataclass(frozen=True)
class Drawing:
    """One finished figure with the words and the numbers that belong to it.

    ``section`` names the part of the report; ``table`` is what was drawn, as a table. Once it is
    saved the figure is let go; its size in inches stays.
    """

    key: str
    section: str
    title: str
    caption: str
    alt: str
    figure: Figure | None
    table: pd.DataFrame
    size_in: tuple[float, float] = (0.0, 0.0)


@contextmanager
def borrowed_settings() -> Iterator[None]:
    """Draw inside this: the settings hold within and are given back after."""

    pace = gc.get_threshold()
    gc.freeze()  # the study's own data are not searched for litter between two figures
    gc.set_threshold(100_000, 5, 10)
    try:
        with _matplotlib_settings():
            yield
    finally:
        gc.set_threshold(*pace)
        gc.unfreeze()


@contextmanager
def _matplotlib_settings() -> Iterator[None]:
    import matplotlib

    with matplotlib.rc_context(SETTINGS), warnings.catch_warnings():
        # A name in a script that the font does not hold is drawn as boxes; the tables hold it whole.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        yield


def new_figure(
    width: float, height: float, rows: int = 1, columns: int = 1, **subplots: Any
) -> tuple[Figure, Any]:
    """A figure (inches) on the Agg canvas with its axes as an array of shape (rows, columns)."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure
    from matplotlib.ticker import MaxNLocator

    figure = Figure(figsize=(width, height), dpi=DPI, facecolor="white", layout="constrained")
    FigureCanvasAgg(figure)
    axes = figure.subplots(rows, columns, squeeze=False, **subplots)
    for axis in axes.ravel():
        # Few ticks: easier to read, and text is what drawing spends its time on.
        axis.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 2.5, 5, 10]))
        axis.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 2.5, 5, 10]))
    return figure, axes


def render(drawing: Drawing) -> tuple[bytes, bytes, bytes]:
    """PNG, SVG and the table as CSV; no time, no version and no random name goes into them."""
    import io

    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from PIL import Image

    figure = drawing.figure
    assert figure is not None  # drawn and not yet let go
    picture, vector = io.BytesIO(), io.StringIO()
    with settled(figure):
        engine = figure.get_layout_engine()
        if engine is not None:
            engine.execute(figure)
            figure.set_layout_engine("none")  # placed once, not again for each file
        # The canvases are asked directly: savefig would draw everything once more to place it.
        canvas = figure.canvas  # knows the sizes of texts from the placing
        canvas = canvas if isinstance(canvas, FigureCanvasAgg) else FigureCanvasAgg(figure)
        canvas.draw()
        # Nothing is transparent; a third level of packing takes half the time and no more room than all four channels.
        image = Image.fromarray(np.asarray(canvas.buffer_rgba())).convert("RGB")
        image.save(picture, format="png", dpi=(DPI, DPI), compress_level=3)
        FigureCanvasSVG(figure).print_svg(vector, metadata={"Date": None, "Creator": None})
    figure.dpi = DPI
    return picture.getvalue(), vector.getvalue().encode(), as_csv(drawing.table).encode()


def as_csv(table: pd.DataFrame) -> str:
    """A table as CSV with ten figures; its floats are written column by column, as pandas would write them one by one."""
    header = str(table.iloc[:0].to_csv(index=False, lineterminator="\n"))
    if len(table) and (table.dtypes == np.float64).all() and table.notna().all(axis=None):
        line = ",".join(["%.10g"] * table.shape[1]) + "\n"
        return header + line * len(table) % tuple(table.to_numpy().ravel().tolist())
    written = table.copy(deep=False)
    for number, kind in enumerate(table.dtypes):
        if kind == np.float64 and len(table):
            values = table.iloc[:, number].to_numpy()
            texts = np.array(
                ("%.10g\n" * len(values) % tuple(values.tolist())).split("\n")[:-1], dtype=object
            )
            texts[np.isnan(values)] = ""
            written.isetitem(number, texts)
    return str(written.to_csv(index=False, lineterminator="\n", float_format="%.10g"))


def is_dense(points: int) -> bool:
    """Whether so many points of a panel go into the vector file as one picture; its words and axes stay vectors."""
    return points > DENSE


def words_above(
    axes: Axes, x: Any, y: Any, words: list[str], points: float, *, edge: bool = False, **look: Any
) -> None:
    """Short words ``points`` above places in the data, or above the upper edge where ``y`` is a share of the height.

    A text with a transform of its own is lighter than an annotation, which is placed anew each time it is asked for.
    """
    from matplotlib.transforms import ScaledTranslation

    base = axes.get_xaxis_transform() if edge else axes.transData
    place = base + ScaledTranslation(0, points / 72, axes.figure.dpi_scale_trans)
    for at, height, text in zip(x, y, words):
        axes.text(at, height, text, transform=place, ha="center", **look)


def nice_length(span: float) -> float:
    """A round length (1, 2 or 5 times a power of ten) near a fifth of ``span``."""
    if not span > 0:
        return 1.0
    power = 10.0 ** math.floor(math.log10(span / 5.0))
    return max(power * step for step in (1.0, 2.0, 5.0) if power * step <= span / 4.0)


def finish_plan(axes: Axes, *, label: str = "") -> None:
    """Equal scale, round eastings and northings, scale bar and north arrow."""
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    axes.set_aspect("equal")
    x0, x1 = axes.get_xlim()
    y0, y1 = axes.get_ylim()
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10]))
        axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:,.0f}".replace(",", "\u2009")))
    axes.set_xlabel("Easting (m)")
    axes.set_ylabel("Northing (m)")
    axes.tick_params(axis="y", labelrotation=90)
    for text in axes.get_yticklabels():
        text.set_verticalalignment("center")
    length = nice_length(x1 - x0)
    height = (y1 - y0) * 0.012
    left, bottom = x0 + 0.04 * (x1 - x0), y0 + 0.04 * (y1 - y0)
    halo = {"facecolor": "white", "alpha": 0.8, "edgecolor": "none", "pad": 1.5}
    axes.fill(
        [left, left + length / 2, left + length / 2, left],
        [bottom, bottom, bottom + height, bottom + height],
        color=INK,
        zorder=20,
        lw=0.6,
        ec=INK,
    )
    axes.fill(
        [left + length / 2, left + length, left + length, left + length / 2],
        [bottom, bottom, bottom + height, bottom + height],
        fc="white",
        ec=INK,
        lw=0.6,
        zorder=20,
    )
    axes.text(
        left + length / 2,
        bottom + 1.8 * height,
        f"{length:g} m",
        ha="center",
        va="bottom",
        fontsize=7,
        zorder=20,
        bbox=halo,
    )
    axes.annotate(
        "N",
        xy=(0.955, 0.965),
        xytext=(0.955, 0.865),
        xycoords="axes fraction",
        ha="center",
        va="center",
        fontsize=8,
        zorder=20,
        bbox=halo,
        arrowprops={"arrowstyle": "-|>", "color": INK, "lw": 1.1, "shrinkA": 0, "shrinkB": 0},
    )
    axes.set_xlim(x0, x1)
    axes.set_ylim(y0, y1)
    if label:
        axes.set_title(label)


def hillshade(x: Any, y: Any, values: Any, *, azimuth: float = 315.0, altitude: float = 45.0) -> Any:
    """Lambert shading in 0 to 1, light from ``azimuth`` (degrees clockwise from north); NaN stays NaN."""
    dy, dx = np.gradient(np.asarray(values, dtype=float), np.asarray(y, float), np.asarray(x, float))
    a, h = math.radians(azimuth), math.radians(altitude)
    light = (math.sin(a) * math.cos(h), math.cos(a) * math.cos(h), math.sin(h))
    shade = (-dx * light[0] - dy * light[1] + light[2]) / np.sqrt(dx**2 + dy**2 + 1.0)
    return np.clip(shade, 0.0, 1.0)


def class_colour(name: Any) -> str:
    """Fill colour of a proposed class."""
    return CLASS_COLOURS.get(str(name).lower(), CLASS_COLOURS["unclassified"])


def class_rank(name: Any) -> int:
    """Order of classes: most certain first; what is not known goes last, "all" after it."""
    names = [item.lower() for item in CLASS_ORDER]
    key = str(name).lower()
    return names.index(key) if key in names else (99 if key in ("all", "total") else 50)


def grade_limits(values: Any) -> tuple[float, float]:
    """Colour limits that extreme grades do not stretch: 0 (or the least) to the 97.5th percentile."""
    array = np.asarray(values, dtype=float)
    array = array[np.isfinite(array)]
    if array.size == 0:
        return 0.0, 1.0
    high = float(np.quantile(array, 0.975))
    low = float(min(0.0, array.min()))
    return (low, high) if high > low else (low, low + 1.0)


def log_axis(axis: Any) -> None:
    """A logarithmic axis with plain numbers at 1, 2 and 5 (or at powers of ten where it is long)."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullLocator

    low, high = axis.get_view_interval()
    long = low > 0 and high / low > 300
    axis.set_major_locator(LogLocator(subs=(1.0,) if long else (1.0, 2.0, 5.0), numticks=12))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_locator(NullLocator())


def class_name(name: Any) -> str:
    """A proposed class as a person reads it: ``Inferred``; "all" stays for the caller to name."""
    text = str(name)
    return text[:1].upper() + text[1:] if text else "Unclassified"


def short(text: Any, most: int = 44) -> str:
    """A label that cannot push a figure out of its frame."""
    line = " ".join(str(text).split())
    return line if len(line) <= most else line[: most - 1] + "…"

"""The seafloor under a machine: classes of slope, and roughness, in plan."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.maps import draw_boundaries, draw_seafloor, draw_surface, plan_window, thinned
from sms_resource.reporting.style import Drawing

EDGES = (0.0, 10.0, 15.0, 20.0, 25.0, 30.0, 90.0)
# From light to dark, one hue into the next; the last stands out, for there no machine stands.
COLOURS = ("#f1eef6", "#d0d1e6", "#a6bddb", "#74a9cf", "#2b8cbe", "#7a0177")


def class_words(low: float, high: float) -> str:
    """Name of a class of slope."""
    return f"over {low:g}°" if high >= 90.0 else f"{low:g} to {high:g}°"


def plan_slope(data: ReportData) -> Drawing | None:
    """Classes of slope over the footprint of a machine, and the roughness left over it, with outline and zones."""
    from matplotlib.colors import BoundaryNorm, ListedColormap

    window, slope, rough = plan_window(data), data.body.slope, data.body.roughness
    if window is None or slope is None or not np.isfinite(slope.values).any():
        return None
    both = rough is not None and bool(np.isfinite(rough.values).any())
    figure, axes = style.new_figure(9.8 if both else 5.4, 5.6, 1, 2 if both else 1)
    axis = axes[0, 0]
    draw_seafloor(axis, data, window, faint=True)
    x, y, values = thinned(slope)
    image = draw_surface(
        axis, slope, cmap=ListedColormap(list(COLOURS)), norm=BoundaryNorm(EDGES, 6), alpha=0.85
    )
    bar = figure.colorbar(image, ax=axis, orientation="horizontal", shrink=0.9, spacing="uniform")
    bar.set_label(f"Slope over {data.body.footprint_m:g} m (°)")
    bar.set_ticks(list(EDGES), labels=[f"{edge:g}" for edge in EDGES])
    draw_boundaries(axis, data)
    style.finish_plan(axis, label="Slope")
    if both and rough is not None:
        axis = axes[0, 1]
        draw_seafloor(axis, data, window, faint=True)
        u, v, heights = thinned(rough)
        shown = heights[
            np.ix_((v >= window[2]) & (v <= window[3]), (u >= window[0]) & (u <= window[1]))
        ]  # what lies outside the picture has no say in its colours
        inside = shown[np.isfinite(shown)]
        most = float(np.quantile(inside, 0.98)) if inside.size else 0.0
        image = draw_surface(axis, rough, cmap="YlOrBr", vmin=0.0, vmax=max(most, 1e-3))
        figure.colorbar(image, ax=axis, orientation="horizontal", shrink=0.9, extend="max",
                        label=f"Roughness over {data.body.footprint_m:g} m (m)")  # fmt: skip
        draw_boundaries(axis, data)
        style.finish_plan(axis, label="Roughness")
    rows, columns = np.nonzero(np.isfinite(values))
    table = pd.DataFrame({"easting": x[columns], "northing": y[rows], "slope_deg": values[rows, columns]})
    return Drawing(
        "plan_slope",
        "body",
        "Slope and roughness of the seafloor",
        f"Slope of the plane that fits the seafloor best over {data.body.footprint_m:g} m, the footprint of a machine, and "
        "the root mean square distance of the seafloor from that plane. The grid cannot show overhangs, and it blunts "
        "chimneys.",
        "Map of slope classes of the seafloor, with the outline of the body.",
        figure,
        table,
    )

"""The variogram map: continuity in the plane of the body by direction."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label


def variogram_maps(data: ReportData) -> Drawing | None:
    """One panel a domain: semivariance by the two components of the separation, with the pairs behind each cell."""
    records = [record for record in data.variograms if record.plane_map is not None and len(record.plane_map)]
    if not records:
        return None
    columns = min(3, len(records))
    rows = math.ceil(len(records) / columns)
    figure, axes = style.new_figure(3.4 * columns + 0.2, 3.2 * rows + 0.2, rows, columns)
    tables = []
    panels = list(axes.ravel())
    for axis, record in zip(panels, records):
        frame = record.plane_map
        assert frame is not None  # chosen above
        along, across = np.unique(frame["along_m"]), np.unique(frame["across_m"])
        ordered = frame.sort_values(["along_m", "across_m"])["gamma"].to_numpy(dtype=float)
        values = np.ma.masked_invalid(ordered.reshape(len(along), len(across)))
        mesh = axis.pcolormesh(
            across, along, values, cmap=style.SURFACE_MAP, shading="nearest", rasterized=True
        )
        axis.plot(0, 0, "+", color="white", markersize=9)
        axis.set_aspect("equal")
        axis.set_xlabel("Across (m)")
        axis.set_ylabel("Along (m)")
        element = element_label(record.metal).rpartition(" (")[0]
        axis.set_title(f"{element}, {record.domain}", loc="left")
        figure.colorbar(
            mesh, ax=axis, shrink=0.8, label=f"{element}: semivariance of {record.plane_map_measure} (ratio)"
        )
        tables.append(frame.assign(domain=record.domain, metal=record.metal))
    for axis in panels[len(records) :]:
        axis.set_axis_off()
    azimuth = f"{records[0].model.azimuth:g}" if records[0].model is not None else "0"
    return Drawing(
        "variogram_map",
        "continuity",
        "Variogram map in the plane of the body",
        f"Semivariance between different holes by separation; along is toward azimuth {azimuth}°, across is 90° right "
        "of it. "
        "Continuity is longer in a direction where the map stays dark; blank cells have too few pairs. A direction is a "
        "choice of the study, never read off by the tool.",
        f"Variogram maps of {len(records)} domains in the plane of the body.",
        figure,
        pd.concat(tables, ignore_index=True),
    )

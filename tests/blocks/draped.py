"""A body draped over a slope of 25 degrees, and how well each vertical frame estimates it.

``python -m tests.blocks.draped docs/pictures/draped_body.png`` draws it, with the errors measured anew.
"""

from __future__ import annotations

import math
import sys

import numpy as np
import pandas as pd

from sms_resource.blocks.frames import KINDS, VerticalFrame
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.geostatistics import Neighbourhood, Structure, VariogramModel, leave_one_out

NOISE = 0.15  # standard deviation of the logarithm of grade that no neighbour tells of
WORDS = {
    "elevation": "elevation",
    "depth": "depth below\nseafloor",
    "proportional": "between seafloor\nand base",
}


def slope_deposit(seed: int, dip_deg: float = 25.0) -> tuple[SurfaceGrid, SurfaceGrid, pd.DataFrame]:
    """A body draped over a slope: seafloor, base, and metre composites of a grade that lies in layers."""
    rng = np.random.default_rng(seed)
    cell = 2.0
    x, y = np.meshgrid(cell * np.arange(101), cell * np.arange(101))
    top = -1500 - math.tan(math.radians(dip_deg)) * x + 1.5 * np.sin(x / 23) * np.cos(y / 17)
    thickness = 10 + 3 * np.sin(x / 60) * np.sin(y / 50)
    seafloor = SurfaceGrid(0, 0, cell, cell, top)
    base = seafloor.with_values(top - thickness)
    east, north = (a.ravel() for a in np.meshgrid(np.arange(20, 181, 27.0), np.arange(20, 181, 27.0)))
    east, north = east + rng.uniform(-4, 4, east.size), north + rng.uniform(-4, 4, east.size)
    rows = []
    for n, (e, m) in enumerate(zip(east, north, strict=True)):
        surface = float(seafloor.sample(e, m))
        depth = surface - float(base.sample(e, m))
        for metre in np.arange(0.5, depth, 1.0):
            # Rich under the seafloor, a lean layer, and a second rich layer above the base.
            grade = 4 + 5 * math.exp(-metre / 2) + 3 * math.exp(-(((metre / depth - 0.8) / 0.12) ** 2))
            rows.append((f"H{n}", e, m, surface - metre, grade * math.exp(rng.normal(0, NOISE))))
    return (
        seafloor,
        base,
        pd.DataFrame(rows, columns=["hole_id", "easting", "northing", "elevation", "cu_pct"]),
    )


def errors(seed: int) -> dict[str, float]:
    """Root mean square error of each frame, a whole hole left out at a time."""
    seafloor, base, composites = slope_deposit(seed)
    model = VariogramModel(0.3, [Structure("spherical", 2.7, (80.0, 80.0, 4.0))])
    search = Neighbourhood((90.0, 90.0, 6.0), max_samples=16, min_samples=2, max_per_hole=4)
    xyz = composites[["easting", "northing", "elevation"]].to_numpy()
    found = {}
    for kind in ("elevation", "depth", "proportional"):
        frame = VerticalFrame(kind, seafloor, base)  # type: ignore[arg-type]
        left = leave_one_out(
            frame.forward(xyz), composites["cu_pct"].to_numpy(), model, search, hole_ids=composites["hole_id"]
        )
        # A sample without neighbours on its level gets the mean: that is what a user would be left with.
        estimate = left["estimate"].fillna(composites["cu_pct"].mean())
        found[kind] = float(np.sqrt(np.mean((estimate - left["true"]) ** 2)))
    return found


def draw(path: str, seeds: range = range(3)) -> pd.DataFrame:
    """A cut through the first body, and the errors of all; returns the errors, one row a body."""
    from matplotlib.figure import Figure

    seafloor, base, composites = slope_deposit(seeds[0])
    table = pd.DataFrame([errors(seed) for seed in seeds])
    figure = Figure(figsize=(8.6, 3.5), dpi=110, layout="constrained")
    left, right = figure.subplots(1, 2, width_ratios=(1.7, 1.0))
    row = 50
    near = composites[(composites["northing"] - seafloor.y[row]).abs() < 14.0]
    left.plot(seafloor.x, seafloor.values[row], color="#1f2328", lw=1.2, label="seafloor")
    left.plot(base.x, base.values[row], color="#7a5c3e", lw=1.2, label="base")
    dots = left.scatter(
        near["easting"], near["elevation"], c=near["cu_pct"], cmap="viridis", s=22, marker="s"
    )
    figure.colorbar(dots, ax=left, label="Cu (%) of composites of 1 m")
    left.set_xlabel("Easting (m)")
    left.set_ylabel("Elevation (m)")
    left.legend(loc="lower left", frameon=False)
    left.set_title("Layers on a slope of 25°; heights as they are", fontsize=9)
    left.set_aspect("equal")
    for number, (colour, mark) in enumerate(zip(("#0072b2", "#d55e00", "#009e73"), "osD", strict=True)):
        right.plot(range(3), table.loc[number, list(KINDS)], marker=mark, ms=4, lw=0.8, color=colour,
                   label=f"invented body {number + 1}")  # fmt: skip
    right.set_xticks(range(3), [WORDS[kind] for kind in KINDS], fontsize=8)
    right.set_ylim(bottom=0.0)
    right.set_ylabel("Root mean square error (Cu %),\none hole left out", fontsize=8)
    right.legend(frameon=False, fontsize=8, loc="lower left")
    right.set_title("Estimated in", fontsize=9)
    for axis in (left, right):
        axis.tick_params(labelsize=8)
        axis.spines[["top", "right"]].set_visible(False)
    figure.savefig(path, metadata={"Software": None})
    return table


if __name__ == "__main__":
    print(draw(sys.argv[1]).round(2))

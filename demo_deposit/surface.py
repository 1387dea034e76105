"""What was picked off the invented seafloor: samples, far richer than the body below, and two dredges."""

from __future__ import annotations

import numpy as np
import pandas as pd
from drilling import Campaign, minerals
from ground import CAP, CENTRE, METALS, WASTE, Ground

PLANTED_RATIO = {"cu_pct": 1.3, "zn_pct": 5.0, "au_gpt": 2.5, "ag_gpt": 4.0}
SPREAD = {"cu_pct": 0.45, "zn_pct": 0.35, "au_gpt": 0.45, "ag_gpt": 0.45}
TYPES = (("grab", 24), ("chimney", 20), ("push_core", 10), ("gravity_core", 6))


def nearest_core(campaign: Campaign, x: float, y: float) -> dict[str, float]:
    """Length-weighted mean of all laboratory assays in sulphide of the hole whose collar is nearest in plan."""
    assays = pd.DataFrame(campaign.assays)
    assays = assays[(assays["domain"] != WASTE) & (assays["method"] == "laboratory")]
    collars = pd.DataFrame(campaign.collars)
    collars = collars[collars["hole"].isin(assays["hole"])]
    hole = collars["hole"].iloc[int(np.hypot(collars["east"] - x, collars["north"] - y).to_numpy().argmin())]
    core = assays[assays["hole"] == hole]
    length = core["to"] - core["from"]
    return {metal: float((core[metal] * length).sum() / length.sum()) for metal in METALS}


def richer(rng: np.random.Generator, core: dict[str, float]) -> dict[str, float]:
    """Grades of a piece of the surface, from those of the core beneath it."""
    grades = {}
    for metal in METALS:
        noise = rng.lognormal(-0.5 * SPREAD[metal] ** 2, SPREAD[metal])
        grades[metal] = core[metal] * PLANTED_RATIO[metal] * noise
    grades["zn_pct"] = min(grades["zn_pct"], 56.0)
    grades["cu_pct"] = min(grades["cu_pct"], 0.346 * (96 - grades["zn_pct"] / 0.671), 29.0)
    return grades


def surface_samples(ground: Ground, campaign: Campaign, seed: int) -> pd.DataFrame:
    """Sixty samples on the body."""
    rng = np.random.default_rng([seed, 34])
    rows = []
    for kind, count in TYPES:
        placed = 0
        while placed < count:
            x, y = CENTRE[0] + rng.uniform(-95, 95), CENTRE[1] + rng.uniform(-95, 95)
            if kind == "chimney":
                near = ground.chimneys[rng.integers(len(ground.chimneys))]
                x, y = near[0] + rng.normal(0, 1.0), near[1] + rng.normal(0, 1.0)
            if ground.reach(np.array(x), np.array(y)) > 0.92:
                continue
            placed += 1
            grades = richer(rng, nearest_core(campaign, x, y))
            extra = minerals(rng, CAP, grades["cu_pct"], grades["zn_pct"], 0.02)
            core = kind.endswith("core")
            rows.append({
                "sample": f"S{len(rows) + 1:03d}", "type": kind, "east": x, "north": y,
                "elevation": float(ground.seafloor(np.array(x), np.array(y))) + rng.normal(0, 0.3),
                "sigma": 2.0 if core else rng.choice([3.0, 5.0, 8.0]), "method": "laboratory",
            } | grades | extra)  # fmt: skip
    return pd.DataFrame(rows)


def dredges(ground: Ground, campaign: Campaign, seed: int) -> pd.DataFrame:
    """Two tracks across the mound; what came up came from anywhere along them."""
    rng = np.random.default_rng([seed, 4])
    rows = []
    for name, start, end in (("D01", (-78, -52), (46, 58)), ("D02", (60, -60), (-38, 66))):
        points = np.linspace(start, end, 8) + np.array(CENTRE)
        means = pd.DataFrame([nearest_core(campaign, x, y) for x, y in points]).mean().to_dict()
        grades = richer(rng, means)
        depth = -ground.seafloor(points[[0, -1], 0], points[[0, -1], 1])
        rows.append({"dredge": name, "x1": points[0, 0], "y1": points[0, 1], "z1": depth[0],
                     "x2": points[-1, 0], "y2": points[-1, 1], "z2": depth[1]}
                    | grades | minerals(rng, CAP, grades["cu_pct"], grades["zn_pct"], 0.02))  # fmt: skip
    return pd.DataFrame(rows)

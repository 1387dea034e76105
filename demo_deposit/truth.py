"""What is truly there: volumes, tonnes and grades of the invented body, by block."""

from __future__ import annotations

import numpy as np
import pandas as pd
from ground import CAP, CENTRE, DOMAINS, EAST0, HEIGHT, METALS, NORTH0, STOCKWORK, WIDTH, Ground

STEP = 0.25  # m of depth; columns are 1 m x 1 m
CUTOFFS = (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0)
SUPPORTS = {"2x2x1": (2.0, 2.0, 1.0), "5x5x2": (5.0, 5.0, 2.0), "10x10x2": (10.0, 10.0, 2.0)}
FLOOR = -1720.0  # lower corner of the blocks: (EAST0, NORTH0, FLOOR), axes north up


def cells(ground: Ground) -> pd.DataFrame:
    """The body in slices of 1 x 1 x 0.25 m, the last of each column cut at the base."""
    x, y = np.meshgrid(EAST0 + 0.5 + np.arange(WIDTH), NORTH0 + 0.5 + np.arange(HEIGHT), indexing="ij")
    x, y = x.ravel(), y.ravel()
    inside = ground.thickness(x, y) > 0
    x, y = x[inside], y[inside]
    base = ground.contacts(x, y)[2]
    count = np.ceil(base / STEP - 1e-9).astype(int)
    column = np.repeat(np.arange(len(x)), count)
    number = np.arange(len(column)) - np.repeat(np.cumsum(count) - count, count)
    top, low = number * STEP, np.minimum((number + 1) * STEP, base[column])
    depth, volume = 0.5 * (top + low), low - top
    x, y = x[column], y[column]
    domain = ground.domain(x, y, depth)
    dry = ground.dry_density(x, y, depth)
    frame = {"easting": x, "northing": y, "elevation": ground.seafloor(x, y) - depth, "domain": domain,
             "volume_m3": volume, "dry_tonnes": dry * volume,
             "wet_tonnes": ground.wet_density(dry, domain) * volume}  # fmt: skip
    share = 1 - ground.anhydrite(x, y, depth)
    frame.update({metal: grade * share for metal, grade in ground.sulphide_grade(x, y, depth).items()})
    return pd.DataFrame(frame)


def blocks(body: pd.DataFrame, size: tuple[float, float, float]) -> pd.DataFrame:
    """Sums and dry-mass-weighted grades of the slices in each block."""
    i, j, k = (((body[name] - low) // step).astype(int) for name, low, step in
               zip(("easting", "northing", "elevation"), (EAST0, NORTH0, FLOOR), size))  # fmt: skip
    sums = {name: body[name] for name in ("volume_m3", "dry_tonnes", "wet_tonnes")}
    sums.update({metal: body[metal] * body["dry_tonnes"] for metal in METALS})
    for number in range(CAP, STOCKWORK + 1):
        sums[f"share_{DOMAINS[number]}"] = body["volume_m3"] * (body["domain"] == number)
    frame = pd.DataFrame({"i": i, "j": j, "k": k, **sums}).groupby(["i", "j", "k"], as_index=False).sum()
    for metal in METALS:
        frame[metal] /= frame["dry_tonnes"]
    for number in range(CAP, STOCKWORK + 1):
        frame[f"share_{DOMAINS[number]}"] /= frame["volume_m3"]
    for name, low, step in zip(("easting", "northing", "elevation"), (EAST0, NORTH0, FLOOR), size):
        frame[name] = low + (frame[{"easting": "i", "northing": "j", "elevation": "k"}[name]] + 0.5) * step
    return frame


def totals(frame: pd.DataFrame) -> dict[str, float]:
    """Volume, tonnes and mean grades of a set of slices or blocks."""
    tonnes = float(frame["dry_tonnes"].sum())
    result = {name: float(f"{frame[name].sum():.6g}") for name in ("volume_m3", "dry_tonnes", "wet_tonnes")}
    for metal in METALS:
        mean = float((frame[metal] * frame["dry_tonnes"]).sum() / tonnes) if tonnes else float("nan")
        result[metal] = float(f"{mean:.5g}")
    return result


def above_cutoffs(frame: pd.DataFrame) -> list[dict[str, float]]:
    """Tonnes and grades of the blocks at or above each copper cut-off."""
    return [{"cu_cutoff_pct": cut, **totals(frame[frame["cu_pct"] >= cut])}
            for cut in CUTOFFS if (frame["cu_pct"] >= cut).any()]  # fmt: skip


def body_truth(body: pd.DataFrame) -> dict:
    """The part of truth.json that is about the body."""
    return {
        "body": totals(body),
        "by_domain": {DOMAINS[n]: totals(body[body["domain"] == n]) for n in range(CAP, STOCKWORK + 1)},
        "grids": {name: {"origin": [EAST0, NORTH0, FLOOR], "size": list(size), "azimuth": 0.0}
                  for name, size in SUPPORTS.items()},
        "above_cu_cutoff": {name: above_cutoffs(blocks(body, size)) for name, size in SUPPORTS.items()},
        "centre": list(CENTRE),
    }  # fmt: skip

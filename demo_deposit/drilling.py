"""Holes into the invented ground: where they stand, what core came up, how it was logged and assayed."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from ground import (
    CAP,
    CENTRE,
    GRAIN_DENSITY,
    MASSIVE,
    METALS,
    NUGGET,
    PORE_WATER_TPM3,
    STOCKWORK,
    WASTE,
    Ground,
)

COLLAR_SHIFT_M = 1.4  # recorded collars stand this much above the grid
COLLAR_NOISE_M = 0.3
COLLAR_OUTLIERS_M = {"033": 6.2, "058": -5.4}
NO_CORE_HOLE, OVER_HOLE, LOST_HOLE = "021", "040", "052"
ANHYDRITE_SURVIVAL = 0.74  # of the share of the sulphide around it that comes up
FINE = 0.05  # m of hole that is looked at as one piece
BASE_RECOVERY = {CAP: -0.50, MASSIVE: 0.40, STOCKWORK: 0.0, WASTE: 0.30}  # logit of the recovered share


@dataclass
class Campaign:
    """All that a drilling campaign writes down, as lists of rows, and what it could not see."""

    collars: list[dict] = field(default_factory=list)
    surveys: list[dict] = field(default_factory=list)
    runs: list[dict] = field(default_factory=list)
    lithology: list[dict] = field(default_factory=list)
    assays: list[dict] = field(default_factory=list)
    densities: list[dict] = field(default_factory=list)
    drilled: list[pd.DataFrame] = field(default_factory=list)  # the true ground along each hole


def sites(ground: Ground, rng: np.random.Generator) -> list[tuple[str, float, float]]:
    """Names and true positions: a jittered 23.6 m pattern, a cluster on the best ground, four twins."""
    step, turn = 23.6, np.radians(20.0)
    points = []
    for row in range(-7, 8):
        for col in range(-7, 8):
            p = np.array([(col + 0.5 * (row % 2)) * step, row * step * 0.87])
            x = CENTRE[0] + p[0] * np.cos(turn) - p[1] * np.sin(turn) + rng.normal(0, 3.2)
            y = CENTRE[1] + p[0] * np.sin(turn) + p[1] * np.cos(turn) + rng.normal(0, 3.2)
            reach = float(ground.reach(np.array(x), np.array(y)))
            keep = rng.uniform() < (0.97 if reach < 0.97 else 0.45)
            if reach < 1.12 and keep:
                points.append((x, y))

    def copper(place: tuple[float, float]) -> float:
        depth = np.arange(1.0, ground.thickness(np.array(place[0]), np.array(place[1])), 0.5)
        grades = ground.sulphide_grade(np.full(depth.shape, place[0]), np.full(depth.shape, place[1]), depth)
        return float(grades["cu_pct"].mean()) if len(depth) > 20 else 0.0

    best = max(points, key=copper)  # infill went where the first copper was best
    points += [(best[0] + rng.normal(0, 8), best[1] + rng.normal(0, 8)) for _ in range(11)]
    names = [f"{number:03d}" for number in range(1, len(points) + 1)]
    result = [(name, x, y) for name, (x, y) in zip(names, points)]
    inner = [s for s in result if ground.reach(np.array(s[1]), np.array(s[2])) < 0.8]
    for name, x, y in inner[4::10][:4]:
        angle = rng.uniform(0, 2 * np.pi)
        result.append((f"{name}T", x + 1.6 * np.sin(angle), y + 1.6 * np.cos(angle)))
    return sorted(result)


def look(ground: Ground, x: float, y: float, azimuth: float, tilt: float, length: float) -> pd.DataFrame:
    """The true ground along a straight hole, in pieces of ``FINE`` m."""
    depth = (np.arange(round(length / FINE)) + 0.5) * FINE
    side = depth * np.sin(np.radians(tilt))
    east, north = x + side * np.sin(np.radians(azimuth)), y + side * np.cos(np.radians(azimuth))
    start = ground.seafloor(np.array(x), np.array(y))
    below = np.maximum(ground.seafloor(east, north) - (start - depth * np.cos(np.radians(tilt))), 0.01)
    hole = pd.DataFrame({"depth": depth, "domain": ground.domain(east, north, below)})
    hole["anhydrite"] = ground.anhydrite(east, north, below)
    hole["friable"] = ground.friability(east, north, below)
    hole["dry"] = ground.dry_density(east, north, below)
    for metal, grade in ground.sulphide_grade(east, north, below).items():
        hole[metal] = grade
    return hole


def code_of(domain: int, cu: float, zn: float, anhydrite: float) -> str:
    """What a logger would call it."""
    if domain == CAP:
        return "SSD" if anhydrite > 0.16 else "CHR"
    if domain == MASSIVE:
        if anhydrite > 0.22:
            return "ANS"
        return "MZN" if zn > 3.4 else ("MCU" if cu > 3.6 else "MPY")
    return "STW" if domain == STOCKWORK else "AVO"


def log(hole: pd.DataFrame, length: float) -> list[tuple[float, float, int, str]]:
    """Logged intervals: contacts to 0.1 m, stretches of 1.5 m inside a domain named by what is most there."""
    change = np.flatnonzero(np.diff(hole["domain"])) + 1
    contacts = [0.0, *np.round(hole["depth"].to_numpy()[change] - FINE / 2, 1), length]
    rows: list[tuple[float, float, int, str]] = []
    for top, low in itertools.pairwise(contacts):
        if low - top < 0.05:
            continue
        edges = np.round(np.linspace(top, low, max(1, round((low - top) / 1.5)) + 1), 1)
        for a, b in itertools.pairwise(edges):
            part = hole[(hole["depth"] > a) & (hole["depth"] < b)]
            if b - a < 0.05 or part.empty:
                continue
            domain = int(part["domain"].mode().iloc[0])
            code = code_of(domain, part["cu_pct"].mean(), part["zn_pct"].mean(), part["anhydrite"].mean())
            if rows and rows[-1][2:] == (domain, code):
                rows[-1] = (rows[-1][0], b, domain, code)
            else:
                rows.append((a, b, domain, code))
    return rows


def minerals(
    rng: np.random.Generator, domain: int, cu: float, zn: float, anhydrite: float
) -> dict[str, float]:
    """By-columns that agree with a mineral sum under 100 %."""
    pb = zn * 0.045 * rng.lognormal(0, 0.4)
    held = cu / 0.346 + zn / 0.671 + pb / 0.866 + 100 * anhydrite
    barite = {CAP: 9.0, MASSIVE: 2.5, STOCKWORK: 0.6, WASTE: 0.1}[domain] * rng.lognormal(-0.1, 0.5)
    barite = min(barite, 0.4 * max(100 - held, 0.0))
    rest = max(100 - held - barite, 0.0)
    silica, pyrite = {CAP: (0.20, 0.62), MASSIVE: (0.14, 0.78), STOCKWORK: (0.58, 0.26), WASTE: (0.55, 0.03)}[
        domain
    ]
    silica *= rng.lognormal(-0.02, 0.2)
    iron = 0.304 * cu / 0.346 + 0.4655 * rest * min(pyrite, 0.97 - silica) + (4.5 if domain == WASTE else 0.0)
    return {
        "pb": pb, "fe": iron, "ba": 0.588 * barite, "sio2": rest * silica,
        "as": (25 + 130 * zn**0.7) * rng.lognormal(0, 0.4), "mo": (4 + 14 * cu) * rng.lognormal(0, 0.5),
    }  # fmt: skip


def recover(rng: np.random.Generator, part: pd.DataFrame, mood: float) -> tuple[float, dict[str, float]]:
    """Share of a stretch that comes up, and the grades of what does.

    Zinc-rich ground is friable and comes up less; barren anhydrite inside it comes up less again.
    """
    logit = part["domain"].map(BASE_RECOVERY) - 0.22 * part["friable"] + mood
    share = 1 / (1 + np.exp(-logit))
    metal_part, salt = (1 - part["anhydrite"]) * share, part["anhydrite"] * share * ANHYDRITE_SURVIVAL
    up = metal_part + salt
    grades = {metal: float((part[metal] * metal_part).sum() / up.sum()) for metal in METALS}
    return float(up.mean()), grades | {"salt": float(salt.sum() / up.sum())}


def sample(campaign: Campaign, rng: np.random.Generator, name: str, top: float, end: float, domain: int,
           grades: dict[str, float], method: str) -> None:  # fmt: skip
    """One assay, with nugget and the laboratory's 2 % scatter."""
    values = {}
    for metal in METALS:
        spread = NUGGET[metal]
        noise = rng.lognormal(-0.5 * spread**2, spread) * rng.normal(1, 0.02)
        values[metal] = min(grades[metal] * noise, {"cu_pct": 30.0, "zn_pct": 46.0}.get(metal, np.inf))
    if values["cu_pct"] / 0.346 + values["zn_pct"] / 0.671 > 88:
        values["zn_pct"] = 0.671 * (88 - values["cu_pct"] / 0.346)
    extra = minerals(rng, domain, values["cu_pct"], values["zn_pct"], grades["salt"])
    campaign.assays.append(
        {"hole": name, "from": round(top, 2), "to": round(end, 2), "domain": domain, "method": method}
        | values
        | extra
    )


def drill(ground: Ground, seed: int) -> Campaign:
    """Drill every site."""
    rng = np.random.default_rng([seed, 2])
    campaign = Campaign()
    where = sites(ground, rng)
    inner = [name for name, x, y in where if ground.thickness(np.array(x), np.array(y)) > 4]
    short = set(
        rng.choice([n for n in inner if n not in (LOST_HOLE, NO_CORE_HOLE)], round(0.35 * len(where)), False)
    )
    surveyed = set(rng.choice([name for name, _, _ in where], 22, False))
    handheld = set(rng.choice([n for n in inner if n not in short], 2, False))
    for name, x, y in where:
        base = float(ground.contacts(np.array(x), np.array(y))[2])
        early = name in short or name == LOST_HOLE
        length = base * rng.uniform(0.55, 0.9) if early else base + rng.uniform(2.0, 5.0)
        length = round(float(np.clip(length, 5.0, 35.0)), 1)
        azimuth = rng.uniform(0, 360)
        tilt = min(abs(rng.normal(0, 2.5 if name not in surveyed else 4.0)), 9.5)
        hole = look(ground, x, y, azimuth, tilt, length)
        ended = "sulphide" if hole["domain"].iloc[-1] != WASTE else "host"
        lift = COLLAR_SHIFT_M + rng.normal(0, COLLAR_NOISE_M) + COLLAR_OUTLIERS_M.get(name, 0.0)
        acoustic = rng.uniform() < 0.7
        campaign.collars.append({
            "hole": name, "east": x + rng.normal(0, 0.35), "north": y + rng.normal(0, 0.35),
            "depth": -(float(ground.seafloor(np.array(x), np.array(y))) + lift), "length": length,
            "ended": "lost" if name == LOST_HOLE else ended,
            "method": "LBL" if acoustic else "USBL", "sigma": 0.8 if acoustic else 4.0,
        })  # fmt: skip
        if name in surveyed:
            for depth in [0.0, *np.arange(10.0, length, 10.0), length]:
                campaign.surveys.append({"hole": name, "depth": depth, "azimuth": (azimuth + rng.normal(0, 2)) % 360,
                                         "dip": -90 + abs(tilt + rng.normal(0, 0.15))})  # fmt: skip
        logged = log(hole, length)
        core(campaign, rng, name, hole, logged, length, name in handheld)
        hole["hole"] = name
        campaign.drilled.append(hole)
    weigh(campaign, rng)
    return campaign


def core(campaign: Campaign, rng: np.random.Generator, name: str, hole: pd.DataFrame,
         logged: list[tuple[float, float, int, str]], length: float, handheld: bool) -> None:  # fmt: skip
    """Runs, their core and their samples; core lies at the top of its rock within its run."""
    edges = [0.0]
    while edges[-1] < length - 0.3:
        edges.append(
            round(
                min(edges[-1] + rng.choice([1.0, 1.5, 1.5, 2.0, 3.0], p=[0.2, 0.3, 0.2, 0.2, 0.1]), length), 2
            )
        )
    edges[-1] = length
    number = int(len(edges) * 0.45)
    for index, (top, end) in enumerate(itertools.pairwise(edges)):
        none, over = name == NO_CORE_HOLE and index == number, name == OVER_HOLE and index == number
        mood, recovered = rng.normal(0, 0.9), 0.0
        for a, b, domain, _ in logged:
            low, high = max(a, top), min(b, end)
            part = hole[(hole["depth"] > low) & (hole["depth"] < high)]
            if high - low < 0.02 or part.empty:
                continue
            share, grades = recover(rng, part, mood)
            got = 0.0 if none else (high - low) * (1.0 if over else share)
            recovered += got
            # of host, every other hole has its first metre sampled
            waste_left = 1.0 if int(name[:3]) % 2 else 0.0
            reach = got if domain != WASTE else (min(got, waste_left) if a == low else 0.0)
            if reach < 0.05:
                continue
            cuts = np.round(np.linspace(low, low + reach, max(1, round(reach / 0.75)) + 1), 2)
            for one, two in itertools.pairwise(cuts):
                method = "handheld_xrf" if handheld and 0.35 < index / len(edges) < 0.55 else "laboratory"
                sample(campaign, rng, name, one, two, domain, grades, method)
        if over:
            recovered *= 1.04
        campaign.runs.append({"hole": name, "from": top, "to": end, "recovered": round(recovered, 2)})
    lost = next((r for r in campaign.runs if r["hole"] == name and r["recovered"] == 0), None)
    for a, b, _, code in logged:
        blind = lost is not None and a < lost["to"] and b > lost["from"]
        note = f"{lost['from']:.1f}-{lost['to']:.1f} no core, by penetration rate" if blind and lost else ""
        campaign.lithology.append({"hole": name, "from": a, "to": b, "code": code, "note": note})


def weigh(campaign: Campaign, rng: np.random.Generator) -> None:
    """Densities of core pieces: some with wet and dry density, some with the masses and the dry volume only."""
    assays = pd.DataFrame(campaign.assays)
    for domain, count in ((CAP, 16), (MASSIVE, 30), (STOCKWORK, 12), (WASTE, 6)):
        rows = assays[(assays["domain"] == domain) & (assays["to"] - assays["from"] > 0.3)]
        for position, row in enumerate(
            rows.sample(count, random_state=int(rng.integers(2**31))).itertuples()
        ):
            truth = next(h for h in campaign.drilled if h["hole"].iloc[0] == row.hole)
            near = truth[(truth["depth"] > row[2]) & (truth["depth"] < row[3])]
            dry = float(near["dry"].mean()) * rng.normal(1.005, 0.02)
            grain = GRAIN_DENSITY[domain] * rng.normal(1, 0.01)
            porosity = max(1 - dry / grain, 0.01)
            entry = {"hole": row.hole, "number": row.Index, "from": row[2], "to": row[3]}
            if position % 3 == 2:  # moisture and density: salt of the pore water stays in the dried piece
                volume = rng.uniform(18, 60)
                water = volume * porosity * 1.024
                salt = 0.035 * water
                entry |= {"wet_mass": volume * dry + water, "dry_mass": volume * dry + salt,
                          "dry_volume": volume * (1 - porosity) + salt / 2.22}  # fmt: skip
            else:
                entry |= {"wet": dry + porosity * PORE_WATER_TPM3, "dry": dry}
            campaign.densities.append(entry)

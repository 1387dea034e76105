"""The invented ground: a mound, the sulphide inside it, and its true grades. No such place exists.

Everything is a function of position, so that a hole, a grab and a block all look into the same ground.
Local coordinates: u along the mound's long axis, v across it, d = depth below the seafloor, in m.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.fft import irfftn, rfftn

CRS = "EPSG:32702"
EAST0, NORTH0 = 512000.0, 8200000.0  # south-west corner of the survey
WIDTH, HEIGHT = 500, 400  # m
CENTRE = (EAST0 + 252.0, NORTH0 + 204.0)
AXIS_AZIMUTH = 35.0  # long axis of the mound, degrees clockwise from north
HALF_AXES = (104.0, 84.0)  # of the body, m
GREATEST_THICKNESS = 32.0
PORE_WATER_TPM3 = 1.03

METALS = ("cu_pct", "zn_pct", "au_gpt", "ag_gpt")
CEILING = {"cu_pct": 28.0, "zn_pct": 45.0, "au_gpt": 60.0, "ag_gpt": 900.0}
# Standard deviation of the natural logarithm: continuous part, and nugget (27 % of the variance).
CONTINUOUS = {"cu_pct": 0.38, "zn_pct": 0.52, "au_gpt": 0.48, "ag_gpt": 0.52}
NUGGET = {"cu_pct": 0.23, "zn_pct": 0.32, "au_gpt": 0.30, "ag_gpt": 0.32}
WASTE, CAP, MASSIVE, STOCKWORK = 0, 1, 2, 3
DOMAINS = ("waste", "cap", "massive", "stockwork")
DRY_DENSITY = {CAP: (2.05, 0.16), MASSIVE: (3.45, 0.18), STOCKWORK: (2.80, 0.12), WASTE: (2.35, 0.10)}
GRAIN_DENSITY = {CAP: 3.45, MASSIVE: 3.92, STOCKWORK: 3.15, WASTE: 2.80}

CELL, SLICE = 2.0, 0.5  # lattice of the random fields: m in plan, m in depth
FIELD_SHAPE = (WIDTH // 2 + 14, HEIGHT // 2 + 12, 100)


@lru_cache(maxsize=4)
def amplitude(shape: tuple[int, ...], cells: tuple[float, ...]) -> np.ndarray:
    """Square root of the spectrum of an exponential covariance on the torus, half of it (as of a real field)."""
    distance2 = np.zeros(shape)
    for axis, (count, reach) in enumerate(zip(shape, cells)):
        lag = np.minimum(np.arange(count), count - np.arange(count)) / reach
        distance2 = distance2 + (lag**2).reshape([-1 if a == axis else 1 for a in range(len(shape))])
    return np.sqrt(rfftn(np.exp(-3.0 * np.sqrt(distance2))).real.clip(min=0.0))


def gaussian_field(rng: np.random.Generator, shape: tuple[int, ...], cells: tuple[float, ...]) -> np.ndarray:
    """Periodic Gaussian field of mean 0 and variance 1 with exponential covariance.

    ``cells`` is the practical range along each axis, in cells. The spectrum of the covariance on the torus is
    taken by FFT and its small negative part dropped (Dietrich & Newsam 1997, doi:10.1137/S1064827592240555).
    """
    field = irfftn(rfftn(rng.standard_normal(shape)) * amplitude(shape, cells), s=shape)
    return (field - field.mean()) / field.std()


def bilinear(lattice: np.ndarray, cell: float, x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """Value of a 2D lattice (x, y) between its nodes, which stand ``cell`` m apart from the survey's corner."""
    p = np.clip((x - EAST0) / cell, 0, lattice.shape[0] - 1.001)
    q = np.clip((y - NORTH0) / cell, 0, lattice.shape[1] - 1.001)
    i, j = p.astype(int), q.astype(int)
    f, g = p - i, q - j
    low = lattice[i, j] * (1 - f) + lattice[i + 1, j] * f
    return low * (1 - g) + (lattice[i, j + 1] * (1 - f) + lattice[i + 1, j + 1] * f) * g


@dataclass(frozen=True, eq=False)
class Ground:
    """The true seafloor, body and grades of the demo deposit; ``Ground.make(seed)`` builds it."""

    rough: np.ndarray
    bumps: np.ndarray
    cap: np.ndarray
    root: np.ndarray
    fields: dict[str, np.ndarray]
    chimneys: np.ndarray  # (n, 4): easting, northing, height, radius

    @classmethod
    def make(cls, seed: int) -> Ground:
        """Draw the random parts of the ground."""
        rng = np.random.default_rng([seed, 1])
        plan = (WIDTH + 28, HEIGHT + 24)
        coarse = FIELD_SHAPE[:2]
        rough = 0.22 * gaussian_field(rng, plan, (18.0, 18.0))
        bumps, cap, root = (gaussian_field(rng, coarse, (35.0, 35.0)) for _ in range(3))
        latent = [gaussian_field(rng, FIELD_SHAPE, (42 / CELL, 42 / CELL, 5.0 / SLICE)) for _ in range(5)]
        salts = gaussian_field(rng, FIELD_SHAPE, (30 / CELL, 30 / CELL, 4.0 / SLICE))
        heat, zinc, gold, silver, mass = latent
        fields = {
            "cu_pct": heat,
            "zn_pct": 0.95 * zinc - 0.31 * heat,
            "au_gpt": 0.6 * zinc + 0.8 * gold,
            "ag_gpt": 0.5 * zinc - 0.866 * silver,
            "density": mass,
            "anhydrite": salts,
        }
        count = 16
        angle, radius = rng.uniform(0, 2 * np.pi, count), 62 * np.sqrt(rng.uniform(0, 1, count))
        chimneys = np.column_stack(
            [
                CENTRE[0] + radius * np.sin(angle),
                CENTRE[1] + radius * np.cos(angle),
                rng.uniform(2.0, 8.0, count),
                rng.uniform(1.8, 3.4, count),
            ]
        )
        return cls(rough, bumps, cap, root, fields, chimneys)

    @staticmethod
    def local(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Distances along and across the mound's long axis, in m."""
        a = np.radians(AXIS_AZIMUTH)
        east, north = x - CENTRE[0], y - CENTRE[1]
        return east * np.sin(a) + north * np.cos(a), east * np.cos(a) - north * np.sin(a)

    def reach(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """0 at the centre of the body, 1 on its outline, more outside."""
        u, v = self.local(x, y)
        u, v = u / HALF_AXES[0], v / HALF_AXES[1]
        t = np.arctan2(v, u)
        return np.hypot(u, v) / (
            1 + 0.07 * np.cos(2 * t + 1) + 0.06 * np.cos(3 * t + 0.4) + 0.04 * np.sin(5 * t)
        )

    def chimney(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Height of chimneys above the mound, in m."""
        height = np.zeros(np.shape(x))
        for east, north, top, radius in self.chimneys:
            height = np.maximum(height, top * np.clip(1.25 - np.hypot(x - east, y - north) / radius, 0, 1))
        return height

    def smooth_seafloor(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Elevation of the mound without chimneys and roughness."""
        u, v = self.local(x, y)
        mound = 29.0 * np.exp(-0.5 * ((u / 55) ** 2 + (v / 45) ** 2))
        return -1662.0 + 0.02 * (x - CENTRE[0]) - 0.012 * (y - CENTRE[1]) + mound

    def seafloor(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """True elevation of the seafloor, chimneys and roughness included."""
        return self.smooth_seafloor(x, y) + bilinear(self.rough, 1.0, x, y) + self.chimney(x, y)

    def thickness(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Thickness of the sulphide under the mound, chimneys left out; 0 outside the outline."""
        rho = np.minimum(self.reach(x, y), 1.0)
        shape = (1 - rho**2) ** 1.1
        return GREATEST_THICKNESS * shape * np.clip(1 + 0.14 * bilinear(self.bumps, CELL, x, y), 0.4, 1.6)

    def contacts(self, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Depth below the seafloor of the floor of cap, massive and stockwork (the body's base), in m."""
        total = self.thickness(x, y)
        tall = np.where(total > 0, self.chimney(x, y), 0.0)
        cap = np.minimum(np.clip(3.2 + 0.8 * bilinear(self.cap, CELL, x, y), 1.2, 6.0), 0.6 * total)
        rho = np.minimum(self.reach(x, y) / 0.64, 1.0)
        root = (
            0.42 * total * np.sqrt(1 - rho**2) * np.clip(1 + 0.15 * bilinear(self.root, CELL, x, y), 0.5, 1.4)
        )
        return cap + tall, np.maximum(total - root, cap) + tall, total + tall

    def domain(self, x: np.ndarray, y: np.ndarray, depth: np.ndarray) -> np.ndarray:
        """Number of the domain at a depth below the seafloor."""
        cap, massive, base = self.contacts(x, y)
        below = np.where(depth < massive, MASSIVE, np.where(depth < base, STOCKWORK, WASTE))
        return np.where((depth < cap) & (depth < base), CAP, below)

    def _field(self, name: str, x: np.ndarray, y: np.ndarray, depth: np.ndarray) -> np.ndarray:
        index = (
            ((x - EAST0) / CELL).astype(int),
            ((y - NORTH0) / CELL).astype(int),
            (depth / SLICE).astype(int),
        )
        shape = self.fields[name].shape
        return self.fields[name][tuple(np.clip(i, 0, n - 1) for i, n in zip(index, shape))]

    def anhydrite(self, x: np.ndarray, y: np.ndarray, depth: np.ndarray) -> np.ndarray:
        """Share of barren, friable anhydrite and clay."""
        return np.clip(0.12 + 0.08 * self._field("anhydrite", x, y, depth), 0.02, 0.45)

    def friability(self, x: np.ndarray, y: np.ndarray, depth: np.ndarray) -> np.ndarray:
        """How much richer in zinc than its surroundings the ground is, in standard deviations."""
        return self._field("zn_pct", x, y, depth)

    def sulphide_grade(self, x: np.ndarray, y: np.ndarray, depth: np.ndarray) -> dict[str, np.ndarray]:
        """Grades of the sulphide itself, before anhydrite dilutes it, without nugget."""
        domain = self.domain(x, y, depth)
        cap, _, base = self.contacts(x, y)
        inside = np.clip(depth - cap, 0, None)
        down = np.clip(inside / np.maximum(base - cap, 1.0), 0, 1)
        core = np.exp(-0.5 * (self.reach(x, y) / 0.5) ** 2)
        mean = {
            "cu_pct": (2.6 + 1.2 * core, 3.4 + 4.2 * core + 1.2 * down, 1.3 + 1.5 * core),
            "zn_pct": (8.5 - 1.5 * core, 0.9 + 4.3 * np.exp(-inside / 5), 0.35 + 0 * core),
            "au_gpt": (6.0 + 0 * core, 0.9 + 3.2 * np.exp(-inside / 8), 0.6 + 0 * core),
            "ag_gpt": (110.0 + 0 * core, 12 + 45 * np.exp(-inside / 6), 7 + 0 * core),
        }
        barren = {"cu_pct": 0.06, "zn_pct": 0.05, "au_gpt": 0.03, "ag_gpt": 0.6}
        grades = {}
        for metal in METALS:
            level = np.choose(domain, [np.full(np.shape(depth), barren[metal]), *mean[metal]])
            spread = CONTINUOUS[metal]
            raw = level * np.exp(spread * self._field(metal, x, y, depth) - 0.5 * spread**2)
            grades[metal] = CEILING[metal] * -np.expm1(-raw / CEILING[metal])
        return grades

    def dry_density(self, x: np.ndarray, y: np.ndarray, depth: np.ndarray) -> np.ndarray:
        """Dry bulk density in t/m3."""
        domain = self.domain(x, y, depth)
        mean, spread = (np.choose(domain, [DRY_DENSITY[d][n] for d in range(4)]) for n in (0, 1))
        return mean + spread * self._field("density", x, y, depth).clip(-2.5, 2.5)

    @staticmethod
    def wet_density(dry: np.ndarray, domain: np.ndarray) -> np.ndarray:
        """Wet bulk density: pores, the rest of the grain volume, are full of seawater."""
        grain = np.choose(domain, [GRAIN_DENSITY[d] for d in range(4)])
        return dry + (1 - dry / grain) * PORE_WATER_TPM3

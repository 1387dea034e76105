"""Minerals from metals: the norm, grain density, and the guards that minerals set on grades."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.samples.intervals import numbers
from sms_resource.units import element_column, grade_factor

Floats = NDArray[np.float64]

# Standard atomic weights, IUPAC 2021 (abridged to what the sums need).
ATOMIC_MASS: dict[str, float] = {
    "H": 1.008, "O": 15.999, "Mg": 24.305, "Al": 26.9815384, "Si": 28.085, "S": 32.06, "Ca": 40.078,
    "Fe": 55.845, "Cu": 63.546, "Zn": 65.38, "As": 74.921595, "Ag": 107.8682, "Sb": 121.760, "Ba": 137.327,
    "Au": 196.966570, "Hg": 200.592, "Pb": 207.2,
}  # fmt: skip


@dataclass(frozen=True)
class Mineral:
    """A mineral of the norm: formula, and grain density in t/m3 (handbook values)."""

    name: str
    formula: str
    density_tpm3: float

    def fraction(self, element: str) -> float:
        """Mass fraction of an element, such as 0.34628 of Cu in chalcopyrite."""
        counts = formula_counts(self.formula)
        total = sum(ATOMIC_MASS[symbol] * count for symbol, count in counts.items())
        return ATOMIC_MASS[element] * counts.get(element, 0.0) / total


MINERALS: dict[str, Mineral] = {
    mineral.name: mineral
    for mineral in (
        Mineral("chalcopyrite", "CuFeS2", 4.19),
        Mineral("bornite", "Cu5FeS4", 5.09),
        Mineral("covellite", "CuS", 4.68),
        Mineral("chalcocite", "Cu2S", 5.79),
        Mineral("sphalerite", "ZnS", 4.05),
        Mineral("galena", "PbS", 7.58),
        Mineral("barite", "BaSO4", 4.48),
        Mineral("anhydrite", "CaSO4", 2.95),
        Mineral("tennantite", "Cu12As4S13", 4.62),
        Mineral("tetrahedrite", "Cu12Sb4S13", 4.97),
        Mineral("pyrite", "FeS2", 5.01),
        Mineral("pyrrhotite", "FeS", 4.62),
        Mineral("magnetite", "Fe3O4", 5.20),
        Mineral("silica", "SiO2", 2.10),
        Mineral("quartz", "SiO2", 2.65),
    )
}
COPPER_MINERALS = ("chalcopyrite", "bornite", "covellite", "chalcocite")


@dataclass(frozen=True)
class NormSettings:
    """Choices of the norm.

    Parameters
    ----------
    copper_mineral : str
        Mineral that takes the copper that arsenic leaves: chalcopyrite, bornite, covellite or chalcocite.
    rest : str
        Mineral that fills up to 100 %: amorphous silica unless the rock says otherwise.
    rest_by_domain : mapping
        Domain to the mineral that fills up there instead, such as quartz in a stockwork.
    densities : mapping
        Grain densities (t/m3) that replace those of `MINERALS`.
    """

    copper_mineral: str = "chalcopyrite"
    rest: str = "silica"
    rest_by_domain: Mapping[str, str] = field(default_factory=dict)
    densities: Mapping[str, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        if self.copper_mineral not in COPPER_MINERALS:
            raise ValueError(
                f"copper_mineral must be one of {', '.join(COPPER_MINERALS)}, not {self.copper_mineral!r}"
            )
        for name in (self.rest, *self.rest_by_domain.values(), *self.densities):
            if name not in MINERALS:
                raise ValueError(f"mineral {name!r} is not one of {', '.join(MINERALS)}")

    def density(self, mineral: str) -> float:
        """Grain density of a mineral in t/m3."""
        return float(self.densities.get(mineral, MINERALS[mineral].density_tpm3))


def formula_counts(formula: str) -> dict[str, float]:
    """Atoms of each element in a plain formula: ``formula_counts("CuFeS2")`` is Cu 1, Fe 1, S 2."""
    counts: dict[str, float] = {}
    for symbol, number in re.findall(r"([A-Z][a-z]?)(\d*)", formula):
        counts[symbol] = counts.get(symbol, 0.0) + (float(number) if number else 1.0)
    return counts


def percent_of(frame: pd.DataFrame, element: str) -> Floats:
    """Grade of an element in percent from its column, whatever unit that has; NaN where it has none."""
    column = element_column(element)
    unit = {"pct": "pct", "gpt": "g/t", "ppm": "ppm"}[column.rpartition("_")[2]]
    return numbers(frame, column) * grade_factor(unit, "pct")


def norm(grades: pd.DataFrame, settings: NormSettings | None = None) -> pd.DataFrame:
    """Minerals (mass percent) that hold the metals of each row.

    Arsenic makes tennantite with its copper, zinc sphalerite, lead galena, barium barite, the other copper the copper
    mineral, the other iron pyrite, and the rest is silica. A metal that was not assayed makes no mineral.

    Parameters
    ----------
    grades : DataFrame
        Element columns such as cu_pct, zn_pct, pb_pct, as_ppm, ba_pct, fe_pct; domain, where the rest depends on it.

    Returns
    -------
    DataFrame
        One column a mineral, ``sum_pct`` of the metals' minerals before the rest (over 100: the grades contradict the
        norm, the minerals are then scaled to 100), ``iron_short_pct`` (iron that the copper mineral needs beyond the
        assay) and ``grain_density_tpm3`` (harmonic mean by mass).
    """
    settings = settings or NormSettings()
    copper, iron = np.nan_to_num(percent_of(grades, "cu")), percent_of(grades, "fe")
    iron_known = np.isfinite(iron)
    iron = np.nan_to_num(iron)
    out: dict[str, Floats] = {}
    arsenic = np.nan_to_num(percent_of(grades, "as"))
    tennantite = MINERALS["tennantite"]
    # arsenic without copper to bind stays out of the norm
    out["tennantite"] = np.minimum(arsenic / tennantite.fraction("As"), copper / tennantite.fraction("Cu"))
    copper = np.maximum(copper - out["tennantite"] * tennantite.fraction("Cu"), 0.0)
    host = MINERALS[settings.copper_mineral]
    out[host.name] = copper / host.fraction("Cu")
    for name, symbol in (("sphalerite", "zn"), ("galena", "pb"), ("barite", "ba")):
        mineral = MINERALS[name]
        out[name] = np.nan_to_num(percent_of(grades, symbol)) / mineral.fraction(symbol.capitalize())
    left = iron - out[host.name] * host.fraction("Fe")
    out["pyrite"] = np.maximum(left, 0.0) / MINERALS["pyrite"].fraction("Fe")
    frame = pd.DataFrame(out, index=grades.index)
    total = frame.sum(axis=1).to_numpy()
    scale = 100.0 / np.maximum(total, 100.0)
    frame = frame.mul(scale, axis=0)
    rest = np.maximum(100.0 - total, 0.0)
    filler = np.full(len(frame), settings.rest, dtype=object)
    if "domain" in grades:
        filler = np.array(
            [settings.rest_by_domain.get(str(name), settings.rest) for name in grades["domain"]], object
        )
    for name in dict.fromkeys([settings.rest, *filler]):
        frame[name] = frame.get(name, 0.0) + np.where(filler == name, rest, 0.0)
    volume = sum(frame[name].to_numpy() / settings.density(name) for name in frame.columns)
    frame["sum_pct"] = total
    frame["iron_short_pct"] = np.where(iron_known, np.maximum(-left, 0.0), 0.0)
    frame["grain_density_tpm3"] = 100.0 / volume
    return frame


def least_mineral_percent(grades: pd.DataFrame) -> Floats:
    """The least mass of mineral (percent) that can hold the metals of each row; over 100 is impossible.

    Copper in chalcocite, zinc in sphalerite, lead in galena, barium in barite, iron in magnetite, silica as itself:
    each the richest mineral that seafloor rock carries it in.
    """
    total = np.zeros(len(grades))
    for symbol, mineral in (
        ("cu", "chalcocite"), ("zn", "sphalerite"), ("pb", "galena"), ("ba", "barite"), ("fe", "magnetite"),
    ):  # fmt: skip
        total += np.nan_to_num(percent_of(grades, symbol)) / MINERALS[mineral].fraction(symbol.capitalize())
    return total + np.nan_to_num(percent_of(grades, "sio2"))


def heaviest_grain(grades: pd.DataFrame) -> Floats:
    """The most that the grain density (t/m3) of each row can be: the norm with the heaviest rock as its rest.

    The rest is taken at 2.95 (anhydrite, fresh basalt) where barium was assayed, and as barite where it was not.
    """
    known = np.isfinite(percent_of(grades, "ba"))
    light = norm(grades.drop(columns="domain", errors="ignore"), NormSettings(rest="anhydrite"))
    heavy = norm(grades.drop(columns="domain", errors="ignore"), NormSettings(rest="barite"))
    return np.where(known, light["grain_density_tpm3"], heavy["grain_density_tpm3"])

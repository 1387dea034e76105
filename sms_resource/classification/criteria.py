"""What a study asks of each class, and what is known of the data: plain frozen settings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

CLASS_NAMES: tuple[str, ...] = ("unclassified", "inferred", "indicated", "measured")
UNCLASSIFIED, INFERRED, INDICATED, MEASURED = range(4)

LABORATORY_RANK = ("good", "caution", "failed", "missing")


@dataclass(frozen=True)
class LevelCriteria:
    """What a block must have to be proposed for one class. No code sets these numbers; each is a setting.

    Parameters
    ----------
    holes, samples : int
        Least number of holes and of samples that inform the block.
    within_m : float
        Greatest distance (m) to the nearest sample, in the metric of the distance column.
    slope : float
        Least slope of regression (Krige 1997); 0 asks nothing. A missing slope does not meet a slope above 0.
    """

    holes: int
    samples: int
    within_m: float
    slope: float = 0.0


@dataclass(frozen=True)
class Smoothing:
    """How classes are smoothed to connected volumes (no spotted dogs: Stephenson et al. 2006).

    Parameters
    ----------
    window : (int, int, int)
        Odd numbers of blocks along i, j, k in which a majority is taken; only blocks of the body vote.
    passes : int
        How often the majority is taken.
    least_blocks, least_dry_tonnes : int, float
        A connected volume of a class (or better) below either goes down one class.
    least_holes : int
        Holes that a connected volume must hold.
    island_blocks : int
        An enclosed island of a lower class with at most this many blocks is raised, where no rule forbids it.
    """

    window: tuple[int, int, int] = (3, 3, 3)
    passes: int = 2
    least_blocks: int = 20
    least_dry_tonnes: float = 0.0
    least_holes: int = 2
    island_blocks: int = 20

    def __post_init__(self) -> None:
        if any(width < 1 or width % 2 == 0 for width in self.window):
            raise ValueError(f"window is {self.window}; odd numbers of blocks were wanted")


@dataclass(frozen=True)
class ClassColumns:
    """Names of the block columns that classes are judged on."""

    estimate: str = "cu_pct"
    slope: str = "cu_pct_slope"
    holes: str = "hole_count"
    samples: str = "sample_count"
    distance: str = "nearest_distance"
    holes_in_range: str = "hole_count"
    domain: str = "domain"
    extrapolation: str = "extrapolation"
    open_ended: str = "open_ended"
    dry_tonnes: str = "dry_tonnes"
    wet_tonnes: str = "wet_tonnes"


@dataclass(frozen=True)
class ClassCriteria:
    """Criteria of the proposed classes, the limits of the downgrade rules, and the smoothing.

    Parameters
    ----------
    measured : LevelCriteria, optional
        None, the default: Measured is never proposed.
    indicated, inferred : LevelCriteria
    least_recovery_pct : float
        Mean recovery of a domain (%) under which its blocks go down one class.
    caution_recovery_pct : float
        Mean recovery (%) under which blocks stay at most Inferred, unless no bias is shown for the domain.
    holes_in_range : int
        Holes that must lie within the variogram range.
    least_densities : int
        Densities that must be measured in a domain.
    position_share : float
        Standard error of position allowed, as a share of the smaller horizontal side of a block.
    least_slope : float
        Slope of regression under which a block goes down one class.
    laboratory_accepted : tuple of str
        Verdicts of quality control that allow more than Inferred.
    rules_off : tuple of str
        Codes of downgrade rules and caps that the study switches off.
    floor : "unclassified" | "inferred"
        Lowest class that a downgrade rule may lead to.
    smoothing : Smoothing, optional
        None leaves the classes as the criteria give them.
    """

    measured: LevelCriteria | None = None
    indicated: LevelCriteria = LevelCriteria(holes=3, samples=6, within_m=20.0, slope=0.6)
    inferred: LevelCriteria = LevelCriteria(holes=2, samples=2, within_m=50.0)
    least_recovery_pct: float = 60.0
    caution_recovery_pct: float = 80.0
    holes_in_range: int = 3
    least_densities: int = 10
    position_share: float = 0.5
    least_slope: float = 0.5
    laboratory_accepted: tuple[str, ...] = ("good", "caution")
    rules_off: tuple[str, ...] = ()
    floor: str = "unclassified"
    smoothing: Smoothing | None = field(default_factory=Smoothing)

    def __post_init__(self) -> None:
        if self.floor not in ("unclassified", "inferred"):
            raise ValueError(f"floor is {self.floor!r}; 'unclassified' or 'inferred' was wanted")


@dataclass(frozen=True)
class ClassContext:
    """What is known of the data behind a block model.

    Parameters
    ----------
    hole_total : int
        Holes that inform the deposit; with none no class is proposed.
    range_m : float or mapping of domain to float
        Variogram range (m) in the metric of the distance column; NaN where it is not known.
    block_size : (float, float, float)
        Sides of a block (m).
    position_sigma_m : float
        Standard error of hole positions (m); NaN where nobody stated it, which counts as uncertain.
    recovery_pct : mapping of domain to float
        Mean core recovery (%), weighted by length.
    density_count : mapping of domain to int
        Densities measured in the domain.
    domains_without_bias : frozenset of str
        Domains in which grade was tested against recovery and no bias was found.
    surface_samples_used, handheld_used, variogram_assumed : bool
    laboratory : mapping of metal column or element to verdict
        "good", "caution", "failed" or "missing". An empty mapping is missing quality control.
    prospects_by, prospects_basis : str
        Who judged the reasonable prospects for eventual economic extraction, and on what.
    """

    hole_total: int
    range_m: float | Mapping[str, float]
    block_size: tuple[float, float, float]
    position_sigma_m: float = float("nan")
    recovery_pct: Mapping[str, float] = field(default_factory=dict)
    density_count: Mapping[str, int] = field(default_factory=dict)
    domains_without_bias: frozenset[str] = frozenset()
    surface_samples_used: bool = False
    handheld_used: bool = False
    variogram_assumed: bool = False
    laboratory: Mapping[str, str] = field(default_factory=dict)
    prospects_by: str = ""
    prospects_basis: str = ""

    @property
    def prospects_judged(self) -> bool:
        """Whether the study says who judged the prospects, and on what."""
        return bool(self.prospects_by.strip() and self.prospects_basis.strip())

    @property
    def tally_label(self) -> str:
        """What a table of these tonnes may be called."""
        if self.prospects_judged:
            return "Mineral resource estimate, draft for a Competent Person"
        return "Block-model tally (reasonable prospects not judged)"

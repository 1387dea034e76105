"""What the stages hand on to one another."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray


@dataclass(frozen=True, eq=False)
class EvidenceState:
    """Output of the stage composite: samples joined, weighed and described.

    Attributes
    ----------
    collars : DataFrame
        Collars at the position that the study chose, with the original beside it.
    paths : HolePaths
        Where a depth of a hole is.
    domain_intervals : DataFrame
        hole_id, from_m, to_m, domain.
    assays : DataFrame
        Accepted assays as plain numbers.
    composites : DataFrame
        One row a composite, all domains, uncut grades.
    sticks : DataFrame
        Holes as intervals with recovery and grades, for pictures.
    tables : dict of DataFrame
        Evidence for the report: recovery, bias, laboratory, twins, top cuts, associations.
    facts : dict
        Small things of the report: shift of collars, handheld readings used, ids assumed vertical.
    """

    collars: pd.DataFrame
    paths: Any
    domain_intervals: pd.DataFrame
    assays: pd.DataFrame
    composites: pd.DataFrame
    sticks: pd.DataFrame
    surface: pd.DataFrame
    laboratory: Any
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)
    facts: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class DensityState:
    """Output of the stage density."""

    table: pd.DataFrame
    model: Any
    by_domain: pd.DataFrame


@dataclass(frozen=True, eq=False)
class BodyState:
    """Output of the stage body."""

    seafloor: Any
    outline: Any
    contacts: pd.DataFrame
    body: Any
    domains: Any
    facts: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class BlockState:
    """Output of the stage blocks: the block model before the estimate, and the vertical frame."""

    model: Any
    proposal: pd.DataFrame
    frame: Any
    seafloor: Any


@dataclass(frozen=True, eq=False)
class VariogramState:
    """Output of the stage variograms.

    Attributes
    ----------
    samples : DataFrame
        Composites of the body with cut grades, place in the vertical frame (x, y, z) and declustering weight.
    inferences : dict
        VariogramInference by (domain, metal column).
    cuts : DataFrame
        What the top cuts did.
    scans : DataFrame
        Declustered mean against cell size.
    """

    samples: pd.DataFrame
    inferences: dict[tuple[str, str], Any]
    cuts: pd.DataFrame
    scans: pd.DataFrame
    facts: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class EstimateState:
    """Output of the stage estimate.

    Attributes
    ----------
    frame : DataFrame
        One row a block: grades, variances, slopes, counts, densities, tonnes.
    companions : dict of DataFrame
        Grades by nearest sample and by inverse distance, one row a block.
    targets : ndarray (b, 3)
        Block centres in the vertical frame.
    density_cases : dict of ndarray (b,)
        Dry tonnes of each block at the "low" and the "high" density of its domains.
    domain_means : DataFrame
        domain, metal, mean, dry_tonnes: of each domain's own part of the blocks, by dry mass.
    """

    frame: pd.DataFrame
    companions: dict[str, pd.DataFrame]
    targets: NDArray[np.float64]
    statistics: pd.DataFrame
    neighbourhoods: dict[tuple[str, str], Any] = field(default_factory=dict)
    density_cases: dict[str, NDArray[np.float64]] = field(default_factory=dict)
    domain_means: pd.DataFrame = field(default_factory=pd.DataFrame)


@dataclass(frozen=True, eq=False)
class ValidationState:
    """Output of the stage validate."""

    table: pd.DataFrame
    cross_validation: pd.DataFrame
    cross_summary: pd.DataFrame
    swaths: pd.DataFrame
    support: pd.DataFrame
    bracket: pd.DataFrame
    comparison: pd.DataFrame
    geometry: pd.DataFrame
    neighbourhood: pd.DataFrame
    facts: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class ProposalState:
    """Output of the stage propose: nothing in it depends on prices, costs or the cut-off.

    Attributes
    ----------
    frame : DataFrame
        One row a block, with proposed_class, class_reasons, kept_share and screened_by.
    marks : DataFrame
        The share that each screen takes of each block.
    columns : Columns
        Columns of blocks with their area in plan.
    """

    frame: pd.DataFrame
    reasons: pd.DataFrame
    smoothing: pd.DataFrame
    waterfall: pd.DataFrame
    marks: pd.DataFrame
    tally_label: str
    columns: Any = None
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class ValueState:
    """Output of the stage value.

    Attributes
    ----------
    frame : DataFrame
        One row a block, with value_per_dry_tonne, cost_per_dry_tonne and equivalent where the study gives terms.
    """

    frame: pd.DataFrame
    facts: dict[str, Any] = field(default_factory=dict)
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class ClassState:
    """Output of the stage classify; the blocks themselves are those of the stage value."""

    reasons: pd.DataFrame
    smoothing: pd.DataFrame
    waterfall: pd.DataFrame
    grade_tonnage: pd.DataFrame
    facts: dict[str, Any] = field(default_factory=dict)
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)

"""A person's word over the proposed class, inside a polygon and with a reason."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.classification.criteria import CLASS_NAMES, MEASURED, ClassCriteria
from sms_resource.findings import Findings

if TYPE_CHECKING:
    from shapely.geometry.base import BaseGeometry


@dataclass(frozen=True)
class ClassOverride:
    """The class of all blocks whose centre lies in a polygon.

    Parameters
    ----------
    polygon : shapely Polygon or MultiPolygon
        In the coordinates of the blocks.
    proposed_class : str
        One of the class names.
    reason, by : str
        Why, and who decided; both must be given.
    name : str
        What the polygon is called.
    lowest_elevation, highest_elevation : float
        Vertical limits of the override (m); open by default.
    """

    polygon: BaseGeometry
    proposed_class: str
    reason: str
    by: str
    name: str = "override"
    lowest_elevation: float = -np.inf
    highest_elevation: float = np.inf


def apply_overrides(
    frame: pd.DataFrame,
    classes: NDArray[np.int8],
    overrides: Sequence[ClassOverride],
    criteria: ClassCriteria,
    *,
    dry_tonnes: str = "dry_tonnes",
) -> tuple[NDArray[np.int8], NDArray[np.bool_], pd.DataFrame, Findings]:
    """Replace classes inside polygons, in the order given; later ones win.

    An override without a reason, without an author, or to a class that the study does not allow is refused
    with an error finding and changes nothing.

    Returns
    -------
    classes, touched mask, table (name, proposed_class, by, reason, blocks, blocks_changed, dry_tonnes,
    dry_tonnes_changed), findings
    """
    import shapely

    out = classes.copy()
    touched = np.zeros(len(classes), dtype=bool)
    findings = Findings()
    rows = []
    east, north = (frame[c].to_numpy(dtype=np.float64) for c in ("easting", "northing"))
    elevation = frame["elevation"].to_numpy(dtype=np.float64)
    dry = frame[dry_tonnes].to_numpy(dtype=np.float64)
    for override in overrides:
        if not _acceptable(override, criteria, findings):
            continue
        inside = shapely.intersects_xy(override.polygon, east, north)
        inside &= (elevation >= override.lowest_elevation) & (elevation <= override.highest_elevation)
        if not inside.any():
            findings.warning(
                "class-override-empty",
                f"Override {override.name!r} holds no block.",
                "Check the polygon's place, coordinate system and elevations.",
            )
        level = CLASS_NAMES.index(override.proposed_class)
        changed = inside & (out != level)
        out[inside] = level
        touched |= inside
        rows.append(
            {
                "name": override.name,
                "proposed_class": override.proposed_class,
                "by": override.by,
                "reason": override.reason,
                "blocks": int(inside.sum()),
                "blocks_changed": int(changed.sum()),
                "dry_tonnes": float(dry[inside].sum()),
                "dry_tonnes_changed": float(dry[changed].sum()),
            }
        )
        findings.note(
            "class-override",
            f"Override {override.name!r} by {override.by}: {int(changed.sum())} blocks, "
            f"{dry[changed].sum():,.0f} dry t, become {override.proposed_class}. Reason: {override.reason}",
        )
    columns = [
        "name", "proposed_class", "by", "reason", "blocks", "blocks_changed", "dry_tonnes", "dry_tonnes_changed",
    ]  # fmt: skip
    return out, touched, pd.DataFrame(rows, columns=columns), findings


def _acceptable(override: ClassOverride, criteria: ClassCriteria, findings: Findings) -> bool:
    problem = ""
    if override.proposed_class not in CLASS_NAMES:
        problem = f"class {override.proposed_class!r} is not one of {', '.join(CLASS_NAMES)}"
    elif CLASS_NAMES.index(override.proposed_class) == MEASURED and criteria.measured is None:
        problem = "the study's criteria do not name Measured"
    elif not override.reason.strip():
        problem = "it has no reason"
    elif not override.by.strip():
        problem = "it does not say who decided"
    if problem:
        findings.error(
            "class-override-refused",
            f"Override {override.name!r} is refused: {problem}.",
            "Give a class that the study allows, a reason, and who decided.",
        )
    return not problem

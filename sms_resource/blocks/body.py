"""The body: the sulphide between the seafloor and its base, inside its outline."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.base import ThicknessData, interpolate_thickness
from sms_resource.blocks.body_inputs import (
    check_contacts,
    crop_lattice,
    data_from_base_points,
    drift_from_base_grid,
    hole_spacing,
    join_data,
)
from sms_resource.blocks.body_parts import (
    CATEGORIES,
    audit_contacts,
    hole_distance,
    honour_holes,
    measure,
    one_a_place,
    report_gaps,
)
from sms_resource.blocks.grid import SurfaceGrid
from sms_resource.blocks.polygons import check_outline
from sms_resource.blocks.thickness_model import ThicknessSettings
from sms_resource.blocks.threads import on_one_thread
from sms_resource.findings import Findings

Array = NDArray[Any]
__all__ = ["CATEGORIES", "Body", "build_body"]


@dataclass(frozen=True, eq=False)
class Body:
    """The body between its top and its base.

    Attributes
    ----------
    top, base : SurfaceGrid
        Elevation of the seafloor and of the base in m, on one lattice, bilinear between nodes.
    thickness, thickness_sigma : SurfaceGrid
        Vertical thickness and its standard deviation in m (NaN where the method gives none).
    known : SurfaceGrid
        Thickness with every open hole held at its end: what lies deeper is extrapolated downwards.
    distance : SurfaceGrid
        Distance in m to the nearest hole; what lies beyond ``drilled_within_m`` is extrapolated sideways.
    outline : shapely polygon or multipolygon
    drilled_within_m : float
    volume_m3 : float
        Exact integral of the thickness over the outline.
    volume_sigma_m3 : float
        Standard deviation of the volume from the interpolation of the base (NaN where not known).
    categories : DataFrame
        category ("drilled" | "sideways" | "downwards"), volume_m3, share. What is both too far sideways and
        below the last sulphide counts as sideways.
    audit : DataFrame
        One row a contact: what it asks, what the body has there, and whether it is honoured.
    record : dict
        What was fitted and decided, ready for JSON.
    findings : Findings
    """

    top: SurfaceGrid
    base: SurfaceGrid
    thickness: SurfaceGrid
    thickness_sigma: SurfaceGrid
    known: SurfaceGrid
    distance: SurfaceGrid
    outline: Any
    drilled_within_m: float
    volume_m3: float
    volume_sigma_m3: float
    categories: pd.DataFrame
    audit: pd.DataFrame
    record: dict[str, Any]
    findings: Findings
    recipe: dict[str, Any] = field(default_factory=dict, repr=False)

    @property
    def area_m2(self) -> float:
        """Area of the outline in plan."""
        return float(self.outline.area)

    @property
    def mean_thickness_m(self) -> float:
        """Volume over area."""
        return self.volume_m3 / self.area_m2 if self.area_m2 > 0 else math.nan

    def shifted(self, *, base_m: float = 0.0, top_m: float = 0.0, outline_m: float = 0.0) -> Body:
        """The body with its surfaces moved.

        Parameters
        ----------
        base_m, top_m : float
            Rise of the base and of the seafloor in m; a negative ``base_m`` makes the body thicker. Thickness
            never becomes negative.
        outline_m : float
            Distance in m by which the outline moves outward; the base is interpolated anew.

        Raises
        ------
        ValueError
            If the outline vanishes, or the outline of a body without a recipe is moved.
        """
        body = self
        if outline_m != 0.0:
            if not self.recipe:
                raise ValueError("outline_m needs a body that was built from contacts")
            outline = self.outline.buffer(outline_m)
            if outline.is_empty:
                raise ValueError(f"outline_m = {outline_m:g} m leaves nothing of the outline")
            body = build_body(outline=outline, **self.recipe)
        if base_m == 0.0 and top_m == 0.0:
            return body
        top = body.top.with_values(body.top.values + top_m, body.top.uncertainty)
        thickness = np.where(body.thickness.values > 0, body.thickness.values + top_m - base_m, 0.0)
        moved = body.thickness.with_values(np.maximum(thickness, 0.0))
        known = body.known.with_values(np.clip(body.known.values + top_m - base_m, 0.0, moved.values))
        return _assemble(replace(body, top=top, thickness=moved, known=known))

    def cut(self, outline: Any) -> Body:
        """The body with the base that it has, cut at another outline; it has nothing outside its own."""
        return _assemble(replace(self, outline=self.outline.intersection(outline)))

    def scaled_sigma(self, factor: float) -> Body:
        """The body with its base lowered by ``factor`` standard deviations of the thickness, point by point."""
        sigma = np.nan_to_num(self.thickness_sigma.values)
        thickness = np.maximum(self.thickness.values + factor * sigma, 0.0)
        moved = self.thickness.with_values(thickness)
        known = self.known.with_values(np.minimum(self.known.values, thickness))
        return _assemble(replace(self, thickness=moved, known=known))

    def __repr__(self) -> str:
        return (
            f"Body({self.volume_m3:.6g} m3 over {self.area_m2:.6g} m2, mean thickness "
            f"{self.mean_thickness_m:.2f} m, method {self.record.get('method')})"
        )


@on_one_thread
def build_body(
    seafloor: SurfaceGrid,
    outline: Any,
    contacts: pd.DataFrame,
    *,
    method: str = "kriging",
    base_points: pd.DataFrame | None = None,
    base_grid: SurfaceGrid | None = None,
    cell_m: float | None = None,
    settings: ThicknessSettings | None = None,
    edge_thickness_m: float | None = 0.0,
    extrapolate_below_m: float = 5.0,
    drilled_within_m: float | None = None,
    base_point_sigma_m: float = 1.0,
) -> Body:
    """Build the body from the seafloor, an outline and what the holes say of the base.

    Thickness below the seafloor is interpolated, not elevation, because the base follows the seafloor more
    than it follows the horizontal. Contacts are honoured exactly at the position of the hole, on the bilinear
    grid itself; where a hole ended in sulphide the base lies at its end or below; the base is never above
    the seafloor.

    Parameters
    ----------
    seafloor : SurfaceGrid
        Elevation in m.
    outline : shapely polygon or multipolygon
        In the coordinate system of the seafloor.
    contacts : DataFrame
        hole_id, easting, northing, thickness_m (vertical, below the seafloor), kind ("reached" | "open").
    method : "kriging" | "spline" | "linear"
        The last two are for comparison and give no variance.
    base_points : DataFrame, optional
        easting, northing, elevation of other points of the base, for example from geophysics.
    base_grid : SurfaceGrid, optional
        A base of the user's; the contacts correct it.
    cell_m : float, optional
        Cell of the body's lattice; None takes the seafloor's own, refined to 1 m where it is coarser.
    settings : ThicknessSettings, optional
        Parameters of the kriging that the user fixes.
    edge_thickness_m : float or None
        Thickness at the outline; None where the outline cuts through the body.
    extrapolate_below_m : float
        The base is held at most so far below the last sulphide of open holes, and of the surface that runs
        through the ends of open holes.
    drilled_within_m : float, optional
        Beyond this distance from any hole the body counts as extrapolated sideways; None takes the spacing
        of the holes.
    base_point_sigma_m : float
        Standard deviation in m of ``base_points``.

    Returns
    -------
    Body
        Its ``findings`` hold what was found; a body with error findings has no volume.

    Raises
    ------
    ValueError
        If an argument is out of its range; the message names it.
    """
    for name, number in (
        ("extrapolate_below_m", extrapolate_below_m),
        ("base_point_sigma_m", base_point_sigma_m),
    ):
        if math.isnan(number) or number < 0:
            raise ValueError(f"{name} must be a length of at least 0 m, not {number!r}")
    for name, length in (("cell_m", cell_m), ("drilled_within_m", drilled_within_m)):
        if length is not None and not (math.isfinite(length) and length > 0):
            raise ValueError(f"{name} must be a positive length in m, not {length!r}")
    if edge_thickness_m is not None and not (math.isfinite(edge_thickness_m) and edge_thickness_m >= 0):
        raise ValueError(f"edge_thickness_m must be at least 0 m or None, not {edge_thickness_m!r}")
    findings = check_outline(outline, seafloor.bounds)
    if not seafloor.has_values:
        findings.error(
            "seafloor-empty", "the seafloor grid holds no value", "check its nodata value and its band"
        )
    good, contact_findings = check_contacts(contacts, outline if not findings.has_errors else None, seafloor)
    findings.extend(contact_findings)
    recipe = {
        "seafloor": seafloor, "contacts": contacts, "method": method, "base_points": base_points,
        "base_grid": base_grid, "cell_m": cell_m, "settings": settings, "edge_thickness_m": edge_thickness_m,
        "extrapolate_below_m": extrapolate_below_m, "drilled_within_m": drilled_within_m,
        "base_point_sigma_m": base_point_sigma_m,
    }  # fmt: skip
    if findings.has_errors:
        return _empty(seafloor, outline, findings, recipe)
    top = crop_lattice(seafloor, outline, cell_m)
    report_gaps(top, outline, findings)
    if findings.has_errors:
        return _empty(seafloor, outline, findings, recipe)
    spacing = hole_spacing(good, outline)
    reach = drilled_within_m or spacing
    holes = ThicknessData(
        good["easting"].to_numpy(dtype=np.float64, copy=True), good["northing"].to_numpy(dtype=np.float64, copy=True),
        good["thickness_m"].to_numpy(dtype=np.float64, copy=True), (good["kind"] == "open").to_numpy(copy=True),
        np.zeros(len(good)),
    )  # fmt: skip
    holes = one_a_place(holes, [str(name) for name in good["hole_id"]], findings)
    drift = None if base_grid is None else drift_from_base_grid(base_grid, top, outline, findings)
    others = data_from_base_points(base_points, top, outline, base_point_sigma_m, findings)
    data = join_data(holes, others)
    if drift is None and len(others) == 0 and (len(good) == 0 or bool(holes.is_open.all())):
        if len(good) == 0:
            findings.error("contacts-missing", "no hole inside the outline gives the base of the sulphide",
                           "check that holes and outline are in one coordinate system, or give a base grid")  # fmt: skip
            return _empty(seafloor, outline, findings, recipe)
        findings.warning(
            "contacts-all-open",
            f"all {len(good)} holes ended in sulphide: nothing tells how far the body goes on below, so the base is "
            "laid through the ends of the holes",
            "drill one hole deeper, or give a base from geophysics",
        )
        data = join_data(replace(holes, is_open=np.zeros(len(holes), dtype=bool)), others)
    elif len(good) > 0 and int((~holes.is_open).sum()) < 5 and drift is None:
        findings.warning("contacts-few", f"only {int((~holes.is_open).sum())} holes reached the base",
                         "treat the volume as very uncertain")  # fmt: skip
    if len(data):
        made = interpolate_thickness(
            top, outline, data, method=method, settings=settings, edge_thickness_m=edge_thickness_m,
            drift=drift, spacing_m=spacing,
        )  # fmt: skip
        thickness, known, sigma = made.thickness, made.known, made.sigma
        volume_sigma, record = made.volume_sigma_m3, made.record
    else:
        assert drift is not None
        thickness = known = drift
        sigma, volume_sigma = top.with_values(np.full(top.shape, np.nan)), math.nan
        record = {"method": "base grid of the user"}
    thickness, known, lost = honour_holes(thickness, known, extrapolate_below_m, holes, findings)
    if lost > 1e-6:
        findings.note(
            "extrapolation-limited",
            f"the base was held {extrapolate_below_m:g} m below the ends of open holes; without that limit the body "
            f"would be about {lost:,.0f} m3 larger",
            "set extrapolate_below_m to what the geology supports",
        )
    record |= {
        "cell_m": top.dx, "hole_spacing_m": spacing, "drilled_within_m": reach, "extrapolate_below_m": extrapolate_below_m,
        "volume_cut_by_limit_m3": lost, "contacts_reached": int((good["kind"] == "reached").sum()),
        "contacts_open": int((good["kind"] == "open").sum()), "base_points": len(others),
        "base_grid": base_grid is not None,
    }  # fmt: skip
    body = Body(
        top, top, thickness, sigma, known, hole_distance(top, good), outline, reach, 0.0, volume_sigma,
        pd.DataFrame(), audit_contacts(good, thickness, top), record, findings, recipe,
    )  # fmt: skip
    body = _assemble(body)
    extrapolated = float(body.categories["share"].iloc[1:].sum())
    if extrapolated > 0.5:
        findings.warning("extrapolated-share", f"{100 * extrapolated:.0f} % of the body is extrapolated from the holes",
                         "show it apart, and drill there")  # fmt: skip
    return body


def _assemble(body: Body) -> Body:
    """Base, volume and categories that follow from the top and the thickness."""
    base = body.top.with_values(body.top.values - body.thickness.values)
    if body.thickness.pins is not None:
        base = replace(base, pins=body.thickness.pins * np.array([1.0, 1.0, 1.0, -1.0]))
    volume, categories = measure(
        body.top, body.thickness, body.known, body.distance, body.outline, body.drilled_within_m
    )
    return replace(body, base=base, volume_m3=volume, categories=categories)


def _empty(seafloor: SurfaceGrid, outline: Any, findings: Findings, recipe: dict[str, Any]) -> Body:
    """A body without volume, for its findings."""
    nothing = seafloor.with_values(np.zeros(seafloor.shape))
    zero = pd.DataFrame({"category": CATEGORIES, "volume_m3": 0.0, "share": 0.0})
    return Body(
        seafloor, seafloor, nothing, nothing, nothing, nothing, outline, 0.0, 0.0, math.nan, zero,
        pd.DataFrame(), {"method": recipe["method"]}, findings, recipe,
    )  # fmt: skip

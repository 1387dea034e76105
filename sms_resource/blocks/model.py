"""The block model: regular blocks, each with the share of its volume inside the body."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.blocks.body import Body
from sms_resource.blocks.grid import BlockGrid
from sms_resource.blocks.layers import LayeredDomains
from sms_resource.blocks.polygons import lattice_moments, polygon_edges
from sms_resource.blocks.propose import propose_grid
from sms_resource.findings import Findings

__all__ = ["BlockModel", "fill_blocks", "propose_grid"]

Array = NDArray[Any]
MOST_CELLS = 400_000_000  # columns in plan times split squared stays below this
MOST_BLOCKS = 50_000_000
CHUNK_SUBCOLUMNS = 4_000_000
FINE_SUBCOLUMNS = 4_000_000
EXTRAPOLATION = ("drilled", "sideways", "downwards")


@dataclass(frozen=True, eq=False)
class BlockModel:
    """Blocks that touch the body.

    Attributes
    ----------
    grid : BlockGrid
    frame : DataFrame
        One row a block: i, j, k; easting, northing, elevation of its centre; volume_m3 inside the body;
        body_fraction; domain (the one with most of the volume); share_<domain> of the volume inside the body;
        extrapolation ("drilled" | "sideways" | "downwards", whichever has most of the volume),
        share_sideways, share_downwards; depth_below_seafloor_m of the centroid of what is inside.
    crs : str or None
    findings : Findings
    """

    grid: BlockGrid
    frame: pd.DataFrame
    crs: str | None = None
    findings: Findings = field(default_factory=Findings)

    def __len__(self) -> int:
        return len(self.frame)

    @property
    def volume_m3(self) -> float:
        """Volume of the body in the blocks."""
        return float(self.frame["volume_m3"].sum())

    @property
    def domains(self) -> list[str]:
        """Names of the domains, from the top down."""
        if "domain" not in self.frame:
            return []
        column = self.frame["domain"]
        if isinstance(column.dtype, pd.CategoricalDtype):
            return [str(name) for name in column.cat.categories]
        return sorted(column.dropna().astype(str).unique())

    def with_frame(self, frame: pd.DataFrame) -> BlockModel:
        """The same blocks with other columns."""
        return BlockModel(self.grid, frame, self.crs, self.findings)

    def to_pyvista(self) -> Any:
        """The blocks as a pyvista grid with true coordinates."""
        from sms_resource.blocks.exchange_vtk import to_pyvista

        return to_pyvista(self)

    def to_xarray(self) -> Any:
        """The blocks as an xarray dataset on i, j, k."""
        from sms_resource.blocks.exchange_netcdf import to_xarray

        return to_xarray(self)

    def to_geodataframe(self) -> Any:
        """The blocks as a geopandas frame of their outlines in plan."""
        from sms_resource.blocks.exchange_gis import to_geodataframe

        return to_geodataframe(self)

    def _facts(self) -> list[tuple[str, str]]:
        size = " x ".join(f"{edge:g}" for edge in self.grid.size)
        return [
            ("Blocks that touch the body", f"{len(self.frame):,}"),
            ("Block size", f"{size} m, j axis toward {self.grid.azimuth:g}°"),
            ("Origin", ", ".join(f"{value:.2f}" for value in self.grid.origin)),
            ("Volume in the body", f"{self.volume_m3:,.0f} m³"),
            ("Domains", ", ".join(self.domains) or "none"),
            ("Coordinate system", self.crs or "not named"),
        ]

    def __repr__(self) -> str:
        facts = "; ".join(f"{name.lower()}: {value}" for name, value in self._facts())
        return f"BlockModel({facts})"

    def _repr_html_(self) -> str:
        from html import escape

        facts = "".join(
            f"<tr><th style='text-align:left'>{escape(name)}</th><td>{escape(value)}</td></tr>"
            for name, value in self._facts()
        )
        head = self.frame.head(5).to_html(index=False, float_format=lambda value: f"{value:.4g}")
        return f"<div><b>Block model</b><table>{facts}</table>{head}<p>First 5 of {len(self.frame):,} blocks</p></div>"


def fill_blocks(
    body: Body,
    grid: BlockGrid,
    *,
    domains: LayeredDomains | None = None,
    single_domain: str = "body",
    split: int | None = None,
    most_blocks: int = MOST_BLOCKS,
) -> BlockModel:
    """Share of every block inside the body, by integrating columns.

    Every column of blocks is split in plan into ``split`` x ``split`` sub-columns. The part of a sub-column
    inside the outline is exact; the surfaces are taken at its centroid and clipped exactly against the floors
    of the blocks, so the error falls with the square of the sub-column's size.

    Parameters
    ----------
    body : Body
    grid : BlockGrid
        Should cover the body; what it leaves out is a finding.
    domains : LayeredDomains, optional
        None is one domain throughout.
    single_domain : str
        Its name.
    split : int, optional
        None takes sub-columns of a quarter of a cell of the body's surfaces, or of half a cell where that would
        make too many; at least 3 along a side.
    most_blocks : int
        More blocks than this are refused.

    Returns
    -------
    BlockModel
        Blocks ordered by j, i, k.

    Raises
    ------
    ValueError
        If the grid asks for more than ``most_blocks``, or ``split`` is less than 1.
    """
    from sms_resource.blocks.model_kernels import column_ranges, fill_columns

    domains = domains or LayeredDomains((single_domain,))
    if split is not None and split < 1:
        raise ValueError(f"split must be at least 1, not {split!r}")
    findings = Findings()
    local, edges = _local_edges(body, grid)
    first_i, last_i = _covered(local[0], local[2], grid.shape[0])
    first_j, last_j = _covered(local[1], local[3], grid.shape[1])
    ni, nj = max(last_i - first_i, 0), max(last_j - first_j, 0)
    if split is None:
        split = _split(grid, min(body.top.dx, body.top.dy), ni * nj)
    guess = body.volume_m3 / grid.block_volume_m3
    if guess > most_blocks or ni * nj * split * split > MOST_CELLS:
        edge = max(grid.size) * max(guess / most_blocks, ni * nj * split * split / MOST_CELLS) ** (1 / 2)
        raise ValueError(
            f"grid asks for about {guess:.3g} blocks in {ni * nj:.3g} columns; the limit is {most_blocks:,} blocks. "
            f"Use blocks of at least about {edge:.2g} m, or clip the outline"
        )
    top, thickness = np.ascontiguousarray(body.top.values), np.ascontiguousarray(body.thickness.values)
    known, distance = np.ascontiguousarray(body.known.values), np.ascontiguousarray(body.distance.values)
    layers = np.ascontiguousarray(domains.depths(body.top))
    lattice = np.array([body.top.x0, body.top.y0, body.top.dx, body.top.dy])
    # The kernels see the covered part of the grid only.
    origin = grid.to_world([[first_i * grid.size[0], first_j * grid.size[1], 0.0]])[0]
    edges = edges - np.array([first_i, first_j] * 2)
    size, axes = np.asarray(grid.size), np.ascontiguousarray(grid.axes[:2, :2])
    parts: list[dict[str, Array]] = []
    outside = 0.0
    step = max(1, CHUNK_SUBCOLUMNS // max(1, ni * split * split))
    for row in range(0, nj if ni else 0, step):
        rows = min(step, nj - row)
        moments = lattice_moments(edges * split, rows * split, ni * split, row * split)
        s, t = moments.centroid()
        lowest, highest = (np.zeros((rows, ni), dtype=np.int64) for _ in range(2))
        column_ranges(
            moments.area, s, t, split, row, size, axes, origin, lattice, top, thickness, grid.shape[2], lowest,
            highest,
        )  # fmt: skip
        count = np.maximum(highest - lowest + 1, 0)
        start = np.concatenate([[0], np.cumsum(count.ravel())[:-1]]).reshape(count.shape)
        total = int(count.sum())
        volume = np.zeros((len(domains.names), total))
        sideways, downwards, moment = np.zeros(total), np.zeros(total), np.zeros(total)
        outside += fill_columns(
            moments.area, s, t, split, row, size, axes, origin, lattice, top, thickness, known, distance,
            body.drilled_within_m, layers, lowest, start, count, volume, sideways, downwards, moment,
        )  # fmt: skip
        if total:
            parts.append(_rows(lowest, count, first_i, first_j + row, volume, sideways, downwards, moment))
    inside_share = _plan_share(body, grid)
    if outside > 1e-9 * max(body.volume_m3, 1.0) or inside_share < 1 - 1e-9:
        findings.warning(
            "blocks-miss-body",
            f"the block grid leaves out part of the body: {100 * (1 - inside_share):.2g} % of its area in plan and "
            f"{outside:,.1f} m3 above or below the blocks",
            "extend the grid, or let it be proposed",
        )
    frame = _frame(parts, grid, domains.names)
    model = BlockModel(grid, frame, body.top.crs, findings)
    miss = model.volume_m3 + outside - body.volume_m3
    if inside_share >= 1 - 1e-9 and abs(miss) > 1e-3 * body.volume_m3:
        findings.warning(
            "blocks-volume",
            f"the blocks hold {model.volume_m3:,.0f} m3, the body {body.volume_m3:,.0f} m3",
            "raise split, or use smaller blocks",
        )
    return model


def _split(grid: BlockGrid, cell: float, columns: int) -> int:
    """Sub-columns along a side of a block, for surfaces on cells of that size."""
    plan = columns * grid.size[0] * grid.size[1]
    wanted = min(max(0.25 * cell, math.sqrt(plan / FINE_SUBCOLUMNS)), 0.5 * max(cell, 0.5))
    return max(3, math.ceil(max(grid.size[0], grid.size[1]) / wanted - 1e-6))


def _local_edges(body: Body, grid: BlockGrid) -> tuple[tuple[float, float, float, float], Array]:
    """Edges of the outline in units of blocks along i and j, and their bounds."""
    edges = polygon_edges(body.outline)
    world = np.column_stack([edges.reshape(-1, 2), np.zeros(2 * len(edges))])
    local = grid.to_local(world)[:, :2] / np.asarray(grid.size[:2])
    if not len(local):
        return (0.0, 0.0, 0.0, 0.0), np.empty((0, 4))
    low, high = local.min(axis=0), local.max(axis=0)
    return (low[0], low[1], high[0], high[1]), local.reshape(-1, 4)


def _covered(low: float, high: float, count: int) -> tuple[int, int]:
    return max(0, math.floor(low)), min(count, math.ceil(high))


def _plan_share(body: Body, grid: BlockGrid) -> float:
    """Share of the outline's area under the grid."""
    import shapely

    if body.outline is None or body.outline.is_empty:
        return 1.0
    footprint = shapely.Polygon(grid.corners_xy())
    if footprint.covers(body.outline):
        return 1.0
    return float(body.outline.intersection(footprint).area / body.outline.area)


def _rows(
    lowest: Array,
    count: Array,
    first_i: int,
    first_j: int,
    volume: Array,
    sideways: Array,
    downwards: Array,
    moment: Array,
) -> dict[str, Array]:
    """Index and figures of the blocks that hold any of the body."""
    per_column = count.ravel()
    total = volume.sum(axis=0)
    keep = total > 0
    column = np.repeat(np.arange(per_column.size), per_column)
    within = np.arange(column.size) - np.repeat(np.cumsum(per_column) - per_column, per_column)
    k = within + np.repeat(lowest.ravel(), per_column)
    return {
        "i": (column % count.shape[1] + first_i)[keep].astype(np.int32),
        "j": (column // count.shape[1] + first_j)[keep].astype(np.int32),
        "k": k[keep].astype(np.int32),
        "volume": total[keep],
        "domains": volume[:, keep],
        "sideways": sideways[keep],
        "downwards": downwards[keep],
        "moment": moment[keep],
    }


def _frame(parts: list[dict[str, Array]], grid: BlockGrid, names: tuple[str, ...]) -> pd.DataFrame:
    """Columns of the block model from the parts of the columns' sweep; the parts are used up."""
    empty = {name: np.zeros(0) for name in ("volume", "sideways", "downwards", "moment")}
    empty |= {name: np.zeros(0, dtype=np.int32) for name in "ijk"}
    empty["domains"] = np.zeros((len(names), 0))
    whole = {
        name: np.concatenate([part.pop(name) for part in parts] or [empty[name]], axis=-1) for name in empty
    }
    volume = whole.pop("volume")
    safe = np.where(volume > 0, volume, 1.0)
    columns: dict[str, Any] = {name: whole[name] for name in "ijk"}
    u = (whole["i"] + 0.5) * grid.size[0]
    v = (whole["j"] + 0.5) * grid.size[1]
    axes = grid.axes
    columns["easting"] = grid.origin[0] + u * axes[0, 0] + v * axes[1, 0]
    columns["northing"] = grid.origin[1] + u * axes[0, 1] + v * axes[1, 1]
    columns["elevation"] = grid.origin[2] + (whole["k"] + 0.5) * grid.size[2]
    columns["volume_m3"] = volume
    columns["body_fraction"] = volume / grid.block_volume_m3
    shares = whole.pop("domains")
    shares /= safe
    dominant = np.argmax(shares, axis=0).astype(np.int8) if len(volume) else np.zeros(0, dtype=np.int8)
    columns["domain"] = pd.Categorical.from_codes(dominant, categories=pd.Index(list(names)))
    for name, share in zip(names, shares, strict=True):
        columns[f"share_{name}"] = share
    sideways, downwards = whole.pop("sideways") / safe, whole.pop("downwards") / safe
    kind = np.argmax(np.stack([1.0 - sideways - downwards, sideways, downwards]), axis=0).astype(np.int8)
    columns["extrapolation"] = pd.Categorical.from_codes(kind, categories=pd.Index(list(EXTRAPOLATION)))
    columns["share_sideways"], columns["share_downwards"] = sideways, downwards
    columns["depth_below_seafloor_m"] = whole.pop("moment") / safe
    return pd.DataFrame(columns, copy=False)

"""The scene: what is drawn, in which colours, and what changes when a slider or a box is moved."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.units import column_element
from sms_resource.viewer.axes import clear_corners, label_of, round_ranges
from sms_resource.viewer.geometry import (
    View,
    block_skin,
    body_solid,
    collar_points,
    cropped,
    flat_index,
    surface_mesh,
    tubes,
)
from sms_resource.viewer.results import Results
from sms_resource.viewer.tonnage import Above, Tonnage, tonnage_lines

GRADE_MAP = "viridis"  # perceptually even, and read by colour-blind eyes
INK, PAPER = "#1f2328", "white"
SEAFLOOR, BASE, BODY = "#8a9aa8", "#7a5c3e", "#b8b2a6"
# Okabe & Ito (2008): domains and classes keep these in the order in which they come.
NAMED = ("#0072b2", "#d55e00", "#009e73", "#cc79a7", "#56b4e9", "#e69f00", "#5b5b5b")
LAYERS = ("seafloor", "base", "body", "blocks", "holes", "names")
SURFACES = ("seafloor", "base", "body")
MOST_NAMES = 120


@dataclass(frozen=True)
class Settings:
    """What the scene shows.

    Parameters
    ----------
    variable, cutoff : str, float
        Blocks at or above it show.
    colour : str
        Column that colours the blocks: a grade, "domain" or "proposed_class".
    exaggeration : float
        Factor on heights.
    frame : "elevation" | "depth" | "proportional"
        True heights, the seafloor laid flat, or seafloor and base laid flat.
    screened : bool
        Whether what the screens took is left out, of picture and of tonnes.
    section : (float, float), optional
        Azimuth in degrees and offset in m of a vertical plane through the middle of the body; blocks on its right,
        seen along the azimuth, are taken away.
    hidden : frozenset of str
        Of ``LAYERS``.
    hidden_domains : frozenset of str
        Domains whose blocks are taken away, as a section takes them: tonnes stay those of the whole body.
    """

    variable: str
    cutoff: float
    colour: str
    exaggeration: float = 1.0
    frame: str = "elevation"
    screened: bool = False
    section: tuple[float, float] | None = None
    hidden: frozenset[str] = field(default_factory=frozenset)
    hidden_domains: frozenset[str] = field(default_factory=frozenset)


class Scene:
    """Actors of one plotter, kept in step with :class:`Settings`.

    Parameters
    ----------
    results : Results
    settings : Settings
    plotter : pyvista.Plotter
    """

    def __init__(self, results: Results, settings: Settings, plotter: Any) -> None:
        self.results, self.settings, self.plotter = results, settings, plotter
        frame = results.blocks
        self._index = frame[["i", "j", "k"]].to_numpy(dtype=np.int64)
        self._places = frame[["easting", "northing", "elevation"]].to_numpy(dtype=float)
        self._middle = np.average(self._places, axis=0, weights=frame["volume_m3"])
        self._kept = (
            frame["kept_share"].to_numpy(dtype=float) if "kept_share" in frame else np.ones(len(frame))
        )
        self._above: dict[tuple[str, bool], Above] = {}
        self.view = self._view()
        self._bounds: tuple[float, ...] = ()
        self.shown = 0

    # ---------------------------------------------------------------- what can be chosen
    @property
    def has_depth(self) -> bool:
        """Whether the seafloor can be laid flat."""
        return self.results.seafloor is not None and "depth_below_seafloor_m" in self.results.blocks

    @property
    def has_proportion(self) -> bool:
        """Whether seafloor and base can be laid flat."""
        return self.results.seafloor is not None and self.results.thickness is not None

    @property
    def domains(self) -> list[str]:
        """Domains of the blocks; a block goes by the one that fills most of it."""
        return self.words("domain") if "domain" in self.results.blocks else []

    @property
    def has_screens(self) -> bool:
        """Whether the results say what the screens took."""
        return "kept_share" in self.results.blocks

    @property
    def colours(self) -> list[str]:
        """Columns that can colour the blocks."""
        extra = [
            name for name in ("domain", "proposed_class", "extrapolation") if name in self.results.blocks
        ]
        return [*self.results.metals, *extra]

    @property
    def limits(self) -> tuple[float, float]:
        """Least and greatest cut-off that the slider offers."""
        values = self.results.numbers(self.settings.variable)
        values = values[np.isfinite(values)]
        if values.size == 0:
            return 0.0, 1.0
        low, high = min(0.0, float(values.min())), float(np.quantile(values, 0.995))
        return (low, high) if high > low else (low, low + 1.0)

    def tonnage(self) -> Tonnage:
        """Tonnes and grades at the present cut-off, of the whole body: a section hides and does not subtract."""
        key = (self.settings.variable, self.settings.screened)
        if key not in self._above:
            share = self._kept if self.settings.screened else np.ones(len(self._kept))
            self._above[key] = Above(self.results, self.settings.variable, share)
        return self._above[key].at(self.settings.cutoff)

    # ---------------------------------------------------------------- drawing
    def draw(self) -> None:
        """Draw everything anew."""
        self.view = self._view()
        self._draw_surfaces()
        self._draw_holes()
        self.draw_blocks()
        self._draw_axes()

    def change(self, **changes: Any) -> None:
        """Take other settings and redraw what they touch."""
        before = self.settings
        self.settings = replace(before, **changes)
        if {"exaggeration", "frame"} & set(changes):
            self.draw()
            if (
                self.settings.frame != before.frame
            ):  # the body lies elsewhere now; the direction of sight stays
                self.plotter.reset_camera(bounds=self._bounds, render=False)
            return
        if "hidden" in changes:
            for layer in LAYERS:
                if (
                    layer in SURFACES
                    and layer not in self.settings.hidden
                    and layer not in self.plotter.actors
                ):
                    self._draw_surface(layer)
                self._show(layer)
        if "colour" in changes:
            self._draw_holes()
        if {"variable", "cutoff", "colour", "screened", "section", "hidden_domains"} & set(changes):
            self.draw_blocks()

    def _view(self) -> View:
        x, y = (10.0 * math.floor(value / 10.0) for value in self._middle[:2])
        z = 10.0 * math.floor(float(self._places[:, 2].min()) / 10.0)
        frame = self.settings.frame
        if frame == "proportional" and self.has_proportion:
            return View((x, y, z), self.settings.exaggeration, self.results.seafloor, self.results.thickness)
        flat = self.results.seafloor if frame == "depth" and self.has_depth else None
        return View((x, y, z), self.settings.exaggeration, flat)

    def _surroundings(self) -> tuple[float, float, float, float]:
        """West, south, east, north of what is shown around the body: a little more on every side."""
        places = self._places[:, :2]
        if self.results.sticks is not None:
            places = np.vstack([places, self.results.sticks[["x_from", "y_from"]].to_numpy(dtype=float)])
        low, high = places.min(axis=0), places.max(axis=0)
        margin = max(15.0, 0.15 * float((high - low).max()))
        return low[0] - margin, low[1] - margin, high[0] + margin, high[1] + margin

    def visible(self) -> NDArray[np.bool_]:
        """Blocks that the cut-off, the screens, hidden domains and the section leave in sight."""
        keep = self.results.numbers(self.settings.variable) >= self.settings.cutoff
        if self.settings.screened:
            keep &= self._kept > 0
        if self.settings.hidden_domains and self.domains:
            keep &= ~self.results.blocks["domain"].astype(str).isin(self.settings.hidden_domains).to_numpy()
        if self.settings.section is not None:
            azimuth, offset = self.settings.section
            angle = math.radians(azimuth)
            right = (self._places[:, :2] - self._middle[:2]) @ np.array([math.cos(angle), -math.sin(angle)])
            keep &= right <= offset
        return keep

    def draw_blocks(self) -> None:
        """Blocks and the words about them."""
        keep = np.flatnonzero(self.visible())
        self.shown = len(keep)
        index = self._index[keep]
        if self.view.flat is not None and self.view.thickness is None:
            index = flat_index(self.results.grid, index, self.results.numbers("depth_below_seafloor_m")[keep])
        skin, row = block_skin(self.results.grid, index, self.view, self.results.seafloor, self.results.base)
        self.plotter.remove_actor("blocks", render=False)
        self._drop_bars()
        if skin.n_cells:
            self._add_blocks(skin, keep[row])
        self._show("blocks")
        self._draw_words()

    def _add_blocks(self, skin: Any, rows: NDArray[np.int64]) -> None:
        column = self.settings.colour
        common: dict[str, Any] = {"name": "blocks", "ambient": 0.25, "diffuse": 0.8, "render": False}
        if column_element(column) or pd.api.types.is_numeric_dtype(self.results.blocks[column].dtype):
            skin.cell_data["shown"] = self.results.numbers(column)[rows]
            self.plotter.add_mesh(
                skin, scalars="shown", cmap=GRADE_MAP, clim=self.colour_limits(column), nan_color="#d0d0d0",
                show_scalar_bar=False, **common,
            )  # fmt: skip
            self._bar(self.plotter.mapper, label_of(column))
            return
        words = self.results.blocks[column].astype(str).to_numpy()
        names = self.words(column)
        skin.cell_data["shown"] = np.array([names.index(word) for word in words[rows]], dtype=np.int32)
        colours = [NAMED[n % len(NAMED)] for n in range(len(names))]
        self.plotter.add_mesh(
            skin, scalars="shown", cmap=colours, clim=(-0.5, len(names) - 0.5), n_colors=len(names),
            show_scalar_bar=False, **common,
        )  # fmt: skip
        self.plotter.add_legend(
            [[name or "not stated", colour] for name, colour in zip(names, colours, strict=True)],
            bcolor=PAPER, border=False, size=(0.10, 0.024 * len(names)), loc="upper right", face="rectangle",
        )  # fmt: skip
        graded = self.plotter.actors.get("holes-graded")
        if graded is not None:
            self._bar(graded.mapper, f"Holes: {label_of(self._hole_metal())}")

    def words(self, column: str) -> list[str]:
        """Words of a text column, in the order in which they keep their colours."""
        values = self.results.blocks[column]
        if isinstance(values.dtype, pd.CategoricalDtype):
            return [str(word) for word in values.cat.categories]
        return sorted(values.astype(str).unique())

    def colour_limits(self, column: str) -> tuple[float, float]:
        """0, or the least value, to the 97.5th percentile: extremes do not flatten the rest."""
        values = self.results.numbers(column)
        values = values[np.isfinite(values)]
        if values.size == 0:
            return 0.0, 1.0
        low, high = min(0.0, float(values.min())), float(np.quantile(values, 0.975))
        return (low, high) if high > low else (low, low + 1.0)

    def _bar(self, mapper: Any, title: str) -> None:
        self.plotter.add_scalar_bar(
            title=f"{title}\n", mapper=mapper, vertical=True, position_x=0.92, position_y=0.28, width=0.035, height=0.44,
            n_labels=5, fmt="%.1f", color=INK, title_font_size=16, label_font_size=14, render=False,
        )  # fmt: skip

    def _drop_bars(self) -> None:
        for title in list(self.plotter.scalar_bars.keys()):
            self.plotter.remove_scalar_bar(title, render=False)
        self.plotter.remove_legend(render=False)

    def _draw_surfaces(self) -> None:
        """Surfaces that are not hidden; one that is shown later is made then."""
        for name in SURFACES:
            self.plotter.remove_actor(name, render=False)
            if name not in self.settings.hidden:
                self._draw_surface(name)

    def _draw_surface(self, name: str) -> None:
        results = self.results
        seafloor, base, thickness = results.seafloor, results.base, results.thickness
        if name == "seafloor" and seafloor is not None:
            mesh = surface_mesh(cropped(seafloor, self._surroundings()), self.view)
            self._add_skin(name, mesh, SEAFLOOR, 0.28)
        elif name == "base" and base is not None and thickness is not None and base.shape == thickness.shape:
            thick = np.nan_to_num(thickness.values) > 0.05
            under = base.with_values(np.where(thick, base.values, np.nan))
            self._add_skin(name, surface_mesh(under, self.view), BASE, 0.55)
        elif name == "body" and seafloor is not None and thickness is not None:
            self._add_skin(name, body_solid(seafloor, thickness, self.view), BODY, 0.35)

    def _add_skin(self, name: str, mesh: Any, colour: str, opacity: float) -> None:
        if mesh.n_cells:
            self.plotter.add_mesh(
                mesh, name=name, color=colour, opacity=opacity, smooth_shading=True, show_scalar_bar=False,
                ambient=0.2, specular=0.1, pickable=False, render=False,
            )  # fmt: skip
            self._show(name)

    def _draw_holes(self) -> None:
        for name in ("holes-graded", "holes-plain", "holes-trace", "names"):
            self.plotter.remove_actor(name, render=False)
        sticks = self.results.sticks
        if sticks is None:
            return
        metal = self._hole_metal()
        span = float(np.ptp(self._places[:, :2], axis=0).max())
        made = tubes(sticks, self.view, metal, radius=max(0.35, span / 260.0))
        plain: dict[str, Any] = {"show_scalar_bar": False, "render": False, "pickable": False}
        if "graded" in made:
            self.plotter.add_mesh(
                made["graded"], name="holes-graded", scalars="grade", cmap=GRADE_MAP, clim=self.colour_limits(metal),
                **plain,
            )  # fmt: skip
        if "plain" in made:
            self.plotter.add_mesh(made["plain"], name="holes-plain", color="#e8e6e1", **plain)
        if "trace" in made:
            self.plotter.add_mesh(made["trace"], name="holes-trace", color=INK, line_width=1.2, **plain)
        points, names = collar_points(sticks, self.view)
        good = np.isfinite(points).all(axis=1)
        if good.any() and int(good.sum()) <= MOST_NAMES:
            lift = np.array([0.0, 0.0, 2.5 + 0.01 * span])
            self.plotter.add_point_labels(
                points[good] + lift, [names[n] for n in np.flatnonzero(good)], name="names",
                font_size=11, text_color=INK, shape=None, show_points=False, always_visible=False, render=False,
            )  # fmt: skip
        self._show("holes")
        self._show("names")

    def _hole_metal(self) -> str:
        """Grade that colours the holes: that of the blocks, or that of the cut-off."""
        return self.settings.colour if self.settings.colour in self.results.metals else self.settings.variable

    def _show(self, layer: str) -> None:
        parts = {"holes": ("holes-graded", "holes-plain", "holes-trace"), "names": ("names", "names-labels")}
        for name in parts.get(layer, (layer,)):
            actor = self.plotter.actors.get(name)
            if actor is not None:
                actor.SetVisibility(layer not in self.settings.hidden)

    def _draw_axes(self) -> None:
        self.plotter.remove_bounds_axes()  # or the old axes would count as part of the scene
        true = self.view.true_ranges(tuple(self.plotter.bounds))
        low, high, counts = round_ranges(true)
        self._bounds = self.view.scene_bounds(low, high)
        clear_corners(self.plotter.show_bounds(
            bounds=self._bounds, axes_ranges=[v for pair in zip(low, high, strict=True) for v in pair],
            xtitle="Easting (m)", ytitle="Northing (m)",
            ztitle=self._height_title(), fmt="%.0f", n_xlabels=counts[0],
            n_ylabels=counts[1], n_zlabels=counts[2], color=INK, font_size=12, location="outer", use_3d_text=False,
            render=False,
        ))  # fmt: skip

    def _height_title(self) -> str:
        if self.view.thickness is not None:
            return f"Place between seafloor (0) and base (-{self.view.mean_m:.1f} m)"
        return "Elevation (m)" if self.view.flat is None else "Minus depth below seafloor (m)"

    def _draw_words(self) -> None:
        settings = self.settings
        lines = [self.results.title, *tonnage_lines(self.tonnage(), settings.variable, settings.cutoff)]
        basis = "after screens" if settings.screened else "before screens" if self.has_screens else ""
        lines.append(", ".join(part for part in (self.results.label, "estimated, rounded", basis) if part))
        if settings.section is not None:
            lines.append(f"Section toward {settings.section[0]:.0f}°; tonnes are of the whole body")
        if settings.hidden_domains:
            lines.append(
                f"Hidden: {', '.join(sorted(settings.hidden_domains))}; tonnes are of the whole body"
            )
        self.plotter.add_text(
            "\n".join(lines), name="words", position="upper_left", font_size=10, color=INK, render=False
        )
        x, y, z = self.view.origin
        seen = "seafloor laid flat" if self.view.flat is not None else "true heights"
        if self.view.thickness is not None:
            seen = f"seafloor and base laid flat, by the mean thickness of {self.view.mean_m:.1f} m"
        foot = (
            f"Vertical exaggeration {settings.exaggeration:g} x; {seen}; axes show true coordinates "
            f"(local origin {x:.0f} E, {y:.0f} N, {z:.0f} m).\nHoles: tube = core by grade, pale tube = core without an "
            "assay, thin line = lost core."
        )
        self.plotter.add_text(foot, name="foot", position="lower_left", font_size=9, color=INK, render=False)

    def look(self, azimuth: float = 35.0, height: float = 24.0) -> None:
        """Put the camera: seen toward ``azimuth`` (degrees clockwise from north) from ``height`` degrees up."""
        if self.settings.section is not None:  # from the side that was taken away
            azimuth = self.settings.section[0] - 90.0 + 15.0
        a, h = math.radians(azimuth), math.radians(height)
        away = (-math.cos(h) * math.sin(a), -math.cos(h) * math.cos(a), math.sin(h))
        self.plotter.camera_position = [away, (0.0, 0.0, 0.0), (0.0, 0.0, 1.0)]
        self.plotter.reset_camera(bounds=self._bounds, render=False)
        self.plotter.camera.zoom(1.14)

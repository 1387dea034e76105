"""Strip logs: every hole as a stick with lithology, grade, recovery, and gaps where core is lost."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from sms_resource.reporting import style
from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.style import Drawing
from sms_resource.units import element_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes

HOLES_A_PAGE = 24
MOST_CODES = 18
ROCK_COLOURS = ("#8da9c4", "#c9a66b", "#7f8f6a", "#b48291", "#d8cfc0", "#5f6f7a", "#a3c1ad", "#c4b7d4")
ROCK_HATCHES = ("", "///", "...", "xx", "", "\\\\\\", "++", "oo")


def _bars(frame: pd.DataFrame, centres: pd.Series, left: float, width: Any) -> np.ndarray:
    """Corners of one rectangle an interval, shape (n, 4, 2), ``width`` to the right of ``centre + left``."""
    x0 = centres.to_numpy(float) + left
    x1 = x0 + np.broadcast_to(np.asarray(width, dtype=float), x0.shape)
    y0, y1 = frame["from_m"].to_numpy(float), frame["to_m"].to_numpy(float)
    return np.stack(
        [np.stack([x0, y0], 1), np.stack([x1, y0], 1), np.stack([x1, y1], 1), np.stack([x0, y1], 1)], 1
    )


def _alike(axis: Axes, bars: np.ndarray, **look: Any) -> None:
    """Rectangles of one look as one path: far quicker to write than one by one."""
    from matplotlib.patches import PathPatch
    from matplotlib.path import Path

    if len(bars):
        # Not add_patch, which looks for the limits corner by corner; they are set by the holes.
        axis.add_artist(PathPatch(Path.make_compound_path_from_polys(bars), snap=True, **look))


def strip_logs(data: ReportData, holes_a_page: int = HOLES_A_PAGE) -> list[Drawing]:
    """Strip logs of all holes, a page a group of holes in the order of their names."""
    from matplotlib.collections import PolyCollection
    from matplotlib.patches import Patch

    sticks, collars = data.evidence.sticks, data.evidence.collars
    metals = [m for m in data.subject.metals if sticks is not None and m in sticks]
    if sticks is None or not has(sticks, "hole_id", "from_m", "to_m") or not metals:
        return []
    metal = metals[0]
    limits = style.grade_limits(sticks[metal])
    lithology, runs = data.evidence.lithology, data.evidence.runs
    codes = (
        sorted(lithology["code"].astype(str).unique())
        if lithology is not None and has(lithology, "code")
        else []
    )
    look = {code: number for number, code in enumerate(codes)}
    names = sticks["hole_id"].astype(str)
    holes = sorted(
        set(names)
        | (set(collars["hole_id"].astype(str)) if has(collars, "hole_id") and collars is not None else set())
    )
    ended = (
        dict(zip(collars["hole_id"].astype(str), collars["ended_in"].astype(str)))
        if collars is not None and has(collars, "hole_id", "ended_in")
        else {}
    )
    lengths = (
        dict(zip(collars["hole_id"].astype(str), collars["length_m"]))
        if collars is not None and has(collars, "hole_id", "length_m")
        else {}
    )
    drawings = []
    size = -(-len(holes) // -(-len(holes) // holes_a_page))  # pages of equal length
    pages = [holes[start : start + size] for start in range(0, len(holes), size)]
    for number, page in enumerate(pages, 1):
        rows = 2 if len(page) > holes_a_page // 2 else 1
        per_row = -(-len(page) // rows)
        figure, axes = style.new_figure(10.2, 3.3 * rows + 0.5, rows, 1)
        for row, axis in enumerate(axes[:, 0]):
            group = page[row * per_row : (row + 1) * per_row]
            place = {hole: float(at) for at, hole in enumerate(group)}
            here = sticks[names.isin(group)]
            centre = here["hole_id"].astype(str).map(place)
            known = here[metal].notna().to_numpy()
            if lithology is not None and codes:
                part = lithology[lithology["hole_id"].astype(str).isin(group)]
                at = part["hole_id"].astype(str).map(place)
                for code in codes:
                    mine = (part["code"].astype(str) == code).to_numpy()
                    if mine.any():
                        _alike(
                            axis,
                            _bars(part[mine], at[mine], -0.42, 0.16),
                            fc=ROCK_COLOURS[look[code] % 8],
                            hatch=ROCK_HATCHES[(look[code] + look[code] // 8) % 8],
                            ec=style.QUIET,
                            lw=0.3,
                        )
            _alike(axis, _bars(here, centre, -0.24, 0.26), fc="none", ec=style.INK, lw=0.5)
            if known.any():
                cells = PolyCollection(
                    list(_bars(here[known], centre[known], -0.24, 0.26)),
                    array=here.loc[known, metal].to_numpy(float),
                    cmap=style.GRADE_MAP,
                    edgecolors="face",
                    linewidths=0.1,
                )
                cells.set_clim(*limits)
                axis.add_collection(cells)
            base = (
                runs[runs["hole_id"].astype(str).isin(group)]
                if runs is not None and has(runs, "hole_id", "recovery_pct", "from_m", "to_m")
                else here
            )
            if "recovery_pct" in base:
                at = base["hole_id"].astype(str).map(place)
                share = np.clip(base["recovery_pct"].fillna(0.0).to_numpy(float), 0, 110) / 100.0 * 0.34
                _alike(axis, _bars(base, at, 0.06, share), fc="#b9c3cc", ec="white", lw=0.2)
                _alike(axis, _bars(base, at, 0.06, 0.34), fc="none", ec=style.RULE, lw=0.3)
            deepest = float(here["to_m"].max()) if len(here) else 1.0
            for hole, x in place.items():
                end = here.loc[here["hole_id"].astype(str) == hole, "to_m"].max()
                end = float(lengths.get(hole, end)) if np.isfinite(lengths.get(hole, np.nan)) else float(end)
                mark = {"sulphide": "▼", "host": "—", "lost": "×"}.get(ended.get(hole, ""), "")
                if np.isfinite(end) and mark:
                    axis.text(x - 0.11, end, mark, ha="center", va="top", fontsize=7)
                    deepest = max(deepest, end)
            axis.set_xlim(-0.6, per_row - 0.4)
            axis.set_ylim(deepest * 1.07 + 0.5, 0.0)
            axis.set_xticks(
                range(len(group)),
                [style.short(hole, 16) for hole in group],
                rotation=40,
                ha="left",
                fontsize=7,
                rotation_mode="anchor",
            )
            axis.xaxis.tick_top()
            axis.set_ylabel("Depth down the hole (m)")
            axis.spines["bottom"].set_visible(False)
            axis.grid(True, axis="y")
            axis.set_axisbelow(True)
        from matplotlib.cm import ScalarMappable
        from matplotlib.colors import Normalize

        figure.colorbar(
            ScalarMappable(Normalize(*limits), style.GRADE_MAP),
            ax=list(axes[:, 0]),
            shrink=0.6,
            pad=0.01,
            label=element_label(metal),
            extend="max",
        )
        handles = [
            Patch(
                fc=ROCK_COLOURS[look[c] % 8],
                hatch=ROCK_HATCHES[(look[c] + look[c] // 8) % 8],
                ec=style.QUIET,
                label=style.short(c, 24),
            )
            for c in codes[:MOST_CODES]
        ]
        if len(codes) > MOST_CODES:
            handles.append(Patch(fc="none", ec="none", label=f"and {len(codes) - MOST_CODES} more codes"))
        handles += [
            Patch(fc="white", ec=style.INK, label="no grade (lost or not assayed)"),
            Patch(fc="#b9c3cc", label="recovery, 0 to 100 %"),
        ]
        figure.legend(handles=handles, loc="outside lower center", ncols=5)
        table = sticks[names.isin(page)]
        columns = [c for c in ("hole_id", "from_m", "to_m", "domain", "recovery_pct", *metals) if c in table]
        drawings.append(
            Drawing(
                f"strip_logs_{number:02d}",
                "evidence",
                f"Strip logs, page {number} of {len(pages)}: {style.short(page[0], 24)} to {style.short(page[-1], 24)}",
                f"Each hole from left: logged lithology, {element_label(metal)} (blank where core was lost or"
                " not assayed), recovery of the run. Below each hole: ▼ ended in sulphide, — ended in host"
                " rock, × lost.",
                f"Strip logs of {len(page)} holes with lithology, grade and recovery.",
                figure,
                table[columns],
            )
        )
    return drawings

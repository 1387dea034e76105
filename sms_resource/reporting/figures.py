"""All figures of a report, in its order; what the data do not hold is not drawn, and named."""

from __future__ import annotations

from collections.abc import Callable

from sms_resource.reporting import (
    figures_blanks,
    figures_blocks,
    figures_continuity,
    figures_geology,
    figures_map,
    figures_neighbourhood,
    figures_quality,
    figures_recovery,
    figures_relief,
    figures_samples,
    figures_section,
    figures_strip,
    figures_topcuts,
    figures_validation,
    figures_value,
    figures_variogram_map,
)
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.style import Drawing, borrowed_settings

Maker = Callable[[ReportData], Drawing | list[Drawing] | None]

# The words name what is missing when a maker returns nothing.
MAKERS: tuple[tuple[str, Maker], ...] = (
    ("plan of holes", figures_map.plan_holes),
    ("collars against the seafloor", figures_map.plan_collars),
    ("recovery", figures_recovery.recovery),
    ("lost core", figures_recovery.lost_core),
    ("histograms", figures_samples.histograms),
    ("log-probability plots", figures_samples.log_probability),
    ("top cuts", figures_topcuts.top_cuts),
    ("contact analysis", figures_geology.contacts),
    ("tracers with depth", figures_geology.tracers),
    ("surface against core", figures_recovery.surface_against_core),
    ("control charts", figures_quality.control_charts),
    ("blanks", figures_blanks.blanks),
    ("duplicates", figures_quality.duplicates),
    ("density", figures_samples.density),
    ("strip logs", figures_strip.strip_logs),
    ("slope plan", figures_relief.plan_slope),
    ("thickness plan", figures_map.plan_thickness),
    ("plan of extrapolation", figures_blocks.plan_extrapolation),
    ("geometry uncertainty", figures_value.geometry),
    ("variograms", figures_continuity.variograms),
    ("variogram map", figures_variogram_map.variogram_maps),
    ("plan of grades", figures_blocks.plan_grades),
    ("cross-sections", figures_section.sections),
    ("swaths", figures_validation.swaths),
    ("leave one hole out", figures_validation.leave_one_out),
    ("change of support", figures_validation.change_of_support),
    ("comparison of estimators", figures_validation.estimators),
    ("neighbourhood study", figures_neighbourhood.neighbourhood),
    ("class plan", figures_blocks.plan_classes),
    ("grade-tonnage curves", figures_value.grade_tonnage),
    ("waterfall of screens", figures_value.waterfall),
    ("tornado", figures_value.tornado),
    ("heat map", figures_value.heat_map),
    ("changes since another run", figures_value.changes),
)


def all_drawings(data: ReportData) -> tuple[list[Drawing], list[str]]:
    """Draw everything that the data allow; return the drawings and the names of what could not be drawn."""
    drawings: list[Drawing] = []
    absent: list[str] = []
    with borrowed_settings():
        for name, maker in MAKERS:
            made = maker(data)
            if made is None or made == []:
                absent.append(name)
            elif isinstance(made, Drawing):
                drawings.append(made)
            else:
                drawings.extend(made)
    return drawings, absent

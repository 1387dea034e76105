"""Samples from the seafloor itself, and dredge tracks."""

from __future__ import annotations

import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.drilling import state_method, to_elevation
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table


def load_surface(
    source: TableSource, elements: tuple[str, ...], summarise: tuple[str, ...] = ()
) -> tuple[pd.DataFrame, Findings]:
    """Read surface samples: grabs, chimney pieces, push cores and gravity cores.

    Parameters
    ----------
    source : TableSource
    elements, summarise : tuple of str
        Elements to read; one that the file lacks is blank, with a warning or a note.
    """
    frame, findings = load_table(source, "surface_samples", elements, summarise)
    frame = to_elevation(frame, source, ("elevation",), findings)
    return state_method(frame, findings), findings


def load_dredges(
    source: TableSource, elements: tuple[str, ...], summarise: tuple[str, ...] = ()
) -> tuple[pd.DataFrame, Findings]:
    """Read dredges: tracks with a start and an end, never points."""
    frame, findings = load_table(source, "dredges", elements, summarise)
    frame = to_elevation(frame, source, ("start_elevation", "end_elevation"), findings)
    return state_method(frame, findings), findings

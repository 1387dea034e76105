"""Points on the base of the sulphide from another source."""

from __future__ import annotations

import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.drilling import to_elevation
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table


def load_points(source: TableSource) -> tuple[pd.DataFrame, Findings]:
    """Read easting, northing and elevation of points, such as a geophysical base."""
    frame, findings = load_table(source, "base_points")
    return to_elevation(frame, source, ("elevation",), findings), findings

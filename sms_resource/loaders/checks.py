"""All checks of the data, one after the other; each adds what it finds and none stops the rest."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from sms_resource.findings import Findings
from sms_resource.loaders.check_grades import check_densities, check_grades
from sms_resource.loaders.check_holes import check_collars, check_recovery, check_surveys
from sms_resource.loaders.check_intervals import check_intervals
from sms_resource.loaders.check_laboratory import check_laboratory
from sms_resource.loaders.check_positions import check_positions, check_systems
from sms_resource.loaders.settings import CheckSettings
from sms_resource.loaders.tables import LoadedData

__all__ = ["CheckSettings", "check_data"]

CHECKS: tuple[Callable[[LoadedData, CheckSettings, Findings], None], ...] = (
    check_systems,
    check_collars,
    check_surveys,
    check_intervals,
    check_recovery,
    check_grades,
    check_densities,
    check_positions,
    check_laboratory,
)
_ORDER = {"error": 0, "warning": 1, "note": 2}


def check_data(data: LoadedData, *, settings: CheckSettings | None = None) -> Findings:
    """Hold the data against each other and against what the trade knows.

    Parameters
    ----------
    data : LoadedData
    settings : CheckSettings, optional

    Returns
    -------
    Findings
        All of them, never only the first: errors, then warnings, then notes, in the order of the checks.
    """
    settings = settings or CheckSettings()
    found = Findings()
    with np.errstate(invalid="ignore"):  # a missing value fails every comparison, as it should
        for check in CHECKS:
            check(data, settings, found)
    return Findings(sorted(found, key=lambda finding: _ORDER[finding.severity]))

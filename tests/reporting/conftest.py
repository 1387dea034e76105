"""One full report, made once for all tests of the room."""

import pytest

from sms_resource.reporting.figures import all_drawings
from sms_resource.reporting.report import Report, make_report
from sms_resource.reporting.style import Drawing
from tests.reporting.synthetic import full_report_data

HOSTILE = "<script>alert(1)</script> & \"quoted\" 'text' $\\frac{ #set |*_"


@pytest.fixture(scope="session")
def data():
    """Invented data with every part filled."""
    return full_report_data()


@pytest.fixture(scope="session")
def hostile_data():
    """The same with mark-up in every text that a data file can bring."""
    return full_report_data(note=HOSTILE)


@pytest.fixture(scope="session")
def report(hostile_data, tmp_path_factory) -> Report:
    """A report on disk, made from the hostile data."""
    return make_report(hostile_data, tmp_path_factory.mktemp("report"))


@pytest.fixture(scope="session")
def page(report) -> str:
    """Its page as text."""
    return report.paths[0].read_text(encoding="utf-8")


@pytest.fixture(scope="session")
def drawings(hostile_data) -> list[Drawing]:
    """All figures of the same data, drawn and not yet let go."""
    made, absent = all_drawings(hostile_data)
    assert absent == []
    return made

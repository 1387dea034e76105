"""Sound data give no error and no warning, and the values that stand in the files."""

from pathlib import Path

import numpy as np
import pytest

from sms_resource.loaders.tables import GRADE_ROLES, SCHEMAS, empty_table
from tests.loaders.small_study import ELEMENTS, HOLES, LENGTHS, Study


def test_sound_data_have_nothing_against_them(tmp_path: Path) -> None:
    data, found = Study(tmp_path).load()
    assert [item for item in found if item.severity != "note"] == []
    assert list(data.drill.collars["hole_id"]) == HOLES
    assert len(data.drill.assays) == sum(LENGTHS)
    assert data.drill.assays["cu_pct"].notna().all()
    assert data.drill.runs["recovery_pct"].between(60, 75.0001).all()
    assert data.seafloor is not None and data.seafloor.shape == (160, 200)
    assert data.exclusions is not None and list(data.exclusions["status"]) == ["active_vent"]


def test_every_table_has_its_columns_and_rows(tmp_path: Path) -> None:
    data, _ = Study(tmp_path).load()
    frames = {
        role: getattr(data.drill, role)
        for role in ("collars", "surveys", "runs", "lithology", "assays", "densities")
    }
    frames |= {"surface_samples": data.surface, "dredges": data.dredges, "laboratory": data.laboratory}
    for role, frame in frames.items():
        expected = list(empty_table(role, ELEMENTS).columns)
        assert list(frame.columns) == expected, role
        assert frame["source_row"].iloc[0] == 2
        assert (np.diff(frame["source_row"]) == 1).all()
        for column in SCHEMAS[role]:
            if column.kind in ("identifier", "text") and column.name != "unit":
                assert frame[column.name].map(type).eq(str).all(), (role, column.name)


@pytest.mark.parametrize("role", list(SCHEMAS))
def test_an_empty_table_has_typed_columns(role: str) -> None:
    frame = empty_table(role, ELEMENTS)
    assert len(frame) == 0 and "source_row" in frame
    assert ("cu_pct_status" in frame) == (role in GRADE_ROLES)

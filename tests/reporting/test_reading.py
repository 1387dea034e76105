"""A figure is drawn again when, and only when, something that it was made from has changed."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from shapely.geometry import Point, box

from sms_resource.reporting import drawing
from sms_resource.reporting.drawing import Kept, draw_all
from sms_resource.reporting.reading import Contents, Reading, UnknownContent, content

VALUES: list[Any] = [
    None, True, 1, 1.0, "1", b"1", float("nan"), -0.0, 0.0, (1,), [1], {"a": 1}, {"a": 1.0}, {"b": 1}, {1}, {True},
    np.array([1]), np.array([1.0]), np.array([1.0], dtype="float32"), np.array([[1.0]]), np.array(["1"], dtype=object),
    np.array([1], dtype=object), np.array([1.0], dtype=object), np.array([None], dtype=object),
    pd.DataFrame({"a": [1.0]}), pd.DataFrame({"a": [1.0]}, index=[1]), pd.DataFrame({"b": [1.0]}),
    pd.DataFrame({"a": ["x", "y"]}), pd.DataFrame({"a": ["y", "x"]}), pd.DataFrame({"a": pd.Categorical(["x", "y"])}),
    pd.Series([1.0], name="a"), pd.Series([1.0], name="b"), pd.Timestamp("2026-01-01"), Point(0, 1), Point(1, 0),
    box(0, 0, 1, 1), "ab", ("a", "b"), ("ab",), np.array(["a", "b", "a"], dtype=object),
    np.array(["a", "b", "b"], dtype=object), np.array([], dtype=float), np.array([], dtype=int),
]  # fmt: skip


def test_different_values_have_different_contents() -> None:
    digests = [content(value) for value in VALUES]
    assert len(set(digests)) == len(VALUES)
    assert digests == [content(value) for value in VALUES]


def test_a_function_has_no_content() -> None:
    with pytest.raises(UnknownContent, match="function"):
        content({"a": lambda: 1})


class Memory(dict[str, Any]):
    """A store that counts."""

    def put(self, key: str, value: Any) -> None:
        self[key] = value


@pytest.fixture
def few(monkeypatch: pytest.MonkeyPatch) -> dict[str, int]:
    """Three makers that count how often they draw, in this interpreter."""
    wanted = ("histograms", "grade-tonnage curves", "tornado")
    calls = dict.fromkeys(wanted, 0)

    def counted(name: str, maker: Any) -> Any:
        def draw(data: Any) -> Any:
            calls[name] += 1
            return maker(data)

        return draw

    makers = tuple((name, counted(name, maker)) for name, maker in drawing.MAKERS if name in wanted)
    monkeypatch.setattr(drawing, "MAKERS", makers)
    monkeypatch.setattr(drawing, "ALONE_UP_TO", 1e9)
    return calls


def test_only_what_changed_is_drawn(data: Any, few: dict[str, int], tmp_path: Path) -> None:
    store = Memory()
    first, absent = draw_all(data, tmp_path / "one", store, "code")
    assert set(few.values()) == {1}
    again, _ = draw_all(data, tmp_path / "two", store, "code")
    assert set(few.values()) == {1}
    assert [item.picture for item in again] == [item.picture for item in first]
    for path in (tmp_path / "one").rglob("*.*"):
        assert path.read_bytes() == (tmp_path / "two" / path.relative_to(tmp_path / "one")).read_bytes()
    cut = replace(data, subject=replace(data.subject, cutoff={"variable": "cu_pct", "value": 7.77}))
    moved, _ = draw_all(cut, tmp_path / "three", store, "code")
    assert few["histograms"] == 1
    assert few["grade-tonnage curves"] == 2
    fresh, _ = draw_all(cut, tmp_path / "four")
    assert [item.picture for item in moved] == [item.picture for item in fresh]
    draw_all(data, tmp_path / "five", store, "other code")
    assert few["histograms"] == 3
    assert absent == []


def test_a_reading_writes_down_what_properties_look_at(data: Any) -> None:
    reading: Any = Reading(data)
    assert reading.cutoff_text == data.cutoff_text
    assert reading.paths_read == (("subject", "cutoff"),)
    assert reading.tally_label == data.tally_label
    assert ("subject", "prospects") in reading.paths_read
    assert reading.evidence.collars is data.evidence.collars
    assert ("evidence", "collars") in reading.paths_read
    with pytest.raises(AttributeError):
        _ = reading.evidence.no_such_field


def test_every_figure_of_full_data_can_be_kept(data: Any) -> None:
    """No maker looks at something that cannot be compared, or at a whole part of the data."""
    contents = Contents(data)
    made = drawing.draw_some(data, list(range(len(drawing.MAKERS))))
    for number, item in made.items():
        if item.read != (("variograms",),):  # whose models are stand-ins in these data
            assert contents.digest(item.read) is not None, drawing.MAKERS[number][0]
        assert all(len(path) > 1 or path == ("variograms",) for path in item.read), drawing.MAKERS[number][0]


def test_what_cannot_be_compared_is_drawn_again(data: Any) -> None:
    odd = replace(data, body=replace(data.body, outline=lambda: None))
    assert Contents(odd).digest((("body", "outline"),)) is None
    assert Contents(data).digest((("body", "outline"),)) is not None
    store = Memory()
    kept = Kept(store, "code", odd)
    kept.keep({"plan": drawing.Made((), (("body", "outline"),))})
    assert kept.find("plan") is None

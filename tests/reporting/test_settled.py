"""What is kept while a figure is placed and written changes no byte of it."""

from __future__ import annotations

import gc
from contextlib import nullcontext

import numpy as np
import pandas as pd
import pytest

from sms_resource.reporting import style
from sms_resource.reporting.figures import MAKERS
from sms_resource.reporting.style import Drawing, as_csv, borrowed_settings, render
from tests.reporting.synthetic import full_report_data

# Equal scales, shared axes, logarithmic axes, turned labels, legends, colour bars, texts in the data.
VARIED = (
    "plan of holes",
    "top cuts",
    "surface against core",
    "strip logs",
    "cross-sections",
    "neighbourhood study",
)


def files_of(name: str) -> list[tuple[bytes, bytes, bytes]]:
    with borrowed_settings():
        made = dict(MAKERS)[name](full_report_data())
        assert made
        return [render(drawing) for drawing in ([made] if isinstance(made, Drawing) else made)]


@pytest.mark.parametrize("name", VARIED)
def test_the_files_are_those_of_a_figure_that_keeps_nothing(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    kept = files_of(name)
    monkeypatch.setattr(style, "settled", nullcontext)
    assert kept == files_of(name)


def test_nothing_is_kept_beyond_the_writing() -> None:
    with borrowed_settings():
        figure, axes = style.new_figure(3.0, 2.0)
        axis = axes[0, 0]
        axis.plot([0.0, 1.0], [0.0, 1.0])
        drawing = Drawing("a", "b", "c", "d", "e", figure, pd.DataFrame({"x": [1.0]}))
        first = render(drawing)
        for place in (axis.xaxis, axis.xaxis.label, *(tick.label1 for tick in axis.xaxis.majorTicks)):
            assert not {"_update_ticks", "_get_ticklabel_bboxes", "_get_layout"} & set(vars(place))
        axis.set_xlim(0.0, 7000.0)
        axis.set_xlabel("changed")
        assert render(drawing)[0] != first[0]


def test_litter_is_searched_for_as_before_after_drawing() -> None:
    pace, held = gc.get_threshold(), gc.get_freeze_count()
    with borrowed_settings():
        assert gc.get_freeze_count() > held
    assert gc.get_threshold() == pace and gc.get_freeze_count() == 0


def test_a_table_is_written_as_pandas_writes_it() -> None:
    rng = np.random.default_rng(4)
    table = pd.DataFrame(
        {
            "value": [*(10.0 ** rng.uniform(-12, 15, 40) * rng.choice([-1, 1], 40)), np.nan, np.inf, -np.inf, -0.0, 1 / 3],
            "all_nan": np.full(45, np.nan),
            "whole": np.arange(45),
            "small": np.linspace(0, 1, 45, dtype=np.float32),
            "name": ['a,"b"', "", None, "ü\n", "%.3g"] * 9,
            "mixed": [1, 2.5, "x", np.nan, True] * 9,
            "flag": [True, False, True] * 15,
        }
    )  # fmt: skip
    for part in (table, table.iloc[:0], table[["value"]], table[["all_nan"]], table[table["flag"]]):
        assert as_csv(part) == part.to_csv(index=False, lineterminator="\n", float_format="%.10g")

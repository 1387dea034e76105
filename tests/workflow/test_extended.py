"""What is kept of a frame of blocks gives the whole frame back, to the bit."""

from __future__ import annotations

import pickle
from dataclasses import dataclass

import numpy as np
import pandas as pd
import pytest

from sms_resource.workflow.extended import Extension, lengthened, shortened


@dataclass(frozen=True, eq=False)
class State:
    frame: pd.DataFrame
    other: int = 1


def base(rows: int = 50) -> pd.DataFrame:
    random = np.random.default_rng(3)
    return pd.DataFrame(
        {"i": np.arange(rows), "cu_pct": np.where(random.random(rows) < 0.2, np.nan, random.random(rows)),
         "domain": random.choice(["cap", "massive"], rows), "count": random.integers(0, 9, rows).astype(np.int32)}
    )  # fmt: skip


@pytest.mark.parametrize("change", ["added", "changed", "reordered", "dropped", "retyped"])
def test_the_frame_comes_back(change: str) -> None:
    first = base()
    frame = first.copy()
    if change == "added":
        frame.insert(1, "proposed_class", "inferred")
    elif change == "changed":
        frame["cu_pct"] = frame["cu_pct"] + 1e-15
        frame["count"] = frame["count"].to_numpy()[::-1]
    elif change == "reordered":
        frame = frame[["domain", "i", "count", "cu_pct"]]
    elif change == "dropped":
        frame = frame.drop(columns="domain").assign(value=2.0)
    else:
        frame["count"] = frame["count"].astype(float)
    kept = pickle.loads(pickle.dumps(shortened(State(frame, 7), first)))
    made = lengthened(kept, first)
    assert made.other == 7
    pd.testing.assert_frame_equal(made.frame, frame, check_exact=True)


def test_only_what_is_new_is_kept() -> None:
    first = base()
    kept = shortened(State(first.assign(value=1.0)), first)
    assert isinstance(kept, Extension)
    assert list(kept.output.frame) == ["value"]


def test_other_rows_and_no_output_are_kept_as_they_are() -> None:
    first = base()
    part = State(first.iloc[:10])
    assert shortened(part, first) is part and lengthened(part, first) is part
    assert shortened(None, first) is None and lengthened(None, first) is None

"""Keep of a frame of blocks only what a stage has added to it; the rest is kept with the stage before."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import pandas as pd


@dataclass(frozen=True)
class Extension:
    """An output whose frame holds only the columns that are new or changed, and the order of all of them."""

    output: Any
    columns: tuple[str, ...]


def shortened(output: Any, base: pd.DataFrame) -> Any:
    """What is kept of an output with a ``frame`` of the same rows as ``base``; the output itself where they differ.

    Parameters
    ----------
    output : dataclass with a field ``frame``, or None
    base : DataFrame
        Frame of the stage that the output builds on.
    """
    frame = getattr(output, "frame", None)
    if not isinstance(frame, pd.DataFrame) or not frame.index.equals(base.index):
        return output
    added = [name for name in frame if name not in base or not frame[name].equals(base[name])]
    return Extension(replace(output, frame=frame[added]), tuple(frame.columns))


def lengthened(kept: Any, base: pd.DataFrame) -> Any:
    """The whole output again, its frame as it was."""
    if not isinstance(kept, Extension):
        return kept
    added = kept.output.frame
    common = base[[name for name in kept.columns if name not in added]]
    return replace(kept.output, frame=pd.concat([common, added], axis=1)[list(kept.columns)])

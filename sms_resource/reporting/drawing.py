"""Draw the figures of a report, on two processors where there are two.

Drawing is what a report spends its time on. Half of the figures are drawn by a second interpreter that is given the data
in a file; whatever it does not deliver is drawn here, so that a report never depends on it. The pictures are the same
either way.
"""

from __future__ import annotations

import os
import pickle
import subprocess
import sys
import tempfile
from dataclasses import dataclass, replace
from pathlib import Path

from sms_resource.reporting.data import ReportData
from sms_resource.reporting.figures import MAKERS
from sms_resource.reporting.style import Drawing, borrowed_settings, save_drawing

# What the slow figures cost against the others, as measured; only the balance of the two halves rests on it.
WEIGHTS = {"strip logs": 8.0, "variograms": 7.0, "cross-sections": 3.0, "contact analysis": 3.0, "swaths": 2.0,
           "plan of grades": 2.0, "plan of holes": 2.0, "thickness plan": 2.0}  # fmt: skip


@dataclass(frozen=True)
class Drawn:
    """One figure on disk: its words and table, its PNG, and the paths written."""

    drawing: Drawing
    picture: bytes
    paths: list[Path]


def draw_all(data: ReportData, folder: Path) -> tuple[list[Drawn], list[str]]:
    """Draw and save every figure that the data allow.

    Parameters
    ----------
    data : ReportData
    folder : Path
        Where ``<key>.png``, ``<key>.svg`` and ``data/<key>.csv`` go.

    Returns
    -------
    drawn : list of Drawn
        In the order of the report.
    absent : list of str
        What could not be drawn for want of data.
    """
    theirs = second_half() if (os.cpu_count() or 1) > 1 else []
    with tempfile.TemporaryDirectory() as place:
        other = _start(data, folder, Path(place)) if theirs else None
        made = draw_some(data, folder, [n for n in range(len(MAKERS)) if n not in theirs])
        found = _collect(other, Path(place)) if other is not None else {}
    made.update(found)
    left = [number for number in range(len(MAKERS)) if number not in made]
    made.update(draw_some(data, folder, left))
    drawn = [item for number in range(len(MAKERS)) for item in made[number]]
    return drawn, [MAKERS[number][0] for number in range(len(MAKERS)) if not made[number]]


def second_half() -> list[int]:
    """Numbers of the makers that the second interpreter draws: heaviest first, each to the lighter half."""
    loads, theirs = [0.0, 1.0], []  # the second starts later
    order = sorted(range(len(MAKERS)), key=lambda number: -WEIGHTS.get(MAKERS[number][0], 1.0))
    for number in order:
        half = int(loads[1] < loads[0])
        loads[half] += WEIGHTS.get(MAKERS[number][0], 1.0)
        if half:
            theirs.append(number)
    return sorted(theirs)


def draw_some(data: ReportData, folder: Path, numbers: list[int]) -> dict[int, list[Drawn]]:
    """Figures of some makers, by the maker's number."""
    made: dict[int, list[Drawn]] = {}
    with borrowed_settings():
        for number in numbers:
            result = MAKERS[number][1](data)
            drawings = [] if result is None else [result] if isinstance(result, Drawing) else list(result)
            made[number] = []
            for drawing in drawings:
                assert drawing.figure is not None  # a maker always draws
                picture, paths = save_drawing(drawing, folder)
                size = (float(drawing.figure.get_figwidth()), float(drawing.figure.get_figheight()))
                words = replace(drawing, figure=None, size_in=size)
                made[number].append(Drawn(words, picture, paths))
    return made


def _start(data: ReportData, folder: Path, place: Path) -> subprocess.Popen[bytes] | None:
    try:
        with (place / "data").open("wb") as stream:
            pickle.dump((data, folder), stream, protocol=5)
        return subprocess.Popen(
            [sys.executable, "-m", "sms_resource.reporting.drawing", str(place)],
            stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
        )  # fmt: skip
    except (OSError, pickle.PicklingError, TypeError, AttributeError):
        return None  # no second interpreter: everything is drawn here


def _collect(other: subprocess.Popen[bytes], place: Path) -> dict[int, list[Drawn]]:
    try:
        if other.wait() != 0:
            return {}
        # The file was written by our own child into a folder that only we can read.
        return pickle.loads((place / "drawn").read_bytes())
    except (OSError, EOFError, pickle.UnpicklingError):
        return {}
    finally:
        if other.poll() is None:
            other.kill()


def main(place: Path) -> None:
    """Draw the second half of the figures (called in an interpreter of its own)."""
    data, folder = pickle.loads((place / "data").read_bytes())
    made = draw_some(data, folder, second_half())
    (place / "drawn").write_bytes(pickle.dumps(made, protocol=5))


if __name__ == "__main__":
    # Under its own name, so that what is pickled here is known there.
    from sms_resource.reporting import drawing as this

    this.main(Path(sys.argv[1]))

"""Draw the figures of a report: those that changed, on two processors where there are two.

Drawing is what a report spends its time on. A figure whose data are what they were is taken from where the last run kept
it. Of the others half are drawn by the second interpreter; whatever it does not deliver is drawn here. The pictures are the
same either way.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Protocol, cast

from sms_resource import second
from sms_resource.reporting.data import ReportData
from sms_resource.reporting.figures import MAKERS
from sms_resource.reporting.reading import Contents, Reading
from sms_resource.reporting.reading import Path as FieldPath
from sms_resource.reporting.style import Drawing, borrowed_settings, render

# What the slow figures cost against the others, as measured; only the balance of the two halves rests on it.
WEIGHTS = {"variograms": 5.0, "strip logs": 4.5, "cross-sections": 3.0, "plan of grades": 3.0, "swaths": 2.8,
           "top cuts": 2.3, "contact analysis": 2.0, "slope plan": 2.0, "duplicates": 1.7, "thickness plan": 1.6,
           "neighbourhood study": 1.6, "recovery": 1.4, "blanks": 1.1, "tracers with depth": 0.5,
           "surface against core": 0.5, "change of support": 0.4, "comparison of estimators": 0.3,
           "density": 0.3}  # fmt: skip
ALONE_UP_TO = 3.0  # less work than this is done before a second interpreter has started
RECIPES_KEPT = 4


class Store(Protocol):
    """Where figures are kept between runs."""

    def get(self, key: str, default: Any = None) -> Any:
        """What is kept under a key, or ``default``."""

    def put(self, key: str, value: Any) -> Any:
        """Keep something."""


@dataclass(frozen=True)
class Drawn:
    """One figure: its words and table, and the contents of its files."""

    drawing: Drawing
    picture: bytes
    vector: bytes
    table: bytes

    def paths(self, folder: Path) -> list[Path]:
        """Paths of PNG, SVG and table under ``folder``."""
        key = self.drawing.key
        return [folder / f"{key}.png", folder / f"{key}.svg", folder / "data" / f"{key}.csv"]

    def write(self, folder: Path) -> None:
        """Write the three files under ``folder``."""
        (folder / "data").mkdir(parents=True, exist_ok=True)
        for path, content in zip(self.paths(folder), (self.picture, self.vector, self.table)):
            path.write_bytes(content)


@dataclass(frozen=True)
class Made:
    """What one maker drew, and the fields of the data that it looked at."""

    drawn: tuple[Drawn, ...]
    read: tuple[FieldPath, ...]


def draw_all(
    data: ReportData, folder: Path, store: Store | None = None, code: str = ""
) -> tuple[list[Drawn], list[str]]:
    """Draw and save every figure that the data allow.

    Parameters
    ----------
    data : ReportData
    folder : Path
        Where ``<key>.png``, ``<key>.svg`` and ``data/<key>.csv`` go.
    store : Store, optional
        Where figures are kept; a figure whose data are unchanged is taken from there.
    code : str
        Names the code that draws; what other code has drawn is not taken.

    Returns
    -------
    drawn : list of Drawn
        In the order of the report.
    absent : list of str
        What could not be drawn for want of data.
    """
    kept = Kept(store, code, data)
    made = {number: found for number in range(len(MAKERS)) if (found := kept.find(MAKERS[number][0]))}
    left = [number for number in range(len(MAKERS)) if number not in made]
    fresh = draw_some(data, left) if light(left) else draw_in_two(data, left)
    kept.keep({MAKERS[number][0]: item for number, item in fresh.items()})
    made.update(fresh)
    drawn = [item for number in range(len(MAKERS)) for item in made[number].drawn]
    for item in drawn:
        item.write(folder)
    return drawn, [MAKERS[number][0] for number in range(len(MAKERS)) if not made[number].drawn]


class Kept:
    """Figures of runs before, found by what they were made from.

    For each maker the store holds recipes, lists of the fields that it looked at in some run. A maker reads its data in
    an order that depends on them alone, so where all fields of a recipe hold what they held then, it would look at
    nothing else and draw the same.
    """

    def __init__(self, store: Store | None, code: str, data: ReportData) -> None:
        self._store = store
        self._code = code
        self._contents = Contents(data)
        self._recipe_key = hashlib.sha256(f"recipes {code}".encode()).hexdigest()
        found = store.get(self._recipe_key) if store is not None else None
        self._recipes: dict[str, list[tuple[FieldPath, ...]]] = found if isinstance(found, dict) else {}

    def find(self, maker: str) -> Made | None:
        """What a maker drew from the same data before, if that is kept."""
        if self._store is None:
            return None
        for recipe in self._recipes.get(maker, []):
            key = self._key(maker, recipe)
            found = self._store.get(key) if key else None
            if isinstance(found, Made):
                return found
        return None

    def keep(self, fresh: dict[str, Made]) -> None:
        """Keep what makers drew, and the recipes."""
        if self._store is None or not fresh:
            return
        for maker, made in fresh.items():
            key = self._key(maker, made.read)
            if key is not None:
                self._store.put(key, made)
                others = [item for item in self._recipes.get(maker, []) if item != made.read]
                self._recipes[maker] = [made.read, *others][:RECIPES_KEPT]
        self._store.put(self._recipe_key, self._recipes)

    def _key(self, maker: str, recipe: tuple[FieldPath, ...]) -> str | None:
        digest = self._contents.digest(recipe)
        if digest is None:
            return None
        return hashlib.sha256(f"figure {self._code} {maker} {digest}".encode()).hexdigest()


def weight(number: int) -> float:
    """What a maker costs against the others."""
    return WEIGHTS.get(MAKERS[number][0], 1.0)


def light(numbers: list[int]) -> bool:
    """Whether a second interpreter would not be worth its start."""
    return second.processors() < 2 or sum(map(weight, numbers)) <= ALONE_UP_TO


def halves(numbers: list[int]) -> tuple[list[int], list[int]]:
    """Makers that are drawn here and by the second interpreter: heaviest first, each to the lighter half."""
    loads = [1.0, 0.0]  # the second has imported what it draws with
    parts: tuple[list[int], list[int]] = ([], [])
    for number in sorted(numbers, key=lambda number: -weight(number)):
        half = int(loads[1] < loads[0])
        loads[half] += weight(number)
        parts[half].append(number)
    return sorted(parts[0]), sorted(parts[1])


def draw_in_two(data: ReportData, numbers: list[int]) -> dict[int, Made]:
    """Figures of some makers, half of them by the second interpreter."""
    ours, theirs = halves(numbers)
    asked = second.ask(f"{__name__}:draw_some", data, theirs)
    made = draw_some(data, ours)
    made.update(second.answer(asked) or {})
    made.update(draw_some(data, [number for number in numbers if number not in made]))
    return made


def draw_some(data: ReportData, numbers: list[int]) -> dict[int, Made]:
    """Figures of some makers, by the maker's number."""
    made: dict[int, Made] = {}
    if not numbers:
        return made
    with borrowed_settings():
        for number in numbers:
            reading = Reading(data)
            result = MAKERS[number][1](cast(ReportData, reading))
            drawings = [] if result is None else [result] if isinstance(result, Drawing) else list(result)
            made[number] = Made(tuple(map(finished, drawings)), reading.paths_read)
    return made


def finished(drawing: Drawing) -> Drawn:
    """A figure as the contents of its files; the figure itself is let go."""
    assert drawing.figure is not None  # a maker always draws
    picture, vector, table = render(drawing)
    size = (float(drawing.figure.get_figwidth()), float(drawing.figure.get_figheight()))
    return Drawn(replace(drawing, figure=None, size_in=size), picture, vector, table)

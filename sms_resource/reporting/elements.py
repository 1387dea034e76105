"""The report as a tree of plain pieces, so that the web page and the printed pages say the same.

Text is plain everywhere; each writer escapes it for its own format.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import pandas as pd

from sms_resource.reporting.rounding import NO_VALUE, group_digits, significant_text
from sms_resource.reporting.style import Drawing, class_name
from sms_resource.units import ELEMENTS, column_element, element_label


@dataclass(frozen=True)
class Paragraph:
    """Running text. ``kind``: "text", "lead" (larger), "note" (small)."""

    text: str
    kind: str = "text"


@dataclass(frozen=True)
class Heading:
    """A heading inside a section."""

    text: str


@dataclass(frozen=True)
class Bullets:
    """A list of short sentences."""

    items: tuple[str, ...]


@dataclass(frozen=True)
class Facts:
    """Labels and values."""

    pairs: tuple[tuple[str, str], ...]


@dataclass(frozen=True)
class Table:
    """A table of finished texts. ``numeric`` marks the columns set to the right; ``strong`` rows that sum up."""

    title: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numeric: tuple[bool, ...]
    note: str = ""
    strong: tuple[int, ...] = ()
    key: str = ""


@dataclass(frozen=True)
class Picture:
    """A figure in its place."""

    drawing: Drawing


@dataclass(frozen=True)
class Caution:
    """One caution: what it says, and the figures that set it off; ``always`` marks those that need no trigger."""

    key: str
    title: str
    text: str
    figures: str
    always: bool = False


@dataclass(frozen=True)
class Slot:
    """Where the figures of given keys go once they are drawn; a trailing ``*`` takes all that begin so."""

    keys: tuple[str, ...]


Block = Slot | Paragraph | Heading | Bullets | Facts | Table | Picture | Caution


@dataclass(frozen=True)
class Section:
    """One part of the report."""

    key: str
    title: str
    blocks: tuple[Block, ...] = ()


@dataclass(frozen=True)
class Document:
    """The whole report: the first screen, then the sections."""

    title: str
    subtitle: str
    label: str
    summary: tuple[Block, ...]
    sections: tuple[Section, ...]
    facts: Mapping[str, str] = field(default_factory=dict)

    def drawings(self) -> list[Drawing]:
        """All figures in the order of the pages."""
        blocks = [*self.summary, *(block for section in self.sections for block in section.blocks)]
        return [block.drawing for block in blocks if isinstance(block, Picture)]


_SUFFIXES = (
    ("_dry_tonnes", "dry tonnes (t)"),
    ("dry_tonnes", "dry tonnes (t)"),
    ("wet_tonnes", "wet tonnes (t)"),
    ("_contained_t", "contained (t metal)"),
    ("_tpm3", "(t/m³)"),
    ("_m3", "(m³)"),
    ("_m2", "(m²)"),
    ("_pct", "(%)"),
    ("_gpt", "(g/t)"),
    ("_ppm", "(ppm)"),
    ("_deg", "(°)"),
    ("_m", "(m)"),
    ("_g", "(g)"),
    ("_seconds", "(s)"),
)
_WORDS = {
    "n": "count",
    "p_value": "p",
    "p_adjusted": "p, all tests together (Holm)",
    "spearman": "rank correlation",
    "dry_low": "dry, low (t/m³)",
    "dry_base": "dry, base (t/m³)",
    "dry_high": "dry, high (t/m³)",
    "wet_base": "wet, base (t/m³)",
    "wet_low": "wet, low (t/m³)",
    "wet_high": "wet, high (t/m³)",
    "seconds": "time (s)",
    "cv": "coefficient of variation",
    "hole_id": "hole",
    "sample_id": "sample",
    "cutoff": "cut-off (in the unit of what it is on)",
    "cutoff_variable": "cut-off on",
}
_CONTENT = {"t": "t", "kg": "kg", "oz": "troy oz"}
_ELEMENT = re.compile(r"\b[a-z][a-z0-9]*_(?:pct|gpt|ppm)\b")
_GIVEN = ("value", "key", "alternatives")  # texts of the study stay as the study has them
MASS_NOTE = (
    "Tonnes, volumes and contained metal to {} significant figures; the data files hold them unrounded."
)


def column_label(column: str) -> str:
    """A column name as a person reads it, with its unit: ``length_m`` becomes ``Length (m)``."""
    name = str(column)
    label = _WORDS.get(name) or _tonnes_label(name) or _content_label(name) or _element_phrase(name)
    if not label:
        label = name.replace("_", " ")
        for suffix, text in _SUFFIXES:
            if name.endswith(suffix):
                label = f"{name[: -len(suffix)].replace('_', ' ')} {text}".strip()
                break
    label = label.replace("cutoff", "cut-off")
    return label[:1].upper() + label[1:]


def _content_label(name: str) -> str:
    """``cu_t`` becomes ``Cu contained (t)``; empty where the column holds no metal."""
    element, _, unit = name.rpartition("_")
    if unit not in _CONTENT or element not in ELEMENTS:
        return ""
    return (
        f"{element_label(f'{element}_{ELEMENTS[element]}').rpartition(' (')[0]} contained ({_CONTENT[unit]})"
    )


def element_words(text: str) -> str:
    """Names of grade columns inside a text as people write them: ``au_gpt failed`` becomes ``Au (g/t) failed``."""
    return _ELEMENT.sub(lambda m: element_label(m[0]) if column_element(m[0]) else m[0], text)


def is_mass(column: str) -> bool:
    """Whether a column holds tonnes, volume or contained metal, whose size and not whose decimals is reported."""
    name = str(column)
    if name.endswith("_pct") or "_per_" in name:
        return False
    return "tonnes" in name or name.endswith(("_contained_t", "_m3", "_m2"))


def _tonnes_label(name: str) -> str:
    """``dry_tonnes_above_cutoff`` becomes ``dry tonnes above cutoff (t)``; empty where there are no tonnes."""
    if name.endswith("_pct"):
        return ""
    return f"{name.replace('_', ' ')} (t)" if "tonnes" in name else ""


def _element_phrase(name: str) -> str:
    """``cu_pct_above_cutoff`` becomes ``Cu (%) above cutoff``; empty where no element leads."""
    words = name.split("_")
    lead = "_".join(words[:2])
    if not column_element(lead):
        return ""
    return " ".join([element_label(lead).replace(" ", "\u00a0"), *words[2:]])


def number_text(value: Any, digits: int = 3) -> str:
    """A number for a working table: ``digits`` significant figures, whole numbers whole, NaN as a dash."""
    if value is None or (isinstance(value, float) and not math.isfinite(value)):
        return NO_VALUE
    number = float(value)
    if abs(number) < 1e-9 and digits <= 4:
        return "0"  # what is left of adding floats
    if number == int(number) and abs(number) < 1e15:
        return group_digits(f"{int(number)}")
    size = math.floor(math.log10(abs(number)))
    if size < -4:
        return f"{number:.{digits - 1}e}".replace("-", "−")
    return group_digits(f"{number:.{max(0, digits - 1 - size)}f}")


def cell_text(value: Any, digits: int = 3) -> str:
    """Any value of a frame as text; missing is a dash, metals are named as people name them."""
    if isinstance(value, bool) or type(value).__name__ == "bool":
        return "yes" if value else "no"
    if isinstance(value, str):
        return element_label(value).replace(" ", "\u00a0") if column_element(value) else value
    if isinstance(value, Sequence):
        return ", ".join(cell_text(item, digits) for item in value)
    if value is None or value is pd.NaT or value is pd.NA:
        return NO_VALUE
    if isinstance(value, (int, float)) or hasattr(value, "dtype"):
        return number_text(float(value), digits)
    return str(value)


def setting_text(value: Any) -> str:
    """A value that a person chose, as that person would write it: 0.6, not 0.600."""
    if isinstance(value, float) and math.isfinite(value):
        return group_digits(f"{value:.10g}")
    return cell_text(value, 4)


def frame_table(
    frame: pd.DataFrame,
    title: str,
    *,
    columns: Sequence[str] | None = None,
    labels: Mapping[str, str] | None = None,
    digits: int = 3,
    note: str = "",
    most: int = 60,
    key: str = "",
    mass_digits: int = 3,
) -> Table:
    """Turn a frame into a table of texts; beyond ``most`` rows the note says how many were left to the files.

    Tonnes, volumes and contained metal carry ``mass_digits`` significant figures: two where they are reported, three
    where a table shows what a step or a choice does and two would hide it.
    """
    chosen = [name for name in columns or frame.columns if name in frame.columns and name != "source_row"]
    names = {**{name: column_label(name) for name in chosen}, **(labels or {})}
    shown = frame[chosen].head(most)
    rows = tuple(
        tuple(_cell(name, value, digits, mass_digits) for name, value in zip(chosen, record))
        for record in shown.itertuples(index=False, name=None)
    )
    if len(frame) > most:
        note = f"{note} The first {most} of {len(frame)} rows; the data files hold all.".strip()
    if any(is_mass(name) and pd.api.types.is_numeric_dtype(shown[name]) for name in chosen):
        note = f"{note} {MASS_NOTE.format(mass_digits)}".strip()
    numeric = tuple(
        pd.api.types.is_numeric_dtype(shown[name]) and not pd.api.types.is_bool_dtype(shown[name])
        for name in chosen
    )
    return Table(title, tuple(names[name] for name in chosen), rows, numeric, note, key=key)


def _cell(column: str, value: Any, digits: int, mass_digits: int) -> str:
    if column.endswith(("p_value", "_p")) and isinstance(value, float) and value < 1e-4:
        return "< 0.0001"
    if is_mass(column) and isinstance(value, (int, float)) and abs(value) >= 1.0:
        return significant_text(float(value), mass_digits)
    text = class_name(value) if column == "proposed_class" else cell_text(value, digits)
    return element_words(text) if isinstance(value, str) and column not in _GIVEN else text


def plain_words(text: str) -> str:
    """Collapse white space, so that text from files cannot break a layout."""
    return re.sub(r"\s+", " ", str(text)).strip()


def facts_from(mapping: Mapping[str, Any] | None) -> Facts | None:
    """Labels and values from a mapping; None where it is empty."""
    if not mapping:
        return None
    return Facts(
        tuple((column_label(str(key)), plain_words(setting_text(value))) for key, value in mapping.items())
    )


def with_table(blocks: list[Block], frame: pd.DataFrame | None, title: str, **options: object) -> None:
    """Append a frame as a table, where it holds rows."""
    if frame is not None and len(frame):
        blocks.append(frame_table(frame, title, **options))  # type: ignore[arg-type]


def drop_empty_headings(blocks: list[Block]) -> list[Block]:
    """Headings stay only if something follows them."""
    return [
        b
        for n, b in enumerate(blocks)
        if not (isinstance(b, Heading) and (n + 1 == len(blocks) or isinstance(blocks[n + 1], Heading)))
    ]

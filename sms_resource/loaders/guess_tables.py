"""The role of a table, its columns and its units, from its headers and values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from difflib import SequenceMatcher
from pathlib import Path

import numpy as np
import pandas as pd

from sms_resource.loaders.dimensions import stated_unit, units_of
from sms_resource.loaders.guess_types import Confidence, Guess, GuessedFile
from sms_resource.loaders.headers import element_of_header
from sms_resource.loaders.parsing import parse_numbers
from sms_resource.loaders.reading import RawTable
from sms_resource.loaders.synonyms import DEPTH_WORDS, SYNONYMS, bare_name
from sms_resource.loaders.tables import GRADE_ROLES, SCHEMAS
from sms_resource.loaders.words import WORDS, plain_word
from sms_resource.units import ELEMENTS

CLOSE = 0.86  # likeness of two names that may be a slip of spelling
LONGEST_M = 300.0  # no hole into a seafloor deposit is longer; a depth of water is mostly more
_TELLING = {
    "collars": ("length_m", "ended_in", "position_sigma_m"),
    "surveys": ("azimuth", "dip"),
    "runs": ("recovered_length_m", "recovery_pct"),
    "lithology": ("code",),
    "densities": ("wet_density_tpm3", "dry_density_tpm3", "grain_density_tpm3", "wet_mass_g"),
    "surface_samples": ("sample_type",),
    "dredges": ("start_easting", "end_easting"),
    "laboratory": ("kind", "value", "expected"),
}
_FILE_WORDS = {
    "collars": ("collar",), "surveys": ("survey",), "runs": ("run", "recovery"), "lithology": ("lith", "geol"),
    "assays": ("assay",), "densities": ("densit",), "surface_samples": ("surface", "grab"), "dredges": ("dredge",),
    "laboratory": ("lab", "qc", "qaqc", "insert"), "base_points": ("base",),
}  # fmt: skip
# median grade of each element above which its column is taken for the finer unit
_COARSE: Mapping[str, tuple[str, float, str]] = {
    "pct": ("%", 100.0, "ppm"),
    "gpt": ("g/t", 100.0, "ppb"),
    "ppm": ("ppm", 0, "ppm"),
}


def guess_table(
    path: Path, raw: RawTable, sheet: str | None = None, layer: str | None = None
) -> GuessedFile | None:
    """The role that fits the table best; None where none does."""
    candidates = []
    for role in SYNONYMS:
        candidate = _as_role(path, raw, role)
        if candidate is not None:
            candidates.append(candidate)
    if not candidates:
        return None
    best = max(candidates, key=lambda item: item.score)
    form = list(best.form)
    if sheet is not None:
        form.append(Guess("sheet", sheet, "it is the sheet that holds the table", "sure"))
    if layer is not None:
        form.append(Guess("layer", layer, "it is the layer that holds the table", "sure"))
    if raw.form is not None:
        for key, value, default in (
            ("delimiter", raw.form.delimiter, ","),
            ("decimal", raw.form.decimal, "."),
            ("encoding", raw.form.encoding, "utf-8"),
        ):
            if value != default and not (key == "encoding" and value == "utf-8-sig"):
                form.append(Guess(key, value, "the text can be read that way and no other", "likely"))
    return replace(best, form=tuple(form))


def _as_role(path: Path, raw: RawTable, role: str) -> GuessedFile | None:
    columns = _columns(raw, role)
    grades = _grades(raw, role) if role in GRADE_ROLES else []
    found = {guess.key for guess in columns}
    if raw.points is not None:
        found |= {"easting", "northing"}
    needed = [column.name for column in SCHEMAS[role] if column.required]
    missing = tuple(name for name in needed if name not in found)
    telling = [name for name in _TELLING.get(role, ()) if name in found]
    if role in GRADE_ROLES and not grades and role != "surface_samples":
        return None
    if role in _TELLING and not telling and role not in ("collars", "surface_samples"):
        return None
    if len(missing) > 1 or (missing and len(needed) <= 2):
        return None
    if role == "laboratory" and missing:
        return None
    spare = [h for h in raw.headers if h and h not in {g.value for g in (*columns, *grades)}]
    if role == "base_points" and (
        spare or not any(word in path.stem.casefold() for word in _FILE_WORDS[role])
    ):
        return None
    named = any(word in path.stem.casefold() for word in _FILE_WORDS[role])
    words = _known_words(raw, role, columns)
    share = len(found & {c.name for c in SCHEMAS[role]}) / len(SCHEMAS[role])
    used = (len(columns) + len(grades)) / max(len([h for h in raw.headers if h]), 1)
    score = 2.0 * (1 - len(missing) / len(needed)) + share + used + 0.5 * len(telling) + 1.5 * named + words
    what = ", ".join([guess.value for guess in columns][:5])
    because = f"it has the columns {what}" + (f" and grades of {len(grades)} elements" if grades else "")
    because += ", and its name says so" if named else ""
    confidence: Confidence = "likely" if named and not missing else "doubtful" if missing else "likely"
    units = [guess for guess in (_unit(raw, g.key, g.value) for g in grades) if guess is not None]
    units += [guess for guess in map(_dimension, columns) if guess is not None]
    vertical = _vertical(raw, columns)
    return GuessedFile(
        path, "table", Guess("role", role, because, confidence), (*columns, *grades), tuple(units),
        (vertical,) if vertical else (), tuple(spare), missing, score=score,
    )  # fmt: skip


def _columns(raw: RawTable, role: str) -> list[Guess]:
    """Canonical columns and the headers that stand for them, the surest first; no header stands for two."""
    taken: dict[str, Guess] = {}
    free = {header: bare_name(header) for header in raw.headers if header}
    options: list[tuple[float, str, str]] = []
    for name, synonyms in SYNONYMS[role].items():
        for header, bare in free.items():
            if header == name:
                options.append((3.0, name, header))
            elif bare in synonyms:
                options.append((2.0 - 0.01 * synonyms.index(bare), name, header))
            elif len(bare) > 3:
                likeness = max(SequenceMatcher(None, bare, synonym).ratio() for synonym in synonyms)
                if likeness >= CLOSE:
                    options.append((likeness - 0.5, name, header))
    used: set[str] = set()
    for rank, name, header in sorted(options, key=lambda item: (-item[0], raw.headers.index(item[2]))):
        if name in taken or header in used:
            continue
        used.add(header)
        if rank >= 2.5:
            taken[name] = Guess(name, header, "the file uses the tool's own name", "sure")
        elif rank > 1.0:
            taken[name] = Guess(name, header, f"“{header}” is a usual name for it", "likely")
        else:
            taken[name] = Guess(name, header, f"“{header}” is like a usual name for it", "doubtful")
    length = taken.get("length_m")
    if role == "collars" and length is not None and bare_name(length.value) == "depth":
        # beside an elevation of its own, a depth of metres to tens of metres is where the hole ended
        values = parse_numbers(raw.column(length.value), decimal=raw.decimal).values
        short = bool(np.isfinite(values).any()) and 0 < float(np.nanmedian(values)) < LONGEST_M
        because = f"“{length.value}” stands beside an elevation, and its values are those of lengths of holes"
        if short:
            taken["length_m"] = Guess("length_m", length.value, because, "doubtful")
        else:
            del taken["length_m"]
    return [taken[column.name] for column in SCHEMAS[role] if column.name in taken]


def _grades(raw: RawTable, role: str) -> list[Guess]:
    out: dict[str, Guess] = {}
    for header in raw.headers:
        found = element_of_header(header)
        # "In" and "As" are words as well as elements: a bare one must hold numbers
        if found is None or found[0] in out or not _numeric(raw, header):
            continue
        stated = found[1] is not None
        why = "the header names the element and its unit" if stated else "the header names the element"
        out[found[0]] = Guess(found[0], header, why, "sure" if stated else "likely")
    return list(out.values())


def _numeric(raw: RawTable, header: str) -> bool:
    cells = raw.column(header).iloc[:200]
    parsed = parse_numbers(cells, decimal=raw.decimal, limits=True)
    return len(parsed.problems) <= 0.2 * len(cells)


def _unit(raw: RawTable, element: str, header: str) -> Guess | None:
    """Unit that the header states, else the one that the values suggest; None where they suggest none."""
    stated = (element_of_header(header) or (element, None))[1]
    if stated is not None:
        return Guess(element, "%" if stated == "pct" else stated, f"the header “{header}” says so", "sure")
    values = parse_numbers(raw.column(header), decimal=raw.decimal, limits=True).values
    values = values[np.isfinite(values)]
    if len(values) < 3:
        return None
    middle = float(np.median(values))
    unit, bound, finer = _COARSE[ELEMENTS[element]]
    chosen = finer if bound and middle > bound else unit
    return Guess(element, chosen, f"the header states none and the median is {middle:.3g}", "doubtful")


def _dimension(column: Guess) -> Guess | None:
    """Unit of a length or a density where the header states another than the tool's."""
    stated = stated_unit(column.value, column.key)
    if stated is None or units_of(column.key)[stated] == 1.0:
        return None
    return Guess(column.key, stated, f"the header “{column.value}” says so", "sure")


def _vertical(raw: RawTable, columns: list[Guess]) -> Guess | None:
    """Whether vertical positions are depths; None where they are elevations or there are none."""
    names = {"elevation", "start_elevation"}
    column = next((guess for guess in columns if guess.key in names), None)
    if column is None:
        return None
    values = parse_numbers(raw.column(column.value), decimal=raw.decimal, codes=np.array([-9999.0])).values
    if not np.isfinite(values).any():
        return None
    positive = float(np.nanmedian(values)) > 0
    says = any(word in bare_name(column.value) for word in DEPTH_WORDS)
    if not positive:
        return None
    why = f"the values of “{column.value}” are positive" + (" and its name says depth" if says else "")
    return Guess("vertical", "depth", why, "likely" if says else "doubtful")


def _known_words(raw: RawTable, role: str, columns: list[Guess]) -> float:
    """A bonus where a column that takes only certain words holds them, a malus where it does not."""
    total = 0.0
    for guess in columns:
        if (
            guess.key in WORDS
            and role in ("surface_samples", "laboratory")
            and guess.key in ("kind", "sample_type")
        ):
            cells = raw.column(guess.value).astype(object)
            texts = {plain_word(str(cell)) for cell in cells[~pd.isna(cells)]}
            known = sum(
                text in WORDS[guess.key] or text.replace(" ", "_") in WORDS[guess.key] for text in texts
            )
            total += 2.0 if texts and known > 0.5 * len(texts) else -2.0
    return total

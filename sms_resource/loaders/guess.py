"""What a handful of data files seems to be: for the command that writes a study file from them.

Nothing here is used by a run. Every guess carries its reason, and a person reads it before it counts.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path

from sms_resource.findings import Findings
from sms_resource.loaders.guess_space import guess_crs, guess_grid, guess_layers, is_raster
from sms_resource.loaders.guess_tables import guess_table
from sms_resource.loaders.guess_types import Guess, GuessedFile, GuessedStudy
from sms_resource.loaders.reading import VECTOR_ENDINGS, WORKBOOK_ENDINGS, read_table, readable
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.workbook import sheet_names
from sms_resource.units import ELEMENTS

__all__ = ["Guess", "GuessedFile", "GuessedStudy", "guess_study"]

ROLES = (
    "collars", "surveys", "runs", "lithology", "assays", "densities", "surface_samples", "dredges", "laboratory",
    "bathymetry", "outline", "exclusions", "chimneys", "class_overrides", "base_points", "base_grid",
)  # fmt: skip
TITLE_ROWS = (1, 2, 3, 4, 5)  # rows in which the names of the columns are looked for
_COMPANIONS = frozenset(
    {".dbf", ".shx", ".prj", ".cpg", ".xml", ".ovr", ".qix", ".sbn", ".sbx", ".qgz", ".qml"}
)
_NOT_DATA = frozenset({".toml", ".md", ".py", ".pdf", ".html", ".json", ".png", ".jpg", ".docx", ".zip"})


def guess_study(paths: Iterable[Path]) -> GuessedStudy:
    """Guess role, columns, units, vertical convention and coordinate system of data files.

    Parameters
    ----------
    paths : iterable of Path
        Files, or folders whose files are looked at (not those of folders inside).

    Returns
    -------
    GuessedStudy
        One file a role, the best where there are several; the rest under ``others`` with the reason. A file
        that cannot be read is among them and stops nothing.
    """
    candidates: list[GuessedFile] = []
    others: list[tuple[Path, str]] = []
    for path in _files(paths):
        if path.suffix.lower() in _NOT_DATA:
            others.append((path, "not looked at: it is no table, grid or layer"))
            continue
        found = _guess_file(path, others)
        candidates += found
    chosen = _choose(candidates, others)
    crs = guess_crs([file for file in candidates if file.kind != "table"])
    assays = chosen.get("assays")
    elements = tuple(e for e in ELEMENTS if assays and e in assays.column_map)
    ordered = tuple(chosen[role] for role in ROLES if role in chosen)
    return GuessedStudy(ordered, crs, elements, tuple(others))


def _files(paths: Iterable[Path]) -> list[Path]:
    out: list[Path] = []
    for path in paths:
        inside = sorted(path.iterdir()) if path.is_dir() else [path]
        out += [item for item in inside if not item.is_dir() and not item.name.startswith((".", "~"))]
    unique = list(dict.fromkeys(out))
    return [path for path in unique if path.suffix.lower() not in _COMPANIONS]


def _guess_file(path: Path, others: list[tuple[Path, str]]) -> list[GuessedFile]:
    findings = Findings()
    if not readable(path, path.name, findings):
        others.append((path, findings[0].message))
        return []
    if path.stat().st_size == 0:
        others.append((path, "The file has no content."))
        return []
    ending = path.suffix.lower()
    if is_raster(path):
        grid, why = guess_grid(path)
        if grid is None:
            others.append((path, why))
        return [grid] if grid else []
    found: list[GuessedFile] = []
    why = ""
    parts: list[tuple[str | None, str | None]]
    if ending in VECTOR_ENDINGS:
        found, tables, why = guess_layers(path)
        parts = [(None, layer) for layer in tables]
    elif ending in WORKBOOK_ENDINGS:
        parts = [(sheet, None) for sheet in sheet_names(path)]
    else:
        parts = [(None, None)]
    for sheet, layer in parts:
        guess, reason = _guess_part(path, sheet, layer)
        if guess is None:
            why = reason
        else:
            found.append(guess)
    if not found:
        others.append((path, why or "nothing in it fits a role"))
    return found


def _guess_part(path: Path, sheet: str | None, layer: str | None) -> tuple[GuessedFile | None, str]:
    """The role of one sheet, layer or text; its header may stand below a title."""
    why = ""
    for header_row in (1,) if layer or path.suffix.lower() in VECTOR_ENDINGS else TITLE_ROWS:
        raw, problems = read_table(TableSource(path, sheet=sheet, layer=layer, header_row=header_row))
        if raw is None or len(raw.rows) == 0:
            why = why or next((item.message for item in problems.errors), "the table has no rows")
            continue
        guess = guess_table(path, raw, sheet, layer)
        if guess is not None and header_row > 1:
            told = Guess(
                "header_row", str(header_row), "the names of the columns stand there, below a title", "likely"
            )
            guess = replace(guess, form=(*guess.form, told))
        if guess is not None:
            return guess, ""
        names = ", ".join(header for header in raw.headers if header)[:120]
        why = why or f"its columns ({names}) fit no role"
    return None, why


def _choose(candidates: list[GuessedFile], others: list[tuple[Path, str]]) -> dict[str, GuessedFile]:
    """The best file of each role; the rest is named."""
    chosen: dict[str, GuessedFile] = {}
    for file in sorted(candidates, key=lambda item: -item.score):
        role = file.role.value
        if role in chosen:
            other = chosen[role].path.name
            others.append(
                (file.path, f"it fits {role} too, but {other} fits better; exchange them if that is wrong")
            )
        else:
            chosen[role] = file
    return chosen

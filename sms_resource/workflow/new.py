"""Write a study file from data files: what was guessed stands beside its reason, what cannot be known stays open."""

from __future__ import annotations

import datetime
import json
import os
from collections import Counter
from dataclasses import dataclass
from pathlib import Path
from typing import Any

OPEN = "DECIDE"
DOUBT = "CHECK"


@dataclass(frozen=True)
class GuessLine:
    """One guess as the command prints it."""

    file: str
    what: str
    value: str
    because: str


@dataclass(frozen=True)
class NewStudy:
    """A study file that was written.

    Attributes
    ----------
    path : Path
    guesses : list of GuessLine
    open_questions : list of str
        What the person must decide; each is marked in the file.
    """

    path: Path
    guesses: list[GuessLine]
    open_questions: list[str]


def new_study(files: list[Path], out: Path) -> NewStudy:
    """Guess what data files are and write a commented study file.

    Parameters
    ----------
    files : list of Path
        Data files in any order, or folders of them.
    out : Path
        Study file to write; paths in it are relative to its folder.

    Returns
    -------
    NewStudy
    """
    from sms_resource.loaders.guess import guess_study

    guessed = guess_study(files)
    questions: list[str] = []
    lines = _head(guessed, out, questions)
    for file in guessed.files:
        lines += _file(file, out, questions, guessed.crs.value if guessed.crs else None)
    for path, why in guessed.others:
        lines.append(f"# Not used: {path.name}: {why}")
        questions.append(f"{path.name} is not used: {why}")
    lines += [""] if guessed.others else []
    lines += _decisions(guessed, questions)
    out.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return NewStudy(out, _lines(guessed), questions)


def quoted(value: Any) -> str:
    """A value as TOML writes it."""
    return json.dumps(value, ensure_ascii=False)


def bare(name: str) -> str:
    """A key as TOML writes it, quoted only where it must be."""
    plain = name.isascii() and name.replace("_", "").replace("-", "").isalnum()
    return name if plain and name else quoted(name)


def _head(guessed: Any, out: Path, questions: list[str]) -> list[str]:
    if guessed.crs is not None:
        crs = f"crs = {quoted(guessed.crs.value)}  # guessed because {guessed.crs.because}"
    else:
        crs = f'crs = ""  # {OPEN}: projected coordinate system in metres, such as "EPSG:32702"'
        questions.append("study.crs: no file states a projected coordinate system")
    questions.append("study.effective_date: the day on which the data were closed (today was written)")
    questions.append("study.jurisdiction: whether the deposit lies in the Area or in national waters")
    return [
        "# A study: every decision of one estimate. Lines marked CHECK were guessed with doubt, lines marked DECIDE are",
        "# open. A key that is left out takes its default; docs/study-file.md lists all keys, defaults and alternatives.",
        "",
        "[study]",
        f"name = {quoted(out.absolute().parent.name or 'study')}",
        f"effective_date = {datetime.date.today().isoformat()}  # {OPEN}: the day on which the data were closed",
        crs,
        'vertical_datum = "not stated"  # say which datum holes and grid share, and whether the tide was taken out',
        'jurisdiction = "area"  # DECIDE: "area" (International Seabed Authority) or "national"',
        "",
    ]


def _elsewhere(file: Any, stated: str, crs: str | None, questions: list[str]) -> list[str]:
    """What becomes of a file that is not in the study's coordinate system."""
    from sms_resource.loaders.coordinate_systems import parse_crs, same_crs

    own, study = parse_crs(stated), parse_crs(crs)
    if own is None or study is None or same_crs(own, study):
        return []
    if file.kind == "grid" and own.is_geographic:
        return [
            "# It is in degrees: a run resamples it into study.crs, and says so. Heights stay as they are."
        ]
    questions.append(f"data.{file.role.value}.reproject: {file.path.name} is in {stated}, the study in {crs}")
    return [
        f"# reproject = true  # {OPEN}: the file is not in study.crs, and a run refuses it without this line"
    ]


def _file(file: Any, out: Path, questions: list[str], crs: str | None) -> list[str]:
    role = file.role.value
    relative = Path(os.path.relpath(file.path.absolute(), out.absolute().parent)).as_posix()
    doubt = (
        f"  # {DOUBT}: {file.role.because}"
        if file.role.confidence == "doubtful"
        else f"  # {file.role.because}"
    )
    lines = [f"[data.{role}]{doubt}", f"file = {quoted(relative)}"]
    for guess in file.form:
        if guess.key == "crs_inside":
            lines.append(f"# The file states {guess.value}.")
            lines += _elsewhere(file, guess.value, crs, questions)
            continue
        value = int(guess.value) if guess.key in ("band", "uncertainty_band", "header_row") else guess.value
        lines.append(f"{guess.key} = {quoted(value)}  # {_reason(guess, role, questions)}")
    if file.kind != "table" and not {"crs", "crs_inside"} & set(file.form_map):
        lines.append(f'# crs = ""  # {OPEN}: the file does not say in which coordinate system it is')
        questions.append(f"data.{role}.crs: {file.path.name} does not say in which coordinate system it is")
    for title, guesses in (("columns", file.columns), ("units", file.units)):
        if not guesses:
            continue
        lines.append("")
        lines.append(f"[data.{role}.{title}]")
        for guess in guesses:
            lines.append(
                f"{bare(guess.key)} = {quoted(guess.value)}  # {_reason(guess, f'{role}.{title}', questions)}"
            )
    for name in file.missing:
        lines.append(f"# {OPEN}: no column was found for {name}, which {role} need")
        questions.append(f"data.{role}: no column was found for {name}")
    if file.unused:
        lines.append(f"# Columns without a meaning here: {', '.join(file.unused)}")
    return [*lines, ""]


def _reason(guess: Any, place: str, questions: list[str]) -> str:
    if guess.confidence == "doubtful":
        questions.append(f"data.{place}.{guess.key}: {guess.value} was guessed with doubt: {guess.because}")
        return f"{DOUBT}: guessed because {guess.because}"
    return f"guessed because {guess.because}"


def _decisions(guessed: Any, questions: list[str]) -> list[str]:
    roles = guessed.by_role()
    for role in ("collars", "assays", "bathymetry"):
        if role not in roles:
            questions.append(f"data.{role}: no such file was found among those given")
    if "surface_samples" in roles and not {"collars", "assays"} & set(roles):
        questions.append(
            "an estimate needs holes with assays: surface samples alone give no tonnes and no grade of a body"
        )
    known = [name for name in ("cu", "zn", "au", "ag") if name in guessed.elements]
    rest = [name for name in guessed.elements if name not in known]
    lines = [
        "[metals]",
        f"estimate = {quoted(known or list(guessed.elements))}",
        f"summarise = {quoted(rest)}",
        "",
    ]
    lines += _domains(roles.get("lithology"), questions)
    if "chimneys" in roles:
        lines += [
            "[chimneys]",
            f'source = "none"  # {OPEN}: "polygons" makes them a domain of their own, the first in domains.sulphide',
            "",
        ]
        questions.append("chimneys.source: whether the chimneys are a domain of their own")
    lines += [
        "[composites]",
        "length_m = 1.0",
        'lost_core = "unknown"  # the report brackets it with the other treatments',
        "",
        "[position]",
        'collars = "keep"  # "shift_median" or "snap" where the check finds collars off the seafloor',
        "",
        "[density]",
    ]
    if "densities" in roles:
        lines.append('method = "measured_mean"')
    else:
        lines.append(f'method = "assigned"  # {OPEN}: no densities were given')
        lines.append(
            f"assigned_dry_tpm3 = {{ }}  # {OPEN}: dry density of each domain, such as massive = 3.3"
        )
        questions.append("density.assigned_dry_tpm3: no measured densities were given")
    lines += ["", "[body]"]
    if "outline" in roles:
        lines.append('outline = "given"')
    else:
        lines.append(
            'outline = "proposed"  # no outline was given: one is proposed from the holes, for you to accept'
        )
    lines += [
        "extrapolate_below_m = 5.0  # how far the body may go on below a hole that ended in sulphide",
        "",
        "[blocks]",
        'vertical_frame = "depth"  # or "elevation", or "proportional"; block size and origin are proposed',
        "",
        "[cutoff]",
        f"variable = {quoted(known[0] if known else (guessed.elements or ['cu'])[0])}",
        f"at = 1.0  # {OPEN}: the cut-off and its basis",
        'basis = ""',
        "",
        "[prospects]",
        "judged = false  # true only with by = and basis =; until then tables are block-model tallies",
    ]
    questions.append("cutoff.at and cutoff.basis: what the cut-off rests on")
    return lines


def _domains(lithology: Any, questions: list[str]) -> list[str]:
    if lithology is None:
        questions.append("domains: without logged codes every sample counts as sulphide")
        return [
            "[domains]",
            'sulphide = ["massive"]  # no lithology was given: every depth counts as this domain',
            "",
        ]
    codes = _codes(lithology)
    said = ", ".join(f"{code} ({count})" for code, count in codes.most_common(40))
    questions.append(f"domains.codes: which of the logged codes are sulphide: {said}")
    pairs = ", ".join(f'{bare(code)} = "?"' for code in sorted(codes))
    return [
        "[domains]",
        f"# {OPEN}: the domain of each logged code, in place of the question marks (rows in brackets): {said}",
        f"codes = {{ {pairs} }}",
        'sulphide = ["massive"]  # domains of the body, from the seafloor down, such as ["cap", "massive", "stockwork"]',
        "",
    ]


def _codes(lithology: Any) -> Counter[str]:
    """Logged codes and how often each occurs."""
    from sms_resource.loaders.source import TableSource
    from sms_resource.loaders.table import load_table

    form = lithology.form_map
    keys = ("sheet", "layer", "delimiter", "decimal", "encoding")
    source = TableSource(
        path=lithology.path,
        columns=lithology.column_map,
        **{name: form[name] for name in keys if name in form},
    )
    frame, _ = load_table(source, "lithology", (), ())
    return Counter(str(code) for code in frame["code"] if str(code).strip())


def _lines(guessed: Any) -> list[GuessLine]:
    lines = []
    if guessed.crs is not None:
        lines.append(GuessLine("", "crs", guessed.crs.value, guessed.crs.because))
    for file in guessed.files:
        lines.append(GuessLine(file.path.name, "role", file.role.value, file.role.because))
        lines += [
            GuessLine(file.path.name, guess.key, guess.value, f"{guess.because} ({guess.confidence})")
            for guess in (*file.form, *file.columns, *file.units)
        ]
    return lines

"""Broken files, columns and cells, each with its error."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from tests.end_to_end.breaking import (
    after,
    both,
    cell,
    decide,
    drop,
    edit,
    one,
    raw,
    rename,
)

MUD = bytes(range(256)) * 8


def _workbook(folder: Path) -> None:
    pd.read_csv(folder / "runs.csv").to_excel(folder / "runs.xlsx", sheet_name="Core", index=False)


def _folder_for_file(folder: Path) -> None:
    (folder / "runs.csv").unlink()
    (folder / "runs.csv").mkdir()


FILES = [
    one("table of no bytes", raw("assays.csv", b""), "file-empty", "assays.csv"),
    one(
        "header without rows",
        raw("runs.csv", b"hole_id,from_m,to_m,recovery_pct\n"),
        "table-empty",
        "runs.csv",
    ),
    one("binary garbage", raw("runs.csv", MUD), "file-not-text", "runs.csv"),
    one(
        "text named .xlsx",
        both(raw("runs.xlsx", b"hole_id,from_m\n"), decide("data.runs.file", "runs.xlsx")),
        "file-unreadable",
        "runs.xlsx",
    ),
    one(
        "kind that is not known",
        both(raw("runs.doc", b"x"), decide("data.runs.file", "runs.doc")),
        "file-kind-unknown",
        "runs.doc",
    ),
    one(
        "folder in place of a file",
        after(_folder_for_file),
        "file-missing",
        "study.toml",
        "[data.runs]",
        "data.runs",
    ),
    one(
        "sheet that is not there",
        both(after(_workbook), decide("data.runs.file", "runs.xlsx"), decide("data.runs.sheet", "Cores")),
        "sheet-unknown",
        "runs.xlsx",
        None,
        None,
        "Core",
    ),
    one("wrong separator", decide("data.runs.delimiter", ";"), "delimiter-wrong", "runs.csv", 1),
    one("encoding that is none", decide("data.runs.encoding", "utf-99"), "encoding-unknown", "runs.csv"),
    one(
        "not in its encoding",
        both(cell("lithology", 4, "code", "Ä"), decide("data.lithology.encoding", "ascii")),
        "encoding-wrong",
        "lithology.csv",
        4,
    ),
    one("field too many", edit("runs.csv", 5, lambda line: line + ",9"), "row-ragged", "runs.csv", 5),
    one(
        "quotation mark left open",
        edit("lithology.csv", 6, lambda line: line.replace("MS", '"MS')),
        "quote-open",
        "lithology.csv",
        6,
    ),
]

COLUMNS = [
    one(
        "column missing",
        rename("collars", "easting", "estng"),
        "column-missing",
        "collars.csv",
        1,
        "easting",
        "estng",
    ),
    one(
        "mapped column missing",
        decide("data.collars.columns", {"easting": "UTM_E"}),
        "column-missing",
        "collars.csv",
        1,
        "UTM_E",
    ),
    one(
        "mapping of no column",
        decide("data.collars.columns", {"eastng": "easting"}),
        "mapping-unknown",
        "collars.csv",
        None,
        "eastng",
        "easting",
    ),
    one("element missing", drop("assays", "zn_pct"), "column-missing", "assays.csv", 1, "zn_pct"),
    one(
        "unit that is not known",
        decide("data.assays.units", {"au": "grains"}),
        "unit-unknown",
        "assays.csv",
        None,
        "au",
    ),
    one("unit not stated", rename("assays", "cu_pct", "Cu"), "unit-missing", "assays.csv", 1, "Cu"),
    one(
        "no density in the densities",
        both(drop("densities", "wet_density_tpm3"), drop("densities", "dry_density_tpm3")),
        "column-missing",
        "densities.csv",
        1,
        "wet_density_tpm3",
    ),
]

CELLS = [
    one(
        "word for a number",
        cell("assays", 5, "cu_pct", "high"),
        "not-a-number",
        "assays.csv",
        5,
        "cu_pct",
        "high",
    ),
    one("unit beside a number", cell("runs", 3, "to_m", "2 m"), "not-a-number", "runs.csv", 3, "to_m"),
    one("infinity", cell("assays", 5, "au_gpt", "inf"), "not-a-number", "assays.csv", 5, "au_gpt"),
    one(
        "thousands separator",
        cell("collars", 3, "easting", "500,024.5"),
        "not-a-number",
        "collars.csv",
        3,
        "easting",
    ),
    one(
        "error of a formula", cell("assays", 6, "zn_pct", "#REF!"), "formula-error", "assays.csv", 6, "zn_pct"
    ),
    one("nd", cell("assays", 7, "au_gpt", "nd"), "result-unclear", "assays.csv", 7, "au_gpt"),
    one(
        "below detection without limit",
        cell("assays", 7, "au_gpt", "<"),
        "detection-limit-missing",
        "assays.csv",
        7,
        "au_gpt",
    ),
    one("no hole named", cell("assays", 4, "hole_id", ""), "identifier-missing", "assays.csv", 4, "hole_id"),
    one(
        "end of a hole that is no word",
        cell("collars", 4, "ended_in", "purple"),
        "word-unknown",
        "collars.csv",
        4,
        "ended_in",
    ),
    one(
        "sample of no type",
        cell("surface_samples", 4, "sample_type", "box"),
        "word-unknown",
        "surface_samples.csv",
        4,
        "sample_type",
    ),
    one(
        "no unit in the laboratory", drop("laboratory", "unit"), "unit-missing", "laboratory.csv", 2, "value"
    ),
    one(
        "elevation in words",
        cell("surface_samples", 3, "elevation", "deep"),
        "not-a-number",
        "surface_samples.csv",
        3,
        "elevation",
    ),
]

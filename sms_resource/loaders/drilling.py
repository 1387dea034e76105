"""Tables of the holes: collars, surveys, runs, lithology, assays and densities."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sms_resource.findings import Findings
from sms_resource.loaders.places import counted, header_of, report_rows
from sms_resource.loaders.source import TableSource
from sms_resource.loaders.table import load_table
from sms_resource.loaders.tables import DrillData, empty_table

RECOVERY_AGREES_PCT = 1.5  # rounding of a recovered length to the centimetre on a short run stays within this


def load_drilling(
    collars: TableSource,
    surveys: TableSource | None = None,
    runs: TableSource | None = None,
    lithology: TableSource | None = None,
    assays: TableSource | None = None,
    densities: TableSource | None = None,
    *,
    elements: tuple[str, ...] = (),
    summarise: tuple[str, ...] = (),
) -> tuple[DrillData, Findings]:
    """Read the tables of the holes.

    Parameters
    ----------
    collars, surveys, runs, lithology, assays, densities : TableSource
        A table that is None is left empty.
    elements : tuple of str
        Elements that the assays must have.
    summarise : tuple of str
        Elements that are read where the assays have them.

    Returns
    -------
    drill : DrillData
    findings : Findings
        Of all tables; a table that cannot be read is empty.
    """
    findings = Findings()
    sources = {
        "collars": collars, "surveys": surveys, "runs": runs,
        "lithology": lithology, "assays": assays, "densities": densities,
    }  # fmt: skip
    tables: dict[str, pd.DataFrame] = {}
    for role, source in sources.items():
        if source is None:
            tables[role] = empty_table(role, (*elements, *summarise))
            continue
        frame, found = load_table(source, role, elements, summarise)
        findings.extend(found)
        if role == "collars":
            frame = to_elevation(frame, source, ("elevation",), findings)
        elif role == "runs":
            frame = _fill_recovery(frame, findings)
        elif role == "assays":
            frame = state_method(frame, findings)
        elif role == "densities":
            _some_density(frame, source, findings)
        tables[role] = frame
    return DrillData(**tables), findings


def to_elevation(
    frame: pd.DataFrame, source: TableSource, columns: tuple[str, ...], findings: Findings
) -> pd.DataFrame:
    """Turn depths into elevations, once, where the study says that the file has depths."""
    if source.vertical != "depth":
        return frame
    for column in columns:
        values = frame[column].to_numpy(dtype=np.float64)
        negative = values < 0
        if negative.any():
            report_rows(
                findings, "error", "elevation-sign", frame["source_row"].to_numpy()[negative],
[f"The study says depth, positive downwards, but the value is {value:g}." for value in values[negative]],
                'Write vertical = "elevation" if the file has elevations, or correct the value.',
                file=source.name, column=header_of(frame, column), most=5,
            )  # fmt: skip
        # a value of the wrong sign is reported once, and not turned into a second fault
        frame[column] = np.where(negative, values, -values + 0.0)
    return frame


def state_method(frame: pd.DataFrame, findings: Findings) -> pd.DataFrame:
    """Rows that do not say how they were measured count as laboratory results, with a warning."""
    silent = frame["method"] == ""
    if silent.any():
        findings.warning(
            "method-not-stated",
            f"{counted(int(silent.sum()), 'row')} without a word on how they were measured, taken as laboratory results.",
            'Add a column "method" (laboratory, handheld), or constants = { method = "laboratory" } in the study.',
            file=frame.attrs.get("file"),
            row=int(frame.loc[silent, "source_row"].iloc[0]),
            column=header_of(frame, "method"),
        )
        frame["method"] = frame["method"].mask(silent, "laboratory")
    return frame


def _fill_recovery(frame: pd.DataFrame, findings: Findings) -> pd.DataFrame:
    """Recovered length and recovery from each other; a finding where they disagree."""
    if len(frame) and frame[["recovery_pct", "recovered_length_m"]].isna().all().all():
        findings.error(
            "column-missing",
            "The runs have neither a recovered length nor a recovery.",
            'Map one with columns = { recovery_pct = "..." } or { recovered_length_m = "..." }.',
            file=frame.attrs.get("file"),
            row=1,
            column="recovery_pct",
        )
    length = (frame["to_m"] - frame["from_m"]).to_numpy(dtype=np.float64)
    recovered = frame["recovered_length_m"].to_numpy(dtype=np.float64)
    percent = frame["recovery_pct"].to_numpy(dtype=np.float64)
    good = length > 0
    implied = np.full(len(frame), np.nan)
    implied[good] = 100.0 * recovered[good] / length[good]
    wrong = np.abs(implied - percent) > np.maximum(RECOVERY_AGREES_PCT, 1.0 / np.where(good, length, np.nan))
    report_rows(
        findings, "warning", "recovery-disagrees", frame["source_row"].to_numpy()[wrong],
        [
            f"The recovered length is {a:.1f} % of the run, but the recovery is given as {b:.1f} %."
            for a, b in zip(implied[wrong], percent[wrong])
        ],
        "Correct one of them; the recovered length was followed.",
        file=frame.attrs.get("file"), column=header_of(frame, "recovery_pct"),
    )  # fmt: skip
    frame["recovery_pct"] = np.where(np.isfinite(implied), implied, percent)
    frame["recovered_length_m"] = np.where(np.isfinite(recovered), recovered, length * percent / 100.0)
    return frame


def _some_density(frame: pd.DataFrame, source: TableSource, findings: Findings) -> None:
    measured = ["wet_density_tpm3", "dry_density_tpm3", "grain_density_tpm3", "wet_mass_g", "dry_mass_g"]
    if len(frame) and frame[measured].isna().all().all():
        findings.error(
            "column-missing",
            "The table has no density: wet, dry or grain density, or wet and dry mass with dry volume.",
            'Map one with columns = { wet_density_tpm3 = "..." }.',
            file=source.name,
            row=source.header_row,
            column="wet_density_tpm3",
        )

"""A method statement in plain words, true of this run, to paste into a technical report."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from sms_resource.reporting.data import ReportData, has
from sms_resource.reporting.elements import cell_text, number_text, plain_words
from sms_resource.reporting.rounding import is_inferred, mass_text, significant_text
from sms_resource.reporting.style import class_name
from sms_resource.reporting.summaries import cuts_in_use
from sms_resource.reporting.tonnage import class_rows, rows_at_cutoff
from sms_resource.units import column_element, element_label

LOST_CORE = {
    "unknown": "Lost core is treated as unknown: a composite weighs the recovered length",
    "represented": "The recovered grade stands for the whole of each run, lost core included",
    "background": "Lost core takes a background grade",
    "neighbour_mean": "Lost core takes the mean of poorly recovered intervals nearby",
}


def method_statement(data: ReportData) -> list[tuple[str, str]]:
    """Titles and paragraphs; only what the data of this run say is said."""
    made = (
        ("Data", _data(data)),
        ("Core recovery and composites", _composites(data)),
        ("Extreme grades", _cuts(data)),
        ("Density", _density(data)),
        ("Body", _body(data)),
        ("Continuity", _continuity(data)),
        ("Estimation", _estimation(data)),
        ("Validation", _validation(data)),
        ("Proposed classes", _classes(data)),
        ("Result", _result(data)),
    )
    return [(title, plain_words(text)) for title, text in made if text]


def _count(number: int, one: str, many: str = "") -> str:
    return f"{number} {one if number == 1 else many or one + 's'}"


def _names(columns: tuple[str, ...] | list[str]) -> str:
    names = [element_label(c).rpartition(" (")[0] if column_element(c) else c for c in columns]
    return ", ".join(names[:-1]) + (" and " if len(names) > 1 else "") + names[-1] if names else "no metal"


def _data(data: ReportData) -> str:
    e = data.evidence
    if e.collars is None or not len(e.collars):
        return ""
    parts = [f"The estimate of {_names(data.subject.metals)} rests on {_count(len(e.collars), 'hole')}"]
    if has(e.collars, "length_m"):
        parts.append(f"with {number_text(float(e.collars['length_m'].sum()))} m of drilling")
    text = " ".join(parts) + "."
    if has(e.collars, "ended_in"):
        count = int((e.collars["ended_in"].astype(str) == "sulphide").sum())
        text += f" {_count(count, 'hole')} ended in sulphide and did not reach the base."
    if has(e.collars, "assumed_vertical"):
        text += (
            f" {_count(int(e.collars['assumed_vertical'].sum()), 'hole')} without survey were taken as"
            " vertical."
        )
    if e.collar_shift_m:
        text += f" All collars were shifted by {e.collar_shift_m:+.2f} m to meet the seafloor."
    if e.surface is not None and len(e.surface):
        use = e.surface_use.rstrip(". ") or "were kept out of the estimate"
        text += (
            f" {_count(len(e.surface), 'surface sample')}: they {use}."
            if not e.surface_use
            else (f" {_count(len(e.surface), 'surface sample')}: {use}.")
        )
    return (
        f"{text} Coordinates are in {data.subject.crs or 'a system that is not stated'}; vertical datum:"
        f" {data.subject.vertical_datum or 'not stated'}."
    )


def _composites(data: ReportData) -> str:
    e = data.evidence
    if e.composites is None or not len(e.composites):
        return ""
    text = ""
    if has(e.runs, "from_m", "to_m", "recovery_pct") and e.runs is not None:
        length = (e.runs["to_m"] - e.runs["from_m"]).to_numpy(float)
        known = e.runs["recovery_pct"].notna().to_numpy() & (length > 0)
        if known.any():
            mean = float(np.average(e.runs["recovery_pct"].to_numpy(float)[known], weights=length[known]))
            text = f"Mean core recovery, weighted by drilled length, is {mean:.0f} %. "
    treatment = LOST_CORE.get(e.lost_core_default, f"Lost core is treated as: {e.lost_core_default}")
    text += f"{treatment}. Samples were joined into {_count(len(e.composites), 'composite')}"
    if has(e.composites, "length_m"):
        text += f" with a median length of {number_text(float(e.composites['length_m'].median()))} m"
    if has(e.composites, "domain"):
        names = sorted(e.composites["domain"].astype(str).unique())
        text += (
            f", cut at the contacts of {'the domains' if len(names) > 1 else 'the domain'} {', '.join(names)}"
        )
    rule = e.composite_rule.rstrip(". ")
    return f"{text}. {rule}." if rule else text + "."


def _cuts(data: ReportData) -> str:
    cuts = cuts_in_use(data.evidence.top_cuts)
    if data.evidence.top_cuts is None:
        return ""
    if cuts is None:
        return "Top cuts were studied; none was applied."
    said = [
        f"{element_label(r['metal'])} in {r['domain']} at {number_text(r['cut'])}"
        f" ({int(r.get('n_cut', 0) or 0)} composites, {number_text(r.get('metal_removed_pct', float('nan')))}"
        " % of the metal)"
        for r in cuts.to_dict("records")
    ]
    return f"Grades were cut: {'; '.join(said)}."


def _density(data: ReportData) -> str:
    used = data.evidence.density_by_domain
    if used is None or not has(used, "domain", "dry_base"):
        return ""
    said = [
        f"{r['domain']} {number_text(r['dry_base'])} t/m³ dry"
        + (f" and {number_text(r['wet_base'])} t/m³ wet" if np.isfinite(r.get("wet_base", np.nan)) else "")
        + (f" ({r['basis']})" if r.get("basis") else "")
        for r in used.to_dict("records")
    ]
    return f"Bulk densities: {'; '.join(said)}. Grades are on dry mass, so metal is dry tonnes times grade."


def _body(data: ReportData) -> str:
    body = data.body
    if not body.volumes:
        return ""
    whole = float(body.volumes.get("volume_m3", float("nan")))
    beyond = float(body.volumes.get("sideways_m3", 0.0)) + float(body.volumes.get("downwards_m3", 0.0))
    text = (
        f"The body lies between the seafloor and its base, inside the outline. {body.method.rstrip('. ')}."
        if body.method
        else ""
    )
    text += (
        f" Its volume is estimated at {number_text(whole)} m³, of which {100 * beyond / whole:.0f} % is"
        " extrapolated."
    )
    if body.extrapolation:
        text += (
            " The greatest distance of extrapolation is"
            f" {number_text(body.extrapolation.get('greatest_distance_m'))} m."
        )
    return text


def _continuity(data: ReportData) -> str:
    if not data.variograms:
        return ""
    assumed = [r for r in data.variograms if r.assumed]
    text = (
        f"{_count(len(data.variograms), 'variogram')} {'was' if len(data.variograms) == 1 else 'were'}"
        " modelled, one for each metal and domain."
    )
    if assumed:
        named = "; ".join(f"{_names([r.metal])} in {r.domain}: {', '.join(r.assumed)}" for r in assumed)
        return f"{text} Assumed rather than inferred: {named}."
    return f"{text} Nothing in them was assumed beyond what the study fixes."


def _estimation(data: ReportData) -> str:
    settings, grid = data.estimation.settings, data.estimation.grid
    parts = []
    if grid is not None:
        size = " by ".join(f"{float(s):g}" for s in grid["size"])
        blocks = data.estimation.blocks
        many = f"{len(blocks)} " if blocks is not None else ""
        parts.append(
            f"Grades were estimated into {many}blocks of {size} m, turned by"
            f" {float(grid.get('azimuth', 0.0)):g}°."
        )
    if settings:
        parts.append(
            "Settings: " + "; ".join(f"{k.lower()}: {cell_text(v)}" for k, v in settings.items()) + "."
        )
    return " ".join(parts)


def _validation(data: ReportData) -> str:
    checks = data.estimation.checks
    parts = []
    if checks is not None and has(checks, "verdict"):
        counts = checks["verdict"].astype(str).value_counts().sort_index()
        parts.append(
            f"{len(checks)} checks were made: " + ", ".join(f"{n} {v}" for v, n in counts.items()) + "."
        )
    means = data.estimation.means
    if means is not None and has(means, "metal", "difference_pct"):
        rows = (
            means[means["domain"] == "all"]
            if "domain" in means and (means["domain"] == "all").any()
            else means
        )
        ranked = rows[rows["difference_pct"].notna()]
        if len(ranked):
            worst = ranked.iloc[int(ranked["difference_pct"].abs().to_numpy().argmax())]
            parts.append(
                "Block means differ from declustered composite means by at most"
                f" {abs(worst['difference_pct']):.1f} % ({_names([worst['metal']])})."
            )
    if data.estimation.leave_one_out is not None and len(data.estimation.leave_one_out):
        parts.append("Each composite was also estimated without its own hole.")
    return " ".join(parts)


def _classes(data: ReportData) -> str:
    rows = class_rows(rows_at_cutoff(data))
    if not len(rows):
        return ""
    names = ", ".join(class_name(name) for name in rows["proposed_class"])
    text = (
        f"Classes were proposed from the criteria of the study ({names}); they are for the Competent Person to "
        "decide. "
    )
    if data.prospects_judged:
        return f"{text}Reasonable prospects were judged by {(data.subject.prospects or {}).get('judged_by')}."
    return (
        f"{text}Reasonable prospects for eventual economic extraction were not judged, so the tonnes are a "
        "block-model tally."
    )


def _result(data: ReportData) -> str:
    rows = class_rows(rows_at_cutoff(data))
    said = []
    for row in rows.to_dict("records"):
        inferred = is_inferred(row["proposed_class"])
        figures = data.subject.inferred_figures if inferred else data.subject.significant_figures
        grades = ", ".join(
            f"{significant_text(float(row[m]), figures)} {element_label(m).rpartition(' (')[2].rstrip(')')}"
            f" {_names([m])}"
            for m in data.subject.metals
            if m in row and np.isfinite(row[m])
        )
        mass = mass_text(float(row["dry_tonnes"]), "dry", figures=figures, approximate=inferred)
        said.append(f"{class_name(row['proposed_class'])}: {mass} at {grades}")
    return f"At {data.cutoff_text} the estimate is, rounded: {'; '.join(said)}." if said else ""


def write_method(data: ReportData, path: Path) -> Path:
    """Write the statement as Markdown."""
    from sms_resource.reporting.markdown import escape_markdown

    lines = [
        "# Method statement",
        "",
        f"*{escape_markdown(plain_words(data.subject.title))}. Draft for a Competent Person.*",
        "",
    ]
    for title, text in method_statement(data):
        lines += [f"## {title}", "", escape_markdown(text), ""]
    path.write_text("\n".join(lines), encoding="utf-8", newline="\n")
    return path

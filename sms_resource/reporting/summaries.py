"""Long tables brought down to what a reader needs; the whole tables stay in the data files."""

from __future__ import annotations

from collections.abc import Sequence

import pandas as pd

from sms_resource.reporting.data import has
from sms_resource.reporting.elements import number_text
from sms_resource.units import ELEMENTS, element_column, element_label

ASPECTS = {
    "references": "reference materials that can be judged", "blanks": "blanks that can be judged",
    "duplicates": "duplicates", "checks": "results of a check laboratory",
}  # fmt: skip


def references_by_material(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Reference materials: count, mean, expected, bias and how many lie beyond 2 and 3 SD, by element and material."""
    if frame is None or not has(frame, "element", "material", "value", "expected"):
        return frame
    known = frame[frame["value"].notna()]
    if not len(known):
        return None
    spread = known["used_sd"] if "used_sd" in known else known.get("expected_sd")
    score = ((known["value"] - known["expected"]) / spread).abs() if spread is not None else None
    work = known.assign(
        beyond_2=(score > 2).astype(int) if score is not None else 0,
        beyond_3=(score > 3).astype(int) if score is not None else 0,
    )
    table = work.groupby(["element", "material"], sort=True).agg(
        n=("value", "size"),
        expected=("expected", "mean"),
        mean=("value", "mean"),
        beyond_2=("beyond_2", "sum"),
        beyond_3=("beyond_3", "sum"),
    )
    table["bias_pct"] = 100.0 * (table["mean"] / table["expected"] - 1.0)
    columns = ["element", "material", "n", "expected", "mean", "bias_pct", "beyond_2", "beyond_3"]
    names = {"beyond_2": "beyond 2 SD", "beyond_3": "beyond 3 SD"}
    return table.reset_index()[columns].rename(columns=names)


def blanks_by_element(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Blanks: count, greatest value, limit, and how many failed, by element."""
    if frame is None or not has(frame, "element", "value", "failed"):
        return frame
    table = frame.groupby("element", sort=True).agg(
        n=("value", "size"), greatest=("value", "max"), failed=("failed", "sum")
    )
    if "limit" in frame:
        table["limit"] = frame.groupby("element", sort=True)["limit"].max()
    return table.reset_index()


def cuts_in_use(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Rows of the top-cut study that carry a cut; None where no cut is in use."""
    if frame is None or not has(frame, "cut"):
        return None
    cut = frame[frame["cut"].notna()]
    wanted = [
        "domain",
        "metal",
        "n",
        "cut",
        "n_cut",
        "mean_before",
        "mean",
        "mean_after",
        "metal_removed_pct",
    ]
    columns = [c for c in (*wanted, "cv", "cv_cut", "reason") if c in cut]
    return cut[columns] if len(cut) else None


def cuts_shown(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Every metal and domain with what is proposed and what is in use, in words where there is none."""
    if frame is None or not has(frame, "metal", "domain", "cut"):
        return None
    proposed = frame["proposed"] if "proposed" in frame else pd.Series(float("nan"), index=frame.index)
    holes = frame["holes_cut"].map(_few_holes) if "holes_cut" in frame else ""
    columns = {
        "Domain": frame["domain"],
        "Metal": frame["metal"],
        "Proposed cut": [number_text(value, 4) if value == value else "none" for value in proposed],
        "Cut in use": [number_text(value, 4) if value == value else "none used" for value in frame["cut"]],
        "Effect shown of": frame.get("effect_of", "cut in use"),
        "Count": frame["n"],
        "Count cut": frame["n_cut"],
        "Mean before": frame.get("mean_before"),
        "Mean after": frame.get("mean_after"),
        "CV before": frame.get("cv_before"),
        "CV after": frame.get("cv_after"),
        "Metal removed (%)": frame["metal_removed_pct"],
        "Holes of the cut samples (count)": holes,
        "Reason for the proposal": frame.get("reason", ""),
    }
    shown = pd.DataFrame({name: values for name, values in columns.items() if values is not None})
    idle = [
        name
        for name, nothing in (("Effect shown of", "none"), ("Holes of the cut samples (count)", ""))
        if (shown[name] == nothing).all()
    ]
    return shown.drop(columns=idle)


def _few_holes(text: object, most: int = 6) -> str:
    """The first holes of a list, and how many more there are."""
    parts = [part for part in str(text or "").split(", ") if part]
    rest = f" and {len(parts) - most} more" if len(parts) > most else ""
    return ", ".join(parts[:most]) + rest


def named_elements(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Elements as people write them: ``cu`` becomes ``Cu``."""
    if frame is None or not has(frame, "element"):
        return frame
    return frame.assign(element=[str(name).capitalize() for name in frame["element"]])


def elements_with_unit(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Elements with the unit that their grades are in: ``cu`` becomes ``Cu (%)``; unknown ones by their name."""
    if frame is None or not has(frame, "element"):
        return frame
    known = {str(name).lower() for name in frame["element"]} & set(ELEMENTS)
    return frame.assign(
        element=[
            element_label(element_column(str(name))) if str(name).lower() in known else str(name).capitalize()
            for name in frame["element"]
        ]
    )


def batches_shown(frame: pd.DataFrame | None) -> tuple[pd.DataFrame | None, str]:
    """Batches of reference materials that are not good, and a sentence with the counts."""
    if frame is None or not has(frame, "element", "batch", "verdict"):
        return None, ""
    counts = frame["verdict"].astype(str).value_counts().sort_index()
    words = ", ".join(f"{count} {name}" for name, count in counts.items())
    text = f"Batches of reference materials, each element by itself: {words}; judged after allowing for all of them."
    bad = frame[frame["verdict"] != "good"]
    columns = [
        c for c in ("element", "batch", "n", "mean_z", "p_adjusted", "failures", "verdict") if c in bad
    ]
    shown = named_elements(bad[columns].rename(columns={"p_adjusted": "adjusted_p_value"}))
    return (shown if len(bad) else None), text


def rates_shown(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Inserts by kind and stage, a column an element: count, and share of the samples."""
    if frame is None or not has(frame, "kind", "stage", "element", "inserts", "share_pct"):
        return None
    rows = []
    for (kind, stage), part in frame.groupby(["kind", "stage"], sort=False):
        row = {"Inserts": f"{kind}, {stage}" if stage else str(kind)}
        for item in part.to_dict("records"):
            share = item["share_pct"]
            text = f"{int(item['inserts'])}" + (
                f" ({share:.1f} %)" if share == share and item["inserts"] else ""
            )
            row[str(item["element"]).capitalize()] = text
        rows.append(row)
    return pd.DataFrame(rows).fillna("0")


def verdicts_shown(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """Verdicts that rest on something; what was not inserted is told by `missing_checks`."""
    if frame is None or not has(frame, "element", "verdict"):
        return frame
    return named_elements(frame[frame["verdict"] != "missing"])


def missing_checks(frame: pd.DataFrame | None) -> tuple[str, ...]:
    """One sentence for each aspect of laboratory quality that some elements lack."""
    if frame is None or not has(frame, "element", "aspect", "verdict"):
        return ()
    said = []
    every = set(frame["element"])
    for aspect, part in frame[frame["verdict"] == "missing"].groupby("aspect", sort=False):
        name = ASPECTS.get(str(aspect), str(aspect))
        elements = [str(element).capitalize() for element in dict.fromkeys(part["element"])]
        text = f"No {name} for {'any element' if set(part['element']) == every else ', '.join(elements)}"
        known = [
            f"{str(e).capitalize()}: {f}"
            for e, f in zip(part["element"], part["figures"])
            if str(f or "").strip()
        ]
        said.append(text + (f" ({'; '.join(known)})" if known else "") + ".")
    return tuple(said)


def chosen_cells(frame: pd.DataFrame | None) -> pd.DataFrame | None:
    """The chosen cell size of each declustering, beside the plain mean of the smallest cells tried."""
    if frame is None or "chosen" not in frame:
        return frame
    chosen = frame[frame["chosen"].astype(bool)]
    return chosen.drop(columns="chosen") if len(chosen) else None


def associations_shown(frame: pd.DataFrame | None, metals: Sequence[str]) -> pd.DataFrame | None:
    """Correlations over all domains in which at least one of the study's metals stands, strongest first."""
    if frame is None or not has(frame, "metal_a", "metal_b", "spearman"):
        return frame
    rows = (
        frame[frame["domain"] == "all"] if "domain" in frame and (frame["domain"] == "all").any() else frame
    )
    rows = rows[rows["metal_a"].isin(metals) | rows["metal_b"].isin(metals)]
    order = rows["spearman"].abs().sort_values(ascending=False, kind="stable").index
    return rows.loc[order]


def checks_shown(frame: pd.DataFrame | None, most: int = 30) -> tuple[pd.DataFrame | None, str]:
    """Checks that did not pass (or all, where they are few), and a sentence with the counts."""
    if frame is None or not has(frame, "verdict"):
        return frame, ""
    counts = frame["verdict"].astype(str).value_counts().sort_index()
    words = f"{len(frame)} checks: " + ", ".join(f"{count} {name}" for name, count in counts.items()) + "."
    if len(frame) <= most:
        return frame, words
    left = frame[frame["verdict"].astype(str) != "pass"]
    return (left if len(left) else frame.head(most)), words + " The table shows those that did not pass."

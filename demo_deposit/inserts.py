"""What the laboratory was given to check it: reference materials, blanks, duplicates and a second laboratory."""

from __future__ import annotations

import numpy as np
import pandas as pd
from ground import METALS

BATCHES = tuple(f"B{number:02d}" for number in range(1, 9))
BAD_BATCH, BAD_METAL, BAD_FACTOR = "B05", "au_gpt", 0.84
RELATIVE_SD = 0.032  # standard deviation that the reference materials state
ACTUAL_SD = 0.55  # what a good batch scatters, in stated standard deviations
REFERENCES = {
    "RM-A": {"cu_pct": 2.10, "zn_pct": 1.35, "au_gpt": 0.85, "ag_gpt": 14.0},
    "RM-B": {"cu_pct": 6.80, "zn_pct": 7.90, "au_gpt": 4.60, "ag_gpt": 96.0},
}
DETECTION = {"cu_pct": 0.01, "zn_pct": 0.01, "au_gpt": 0.01, "ag_gpt": 0.5}
# Relative standard deviation of one determination, by stage of the duplicate: cu, zn, au, ag.
PAIR_SD = {"field": (0.07, 0.08, 0.11, 0.10), "pulp": (0.022, 0.025, 0.045, 0.04)}


def reference_results(rng: np.random.Generator, per_batch: int = 3) -> pd.DataFrame:
    """Results of the reference materials; one batch reads one metal low, the others are good."""
    rows = []
    for batch in BATCHES:
        for turn in range(per_batch):
            for material, expected in REFERENCES.items():
                for metal in METALS:
                    value = expected[metal] * (1 + rng.normal(0, ACTUAL_SD * RELATIVE_SD))
                    if (batch, metal) == (BAD_BATCH, BAD_METAL):
                        value *= BAD_FACTOR
                    rows.append({"kind": "reference", "batch": batch, "turn": turn, "material": material,
                                 "metal": metal, "value": value, "expected": expected[metal],
                                 "sd": expected[metal] * RELATIVE_SD})  # fmt: skip
    return pd.DataFrame(rows)


def blank_results(rng: np.random.Generator, per_batch: int = 3) -> pd.DataFrame:
    """Barren quartz: half below detection, the rest a little above."""
    rows = []
    for batch in BATCHES:
        for turn in range(per_batch):
            for metal in METALS:
                value = DETECTION[metal] * rng.lognormal(-0.1, 0.5)
                rows.append({"kind": "blank", "batch": batch, "turn": turn, "material": "quartz", "metal": metal,
                             "value": value})  # fmt: skip
    return pd.DataFrame(rows)


def pair_results(rng: np.random.Generator, assays: pd.DataFrame) -> pd.DataFrame:
    """Second determinations of samples: field and pulp duplicates, and pulps sent to a check laboratory."""
    rows = []
    for batch in BATCHES:
        inside = assays[(assays["batch"] == batch) & (assays["method"] == "laboratory")]
        chosen = inside.sample(14, random_state=int(rng.integers(2**31)))
        plan = [("duplicate", "field")] * 6 + [("duplicate", "pulp")] * 4 + [("check", "pulp")] * 4
        for turn, ((kind, stage), (_, row)) in enumerate(zip(plan, chosen.iterrows())):
            for metal, spread in zip(METALS, PAIR_SD[stage]):
                bias = 1.015 if kind == "check" and metal == "cu_pct" else 1.0
                if kind == "check" and (batch, metal) == (BAD_BATCH, BAD_METAL):
                    bias = 1 / BAD_FACTOR
                rows.append({"kind": kind, "batch": batch, "turn": turn, "original": row["sample"], "stage": stage,
                             "metal": metal, "first": row[metal],
                             "value": row[metal] * bias * (1 + rng.normal(0, spread))})  # fmt: skip
    return pd.DataFrame(rows)


def spoil(assays: pd.DataFrame) -> pd.DataFrame:
    """The samples of the bad batch read low too."""
    bad = (assays["batch"] == BAD_BATCH) & (assays["method"] == "laboratory")
    assays = assays.copy()
    assays.loc[bad, BAD_METAL] *= BAD_FACTOR
    return assays


def samples_before(blanks: pd.DataFrame, assays: pd.DataFrame) -> list[str]:
    """The sample that went through the laboratory before each blank: one with copper to carry over, of its batch."""
    rng = np.random.default_rng(17)  # of its own, so that no other number of the demo depends on it
    chosen: dict[tuple[str, int], str] = {}
    for batch, turn in dict.fromkeys(zip(blanks["batch"], blanks["turn"])):
        inside = assays[(assays["batch"] == batch) & (assays["method"] == "laboratory")]
        rich = inside[inside["cu_pct"] >= inside["cu_pct"].median()]
        chosen[batch, turn] = rich["sample"].iloc[int(rng.integers(len(rich)))]
    return [chosen[key] for key in zip(blanks["batch"], blanks["turn"])]


def laboratory(rng: np.random.Generator, assays: pd.DataFrame) -> pd.DataFrame:
    """All inserts in the order in which they went through the laboratory."""
    frame = pd.concat(
        [reference_results(rng), blank_results(rng), pair_results(rng, assays)], ignore_index=True
    )
    blank = frame["kind"] == "blank"
    frame.loc[blank, "original"] = samples_before(frame[blank], assays)
    order = {"reference": 0, "blank": 1, "duplicate": 2, "check": 3}
    frame["place"] = frame["turn"] * 10 + frame["kind"].map(order)
    frame = frame.sort_values(["batch", "place", "material", "metal"], kind="stable", ignore_index=True)
    key = frame["batch"] + frame["kind"] + frame["turn"].astype(str) + frame["material"].fillna("")
    frame["sequence"] = pd.factorize(key)[0] + 1
    frame["sample"] = [f"Q{number:04d}" for number in frame["sequence"]]
    return frame.drop(columns=["turn", "place"])

"""An invented mound with every part of a report filled, seeded; nothing in it is real."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from shapely.geometry import Point, Polygon

from sms_resource.findings import Findings
from sms_resource.reporting.data import (
    BodyEvidence,
    Classes,
    Estimation,
    Evidence,
    LaboratoryEvidence,
    ReportData,
    RunRecord,
    Subject,
    ValueEvidence,
    VariogramRecord,
)

METALS = ("cu_pct", "zn_pct", "au_gpt", "ag_gpt")
MEANS = {"cu_pct": 3.0, "zn_pct": 2.0, "au_gpt": 2.5, "ag_gpt": 40.0}
X0, Y0 = 500_000.0, 7_600_000.0


@dataclass(frozen=True)
class Grid:
    """A plain surface with what the figures ask for."""

    x: np.ndarray
    y: np.ndarray
    values: np.ndarray

    def sample(self, x, y):
        """Nearest value; good enough for a picture."""
        i = np.clip(
            np.round((np.asarray(x) - self.x[0]) / (self.x[1] - self.x[0])).astype(int), 0, self.x.size - 1
        )
        j = np.clip(
            np.round((np.asarray(y) - self.y[0]) / (self.y[1] - self.y[0])).astype(int), 0, self.y.size - 1
        )
        return self.values[j, i]


class Spherical:
    """A spherical model, isotropic in plan."""

    nugget, azimuth, plunge, tilt, total_sill, structures = 1.2, 30.0, 0.0, 0.0, 4.0, ()

    def variogram(self, separations):
        """Semivariance at separations (n, 3)."""
        h = np.sqrt((separations[:, :2] ** 2).sum(1) / 35.0**2 + separations[:, 2] ** 2 / 4.0**2)
        return np.where(h == 0, 0.0, 1.2 + 2.8 * np.where(h < 1, 1.5 * h - 0.5 * h**3, 1.0))


def _thickness(x, y):
    r2 = ((x - X0 - 200) / 90) ** 2 + ((y - Y0 - 160) / 65) ** 2
    return np.maximum(0.0, 16.0 * (1 - r2))


def _seafloor(x, y):
    return (
        -1620.0
        + 30.0 * np.exp(-(((x - X0 - 200) / 95) ** 2 + ((y - Y0 - 160) / 75) ** 2))
        + 0.03 * (x - X0)
        + np.sin(x / 7) * 0.3
    )


def full_report_data(*, cells: int = 4, name: str = "Example Mound", note: str = "") -> ReportData:
    """A report with all parts; ``note`` is put wherever text from a data file can land."""
    rng = np.random.default_rng(11)
    x, y = X0 + np.arange(0, 400, 2.0), Y0 + np.arange(0, 320, 2.0)
    gx, gy = np.meshgrid(x, y)
    top, thick = _seafloor(gx, gy), _thickness(gx, gy)
    inside = thick > 0
    base = np.where(inside, top - thick, np.nan)
    outline = Polygon(
        [(X0 + 200 + 90 * np.cos(t), Y0 + 160 + 65 * np.sin(t)) for t in np.linspace(0, 2 * np.pi, 60)]
    )

    count = 30
    angle, radius = rng.uniform(0, 2 * np.pi, count), np.sqrt(rng.uniform(0, 1, count)) * 0.95
    ex, ny = X0 + 200 + 88 * radius * np.cos(angle), Y0 + 160 + 62 * radius * np.sin(angle)
    holes = [f"H{n:03d}{note if n == 3 else ''}" for n in range(1, count + 1)]
    length = np.clip(np.round(_thickness(ex, ny) * rng.uniform(0.6, 1.15, count), 1), 2.0, 18.0)
    ended = np.where(length > _thickness(ex, ny), "host", "sulphide")
    ended[4] = "lost"
    dz = rng.normal(0.8, 0.35, count)
    dz[7] = 3.9
    collars = pd.DataFrame(
        {
            "hole_id": holes,
            "easting": ex,
            "northing": ny,
            "elevation": _seafloor(ex, ny),
            "length_m": length,
            "ended_in": ended,
            "position_method": "LBL",
            "position_sigma_m": 1.5,
            "original_elevation": _seafloor(ex, ny) + dz,
            "dz_m": dz,
            "flagged": np.abs(dz) > 2,
            "assumed_vertical": np.arange(count) % 3 > 0,
        }
    )
    sticks, runs, rocks, composites = [], [], [], []
    for n, hole in enumerate(holes):
        z0 = _seafloor(ex[n], ny[n])
        rocks.append((hole, 0.0, min(3.0, length[n]), f"CHM{note}"))
        if length[n] > 3:
            rocks.append((hole, 3.0, length[n], "MSC"))
        for a in np.arange(0, length[n], 1.0):
            b = min(a + 1.0, length[n])
            recovery = float(np.clip(rng.normal(50, 30), 0, 100)) if rng.uniform() > 0.15 else 0.0
            grades = {
                m: float(rng.lognormal(np.log(MEANS[m]) - 0.3, 0.75)) if recovery > 0 else np.nan
                for m in METALS
            }
            domain = "cap" if a < 3 else "massive"
            sticks.append(
                {
                    "hole_id": hole,
                    "from_m": a,
                    "to_m": b,
                    "recovery_pct": recovery,
                    "domain": domain,
                    **grades,
                    "x_from": ex[n],
                    "y_from": ny[n],
                    "z_from": z0 - a,
                    "x_to": ex[n],
                    "y_to": ny[n],
                    "z_to": z0 - b,
                }
            )
            runs.append(
                {
                    "hole_id": hole,
                    "from_m": a,
                    "to_m": b,
                    "recovered_length_m": recovery / 100 * (b - a),
                    "recovery_pct": recovery,
                }
            )
            if recovery > 0:
                composites.append(
                    {
                        "composite_id": f"{hole}-{a:g}",
                        "hole_id": hole,
                        "from_m": a,
                        "to_m": b,
                        "length_m": b - a,
                        "recovered_length_m": recovery / 100,
                        "recovery_pct": recovery,
                        "domain": domain,
                        "easting": ex[n],
                        "northing": ny[n],
                        "elevation": z0 - a - 0.5,
                        **grades,
                        "mo_ppm": 40.0 + 3.0 * a,
                        "weight": rng.uniform(0.5, 1.5),
                    }
                )
    sticks_frame, composites_frame = pd.DataFrame(sticks), pd.DataFrame(composites)

    surface = pd.DataFrame(
        {
            "sample_id": [f"S{n}" for n in range(25)],
            "sample_type": "grab",
            "easting": X0 + 200 + rng.normal(0, 50, 25),
            "northing": Y0 + 160 + rng.normal(0, 40, 25),
            "elevation": -1600.0,
            **{m: MEANS[m] * rng.lognormal(0.6, 0.5, 25) for m in METALS},
        }
    )
    blocks = _blocks(rng, cells)
    domains = ["cap", "massive"]
    evidence = Evidence(
        collars=collars,
        collar_shift_m=-0.82,
        sticks=sticks_frame,
        runs=pd.DataFrame(runs),
        lithology=pd.DataFrame(rocks, columns=["hole_id", "from_m", "to_m", "code"]),
        composites=composites_frame,
        composite_audit=pd.DataFrame(
            {"step": ["assayed length", "in composites"], "length_m": [210.0, 205.5]}
        ),
        surface=surface,
        dredges=pd.DataFrame(
            {
                "dredge_id": ["D1"],
                "start_easting": [X0 + 90],
                "start_northing": [Y0 + 60],
                "end_easting": [X0 + 300],
                "end_northing": [Y0 + 110],
            }
        ),
        surface_bias=pd.DataFrame(
            {
                "metal": METALS,
                "n": 25,
                "surface_mean": [4.1, 12.0, 6.0, 160.0],
                "nearest_core_mean": [3.1, 2.0, 2.4, 41.0],
                "top_metre_mean": [3.4, 4.0, 3.0, 70.0],
                "ratio": [1.32, 6.0, 2.5, 3.9],
                "ratio_low": [1.05, 3.9, 1.7, 2.6],
                "ratio_high": [1.7, 8.8, 3.6, 5.7],
            }
        ),
        recovery_bias=pd.DataFrame(
            [
                {
                    "domain": d,
                    "metal": m,
                    "n": 90,
                    "spearman": 0.31,
                    "p_value": 0.0004,
                    "p_adjusted": 0.004,
                    "verdict": "grade rises with recovery",
                }
                for d in domains
                for m in METALS
            ]
        ),
        lost_core=pd.DataFrame(
            [
                {
                    "treatment": t,
                    "domain": "all",
                    "n": 180,
                    **{m: MEANS[m] * f for m in METALS},
                    "dry_tonnes": 4.1e5 * f,
                }
                for t, f in (
                    ("represented", 1.12),
                    ("unknown", 1.0),
                    ("neighbour_mean", 0.93),
                    ("background", 0.55),
                )
            ]
        ),
        densities=pd.DataFrame(
            {
                "hole_id": "H001",
                "domain": ["massive"] * 9 + ["cap"] * 4,
                "dry_density_tpm3": rng.normal(3.2, 0.25, 13),
                "wet_density_tpm3": rng.normal(3.5, 0.2, 13),
            }
        ),
        density_by_domain=pd.DataFrame(
            {
                "domain": ["massive", "cap"],
                "dry_low": [3.0, 1.9],
                "dry_base": [3.25, 2.2],
                "dry_high": [3.5, 2.5],
                "wet_base": [3.48, 2.6],
                "n": [9, 4],
                "basis": ["mean of measurements", f"few measurements {note}"],
            }
        ),
        top_cuts=pd.DataFrame(
            {
                "domain": ["massive", "massive"],
                "metal": ["au_gpt", "ag_gpt"],
                "cut": [9.0, 150.0],
                "n": [150, 150],
                "n_cut": [3, 4],
                "mean_before": [2.6, 41.0],
                "mean_after": [2.5, 39.6],
                "metal_removed_pct": [3.8, 3.4],
                "proposed": [np.nan, 160.0],
                "effect_of": "cut in use",
                "cv_before": [0.9, 0.8],
                "cv_after": [0.7, 0.7],
                "holes_cut": ["H01 (2), H02 (1)", "H03 (4)"],
                "reason": "break in the log-probability plot",
            }
        ),
        top_cut_curves=_curves(domains),
        weighting="recovered length",
        positions=pd.DataFrame(
            {
                "table": ["collars"],
                "method": ["USBL"],
                "positions": [40],
                "with_sigma": [40],
                "sigma_median_m": [4.0],
            }
        ),
        hole_ends=pd.DataFrame(
            {"ended_in": ["sulphide", "host", "lost"], "holes": [10, 28, 2], "share_pct": [25.0, 70.0, 5.0]}
        ),
        collar_match=pd.DataFrame({"quantity": ["median_m"], "before": [0.82], "after": [0.0]}),
        twin_pairs=pd.DataFrame({"hole_a": ["H01"], "hole_b": ["H02"], "distance_m": [1.5], "dz_m": [0.1]}),
        twin_clusters=pd.DataFrame({"site": [1], "holes": [2], "hole_ids": ["H01, H02"], "spread_m": [0.75]}),
        twins=pd.DataFrame(
            {
                "hole_a": "H01",
                "hole_b": "H02",
                "metal": METALS,
                "shared_m": 9.0,
                "mean_a": [3.0, 2.0, 2.5, 40.0],
                "mean_b": [3.3, 1.9, 2.1, 44.0],
                "relative_pct": [-9.5, 5.1, 17.4, -9.5],
            }
        ),
        dredge_tracks=pd.DataFrame(
            {"dredge_id": ["D1"], "length_m": [216.0], "azimuth": [77.0], "half_length_m": [108.0]}
        ),
        assay_summary=pd.DataFrame(
            {"element": ["cu", "au"], "below_detection": [0, 4], "over_limit": [1, 0]}
        ),
        declustering_scan=pd.DataFrame(
            {"cell_size_m": [10.0, 20.0, 30.0], "metal": "cu_pct", "mean": [3.1, 2.9, 2.95]}
        ),
        contact_analysis=pd.DataFrame(
            [
                {
                    "contact": "cap | massive",
                    "metal": m,
                    "distance_m": x,
                    "n": 20,
                    "mean": MEANS[m] * (1.3 - 0.1 * x),
                }
                for m in METALS
                for x in (-2.5, -1.5, -0.5, 0.5, 1.5, 2.5)
            ]
        ),
        statistics=pd.DataFrame(
            {
                "metal": METALS,
                "domain": "massive",
                "n": 150,
                "mean": [3.0, 2.0, 2.5, 40.0],
                "cv": [0.7, 0.8, 0.75, 0.8],
            }
        ),
        laboratory=_laboratory(rng),
    )
    body = BodyEvidence(
        seafloor=Grid(x, y, top),
        slope=Grid(x, y, np.degrees(np.arctan(np.hypot(*np.gradient(top, 2.0))))),
        roughness=Grid(x, y, 0.1 + 0.05 * np.sin(gx / 9.0) ** 2),
        footprint_m=8.0,
        slope_classes=pd.DataFrame(
            {
                "slope": ["0 to 10°", "over 30°"],
                "area_m2": [9000.0, 400.0],
                "dry_tonnes": [4.4e5, 2e4],
                "wet_tonnes": [4.7e5, 2.2e4],
                "share_pct": [95.7, 4.3],
            }
        ),
        base=Grid(x, y, base),
        thickness=Grid(x, y, np.where(inside, thick, np.nan)),
        thickness_sigma=Grid(x, y, np.where(inside, 1 + 0.1 * thick, np.nan)),
        outline=outline,
        exclusions=_zones(note),
        volumes={
            "volume_m3": 147_000.0,
            "drilled_m3": 110_000.0,
            "sideways_m3": 25_000.0,
            "downwards_m3": 12_000.0,
        },
        extrapolation={
            "greatest_distance_m": 28.0,
            "basis": "half the spacing beyond the last hole",
            "share_pct": 25.2,
        },
        contacts=pd.DataFrame(
            {
                "hole_id": holes,
                "easting": ex,
                "northing": ny,
                "thickness_m": length,
                "kind": np.where(ended == "host", "reached", "open"),
            }
        ),
        geometry_uncertainty=pd.DataFrame(
            {
                "case": [
                    "base up one sigma",
                    "base down one sigma",
                    "seafloor down one sigma",
                    "outline in 5 m",
                    "outline out 5 m",
                ],
                "volume_m3": [1.3e5, 1.6e5, 1.42e5, 1.35e5, 1.58e5],
                "dry_tonnes": [4.1e5, 5.1e5, 4.5e5, 4.3e5, 5.0e5],
                "change_pct": [-11.0, 10.4, -3.2, -7.1, 7.5],
            }
        ),
        grid_proposal=pd.DataFrame(
            {"what": ["block size"], "proposed": ["10 x 10 x 2 m"], "reason": ["a third of the spacing"]}
        ),
        method="thickness kriged from contacts, zero at the outline",
        waterfall=pd.DataFrame(
            {
                "step": [
                    "body",
                    "slope over 30 degrees",
                    "active vent and buffer",
                    "thinner than 2 m",
                    "what remains",
                ],
                "dry_tonnes": [4.6e5, -3.1e4, -4.2e4, -8e3, 3.79e5],
                "kind": ["total", "taken", "taken", "taken", "total"],
            }
        ),
        sigma_seafloor_m=0.3,
    )
    return ReportData(
        subject=Subject(
            title=f"{name}: estimate",
            deposit=f"{name}{note}",
            author="A. Geologist",
            competent_person="",
            effective_date="2024-05-01",
            reporting_standard="CRIRSCO International Reporting Template (2019)",
            jurisdiction="area",
            crs="EPSG:32702",
            vertical_datum="mean sea level",
            metals=METALS,
            deleterious=("as_ppm", "pb_pct"),
            cutoff={
                "variable": "cu_pct",
                "value": 1.0,
                "basis": "assumed for the example",
                "currency": "USD",
                "date": "2024-05-01",
            },
        ),
        evidence=evidence,
        body=body,
        variograms=_variograms(rng),
        estimation=_estimation(rng, blocks, composites_frame, domains),
        classes=Classes(
            criteria={"indicated_within_m": 25.0, "indicated_holes": 3},
            reasons=pd.DataFrame(
                {
                    "proposed_class": ["Inferred", "Inferred"],
                    "reason": ["fewer than 3 holes in reach", f"mean recovery under 60 % {note}"],
                    "blocks": [500, 900],
                    "dry_tonnes": [1.1e5, 2e5],
                }
            ),
            before_after=pd.DataFrame(
                {
                    "proposed_class": ["Indicated", "Inferred"],
                    "before_dry_tonnes": [2.1e5, 2.5e5],
                    "after_dry_tonnes": [1.9e5, 2.7e5],
                }
            ),
            flags=(
                "Inferred is richer than Indicated in Zn: extrapolated tonnage lies in the best material.",
            ),
        ),
        value=_value(blocks),
        record=_record(note),
    )


def _blocks(rng, cells):
    size = 40.0 / cells
    ni, nj, nk = int(200 / size), int(150 / size), 20
    i, j, k = (a.ravel() for a in np.meshgrid(np.arange(ni), np.arange(nj), np.arange(nk), indexing="ij"))
    e, n, z = X0 + 100 + (i + 0.5) * size, Y0 + 85 + (j + 0.5) * size, -1630 + (k + 0.5) * 2.0
    top, thick = _seafloor(e, n), _thickness(e, n)
    inside = (z < top) & (z > top - thick)
    frame = pd.DataFrame({"i": i, "j": j, "k": k, "easting": e, "northing": n, "elevation": z})[
        inside
    ].reset_index(drop=True)
    frame["volume_m3"] = size * size * 2.0
    frame["body_fraction"] = 1.0
    frame["domain"] = np.where(top[inside] - frame["elevation"] < 3, "cap", "massive")
    frame["dry_density_tpm3"] = np.where(frame["domain"] == "cap", 2.2, 3.25)
    frame["dry_tonnes"] = frame["volume_m3"] * frame["dry_density_tpm3"]
    frame["wet_tonnes"] = frame["dry_tonnes"] * 1.08
    wave = 1 + 0.5 * np.sin(frame["easting"] / 25) * np.cos(frame["northing"] / 30)
    for m in METALS:
        frame[m] = MEANS[m] * wave * rng.lognormal(0, 0.12, len(frame))
    r = np.hypot(frame["easting"] - X0 - 200, frame["northing"] - Y0 - 160)
    frame["proposed_class"] = np.where(r < 45, "Indicated", np.where(r < 80, "Inferred", "unclassified"))
    frame["extrapolation"] = np.where(
        r < 60, "drilled", np.where(top[inside] - frame["elevation"] > 10, "downwards", "sideways")
    )
    frame["nearest_distance_m"] = r / 4
    return frame


def _zones(note):
    import geopandas as gpd

    return gpd.GeoDataFrame(
        {
            "name": [f"vent {note}", "reference zone"],
            "status": ["active_vent", "set_aside"],
            "buffer_m": [15.0, 0.0],
        },
        geometry=[
            Point(X0 + 150, Y0 + 200),
            Polygon([(X0 + 240, Y0 + 90), (X0 + 290, Y0 + 90), (X0 + 290, Y0 + 130), (X0 + 240, Y0 + 130)]),
        ],
        crs="EPSG:32702",
    )


def _laboratory(rng):
    rows, pairs = [], []
    for sequence in range(60):
        for element, unit in (("cu", 3.0), ("zn", 2.0), ("au", 2.5), ("ag", 40.0)):
            shift = 3.3 if 30 <= sequence < 34 and element == "cu" else 0.0
            rows.append(
                {
                    "kind": "reference",
                    "batch": f"B{sequence // 15}",
                    "sequence": sequence,
                    "sample_id": f"R{sequence}",
                    "original_sample_id": "",
                    "material": f"RM-{sequence % 2}",
                    "stage": "",
                    "element": element,
                    "value": unit + unit * 0.03 * (rng.normal() + shift),
                    "value_status": 0,
                    "value_limit": np.nan,
                    "expected": unit,
                    "expected_sd": unit * 0.03,
                }
            )
            rows.append(
                {
                    "kind": "blank",
                    "batch": f"B{sequence // 15}",
                    "sequence": sequence,
                    "sample_id": f"B{sequence}",
                    "original_sample_id": "",
                    "material": "blank",
                    "stage": "",
                    "element": element,
                    "value": abs(rng.normal(0, unit * 0.004)) if sequence % 3 else np.nan,
                    "value_status": 0,
                    "value_limit": unit * 0.01,
                    "expected": np.nan,
                    "expected_sd": np.nan,
                }
            )
            a = unit * rng.lognormal(0, 0.6)
            pairs.append(
                {
                    "stage": "coarse" if sequence % 2 else "pulp",
                    "element": element,
                    "original": a,
                    "repeat": a * rng.lognormal(0, 0.08),
                }
            )
    verdicts = pd.DataFrame(
        [
            {"element": e, "aspect": a, "verdict": v, "figures": f}
            for e, a, v, f in (
                ("cu", "references", "failed", "4 of 60 beyond 3 SD, all in batch B2"),
                ("cu", "blanks", "good", "0 of 60 over 5 detection limits"),
                ("cu", "duplicates", "good", "CVavg 6.1 %"),
                ("cu", "checks", "missing", "no check laboratory"),
            )
        ]
    )
    return LaboratoryEvidence(
        table=pd.DataFrame(rows),
        verdicts=verdicts,
        pairs=pd.DataFrame(pairs),
        check_pairs=pd.DataFrame(pairs).assign(stage=""),
        checks=pd.DataFrame(
            {
                "element": ["cu"],
                "n": [60],
                "slope": [1.01],
                "slope_low": [0.99],
                "slope_high": [1.03],
                "intercept": [0.0],
                "intercept_low": [-0.05],
                "intercept_high": [0.05],
                "verdict": ["good"],
            }
        ),
        duplicates=pd.DataFrame({"element": ["cu"], "stage": ["pulp"], "n": [30], "cv_avg_pct": [6.1]}),
    )


def _curves(domains):
    """What a cut would do, for every domain and metal."""
    cut = np.linspace(1.0, 3.0, 9)
    return pd.concat(
        [
            pd.DataFrame(
                {
                    "domain": domain,
                    "metal": metal,
                    "cut": cut * MEANS[metal],
                    "mean": MEANS[metal] * (1 - 0.1 * (3 - cut) ** 2 / 4),
                    "cv": 0.8 - 0.1 * (3 - cut),
                    "metal_removed_pct": 10 * (3 - cut) ** 2 / 4,
                    "n_cut": np.arange(8, -1, -1) * 3,
                }
            )
            for domain in domains
            for metal in METALS
        ],
        ignore_index=True,
    )


def _variograms(rng):
    model = Spherical()
    records = []
    for metal in METALS[:2]:
        rows = []
        for label, kind, azimuth, plunge, step in (
            ("down hole", "down_hole", np.nan, np.nan, 1.0),
            ("azimuth 30", "directional", 30.0, 0.0, 10.0),
            ("azimuth 120", "directional", 120.0, 0.0, 10.0),
        ):
            for lag in range(1, 8):
                unit = (
                    np.array([[0, 0, -1.0]])
                    if kind == "down_hole"
                    else np.array([[np.sin(np.radians(azimuth)), np.cos(np.radians(azimuth)), 0]])
                )
                rows.append(
                    {
                        "label": label,
                        "kind": kind,
                        "azimuth": azimuth,
                        "plunge": plunge,
                        "distance": lag * step,
                        "gamma": float(model.variogram(unit * lag * step)[0]) * rng.lognormal(0, 0.15),
                        "pairs": int(rng.integers(15, 300)),
                    }
                )
        records.append(
            VariogramRecord(
                metal,
                "massive",
                pd.DataFrame(rows),
                model,
                "Horizontal range inferred from 150 composites in 30 holes.",
                ("ratio of minor to major horizontal range: 1 (assumed)",),
                (),
                "down-hole",
                pd.DataFrame(
                    {
                        "parameter": ["nugget", "range_m"],
                        "low": [0.8, 25.0],
                        "best": [1.2, 35.0],
                        "high": [1.7, 48.0],
                    }
                ),
                150,
                30,
                plane_map=_plane_map(rng),
            )
        )
    return tuple(records)


def _plane_map(rng):
    """Semivariance by separation in the plane, one cell without pairs."""
    along, across = np.meshgrid(np.arange(-50.0, 51.0, 20.0), np.arange(-50.0, 51.0, 20.0), indexing="ij")
    gamma = np.minimum(np.hypot(along, across) / 40.0, 1.0) * rng.lognormal(0, 0.1, along.shape)
    gamma[0, 0] = np.nan
    return pd.DataFrame(
        {"along_m": along.ravel(), "across_m": across.ravel(), "gamma": gamma.ravel(), "pairs": 40}
    )


def _estimation(rng, blocks, composites, domains):
    swaths = []
    for metal in METALS:
        for axis, step in (("easting", 20.0), ("northing", 20.0), ("elevation", 4.0)):
            at_b, at_c = np.floor(blocks[axis] / step), np.floor(composites[axis] / step)
            for cell in np.unique(at_b):
                c = composites[at_c == cell][metal].dropna()
                swaths.append(
                    {
                        "axis": axis,
                        "column": metal,
                        "centre_m": (cell + 0.5) * step,
                        "sample_count": len(c),
                        "sample_mean": c.mean(),
                        "declustered_mean": c.mean() * 0.97,
                        "block_mean": blocks[at_b == cell][metal].mean(),
                        "nearest_mean": c.mean() * 1.04,
                    }
                )
    true = {m: composites[m].dropna().to_numpy() for m in METALS}
    loo = pd.concat(
        [
            pd.DataFrame(
                {
                    "column": m,
                    "true": t,
                    "estimate": t.mean() + 0.4 * (t - t.mean()) + rng.normal(0, 0.3 * t.std(), t.size),
                }
            )
            for m, t in true.items()
        ],
        ignore_index=True,
    )
    loo["error"] = loo["estimate"] - loo["true"]
    cut = np.linspace(0, 6, 25)
    support = pd.concat(
        [
            pd.DataFrame(
                {
                    "metal": m,
                    "cutoff": cut * MEANS[m] / 3,
                    "support": s,
                    "proportion": np.exp(-cut / w),
                    "grade": (cut / 3 + 1) * MEANS[m] * w / 3,
                }
            )
            for m in METALS
            for s, w in (("blocks", 2.6), ("discrete gaussian", 2.9), ("affine", 2.8))
        ],
        ignore_index=True,
    )
    return Estimation(
        settings={
            "Method": "ordinary kriging of blocks",
            "Block size (m)": "10 x 10 x 2",
            "Points in a block": "3 x 3 x 3",
            "Search": "two passes, 1 and 2 times the ranges; 4 to 16 samples, at most 4 a hole",
        },
        blocks=blocks,
        grid={
            "origin": (X0 + 100, Y0 + 85, -1630.0),
            "size": (float(np.diff(np.sort(blocks["easting"].unique())).min()),) * 2 + (2.0,),
            "shape": (20, 15, 20),
            "azimuth": 0.0,
            "crs": "EPSG:32702",
        },
        means=pd.DataFrame(
            [
                {
                    "metal": m,
                    "domain": d,
                    "composite_mean": MEANS[m] * 1.03,
                    "declustered_mean": MEANS[m],
                    "block_mean": MEANS[m] * 0.98,
                    "difference_pct": -2.0,
                }
                for m in METALS
                for d in domains
            ]
        ),
        swaths=pd.DataFrame(swaths),
        leave_one_out=loo,
        leave_one_out_summary=pd.DataFrame({"metal": METALS, "n": 180, "mean_error": 0.01, "slope": 0.94}),
        estimators=pd.DataFrame(
            {
                "metal": METALS,
                "ordinary_kriging": [3.0, 2.0, 2.5, 40.0],
                "inverse_distance": [3.05, 1.97, 2.52, 41.0],
                "nearest": [3.2, 2.1, 2.41, 39.0],
            }
        ),
        change_of_support=support,
        support_variance=pd.DataFrame(
            {"metal": METALS, "domain": "massive", "realised": 1.1, "theoretical": 1.5, "ratio": 0.73}
        ),
        neighbourhood=pd.DataFrame(
            {
                "varied": "samples",
                "setting": ["4", "8", "16", "24"],
                "used": [False, False, True, False],
                "slope": [0.6, 0.75, 0.82, 0.84],
                "efficiency": [0.2, 0.35, 0.41, 0.42],
                "negative_weight_sum": [0.0, -0.01, -0.03, -0.06],
            }
        ),
        neighbourhood_note="16 samples: the slope gains less than 0.02 beyond.",
        frames_effect=pd.DataFrame({"frame": ["elevation", "depth"], "leave_one_out_error": [1.4, 1.1]}),
        checks=pd.DataFrame(
            {
                "check": ["block mean against declustered mean", "realised against theoretical variance"],
                "subject": ["cu_pct", "cu_pct"],
                "value": ["−2.0 %", "0.73"],
                "limit": ["5 %", "0.8 to 1.2"],
                "verdict": ["pass", "flag"],
            }
        ),
    )


def _value(blocks):
    rows = []
    for cut in np.linspace(0, 5, 26):
        for name in ("Indicated", "Inferred", "unclassified", "all"):
            part = blocks[(blocks["cu_pct"] >= cut) & ((blocks["proposed_class"] == name) | (name == "all"))]
            t = part["dry_tonnes"].sum()
            rows.append(
                {
                    "cutoff_variable": "cu_pct",
                    "cutoff": round(cut, 3),
                    "proposed_class": name,
                    "dry_tonnes": t,
                    "wet_tonnes": part["wet_tonnes"].sum(),
                    **{m: (part[m] * part["dry_tonnes"]).sum() / t if t else np.nan for m in METALS},
                }
            )
    frame = pd.DataFrame(rows)
    tornado = pd.DataFrame(
        [
            {
                "decision": d,
                "low_label": lo,
                "high_label": hi,
                "measure": m,
                "low": 1 - s * f,
                "base": 1.0,
                "high": 1 + s,
            }
            for m, f in (("dry_tonnes", 1.0), ("cu_pct", 0.5))
            for d, s, lo, hi in (
                ("body.base_shift_m", 0.12, "+1.5 m", "−1.5 m"),
                ("density.factor", 0.08, "0.92", "1.08"),
                ("composites.lost_core", 0.06, "floor", "upper"),
                ("cutoff.at", 0.15, "1.5", "0.5"),
            )
        ]
    )
    heat = pd.DataFrame(
        [
            {"x": f"{c:g}", "y": f"{d:g}", "dry_tonnes": 4e5 * d * np.exp(-c / 4), "cu_pct": 3.0 + c}
            for c in (0.5, 1.0, 1.5, 2.0)
            for d in (0.9, 1.0, 1.1)
        ]
    )
    return ValueEvidence(
        grade_tonnage=frame,
        mineable_shape=pd.DataFrame(
            {
                "method": ["cut-off alone", "patches", "full benches"],
                "dry_tonnes": [4.2e5, 4.4e5, 4.6e5],
                "wet_tonnes": [4.6e5, 4.8e5, 5.0e5],
                "cu_pct": [3.0, 2.9, 2.8],
                "below_dry_tonnes": [0.0, 3e4, 6e4],
                "left_dry_tonnes": [0.0, 1e4, 2e4],
            }
        ),
        scenarios=pd.DataFrame(
            {"scenario": ["base", "density low"], "dry_tonnes": [4.2e5, 3.9e5], "cu_pct": [3.0, 3.0]}
        ),
        tornado=tornado,
        heat_maps=(
            {"label": "both", "x": "cutoff.at (Cu, %)", "y": "density.factor (ratio)", "frame": heat},
        ),
        equivalent={
            "formula": "CuEq = Cu + 0.378 Au + 0.0030 Ag",
            "statements": ["The study states that each metal can be recovered and sold."],
            "table": pd.DataFrame(
                {
                    "metal": ["cu_pct", "au_gpt"],
                    "price": [3.0, 1300.0],
                    "price_unit": ["USD/lb", "USD/oz"],
                    "price_date": "2024-05-01",
                    "price_source": "assumed",
                    "recovery_pct": [88.0, 60.0],
                    "payable_pct": [95.0, 50.0],
                    "factor": [1.0, 0.378],
                }
            ),
        },
        cutoff_costs=pd.DataFrame(
            {"item": ["lifting"], "value": [70.0], "unit": ["USD per wet tonne"], "inside": [True]}
        ),
    )


def _record(note):
    findings = Findings()
    findings.warning(
        "collar-off-seafloor",
        f"collar is 3.9 m above the seafloor {note}",
        "check the datum of the collar",
        file="collars.csv",
        row=9,
        column="elevation",
    )
    findings.note("assumed-vertical", "20 holes without survey are taken as vertical", "")
    ledger = pd.DataFrame(
        [
            {
                "key": "composites.length_m",
                "value": 1.0,
                "origin": "default",
                "meaning": "Length of a composite.",
                "reason": "near the sample length",
                "by": "default of the tool",
                "alternatives": "0.5, 2",
                "effect": "dry tonnes ±0.4 %",
                "effect_pct": 0.4,
            },
            {
                "key": "composites.lost_core",
                "value": "unknown",
                "origin": "chosen",
                "meaning": "Treatment of lost core.",
                "reason": f"no proof either way {note}",
                "by": "A. Geologist",
                "alternatives": "represented, background",
                "effect": "Cu −45 to +12 %",
                "effect_pct": 45.0,
            },
        ]
    )
    truth = pd.DataFrame(
        {
            "quantity": ["dry tonnes of the body", "cu_pct"],
            "unit": ["t dry", "%"],
            "truth": [4.4e5, 3.1],
            "estimate": [4.6e5, 3.0],
            "difference_pct": [4.5, -3.2],
            "cause": ["base extrapolated below holes that ended in sulphide", "lost core"],
        }
    )
    manifest = {
        "inputs": [{"path": f"collars.csv{note}", "sha256": "ab" * 32, "bytes": 1200}],
        "outputs": [{"path": "block_model.parquet", "sha256": "cd" * 32}],
        "versions": {"numpy": "2.4"},
        "seed": 1,
        "stages": [{"stage": "load", "seconds": 0.4}, {"stage": "estimate", "seconds": 3.1}],
    }
    return RunRecord(
        ledger=ledger,
        changes=pd.DataFrame(
            {
                "step": ["other run", "composites.lost_core", "this run"],
                "dry_tonnes": [4.4e5, -2e4, 4.2e5],
                "kind": ["total", "change", "total"],
                "decision": ["", "composites.lost_core", ""],
            }
        ),
        against="results of last week",
        findings=findings,
        truth={
            "file": "truth.json",
            "table": truth,
            "notes": ("A plain mean of all samples, surface included, is 41 % too high in Cu.",),
        },
        manifest=manifest,
        sources=("Invented source (2024), Example of a source line.",),
    )

"""Write the demo deposit: ``python demo_deposit/generate.py [folder]``.

Everything is invented and drawn from one seed; the same seed and the same library versions give the same bytes.
"""

from __future__ import annotations

import json
import os
import sqlite3
import sys
from pathlib import Path

import numpy as np
import pandas as pd

sys.path.insert(0, str(Path(__file__).resolve().parent))

import drilling
import inserts
import surface
import truth
from ground import CENTRE, CRS, DOMAINS, EAST0, HEIGHT, METALS, NORTH0, WASTE, WIDTH, Ground

SEED = 20265
WINDOW = (150, 92, 360, 316)  # west, south, east, north edge of the 0.5 m grid, m from the survey's corner
CORE_AG_LIMIT, SURFACE_ZN_LIMIT = 300.0, 50.0
STAMP = "2024-01-01T00:00:00.000Z"


def text(values: pd.Series, digits: int, low: float, high: float = np.inf) -> list[str]:
    """Results as a laboratory writes them: below detection "<", over limit ">", nothing for not assayed."""
    out = []
    for value in values:
        if pd.isna(value):
            out.append("")
        elif value < low:
            out.append(f"<{low:g}")
        else:
            out.append(f">{high:g}" if value > high else f"{value:.{digits}f}")
    return out


def grids(ground: Ground, folder: Path) -> None:
    """Bathymetry at 1 m (GeoTIFF) and, over the mound only, at 0.5 m (text grid)."""
    import rasterio
    from rasterio.transform import from_origin

    rng = np.random.default_rng([SEED, 5])
    x, y = np.meshgrid(EAST0 + 0.5 + np.arange(WIDTH), NORTH0 + HEIGHT - 0.5 - np.arange(HEIGHT))
    z = np.round(ground.seafloor(x, y) + rng.normal(0, 0.06, x.shape), 2).astype("float32")
    for row, col, size in ((60, 70, 3), (190, 236, 2), (222, 301, 1), (330, 420, 4)):  # missed soundings
        z[row : row + size, col : col + size] = -9999.0
    corner = (x - x.min()) + (y - y.min()) < 34  # the survey lines end here
    z[corner] = -9999.0
    with rasterio.open(folder / "bathymetry_1m.tif", "w", driver="GTiff", width=WIDTH, height=HEIGHT, count=1,
                       dtype="float32", crs=CRS, nodata=-9999.0, transform=from_origin(EAST0, NORTH0 + HEIGHT, 1, 1),
                       compress="deflate", predictor=3, zlevel=9) as file:  # fmt: skip
        file.write(z, 1)

    west, south, east, north = WINDOW
    columns, rows = 2 * (east - west), 2 * (north - south)
    x, y = np.meshgrid(
        EAST0 + west + 0.25 + 0.5 * np.arange(columns), NORTH0 + north - 0.25 - 0.5 * np.arange(rows)
    )
    z = ground.seafloor(x, y) + rng.normal(0, 0.04, x.shape)
    head = (f"ncols {columns}\nnrows {rows}\nxllcorner {EAST0 + west:.1f}\nyllcorner {NORTH0 + south:.1f}\n"
            "cellsize 0.5\nNODATA_value -9999\n")  # fmt: skip
    body = "\n".join(" ".join(f"{v:.2f}" for v in row) for row in z)
    (folder / "bathymetry_0p5m.asc").write_bytes((head + body + "\n").encode("ascii"))


def write_csv(frame: pd.DataFrame, path: Path, **options: str) -> None:
    """A text table with the same line ends on every system."""
    data = frame.to_csv(index=False, lineterminator="\n", sep=options.get("sep", ","))
    path.write_bytes(data.encode(options.get("encoding", "utf-8")))


def write_workbook(frame: pd.DataFrame, path: Path) -> None:
    """Collars as a workbook: one sheet of data, one of notes."""
    import datetime

    import xlsxwriter

    book = xlsxwriter.Workbook(str(path), {"in_memory": True})
    book.set_properties({"title": "Demo mound A", "created": datetime.datetime(2024, 1, 1)})
    sheet, notes = book.add_worksheet("Collars"), book.add_worksheet("Notes")
    bold = book.add_format({"bold": True})
    sheet.write_row(0, 0, list(frame.columns), bold)
    for number, row in enumerate(frame.itertuples(index=False), 1):
        for column, value in enumerate(row):
            if isinstance(value, str):
                sheet.write_string(number, column, value)
            elif not pd.isna(value):
                sheet.write_number(number, column, float(value))
    for number, line in enumerate((
        "Invented data. Depths are positive down, from the ship's acoustic positioning.",
        "EndedIn: sulphide = stopped in sulphide; host = reached rock below it; lost = string stuck.",
    )):  # fmt: skip
        notes.write_string(number, 0, line)
    book.close()


def hole_files(campaign: drilling.Campaign, assays: pd.DataFrame, folder: Path) -> None:
    """Collars, surveys, runs, lithology, assays and densities."""
    c = pd.DataFrame(campaign.collars)
    collars = pd.DataFrame({
        "HoleID": c["hole"], "East_m": c["east"].round(2), "North_m": c["north"].round(2),
        "WaterDepth_m": c["depth"].round(2), "TotalDepth_m": c["length"], "EndedIn": c["ended"],
        "PosMethod": c["method"], "PosSigma_m": c["sigma"],
    })  # fmt: skip
    write_workbook(collars, folder / "collars.xlsx")
    s = pd.DataFrame(campaign.surveys)
    write_csv(pd.DataFrame({"HoleID": s["hole"], "Depth_m": s["depth"].round(1), "Azimuth_deg": s["azimuth"].round(1),
                            "Dip_deg": s["dip"].round(1)}), folder / "surveys.csv")  # fmt: skip
    r = pd.DataFrame(campaign.runs)
    percent = (100 * r["recovered"] / (r["to"] - r["from"])).round(0).astype(int)
    write_csv(pd.DataFrame({"HoleID": r["hole"], "RunFrom_m": r["from"], "RunTo_m": r["to"],
                            "CoreRecovered_m": r["recovered"], "Recovery_pct": percent}), folder / "runs.csv")  # fmt: skip
    g = pd.DataFrame(campaign.lithology)
    write_csv(g.rename(columns={"hole": "HoleID", "from": "From_m", "to": "To_m", "code": "Rock", "note": "Remark"}),
              folder / "lithology.csv")  # fmt: skip
    write_csv(grade_columns(assays, {"HoleID": assays["hole"], "SampleNo": assays["sample"],
              "From_m": assays["from"].map("{:.2f}".format), "To_m": assays["to"].map("{:.2f}".format),
              "Batch": assays["batch"], "Method": assays["method"]}, core=True), folder / "assays.csv")  # fmt: skip
    d = pd.DataFrame(campaign.densities).sort_values(["hole", "from"])

    def comma(name: str, digits: int) -> pd.Series:
        return d[name].map(lambda v: "" if pd.isna(v) else f"{v:.{digits}f}".replace(".", ","))

    write_csv(pd.DataFrame({
        "Hole": d["hole"], "Sample": assays["sample"].loc[d["number"]].to_numpy(), "From (m)": comma("from", 2),
        "To (m)": comma("to", 2), "Wet density (t/m³)": comma("wet", 3), "Dry density (t/m³)": comma("dry", 3),
        "Wet mass (g)": comma("wet_mass", 3), "Dry mass (g)": comma("dry_mass", 3),
        "Dry volume (cm³)": comma("dry_volume", 3),
    }), folder / "densities.csv", sep=";", encoding="cp1252")  # fmt: skip


def grade_columns(frame: pd.DataFrame, first: dict, *, core: bool) -> pd.DataFrame:
    """Grades in the mixed units of a laboratory's sheet: Au in ppb, Pb in ppm, the rest in % or g/t."""
    columns = {
        "Cu_pct": text(frame["cu_pct"], 2, 0.01), "Zn_pct": text(frame["zn_pct"], 2, 0.01, SURFACE_ZN_LIMIT),
        "Pb_ppm": text(1e4 * frame["pb"], 0, 20), "Fe_pct": text(frame["fe"], 1, 0.1),
        "Ba_pct": text(frame["ba"], 2, 0.05), "SiO2_pct": text(frame["sio2"], 1, 0.1),
        "As_ppm": text(frame["as"], 0, 5), "Mo_ppm": text(frame["mo"], 0, 2),
        "Au_ppb": text(1e3 * frame["au_gpt"], 0, 10),
        "Ag_gpt": text(frame["ag_gpt"], 1, 0.5, CORE_AG_LIMIT if core else np.inf),
    }  # fmt: skip
    return pd.DataFrame(first | columns)


def surface_files(samples: pd.DataFrame, tracks: pd.DataFrame, lab: pd.DataFrame, folder: Path) -> None:
    """Surface samples, dredges and the laboratory's inserts."""
    places = {"Sample": samples["sample"], "Type": samples["type"], "Easting": samples["east"].round(1),
              "Northing": samples["north"].round(1), "Elevation": samples["elevation"].round(1),
              "PosSigma_m": samples["sigma"], "Method": samples["method"]}  # fmt: skip
    write_csv(grade_columns(samples, places, core=False), folder / "surface_samples.csv")
    ends = {"Dredge": tracks["dredge"]}
    for end, place in (("1", "OnBottom"), ("2", "OffBottom")):
        for axis, suffix in (("x", "E"), ("y", "N"), ("z", "Depth")):
            ends[f"{place}_{suffix}"] = tracks[axis + end].round(0)
    write_csv(grade_columns(tracks, ends, core=False), folder / "dredges.csv")
    low = lab["metal"].map(inserts.DETECTION)

    def number(name: str) -> pd.Series:
        return lab[name].map(lambda v: "" if pd.isna(v) else f"{v:.4g}")

    value = np.where(lab["value"] < low, low.map("<{:g}".format), number("value"))
    write_csv(pd.DataFrame({
        "Kind": lab["kind"], "Batch": lab["batch"], "Sequence": lab["sequence"], "SampleNo": lab["sample"],
        "OriginalNo": lab["original"].fillna(""), "Material": lab["material"].fillna(""),
        "Stage": lab["stage"].fillna(""), "Element": lab["metal"].str.split("_").str[0].str.capitalize(),
        "Unit": lab["metal"].str.split("_").str[1].map({"pct": "%", "gpt": "g/t"}), "Result": value,
        "OriginalResult": number("first"), "Expected": number("expected"), "Expected_SD": number("sd"),
    }), folder / "laboratory.csv")  # fmt: skip


def polygons(ground: Ground) -> tuple[object, dict[str, tuple[str, float, object]]]:
    """The interpreted outline, and the zones to keep out of: an active vent and a set-aside zone."""
    from shapely.geometry import Point, Polygon, box

    rng = np.random.default_rng([SEED, 6])
    ring = []
    for angle in np.linspace(0, 2 * np.pi, 56, endpoint=False):
        far = np.linspace(20, 140, 1201)
        x, y = CENTRE[0] + far * np.sin(angle), CENTRE[1] + far * np.cos(angle)
        edge = far[int(np.argmax(ground.reach(x, y) >= 1.0))] + rng.normal(0, 1.3)
        ring.append((round(CENTRE[0] + edge * np.sin(angle), 1), round(CENTRE[1] + edge * np.cos(angle), 1)))
    vent = Point(CENTRE[0] + 88.0, CENTRE[1] - 52.0).buffer(6.0, quad_segs=4)
    zone = box(EAST0 + 130, NORTH0 + 255, EAST0 + 222, NORTH0 + 345)
    return Polygon(ring), {"Vent field V1": ("active_vent", 50.0, vent), "Zone P1": ("set_aside", 0.0, zone)}


def write_layers(outline: object, zones: dict, folder: Path) -> None:
    """GeoPackages, with their time of change set to a constant."""
    import geopandas as gpd

    layers = {
        "outline.gpkg": gpd.GeoDataFrame({"Zone": ["Main mound"]}, geometry=[outline], crs=CRS),
        "exclusions.gpkg": gpd.GeoDataFrame({
            "ZoneName": list(zones), "ZoneStatus": [z[0] for z in zones.values()],
            "Buffer_m": [z[1] for z in zones.values()]}, geometry=[z[2] for z in zones.values()], crs=CRS),
    }  # fmt: skip
    os.environ["OGR_CURRENT_DATE"] = STAMP
    for name, frame in layers.items():
        path = folder / name
        path.unlink(missing_ok=True)
        frame.to_file(path, layer=path.stem, driver="GPKG", engine="pyogrio")
        with sqlite3.connect(path) as base:
            base.execute("UPDATE gpkg_contents SET last_change = ?", (STAMP,))
        base.close()


def lost_core(campaign: drilling.Campaign, assays: pd.DataFrame) -> dict[str, dict[str, dict[str, float]]]:
    """Along the holes, by domain: the truth, and what three readings of the lost core make of it."""
    drilled = pd.concat(campaign.drilled)
    rows = assays[(assays["method"] == "laboratory") & (assays["domain"] != WASTE)].copy()
    rows["length"] = rows["to"] - rows["from"]
    runs = pd.DataFrame(campaign.runs)
    result: dict[str, dict[str, dict[str, float]]] = {}
    for number in (1, 2, 3):
        true = drilled[drilled["domain"] == number]
        mine = rows[rows["domain"] == number].copy()
        cored = drilling.FINE * len(true)
        stands = np.zeros(len(mine))
        for row in runs.itertuples():
            piece = (
                (mine["hole"] == row.hole) & (mine["from"] >= row[2] - 0.01) & (mine["to"] <= row[3] + 0.01)
            ).to_numpy()
            inside = (true["hole"] == row.hole) & (true["depth"] > row[2]) & (true["depth"] < row[3])
            if piece.any():
                share = mine["length"].to_numpy()[piece]
                stands[piece] += drilling.FINE * inside.sum() * share / share.sum()
        result[DOMAINS[number]] = {
            metal: {
                "true_along_holes": float(f"{(true[metal] * (1 - true['anhydrite'])).mean():.4g}"),
                "recovered_core": float(f"{np.average(mine[metal], weights=mine['length']):.4g}"),
                "core_stands_for_run": float(f"{np.average(mine[metal], weights=stands):.4g}"),
                "lost_core_barren": float(f"{(mine[metal] * mine['length']).sum() / cored:.4g}"),
            }
            for metal in METALS
        }
    return result


def surface_ratios(samples: pd.DataFrame, campaign: drilling.Campaign) -> dict[str, dict[str, float]]:
    """Planted ratios, and those that the 60 samples came out with against the same cores."""
    cores = pd.DataFrame(
        [surface.nearest_core(campaign, x, y) for x, y in zip(samples["east"], samples["north"])]
    )
    return {metal: {"planted": surface.PLANTED_RATIO[metal],
                    "of_these_samples": float(f"{samples[metal].mean() / cores[metal].mean():.4g}")}
            for metal in METALS}  # fmt: skip


def main(folder: Path) -> None:
    """Write every file of the demo but its study file and its README."""
    import shapely

    folder.mkdir(parents=True, exist_ok=True)
    (folder / "truth").mkdir(exist_ok=True)
    ground = Ground.make(SEED)
    campaign = drilling.drill(ground, SEED)
    assays = pd.DataFrame(campaign.assays)
    assays["sample"] = [f"C{number:05d}" for number in range(1, len(assays) + 1)]
    holes = list(dict.fromkeys(assays["hole"]))
    assays["batch"] = assays["hole"].map(
        {hole: inserts.BATCHES[8 * n // len(holes)] for n, hole in enumerate(holes)}
    )
    samples, tracks = (make(ground, campaign, SEED) for make in (surface.surface_samples, surface.dredges))
    true_assays = assays
    rng = np.random.default_rng([SEED, 7])
    assays = inserts.spoil(assays)
    lab = inserts.laboratory(rng, assays)
    xrf = assays["method"] == "handheld_xrf"
    assays.loc[xrf, "cu_pct"] *= 1.15
    assays.loc[xrf, ["au_gpt", "ag_gpt", "ba", "sio2", "mo"]] = np.nan
    assays.loc[assays["batch"] == "B02", "mo"] = np.nan  # not asked for
    assays.loc[rng.choice(np.flatnonzero(~xrf), 4, False), "au_gpt"] = np.nan  # pulp used up

    grids(ground, folder)
    hole_files(campaign, assays, folder)
    surface_files(samples, tracks, lab, folder)
    outline, zones = polygons(ground)
    write_layers(outline, zones, folder)

    body = truth.cells(ground)
    inside = {}
    for name, (status, buffer, shape) in zones.items():
        zone = shapely.buffer(shape, buffer)
        hit = shapely.contains_xy(zone, body["easting"], body["northing"])
        inside[name] = {"status": status, "dry_tonnes": float(f"{body['dry_tonnes'][hit].sum():.5g}")}
    collars = pd.DataFrame(campaign.collars)
    record = truth.body_truth(body) | {
        "seed": SEED,
        "in_exclusions": inside,
        "collar_shift_m": drilling.COLLAR_SHIFT_M,
        "collar_noise_sd_m": drilling.COLLAR_NOISE_M,
        "collar_outliers_m": drilling.COLLAR_OUTLIERS_M,
        "surface_ratio": surface_ratios(samples, campaign),
        "surface_ratio_is": "mean of the surface samples over mean of their nearest holes, each hole the "
        "length-weighted mean of its laboratory assays in sulphide",
        "bad_batch": {"batch": inserts.BAD_BATCH, "column": inserts.BAD_METAL, "factor": inserts.BAD_FACTOR},
        "lost_core": lost_core(campaign, true_assays),
        "run_without_core": {"hole": drilling.NO_CORE_HOLE}, "run_over_100_pct": {"hole": drilling.OVER_HOLE},
        "holes": len(collars), "holes_ended_in_sulphide": int((collars["ended"] != "host").sum()),
        "mean_recovery_pct": float(f"{100 * sum(r['recovered'] for r in campaign.runs) / collars['length'].sum():.3g}"),
    }  # fmt: skip
    (folder / "truth" / "truth.json").write_bytes((json.dumps(record, indent=1) + "\n").encode())
    shown = truth.blocks(body, truth.SUPPORTS["5x5x2"]).round(4)
    shown = shown.astype(
        {c: "float32" for c in shown.columns if c not in ("i", "j", "k", "easting", "northing")}
    )
    shown.astype(dict.fromkeys(("i", "j", "k"), "int16")).to_parquet(
        folder / "truth" / "truth_blocks.parquet", index=False, compression="zstd")  # fmt: skip


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).resolve().parent)

"""How fast kriging is, against other programs and against the arithmetic that it must do.

Run with ``python -m pytest tests/benchmarks/bench_kriging.py -m benchmark -n 0 -s``. Times are the best of a few,
after compilation. Next to the time on the clock stands the time of the processor: what the clock would show
on a machine that does nothing else is the processor's time over the number of cores (``CORES``).
"""

from __future__ import annotations

import os
import resource
import shutil
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sms_resource.geostatistics import (
    Neighbourhood,
    Structure,
    VariogramModel,
    leave_one_out,
    ordinary_kriging,
)
from sms_resource.geostatistics.inputs import checked_samples
from sms_resource.geostatistics.kriging import Outputs
from sms_resource.geostatistics.kriging_run import krige_found
from sms_resource.geostatistics.kriging_setup import model_arrays
from sms_resource.geostatistics.search_run import Finder, target_chunks
from sms_resource.geostatistics.search_study import operation_parts

pytestmark = pytest.mark.benchmark
CORES = min(2, os.cpu_count() or 1)

OCTANTS = Neighbourhood((80.0, 70.0, 15.0), 24, 4, 4, 2, "octants", azimuth=30.0)
NEAREST = Neighbourhood((80.0, 80.0, 80.0), 24, 4)


def models(count: int, shape: str = "spherical") -> list[VariogramModel]:
    """One variogram a metal, each its own."""
    return [
        VariogramModel(0.3, [Structure(shape, 0.7, (40.0 + 5 * m, 35.0 + 4 * m, 6.0 + m))], azimuth=30.0)
        for m in range(count)
    ]


def deposit(columns: int, seed: int = 5):
    """2000 composites of a metre in 100 vertical holes over 200 x 200 m."""
    rng = np.random.default_rng(seed)
    tops = rng.uniform(0, 200, (100, 2))
    hole = np.repeat(np.arange(100), 20)
    points = np.column_stack([tops[hole], -(np.tile(np.arange(20.0), 100) + 0.5)])
    return points, rng.lognormal(size=(2000, columns)), hole


def block_grid(number: int):
    """About ``number`` cubes that fill 200 x 200 x 20 m, and their size."""
    side = (200 * 200 * 20 / number) ** (1 / 3)
    nx, nz = round(200 / side), max(1, round(20 / side))
    x, z = (np.arange(nx) + 0.5) * 200 / nx, -(np.arange(nz) + 0.5) * 20 / nz
    grid = np.stack(np.meshgrid(x, x, z, indexing="ij"), axis=-1).reshape(-1, 3)
    return grid, (200 / nx, 200 / nx, 20 / nz)


def best(call, times: int = 3) -> float:
    """Seconds on the clock of the fastest of some calls."""
    return both(call, times)[0]


def both(call, times: int = 3) -> tuple[float, float]:
    """Seconds on the clock and of the processor, each of the fastest of some calls."""
    clock, processor = [], []
    for _ in range(times):
        started, worked = time.perf_counter(), time.process_time()
        call()
        clock.append(time.perf_counter() - started)
        processor.append(time.process_time() - worked)
    return min(clock), min(processor)


def by_turns(one, other, times: int = 6) -> tuple[tuple[float, float], tuple[float, float]]:
    """As :func:`both` of two calls, which take turns: what slows the machine for a while slows both."""
    seconds: tuple[list[tuple[float, float]], ...] = ([], [])
    for _ in range(times):
        for call, taken in zip((one, other), seconds):
            taken.append(both(call, 1))
    first, second = ((min(c for c, _ in taken), min(p for _, p in taken)) for taken in seconds)
    return first, second


def compared(name: str, theirs: tuple[float, float], ours: tuple[float, float], unit: str) -> list[dict]:
    """Rows of a comparison: seconds on the clock and of the processor, per block or point."""
    return [
        {
            "program": program,
            f"us a {unit}, clock": clock * 1e6,
            f"us a {unit}, processor": processor * 1e6,
            "times as fast, clock": theirs[0] / clock,
            "times as fast, processor over cores": theirs[1] / (processor / cores),
        }
        for program, (clock, processor), cores in ((name, theirs, 1), ("sms_resource", ours, CORES))
    ]


def show(capsys, title: str, rows: list[dict]) -> None:
    with capsys.disabled():
        print(f"\n{title}\n{pd.DataFrame(rows).to_string(index=False)}")


def test_against_gstat(capsys, tmp_path):
    """Block kriging of the same data, one metal, 24 nearest samples, 27 points."""
    if shutil.which("Rscript") is None:
        pytest.skip("Rscript is not on this machine")
    points, values, _ = deposit(1)
    grid, size = block_grid(30_000)
    some = grid[:: len(grid) // 2000][:2000]
    pd.DataFrame(np.column_stack([points, values]), columns=list("xyzv")).to_csv(
        tmp_path / "s.csv", index=False
    )
    pd.DataFrame(some, columns=list("xyz")).to_csv(tmp_path / "t.csv", index=False)
    (tmp_path / "run.R").write_text(
        f"""library(sp); library(gstat)
        s <- read.csv("{tmp_path}/s.csv"); coordinates(s) <- ~x+y+z
        t <- read.csv("{tmp_path}/t.csv"); coordinates(t) <- ~x+y+z
        m <- vgm(0.7, "Sph", 40, nugget = 0.3)
        g <- gstat(NULL, "v", v ~ 1, s, model = m, nmax = 24, set = list(nblockdiscr = 3))
        run <- function() predict(g, t, block = c{size}, debug.level = 0)
        run(); x <- sapply(1:3, function(i) system.time(run())); cat(min(x["elapsed", ]), min(x["user.self", ]))"""
    )
    run = subprocess.run(["Rscript", str(tmp_path / "run.R")], capture_output=True, text=True)
    if run.returncode:
        pytest.skip("R's gstat is not on this machine")
    theirs = tuple(float(word) / len(some) for word in run.stdout.split()[-2:])
    model = VariogramModel(0.3, [Structure("spherical", 0.7, 40.0)])
    settings = {"block_size": size, "discretisation": (3, 3, 3)}
    ordinary_kriging(points, values, grid[:100], model, NEAREST, **settings)
    settings["threads"] = CORES
    ours = both(lambda: ordinary_kriging(points, values, grid, model, NEAREST, **settings))
    rows = compared("gstat, one core", theirs, tuple(time / len(grid) for time in ours), "block")
    show(capsys, "Block kriging, 24 nearest of 2000 samples, 3 x 3 x 3 points, one metal", rows)
    assert rows[1]["times as fast, processor over cores"] >= 15.0


def test_against_pykrige(capsys):
    """Points from a moving window of 24 samples; the constructor of the other is not timed."""
    pykrige = pytest.importorskip("pykrige.ok3d")
    points, values, _ = deposit(1)
    chosen = np.random.default_rng(0).choice(2000, 300, replace=False)
    points, values = points[chosen], values[chosen, 0]
    grid, _ = block_grid(300_000)
    some = grid[:: len(grid) // 300][:300]
    theirs = pykrige.OrdinaryKriging3D(
        *points.T,
        values,
        variogram_model="spherical",
        variogram_parameters={"psill": 0.7, "range": 40.0, "nugget": 0.3},
    )
    model = VariogramModel(0.3, [Structure("spherical", 0.7, 40.0)])
    ordinary_kriging(points, values, grid[:100], model, NEAREST)
    other, ours = by_turns(
        lambda: theirs.execute("points", *some.T, n_closest_points=24, backend="loop"),
        lambda: ordinary_kriging(points, values, grid, model, NEAREST, threads=CORES),
    )
    rows = compared(
        "PyKrige",
        (other[0] / len(some), other[1] / len(some)),
        (ours[0] / len(grid), ours[1] / len(grid)),
        "point",
    )
    show(capsys, "Points, 24 nearest of 300 samples", rows)
    assert rows[1]["times as fast, processor over cores"] >= 100.0


def million_blocks() -> tuple[float, float, float, int]:
    """A million blocks and four metals, each with its own model.

    Returns seconds on the clock and of the processor, MB above the data, and the number of blocks.
    """
    points, values, holes = deposit(4)
    grid, size = block_grid(1_000_000)
    settings = {"hole_ids": holes, "block_size": size, "discretisation": (3, 3, 3)}
    ordinary_kriging(points, values, grid[:100], models(4), OCTANTS, **settings)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    started, worked = time.perf_counter(), time.process_time()
    result = ordinary_kriging(points, values, grid, models(4), OCTANTS, **settings)
    taken, processor = time.perf_counter() - started, time.process_time() - worked
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    assert (result.status == 0).all()
    return taken, processor, (after - before) / 1024.0, len(grid)


def test_a_million_blocks(capsys):
    """In a process of its own, so that the memory is that of kriging alone."""
    code = "from tests.benchmarks.bench_kriging import million_blocks as m; print(*m())"
    folder = Path(__file__).parents[2]
    run = subprocess.run([sys.executable, "-c", code], cwd=folder, capture_output=True, text=True)
    assert run.returncode == 0, run.stderr
    seconds, processor, megabytes, blocks = (float(word) for word in run.stdout.split()[-4:])
    rows = [
        {
            "blocks": int(blocks),
            "metals": 4,
            "seconds, clock": seconds,
            "seconds, processor": processor,
            "processor over cores": processor / CORES,
            "MB above the data": megabytes,
        }
    ]
    show(
        capsys, "24 samples, octants, at most 4 a hole, 3 x 3 x 3 points, each metal its own variogram", rows
    )
    assert seconds < 60.0
    assert megabytes < 1500.0


def test_time_grows_linearly(capsys):
    """The same hundred thousand blocks once, ten times and a hundred times over."""
    points, values, holes = deposit(1)
    grid, size = block_grid(100_000)
    settings = {"hole_ids": holes, "block_size": size, "discretisation": (3, 3, 3)}
    ordinary_kriging(points, values, grid[:100], models(1), OCTANTS, **settings)
    rows = []
    for factor in (1, 10, 100):
        targets = np.tile(grid, (factor, 1))
        clock, seconds = both(
            lambda targets=targets: ordinary_kriging(points, values, targets, models(1), OCTANTS, **settings),
            times=3 if factor < 100 else 1,
        )
        rows.append(
            {
                "blocks": len(targets),
                "seconds, clock": clock,
                "seconds, processor": seconds,
                "processor us a block": seconds / len(targets) * 1e6,
            }
        )
    numbers, seconds = (np.log([row[name] for row in rows]) for name in ("blocks", "seconds, processor"))
    exponent = np.polyfit(numbers, seconds, 1)[0]
    show(capsys, f"Time of the processor grows with the number of blocks to the power {exponent:.3f}", rows)
    assert exponent < 1.05


def test_leave_one_hole_out(capsys):
    points, values, holes = deposit(4)
    rows = []
    for name, road in (("octants", OCTANTS), ("all samples", None)):
        call = lambda road=road: leave_one_out(points, values, models(4), road, hole_ids=holes)  # noqa: E731
        call()
        rows.append({"search": name, "samples": 2000, "metals": 4, "seconds": best(call, 2)})
    show(capsys, "Leave one hole out", rows)
    assert rows[0]["seconds"] < 5.0


def test_where_the_time_goes(capsys):
    """Search and kriging apart, on one thread, against the arithmetic and against a matrix product."""
    points, values, holes = deposit(1)
    samples = checked_samples(points, values, holes)
    matrix = np.random.default_rng(0).normal(size=(400, 400))
    try:
        from threadpoolctl import threadpool_limits
    except ImportError:
        product = best(lambda: matrix @ matrix, 20)
        peak_of = "matrix product, all threads"
    else:
        with threadpool_limits(1):
            product = best(lambda: matrix @ matrix, 20)
        peak_of = "matrix product, one thread"
    peak = 2.0 * 400**3 / product / 1e9
    rows, parts = [], {}
    for shape in ("spherical", "exponential"):
        for number in (30_000, 1_000_000):
            grid, size = block_grid(number)
            grid = grid[: len(grid) // 3 : max(1, number // 1_000_000)][:60_000]
            model = models(1, shape)[0]
            arrays = model_arrays(model, samples.points, np.array(size), (3, 3, 3))
            finder = Finder(samples.points, samples.holes, [OCTANTS], 1)
            out = Outputs.empty(len(grid), 1)
            spent = {"search": 0.0, "order": 0.0, "kriging": 0.0}
            found_runs = estimated = taken = 0
            present = np.arange(2000)
            for turn in range(2):  # the first compiles
                if turn:
                    spent = dict.fromkeys(spent, 0.0)
                    found_runs = estimated = taken = 0
                for where, local in target_chunks(grid, samples.origin, OCTANTS):
                    t0 = time.process_time()
                    found = finder.find(local)
                    t1 = time.process_time()
                    runs = found.runs()
                    t2 = time.process_time()
                    krige_found(
                        found, local, where, present, samples, arrays, [0], runs, 1, np.array([np.inf]), np.inf,
                        None, out,
                    )  # fmt: skip
                    t3 = time.process_time()
                    for name, seconds in zip(spent, (t1 - t0, t2 - t1, t3 - t2)):
                        spent[name] += seconds
                    found_runs += len(runs[1])
                    estimated += len(runs[0])
                    taken += int(found.count.sum())
            shared = estimated / found_runs
            parts = {name: float(v) for name, v in operation_parts(taken / estimated, 27, shared).items()}
            operations = sum(parts.values())
            achieved = operations * estimated / spent["kriging"] / 1e9
            rows.append(
                {
                    "shape": shape,
                    "block (m)": round(size[0], 1),
                    "samples": round(taken / estimated, 1),
                    "blocks a factor": round(shared, 1),
                    **{f"{name} (us)": round(s / len(grid) * 1e6, 2) for name, s in spent.items()},
                    "operations": round(operations),
                    "Gflop/s": round(achieved, 1),
                    f"share of {peak_of}": round(achieved / peak, 2),
                }
            )
    show(capsys, f"One thread, a block and metal; {peak_of}: {peak:.0f} Gflop/s", rows)
    show(capsys, "Operations of the last row", [parts])
    assert all(row["Gflop/s"] > 0.0 for row in rows)

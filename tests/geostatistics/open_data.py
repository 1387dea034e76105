"""Open data sets of R's gstat (Pebesma 2004), exported when a test asks for them; nothing of them is kept here."""

from __future__ import annotations

import functools
import io
import shutil
import subprocess

import pandas as pd
import pytest

SETS = {
    "jura.pred": ("jura", "prediction.dat"),
    "walker": ("walker", "as.data.frame(walker)"),
    "walker.exh": ("walker", "as.data.frame(walker.exh)"),
}


def run_r(script: str) -> str:
    """Standard output of an R script; the test is skipped where R or gstat is absent."""
    if shutil.which("Rscript") is None:
        pytest.skip("R is not installed: no live comparison with gstat")
    done = subprocess.run(["Rscript", "-e", script], capture_output=True, text=True, timeout=120, check=False)
    if done.returncode != 0:
        pytest.skip(f"R could not run gstat: {done.stderr.strip()[-200:]}")
    return done.stdout


@functools.cache
def open_data(name: str) -> pd.DataFrame:
    """One data set as a table."""
    group, expression = SETS[name]
    text = run_r(
        f"suppressMessages(library(gstat)); data({group}); write.csv({expression}, stdout(), row.names=FALSE)"
    )
    return pd.read_csv(io.StringIO(text))

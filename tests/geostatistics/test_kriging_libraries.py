"""Kriging against R's gstat (Pebesma 2004), GSTools (Mueller et al. 2022) and PyKrige, run live."""

from __future__ import annotations

import math
import shutil
import subprocess

import numpy as np
import pandas as pd
import pytest
from scipy.spatial.transform import Rotation

from sms_resource.geostatistics import (
    Neighbourhood,
    Structure,
    VariogramModel,
    leave_one_out,
    ordinary_kriging,
)

from .kriging_twin import scene

GSTAT_SHAPE = {"spherical": "Sph", "exponential": "Exp", "gaussian": "Gau"}
GSTAT_RANGE = {"spherical": 1.0, "exponential": 1.0 / 3.0, "gaussian": 1.0 / math.sqrt(3.0)}

ANISOTROPIC = VariogramModel(0.3, [Structure("spherical", 1.0, (60.0, 36.0, 12.0))], 60.0, 20.0, 35.0)
NESTED = VariogramModel(
    0.2,
    [
        Structure("spherical", 0.5, (25.0, 25.0, 25.0)),
        Structure("exponential", 0.7, (70.0, 35.0, 14.0)),
    ],
    azimuth=110.0,
)
GAUSSIAN = VariogramModel(0.1, [Structure("gaussian", 1.0, (40.0, 40.0, 8.0))], azimuth=30.0)

# name: model, samples nearest to use (0 = all), reach in metres, points along each side of a block (0 = points)
GSTAT_CASES = {
    "points": (ANISOTROPIC, 0, 0.0, 0),
    "nested": (NESTED, 0, 0.0, 0),
    "gaussian": (GAUSSIAN, 0, 0.0, 0),
    "blocks of 8": (NESTED, 0, 0.0, 2),
    "blocks of 64": (ANISOTROPIC, 0, 0.0, 4),
    "neighbourhood": (NESTED, 12, 45.0, 0),
    "neighbourhood and blocks": (ANISOTROPIC, 16, 50.0, 4),
}


def r_model(model):
    """The model in gstat's words: practical ranges and angles turned into its own."""
    text = None
    for item in model.structures:
        first, second, third = item.ranges
        angles = f"{model.azimuth}, {(360.0 - model.plunge) % 360.0}, {model.tilt}"
        call = (
            f'{item.sill}, "{GSTAT_SHAPE[item.shape]}", {first * GSTAT_RANGE[item.shape]!r}, '
            f"anis = c({angles}, {second / first!r}, {third / first!r})"
        )
        text = f"vgm({call}, nugget = {model.nugget})" if text is None else f"vgm({call}, add.to = {text})"
    return text


@pytest.fixture(scope="module")
def data():
    points, values, _holes, targets = scene(7, samples=60, targets=30, columns=1, missing=0.0)
    return points.round(3), values[:, 0].round(4), targets.round(3)


@pytest.fixture(scope="module")
def gstat(data, tmp_path_factory):
    """All cases in one session of R, for it takes seconds to start."""
    if shutil.which("Rscript") is None:
        pytest.skip("Rscript is not on this machine")
    if subprocess.run(["Rscript", "-e", "library(gstat)"], capture_output=True).returncode:
        pytest.skip("R's gstat is not on this machine")
    folder = tmp_path_factory.mktemp("gstat")
    points, values, targets = data
    pd.DataFrame(np.column_stack([points, values]), columns=list("xyzv")).to_csv(
        folder / "s.csv", index=False
    )
    pd.DataFrame(targets, columns=list("xyz")).to_csv(folder / "t.csv", index=False)
    lines = [
        "library(sp); library(gstat)",
        f's <- read.csv("{folder}/s.csv"); coordinates(s) <- ~x+y+z',
        f't <- read.csv("{folder}/t.csv"); coordinates(t) <- ~x+y+z',
        "out <- NULL",
    ]
    for name, (model, nearest, reach, count) in GSTAT_CASES.items():
        local = f", nmax = {nearest}, maxdist = {reach}" if nearest else ""
        midpoints = f", set = list(nblockdiscr = {count})" if count else ""
        block = ", block = c(4, 5, 2)" if count else ""
        lines += [
            f'g <- gstat(NULL, "v", v ~ 1, s, model = {r_model(model)}{local}{midpoints})',
            f"p <- predict(g, t{block}, debug.level = 0)",
            f'out <- rbind(out, data.frame(case = "{name}", estimate = p[[1]], variance = p[[2]]))',
        ]
    lines += [
        f"cv <- krige.cv(v ~ 1, s, model = {r_model(NESTED)}, nmax = 12, verbose = FALSE)",
        'out <- rbind(out, data.frame(case = "leave one out", estimate = cv$var1.pred, variance = cv$var1.var))',
        f'write.table(format(out, digits = 17), "{folder}/out.csv", row.names = FALSE, sep = ";")',
    ]
    (folder / "run.R").write_text("\n".join(lines))
    run = subprocess.run(["Rscript", str(folder / "run.R")], capture_output=True, text=True)
    assert run.returncode == 0, run.stderr
    return pd.read_csv(folder / "out.csv", sep=";", skipinitialspace=True)


@pytest.mark.parametrize("name", GSTAT_CASES)
def test_gstat(name, data, gstat):
    points, values, targets = data
    model, nearest, reach, count = GSTAT_CASES[name]
    road = Neighbourhood(reach, nearest, 1) if nearest else None
    block = {"block_size": (4, 5, 2), "discretisation": (count,) * 3} if count else {}
    result = ordinary_kriging(points, values, targets, model, road, **block)
    expected = gstat[gstat["case"].str.strip() == name]
    np.testing.assert_allclose(result.estimate, expected["estimate"], rtol=1e-8, atol=1e-8)
    np.testing.assert_allclose(result.variance, expected["variance"], rtol=1e-8, atol=1e-8)


def test_gstat_leave_one_out(data, gstat):
    points, values, _ = data
    frame = leave_one_out(points, values, NESTED, Neighbourhood(1e4, 12, 1), leave="sample")
    expected = gstat[gstat["case"].str.strip() == "leave one out"]
    np.testing.assert_allclose(frame["estimate"], expected["estimate"], rtol=1e-8)
    np.testing.assert_allclose(frame["variance"], expected["variance"], rtol=1e-8)


def euler(model):
    """Angles about z, y and x, in radians, that turn x, y, z onto the axes of the model."""
    major, semi, minor = model.axes
    return Rotation.from_matrix(np.column_stack([major, -semi, minor])).as_euler("zyx")


@pytest.mark.parametrize("model", [ANISOTROPIC, GAUSSIAN])
def test_gstools(model, data):
    gstools = pytest.importorskip("gstools")
    points, values, targets = data
    item = model.structures[0]
    # rescale turns the practical range into the length scale of each model of the library
    kind, rescale = {
        "spherical": (gstools.Spherical, 1.0),
        "gaussian": (gstools.Gaussian, math.sqrt(3.0)),
    }[item.shape]
    theirs = kind(
        dim=3,
        var=item.sill,
        len_scale=item.ranges[0],
        rescale=rescale,
        nugget=model.nugget,
        anis=[item.ranges[1] / item.ranges[0], item.ranges[2] / item.ranges[0]],
        angles=euler(model),
    )
    krige = gstools.krige.Ordinary(theirs, points.T, values, exact=True)
    estimate, variance = krige(targets.T, return_var=True)
    result = ordinary_kriging(points, values, targets, model)
    np.testing.assert_allclose(result.estimate, estimate, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(result.variance, variance, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("nearest", [None, 10])
def test_pykrige(nearest, data):
    pykrige = pytest.importorskip("pykrige.ok3d")
    points, values, targets = data
    model = VariogramModel(0.3, [Structure("exponential", 1.0, (60.0, 36.0, 12.0))], 60.0, 20.0, 35.0)
    item = model.structures[0]
    angle_z, angle_y, angle_x = np.degrees(euler(model))
    # its third axis is turned about x first, its scaling divides, and its exponential is exp(-3h/a)
    theirs = pykrige.OrdinaryKriging3D(
        *points.T,
        values,
        variogram_model="exponential",
        variogram_parameters={"psill": item.sill, "range": item.ranges[0], "nugget": model.nugget},
        anisotropy_scaling_y=item.ranges[0] / item.ranges[1],
        anisotropy_scaling_z=item.ranges[0] / item.ranges[2],
        anisotropy_angle_x=angle_x,
        anisotropy_angle_y=angle_y,
        anisotropy_angle_z=angle_z,
    )
    estimate, variance = theirs.execute("points", *targets.T, n_closest_points=nearest, backend="loop")
    # its moving window takes the nearest in the space of the variogram
    road = (
        None
        if nearest is None
        else Neighbourhood(
            tuple(1e4 * side for side in item.ranges), nearest, 1, azimuth=60.0, plunge=20.0, tilt=35.0
        )
    )
    result = ordinary_kriging(points, values, targets, model, road)
    np.testing.assert_allclose(result.estimate, np.asarray(estimate), rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(result.variance, np.asarray(variance), rtol=1e-9, atol=1e-9)

"""Speed and memory of the block model; run with -m benchmark."""

from __future__ import annotations

import resource
import time

import pytest

from sms_resource.blocks.body import build_body
from sms_resource.blocks.model import fill_blocks, propose_grid
from tests.blocks.mounds import invent_mound


@pytest.mark.benchmark
@pytest.mark.parametrize(
    ("blocks", "seconds", "megabytes"), [(1_000_000, 10, 2_000), (10_000_000, 90, 4_000)]
)
def test_blocks_in_time_and_memory(blocks: int, seconds: float, megabytes: float) -> None:
    mound = invent_mound(6, cell_m=1.0)
    xy = mound.contacts[["easting", "northing"]].to_numpy()
    warm = build_body(mound.seafloor, mound.outline, mound.contacts)
    fill_blocks(warm, propose_grid(warm, xy, size=(10, 10, 10))[0])  # compiles the kernels
    edge = (2 * warm.volume_m3 / blocks) ** (1 / 3) * 0.93
    start = time.perf_counter()
    body = build_body(mound.seafloor, mound.outline, mound.contacts)
    model = fill_blocks(body, propose_grid(body, xy, size=(edge, edge, edge / 2))[0])
    spent = time.perf_counter() - start
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    assert len(model) >= blocks
    assert spent < seconds and peak < megabytes, f"{len(model):,} blocks in {spent:.1f} s, {peak:.0f} MB"

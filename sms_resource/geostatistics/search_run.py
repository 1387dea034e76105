"""Search for the samples of many targets: the passes, the order of work, and what was found."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .candidate_kernels import CELLS, SHELLS
from .model import along
from .neighbourhood import Neighbourhood
from .search_kernels import (
    ENOUGH,
    MOST_SAMPLES,
    hash_sets,
    mark_new_sets,
    search_samples,
)

FloatArray = NDArray[np.float64]
Int32Array = NDArray[np.int32]
Int64Array = NDArray[np.int64]

CHUNK = 16384  # targets in work at one time: some 10 MB, whatever the number of targets
_LONGEST_RUN = 8  # targets that share one factorisation before it is made again


def share_out(kernel: Callable[..., None], workers: int, *arguments: Any) -> None:
    """Run ``kernel(worker, workers, *arguments)`` for every worker, the first here and each other in a thread.

    The kernels give up the interpreter's lock. Compared with numba's own parallel loops this compiles in a
    third of the time, may be called from any thread, and lets an exception through.
    """
    if workers == 1:
        kernel(0, 1, *arguments)
        return
    with ThreadPoolExecutor(workers - 1) as pool:
        shares = [pool.submit(kernel, worker, workers, *arguments) for worker in range(1, workers)]
        kernel(0, workers, *arguments)
        for share in shares:
            share.result()


def near_order(points: FloatArray) -> Int64Array:
    """An order of (n, 3) points in which neighbours in space mostly follow each other (Morton 1966)."""
    if len(points) < 3:
        return np.arange(len(points))
    low = points.min(axis=0)
    extent = float((points - low).max())
    cells = ((points - low) * (1023.0 / extent if extent > 0.0 else 0.0)).astype(np.uint64)
    key = np.zeros(len(points), dtype=np.uint64)
    for axis in range(3):
        bits = cells[:, axis]
        for shift, mask in ((16, 0x30000FF), (8, 0x300F00F), (4, 0x30C30C3), (2, 0x9249249)):
            bits = (bits | (bits << np.uint64(shift))) & np.uint64(mask)
        key |= bits << np.uint64(axis)
    return np.argsort(key, kind="stable")


@dataclass
class Found:
    """What the search found for the c targets of one chunk; see ``search_samples`` for the arrays."""

    samples: Int32Array
    reach: FloatArray
    count: Int32Array
    hole_count: Int32Array
    nearest: FloatArray
    status: NDArray[np.int8]
    pass_number: NDArray[np.int8]

    def runs(self) -> tuple[Int64Array, Int64Array, Int64Array]:
        """Targets with enough samples, ordered so that those with the same samples are next to each other.

        Returns
        -------
        order : (q,) targets
        starts, sizes : runs of ``order`` that see the same samples, the longest first
        """
        hashes = np.empty(len(self.count), dtype=np.uint64)
        hash_sets(self.samples, self.count, self.status, hashes)
        usable = np.flatnonzero(self.status == ENOUGH)
        order = usable[np.argsort(hashes[usable], kind="stable")].astype(np.int64)
        if not len(order):
            return order, order, order
        is_new = np.empty(len(order), dtype=np.bool_)
        mark_new_sets(self.samples, self.count, order, is_new)
        starts = np.flatnonzero(is_new)
        sizes = np.diff(np.append(starts, len(order)))
        pieces = -(-sizes // _LONGEST_RUN)
        part = np.arange(pieces.sum()) - np.repeat(np.cumsum(pieces) - pieces, pieces)
        first = np.repeat(starts, pieces) + part * _LONGEST_RUN
        length = np.minimum(np.repeat(sizes, pieces) - part * _LONGEST_RUN, _LONGEST_RUN)
        # the longest first, and among equals neighbours in space together, for they lie together in memory
        longest_first = np.lexsort((order[first], -length))
        return order, first[longest_first], length[longest_first]


class Finder:
    """The search of one set of samples under one or several passes.

    Parameters
    ----------
    points : (n, 3) local coordinates of the samples, metres
    holes : (n,) numbers of their holes
    passes : neighbourhoods to try in turn
    threads : int
    """

    def __init__(
        self, points: FloatArray, holes: Int32Array, passes: Sequence[Neighbourhood], threads: int
    ) -> None:
        if len(points) >= MOST_SAMPLES:
            raise ValueError(
                f"coordinates holds {len(points)} samples; the search takes up to {MOST_SAMPLES}"
            )
        self.passes = list(passes)
        self.threads = threads
        self._holes = np.ascontiguousarray(holes, dtype=np.int32)
        self._plain = np.ascontiguousarray(points.T)
        self._scaled = [along(item.axes, points) / np.array(item.radii)[:, None] for item in self.passes]
        n = len(points)
        by_hole = np.argsort(self._holes, kind="stable")
        # where holes have no limit their order is no help, and the order of the samples is
        self._order = [by_hole if (item.max_per_hole or n) < n else np.arange(n) for item in self.passes]
        self._grouped = [
            np.ascontiguousarray(item[:, order]) for item, order in zip(self._scaled, self._order)
        ]
        hole_count = int(self._holes.max()) + 1 if n else 0
        self._whole = np.empty((threads, 6 * n + CELLS * SHELLS + 1 + hole_count), dtype=np.int64)
        self._real = np.empty((threads, 28, n + 2))
        self.capacity = max(min(item.max_samples, max(n, 1)) for item in self.passes)

    def find(
        self, targets: FloatArray, skip_hole: Int32Array | None = None, skip_sample: Int32Array | None = None
    ) -> Found:
        """Samples for (c, 3) local targets, in the order given; neighbours should follow each other."""
        c = len(targets)
        none = np.full(c, -1, dtype=np.int32)
        out = Found(
            np.zeros((c, self.capacity), dtype=np.int32),
            np.zeros((c, self.capacity)),
            np.zeros(c, dtype=np.int32),
            np.zeros(c, dtype=np.int32),
            np.full(c, np.nan),
            np.ones(c, dtype=np.int8),
            np.zeros(c, dtype=np.int8),
        )
        if not len(self._holes):
            return out
        finite = np.isfinite(targets).all(axis=1)
        rows = np.flatnonzero(finite)
        n = len(self._holes)
        for number, item in enumerate(self.passes, start=1):
            if not len(rows):
                break
            limits = np.array(
                [
                    min(item.max_samples, self.capacity),
                    item.min_samples,
                    item.max_per_hole if (item.max_per_hole or n) < n else n + 1,
                    item.min_holes,
                    item.sector_count,
                    min(item.sector_limit, n + 1),
                ],
                dtype=np.int64,
            )
            share_out(
                search_samples,
                self.threads,
                self._scaled[number - 1],
                self._plain,
                self._holes,
                self._grouped[number - 1],
                self._order[number - 1],
                np.ascontiguousarray(along(item.axes, targets).T / np.array(item.radii)),
                targets,
                rows,
                none if skip_hole is None else skip_hole,
                none if skip_sample is None else skip_sample,
                skip_hole is None and skip_sample is None,
                limits,
                item.radii[0],
                out.samples,
                out.reach,
                out.count,
                out.hole_count,
                out.nearest,
                out.status,
                self._whole,
                self._real,
            )
            out.pass_number[rows[out.status[rows] == ENOUGH]] = number
            rows = rows[out.status[rows] != ENOUGH]
        return out


def target_chunks(
    targets: FloatArray, origin: FloatArray, first_pass: Neighbourhood
) -> Iterator[tuple[Int64Array, FloatArray]]:
    """Chunks of (b, 3) targets: their rows, neighbours in the search together, and their local coordinates."""
    for first in range(0, len(targets), CHUNK):
        local = np.asarray(targets[first : first + CHUNK], dtype=float) - origin
        reduced = along(first_pass.axes, np.where(np.isfinite(local), local, 0.0)).T / np.array(
            first_pass.radii
        )
        order = near_order(reduced)
        yield order + first, np.ascontiguousarray(local[order])

"""Ordinary and simple kriging of points and blocks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from sms_resource.findings import Findings

from .inputs import Samples, checked_block, checked_samples, checked_threads, points_array
from .kriging_setup import ModelArrays, model_arrays
from .model import VariogramModel, as_models
from .neighbourhood import HighGradeRestraint, Neighbourhood, as_passes, check_holes

FloatArray = NDArray[np.float64]

STATUS = {
    0: "estimated",
    1: "too few samples",
    2: "too few holes",
    3: "singular system",
    4: "not finite",
}


@dataclass(frozen=True)
class KrigingResult:
    """Kriged targets: arrays of b rows, (b, m) for m columns of values or (b,) for a plain vector.

    Attributes
    ----------
    estimate, variance : in the unit of the value, and its square
    lagrange : multiplier mu of ``K w + mu 1 = k``
    slope_of_regression : (BV - KV + |mu|) / (BV - KV + 2 |mu|), with BV the variance of the target's support
    kriging_efficiency : (BV - KV) / BV (Krige 1997)
    sample_count, hole_count : samples and holes that were found; without hole ids each sample is a hole
    nearest_distance : plain distance in metres from the centre of the target to the nearest sample found
    negative_weight_sum : sum of the weights below zero
    status : 0 estimated, 1 too few samples, 2 too few holes, 3 singular system, 4 not finite
    pass_number : number of the neighbourhood that found the samples, from 1; 0 for none or all samples
    """

    estimate: FloatArray
    variance: FloatArray
    lagrange: FloatArray
    slope_of_regression: FloatArray
    kriging_efficiency: FloatArray
    sample_count: NDArray[np.int32]
    hole_count: NDArray[np.int32]
    nearest_distance: FloatArray
    negative_weight_sum: FloatArray
    status: NDArray[np.int8]
    pass_number: NDArray[np.int8]

    def status_counts(self) -> dict[str, int]:
        """How many targets (times columns) came to each status."""
        return {name: int((self.status == code).sum()) for code, name in STATUS.items()}

    def findings(self, names: Sequence[str] | None = None) -> Findings:
        """What a reader must know: targets without an estimate, and why; ``names`` are the columns."""
        out = Findings()
        status = self.status if self.status.ndim == 2 else self.status[:, None]
        remedies = {
            1: ("kriging-too-few-samples", "widen the search, add a pass, or lower min_samples"),
            2: ("kriging-too-few-holes", "widen the search, add a pass, or lower min_holes"),
            3: ("kriging-singular", "look for samples that nearly coincide; add a nugget or another shape"),
            4: ("kriging-not-finite", "look at the coordinates of the targets and at the model"),
        }
        for column in range(status.shape[1]):
            name = names[column] if names is not None else f"column {column}"
            for code, (kind, remedy) in remedies.items():
                number = int((status[:, column] == code).sum())
                if number:
                    text = f"{name}: {number} of {len(status)} targets are not estimated ({STATUS[code]})"
                    out.warning(kind, text, remedy, column=name)
            sums = self.negative_weight_sum if status is self.status else self.negative_weight_sum[:, None]
            done = sums[status[:, column] == 0, column]
            share = float((done < -0.1).mean()) if len(done) else 0.0
            if share > 0.1:
                out.warning(
                    "kriging-negative-weights",
                    f"{name}: negative weights sum below -0.1 in {share:.0%} of the targets estimated",
                    "take fewer samples, or look at the shape of the variogram",
                    column=name,
                )
        return out

    def __repr__(self) -> str:
        shape = " x ".join(str(size) for size in self.estimate.shape)
        told = ", ".join(f"{number} {name}" for name, number in self.status_counts().items() if number)
        return f"KrigingResult({shape}: {told})"


def ordinary_kriging(
    coordinates: ArrayLike,
    values: ArrayLike,
    targets: ArrayLike,
    model: VariogramModel | Sequence[VariogramModel],
    neighbourhood: Neighbourhood | Sequence[Neighbourhood] | None = None,
    *,
    hole_ids: ArrayLike | None = None,
    block_size: ArrayLike | None = None,
    discretisation: ArrayLike = (1, 1, 1),
    threads: int | None = None,
    block_azimuth: float = 0.0,
    high_grade_restraint: HighGradeRestraint | None = None,
    coincident: str = "error",
) -> KrigingResult:
    """Ordinary kriging (Matheron 1963) of points or blocks.

    Parameters
    ----------
    coordinates : (n, 3) easting, northing, elevation of the samples, metres
    values : (n,) or (n, m)
        NaN = that sample is absent for that column.
    targets : (b, 3) centres of the blocks, or points, metres
    model : VariogramModel, or one per column of values
    neighbourhood : Neighbourhood, or several to try in turn, or None for all samples
    hole_ids : (n,), optional
        Hole of each sample; needed for limits by hole.
    block_size : (3,) sides in metres, or None for points, which are exact at the data
    discretisation : (3,) number of points along each side of a block, at the midpoints of its cells
    threads : int, optional
        Threads to use; all by default. The result does not depend on it.
    block_azimuth : float
        Degrees by which the northing side of the blocks is turned clockwise from north.
    high_grade_restraint : HighGradeRestraint, optional
    coincident : "error" | "average" | "keep_first"
        What to do with samples at one place (within a micrometre) that hold values in one column.

    Returns
    -------
    KrigingResult

    Raises
    ------
    ValueError
        For arguments that do not fit together; the message names the argument, what came and what was wanted.

    Notes
    -----
    Distances are formed in local coordinates. Samples are taken nearest first (see Neighbourhood). The nugget
    does not count in block-to-point covariances nor inside a block. Targets are streamed: memory does not
    grow with their number beyond the output.

    Examples
    --------
    >>> import numpy as np
    >>> model = VariogramModel(0.0, [Structure("spherical", 1.0, 30.0)])  # doctest: +SKIP
    >>> ordinary_kriging([[0, 0, 0], [10, 0, 0]], [1.0, 3.0], [[5, 0, 0]], model).estimate  # doctest: +SKIP
    array([2.])
    """
    samples = checked_samples(coordinates, values, hole_ids, coincident)
    return _krige_all(
        samples, targets, model, neighbourhood, hole_ids, block_size, discretisation, threads, block_azimuth,
        high_grade_restraint, None,
    )  # fmt: skip


def simple_kriging(
    coordinates: ArrayLike,
    values: ArrayLike,
    targets: ArrayLike,
    model: VariogramModel | Sequence[VariogramModel],
    neighbourhood: Neighbourhood | Sequence[Neighbourhood] | None = None,
    *,
    mean: ArrayLike,
    hole_ids: ArrayLike | None = None,
    block_size: ArrayLike | None = None,
    discretisation: ArrayLike = (1, 1, 1),
    threads: int | None = None,
    block_azimuth: float = 0.0,
    coincident: str = "error",
) -> KrigingResult:
    """Simple kriging with a known ``mean`` (one, or one per column); the rest as in ``ordinary_kriging``.

    ``lagrange`` is zero and the slope of regression one by construction.
    """
    samples = checked_samples(coordinates, values, hole_ids, coincident)
    columns = samples.values.shape[1]
    means = np.atleast_1d(np.asarray(mean, dtype=float))
    if means.shape not in ((1,), (columns,)) or not np.isfinite(means).all():
        raise ValueError(f"mean {mean!r}: wanted one finite number, or {columns}, one per column of values")
    return _krige_all(
        samples, targets, model, neighbourhood, hole_ids, block_size, discretisation, threads, block_azimuth,
        None, means * np.ones(columns),
    )  # fmt: skip


@dataclass
class Outputs:
    """The arrays that are filled chunk by chunk, all (b, m)."""

    estimate: FloatArray
    variance: FloatArray
    lagrange: FloatArray
    slope: FloatArray
    efficiency: FloatArray
    negative: FloatArray
    nearest: FloatArray
    count: NDArray[np.int32]
    holes: NDArray[np.int32]
    status: NDArray[np.int8]
    pass_number: NDArray[np.int8]

    @classmethod
    def empty(cls, rows: int, columns: int) -> Outputs:
        """NaN for numbers, zero for counts, and "too few samples" until something better is known."""
        shape = (rows, columns)

        def missing() -> FloatArray:
            return np.full(shape, np.nan)

        return cls(
            estimate=missing(),
            variance=missing(),
            lagrange=missing(),
            slope=missing(),
            efficiency=missing(),
            negative=missing(),
            nearest=missing(),
            count=np.zeros(shape, dtype=np.int32),
            holes=np.zeros(shape, dtype=np.int32),
            status=np.ones(shape, dtype=np.int8),
            pass_number=np.zeros(shape, dtype=np.int8),
        )

    def result(self, samples: Samples) -> KrigingResult:
        """The same arrays in the shape that the caller wants."""
        shaped = samples.shaped
        return KrigingResult(
            estimate=shaped(self.estimate),
            variance=shaped(self.variance),
            lagrange=shaped(self.lagrange),
            slope_of_regression=shaped(self.slope),
            kriging_efficiency=shaped(self.efficiency),
            sample_count=shaped(self.count),
            hole_count=shaped(self.holes),
            nearest_distance=shaped(self.nearest),
            negative_weight_sum=shaped(self.negative),
            status=shaped(self.status),
            pass_number=shaped(self.pass_number),
        )


def _krige_all(
    samples: Samples,
    targets: ArrayLike,
    model: VariogramModel | Sequence[VariogramModel],
    neighbourhood: Neighbourhood | Sequence[Neighbourhood] | None,
    hole_ids: ArrayLike | None,
    block_size: ArrayLike | None,
    discretisation: ArrayLike,
    threads: int | None,
    block_azimuth: float,
    restraint: HighGradeRestraint | None,
    means: FloatArray | None,
) -> KrigingResult:
    """Check what is left to check, and krige by the moving neighbourhood or from all samples."""
    from . import kriging_run

    places = points_array("targets", targets)
    passes = as_passes(neighbourhood)
    check_holes(passes, hole_ids)
    models = as_models(model, samples.values.shape[1])
    size, counts = checked_block(block_size, discretisation)
    arrays: dict[VariogramModel, ModelArrays] = {
        item: model_arrays(item, samples.points, size, counts, block_azimuth) for item in models
    }
    workers = checked_threads(threads)
    out = Outputs.empty(len(places), samples.values.shape[1])
    if passes:
        kriging_run.by_neighbourhood(samples, places, models, arrays, passes, workers, restraint, means, out)
    else:
        if restraint is not None:
            raise ValueError("high_grade_restraint needs a neighbourhood; wanted one, or no restraint")
        kriging_run.from_all_samples(samples, places, models, arrays, workers, means, out)
    return out.result(samples)

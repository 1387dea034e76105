"""What each code of a finding of this room means."""

from __future__ import annotations

CODES: dict[str, str] = {
    # kriging and search
    "kriging-too-few-samples": "Targets without an estimate: fewer samples in reach than the least asked for.",
    "kriging-too-few-holes": "Targets without an estimate: samples from fewer holes than the least asked for.",
    "kriging-singular": "Targets without an estimate: the kriging system has no stable solution.",
    "kriging-not-finite": "Targets without an estimate: a coordinate or a result is not a number.",
    "kriging-negative-weights": "Negative weights sum below -0.1 in more than a tenth of the targets.",
    "samples-not-located": "A sample has no position.",
    "samples-coincident": "Two samples at one place hold different values.",
    "samples-single": "One sample alone holds a value of a column.",
    "samples-equal": "All values of a column are equal: there is nothing to estimate.",
    "samples-in-one-line": "All samples lie in one line in plan: the estimate knows nothing across it.",
    # experimental variograms, fit and validation
    "variogram-no-variance": "The values do not vary, or there is one sample: the model is assumed.",
    "variogram-not-inferred": "Too few pairs, samples or holes for a variogram: ranges are assumed.",
    "variogram-no-continuity": "The shortest pairs in the plane already stand at the sill: the range is assumed.",
    "variogram-holes-in-line": "All holes lie in one line: the range across it is assumed.",
    "variogram-zonal": "Part of the variance varies only across the plane of continuity, as with a trend in depth.",
    "variogram-bound-hit": "A fitted parameter of a variogram stands at a limit.",
    "validation-flag": "A check of the estimate lies outside its limit.",
}

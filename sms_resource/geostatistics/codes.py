"""What each code of a finding of this room means."""

from __future__ import annotations

CODES: dict[str, str] = {
    # kriging and search
    "kriging-too-few-samples": "Targets without an estimate: fewer samples in reach than the least asked for.",
    "kriging-too-few-holes": "Targets without an estimate: samples from fewer holes than the least asked for.",
    "kriging-singular": "Targets without an estimate: the kriging system has no stable solution.",
    "kriging-not-finite": "Targets without an estimate: a coordinate or a result is not a number.",
    "kriging-negative-weights": "Negative weights carry a large share in many targets.",
    "kriging-constant-values": "All values of a column are equal: there is nothing to estimate.",
    "samples-in-one-line": "All samples lie on one line: the estimate knows nothing across it.",
    # experimental variograms, fit and validation
}

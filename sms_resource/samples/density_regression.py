"""Dry density as a straight line of grades, with the interval of the line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sms_resource.findings import Findings
from sms_resource.samples.intervals import names, numbers
from sms_resource.units import column_element, element_label

Floats = NDArray[np.float64]
Case = Literal["low", "base", "high"]
CASES: tuple[Case, ...] = ("low", "base", "high")
REGRESSORS = ("cu_pct", "zn_pct", "fe_pct")


@dataclass(frozen=True)
class Regression:
    """Dry density as a straight line of grades: coefficients, their fit and where they were seen."""

    predictors: tuple[str, ...]
    coefficients: Floats
    inverse: Floats
    residual_sd: float
    r_squared: float
    count: int
    quantile: float
    least: Floats
    greatest: Floats

    def statement(self) -> str:
        """The equation and its fit as text."""
        terms = " ".join(f"{c:+.4f} {_label(p)}" for c, p in zip(self.coefficients[1:], self.predictors))
        return (
            f"dry density (t/m3) = {self.coefficients[0]:.3f} {terms}; {self.count} pairs of density and assays, "
            f"R2 {self.r_squared:.2f}, residual SD {self.residual_sd:.3f} t/m3"
        )

    def predict(self, grades: pd.DataFrame, case: Case = "base") -> Floats:
        """Dry density (t/m3); low and high are the interval of the mean of the line."""
        x = np.column_stack([np.ones(len(grades)), *(numbers(grades, name) for name in self.predictors)])
        mean = x @ self.coefficients
        if case == "base":
            return mean
        spread = np.sqrt(np.maximum(np.einsum("ij,jk,ik->i", x, self.inverse, x), 0.0))
        half = self.quantile * self.residual_sd * spread
        return mean - half if case == "low" else mean + half

    def outside(self, grades: pd.DataFrame) -> NDArray[np.bool_]:
        """Rows whose grades lie outside the range that the line saw."""
        x = np.column_stack([numbers(grades, name) for name in self.predictors])
        with np.errstate(invalid="ignore"):
            return np.asarray(((x < self.least) | (x > self.greatest)).any(axis=1), dtype=bool)


def usable_predictors(
    predictors: Sequence[str] | None, blocks_have: Sequence[str] | None, findings: Findings
) -> list[str]:
    """Predictors that blocks can use, with a warning about those that are not estimated into them."""
    if predictors is None:
        return [name for name in REGRESSORS if blocks_have is None or name in blocks_have]
    lost = [name for name in predictors if blocks_have is not None and name not in blocks_have]
    if lost:
        said = ", ".join(map(_label, lost))
        findings.warning(
            "density-predictor",
            f"{said} cannot predict density: blocks do not carry it. The regression goes without",
            "Add it to metals.estimate, or take it out of density.predictors.",
        )
    return [name for name in predictors if name not in lost]


def fit_regression(
    measured: pd.DataFrame, predictors: Sequence[str], confidence: float, findings: Findings
) -> Regression | None:
    """Ordinary least squares of dry density on grades; None, with a finding, where there are too few."""
    from scipy.special import stdtrit

    y = numbers(measured, "dry_density_tpm3")
    x = (
        np.column_stack([numbers(measured, name) for name in predictors])
        if predictors
        else np.empty((len(y), 0))
    )
    use = np.isfinite(x).all(axis=1)
    x, y = x[use], y[use]
    where = (
        names(measured["domain"]) if "domain" in measured else np.array(["all"] * len(measured), dtype=object)
    )
    design = np.column_stack([np.ones(len(y)), x])
    freedom = len(y) - design.shape[1]
    if not predictors or freedom < 3 or np.linalg.matrix_rank(design) < design.shape[1]:
        findings.warning(
            "density-regression",
            f"{len(y)} of {len(measured)} densities with {', '.join(map(_label, predictors)) or 'no predictor'} beside "
            "them are too few, or too alike, for a regression; the means of the domains and their intervals are used",
            "Take fewer predictors, or the method measured_mean.",
        )
        return None
    inverse = np.linalg.inv(design.T @ design)
    coefficients = inverse @ design.T @ y
    residual = y - design @ coefficients
    sd = float(np.sqrt(residual @ residual / freedom))
    spread = float(((y - y.mean()) ** 2).sum())
    fitted = Regression(
        tuple(predictors), coefficients, inverse, sd, 1.0 - float(residual @ residual) / spread if spread else 0.0,
        len(y), float(stdtrit(freedom, 0.5 + confidence / 2)), x.min(axis=0), x.max(axis=0),
    )  # fmt: skip
    weak = fitted.r_squared < 0.3
    (findings.warning if weak else findings.note)(
        "density-regression",
        f"{fitted.statement()}; pairs by domain: {_by_domain(where[np.asarray(use)])}; low and high are its "
        f"{100 * confidence:.0f} % interval" + ("; grades explain little of it" if weak else ""),
        "Compare with the means of the domains." if weak else "",
    )
    return fitted


def _label(column: str) -> str:
    return element_label(column) if column_element(column) else column


def _by_domain(where: NDArray[np.object_]) -> str:
    found = pd.Series(where, dtype=object).value_counts().sort_index()
    return ", ".join(f"{domain} {count}" for domain, count in found.items())

"""Outcome regression: the effect is a contrast of the coefficients.

It compares two people who differ in the exposure and are alike in the covariates: a *conditional* effect, taken to be
the same for all of them.
"""

from __future__ import annotations

from adjustplan.data import Floats
from adjustplan.estimate.kernel import FAMILIES, Influence, Regression
from adjustplan.estimate.kernel.influence import of_residual
from adjustplan.estimate.problem import Problem, Rows, Solution


def solve(rows: Rows, start: Regression | None = None) -> Solution:
    """Fit the outcome regression and read off the effect."""
    regression = outcome_regression(rows, start)
    return Solution(float(rows.matrix.contrast @ regression.coefficients), regression=regression)


def with_influence(rows: Rows, found: Solution) -> Solution:
    """The same with each person's influence on the effect."""
    regression, contrast = found.regression, rows.matrix.contrast
    assert regression is not None
    return found.ruled(lambda block: on_contrast(block, regression, contrast), rows)


def outcome_regression(rows: Rows, start: Regression | None = None) -> Regression:
    """The regression of the outcome on exposure and covariates."""
    at = None if start is None else start.coefficients
    return rows.regress(_outcome, FAMILIES[rows.setting.model], at)


def _outcome(block: Problem) -> tuple[Floats, Floats, Floats]:
    return block.matrix.columns, block.weight, block.mean


def on_contrast(block: Problem, regression: Regression, contrast: Floats) -> Influence:
    """The influence on a contrast of the coefficients: x' A c s (y - t μ)."""
    return of_score(block, regression, regression.bread @ contrast)


def of_score(block: Problem, regression: Regression, direction: Floats) -> Influence:
    """The influence ``x' direction`` times a person's score."""
    fitted = regression.means(block.matrix.columns)
    return of_residual((block.matrix.columns @ direction) * regression.gain(fitted), fitted)

"""Outcome regression: the effect is a contrast of the coefficients.

It compares two people who differ in the exposure and are alike in the covariates: a *conditional* effect, taken to be
the same for all of them.
"""

from __future__ import annotations

import numpy as np

from adjustplan.estimate.kernel import FAMILIES, Regression, regress
from adjustplan.estimate.kernel.influence import Influence, of_residual
from adjustplan.estimate.problem import Problem, Solution


def solve(problem: Problem, start: Regression | None = None) -> Solution:
    """Fit the outcome regression and read off the effect."""
    regression = outcome_regression(problem, start)
    return Solution(float(problem.matrix.contrast @ regression.coefficients), regression=regression)


def with_influence(problem: Problem, found: Solution) -> Solution:
    """The same with each person's influence on the effect."""
    assert found.regression is not None
    influence = on_contrast(problem, found.regression, problem.matrix.contrast)
    return Solution(found.value, influence=influence, regression=found.regression)


def outcome_regression(problem: Problem, start: Regression | None = None) -> Regression:
    """The regression of the outcome on exposure and covariates."""
    family = FAMILIES[problem.setting.model]
    at = None if start is None else start.coefficients
    return regress(problem.matrix.columns, problem.weight, problem.mean, family, at)


def on_contrast(problem: Problem, regression: Regression, contrast: np.ndarray) -> Influence:
    """The influence on a contrast of the coefficients: x' A c s (y - t μ)."""
    factor = (problem.matrix.columns @ (regression.bread @ contrast)) * regression.gain
    return of_residual(factor, regression.fitted)

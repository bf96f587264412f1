"""Standard errors and intervals: from each person's influence, or from the model where it says how outcomes vary."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.kernel import Influence, Regression, covariance, pattern_sums
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Solution
from adjustplan.estimate.results import NORMAL_QUANTILE, Estimate, with_interval


def in_words(problem: Problem, solution: Solution) -> Estimate:
    """The estimate on the scale of the measure, with its interval.

    Raises
    ------
    NotEstimableError
        If a number is too large for the arithmetic.
    """
    ratio = problem.setting.scale != "difference"
    error = standard_error(problem, solution)
    found = with_interval(solution.value, error, ratio=ratio, quantile=quantile(problem))
    numbers = (found.estimate, found.lower, found.upper, error)
    if not all(map(math.isfinite, numbers)) or (ratio and found.estimate == 0):
        message = f"The {problem.setting.measure} or its interval is too large for the arithmetic."
        raise NotEstimableError("estimate-overflow", message, "Look for rare levels, or another unit of the exposure.")
    return found


def standard_error(problem: Problem, solution: Solution) -> float:
    """On the scale of the solution's value."""
    if solution.standard_error is not None:
        return solution.standard_error
    if problem.setting.variance == "model":
        regression = solution.regression
        assert regression is not None  # a setting with the model's variance is a regression
        contrast = problem.matrix.contrast
        squared = float(contrast @ regression.bread @ contrast) * dispersion(problem, regression)
    else:
        assert solution.influence is not None
        squared = float(joint_covariance(problem, [solution.influence])[0, 0])
    return math.sqrt(squared)


def joint_covariance(problem: Problem, parts: Sequence[Influence]) -> Floats:
    """The covariance matrix of several estimates from the same people."""
    total = covariance(parts, problem.moments, problem.cluster)
    if problem.projection is None or problem.cluster is not None:
        return total
    along = problem.projection.scores.T @ pattern_sums(parts, problem.moments)
    return np.asarray(total - along.T @ problem.projection.inverse @ along)


def dispersion(problem: Problem, regression: Regression) -> float:
    """The variance of the residuals of a linear model; 1 where the family says how outcomes vary."""
    if regression.family.name != "linear":
        return 1.0
    freedom = problem.moments.people.sum() - problem.matrix.columns.shape[1]
    return squared_residuals(problem, regression) / float(freedom)


def squared_residuals(problem: Problem, regression: Regression) -> float:
    moments = problem.moments
    return float(np.sum(moments.deviations + problem.weight * (problem.mean - regression.fitted) ** 2))


def by_t(problem: Problem) -> bool:
    """Whether the interval is by the t distribution: that of a linear regression of means."""
    setting = problem.setting
    return setting.way == "regression" and setting.measure == "mean difference" and problem.cluster is None


def quantile(problem: Problem) -> float:
    """The factor of the 95 % interval."""
    if not by_t(problem):
        return NORMAL_QUANTILE
    from scipy.special import stdtrit

    return float(stdtrit(float(problem.moments.people.sum() - problem.matrix.columns.shape[1]), 0.975))

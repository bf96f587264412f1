"""A curve in the place of each straight line: the model is fitted again, and the effect looked at again.

The model that is fitted again is the one the way to adjust rests on: that of the exposure for weighting, that of the
outcome for all others. It starts where the straight line ended, so few steps are left to do.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from adjustplan.data import Floats, Patterns
from adjustplan.estimate.diagnostics.linearity import Departure, departure_from_linearity
from adjustplan.estimate.kernel import Regression
from adjustplan.estimate.matrix import ModelMatrix, model_matrix
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Solution
from adjustplan.estimate.standard_errors import dispersion, joint_covariance
from adjustplan.estimate.ways import doubly_robust, regression, standardisation, weighting

CURVE = "spline(4)"
FEWEST_VALUES = 6
"""A covariate with fewer values is better looked at as a category."""
_RANK_TOLERANCE = 1e-10
_SOLVERS = {
    "regression": regression.solve,
    "standardisation": standardisation.solve,
    "doubly robust": doubly_robust.solve,
}


def straight_lines(patterns: Patterns, problem: Problem, members: Sequence[str]) -> list[str]:
    """Members that enter the model as a straight line and have enough values for a curve."""
    kept = set(problem.matrix.variables)
    forms = problem.setting.forms
    lines = [name for name in members if forms[name] == "linear" and name in kept]
    return [name for name in lines if len(patterns.levels(name)) >= FEWEST_VALUES]


def departure(
    patterns: Patterns, problem: Problem, solution: Solution, standard_error: float | None, name: str
) -> Departure:
    """Test one of them.

    Raises
    ------
    NotEstimableError
        If the model with the curve has no usable estimate.
    """
    matrix, basis = _curved(patterns, problem, name)
    curved = replace(problem, matrix=matrix)
    if problem.setting.way == "weighting":
        weighted = weighting.solve(curved)
        assert weighted.propensity is not None
        fitted, value = weighted.propensity.regressions[0], weighted.value
        places = _places(tuple(np.array(matrix.variables)[matrix.covariates]), name)
        covariance = fitted.bread[np.ix_(places, places)]
    else:
        assert solution.regression is not None
        started = _start(problem, solution.regression, basis, name)
        family = solution.regression.family.name
        # a log-binomial model that fell back was fitted as Poisson
        curved = replace(curved, setting=replace(problem.setting, model=family))  # type: ignore[arg-type]
        found = _SOLVERS[problem.setting.way](curved, replace(solution.regression, coefficients=started))
        assert found.regression is not None
        fitted, value = found.regression, found.value
        places = _places(matrix.variables, name)
        covariance = _covariance(curved, fitted, places)
    if not (fitted.converged and _independent(fitted.bread)):
        message = f"The model with a curve for “{name}” has no usable estimate, so its straight line was not tested."
        raise NotEstimableError("estimate-no-convergence", message, "Look for extreme values.", "note")
    shift = None if standard_error is None else (value - solution.value) / standard_error
    values = patterns.values[name].to_numpy(dtype=np.float64)
    return departure_from_linearity(name, values, basis, fitted.coefficients[places], covariance, shift)


def _curved(patterns: Patterns, problem: Problem, name: str) -> tuple[ModelMatrix, Floats]:
    """The model matrix with the curve's columns at its end, in place of the line's; and these columns."""
    setting, matrix = problem.setting, problem.matrix
    drawn = model_matrix(patterns, setting.exposure, setting.coding, {name: CURVE}, [name])
    basis = drawn.columns[:, np.array(drawn.variables) == name]
    kept = np.flatnonzero(np.array(matrix.variables) != name)
    old = matrix.keep(kept)
    width = basis.shape[1]
    return ModelMatrix(
        np.hstack([old.columns, basis]),
        (*old.variables, *[name] * width),
        np.hstack([old.exposed, basis]),
        np.hstack([old.reference, basis]),
        np.concatenate([old.covariates, np.ones(width, dtype=bool)]),
    ), basis


def _start(problem: Problem, line: Regression, basis: Floats, name: str) -> Floats:
    """The coefficients that draw the same straight line with the curve's columns."""
    names = np.array(problem.matrix.variables)
    own = int(np.flatnonzero(names == name)[0])
    few = np.linspace(0, len(basis) - 1, min(len(basis), 2000)).astype(int)
    design = np.column_stack([np.ones(len(few)), basis[few]])
    drawn = np.linalg.lstsq(design, problem.matrix.columns[few, own] * line.coefficients[own], rcond=None)[0]
    coefficients = np.concatenate([line.coefficients[names != name], drawn[1:]])
    coefficients[0] += drawn[0]
    return np.asarray(coefficients)


def _covariance(problem: Problem, fitted: Regression, places: np.ndarray) -> Floats:
    if problem.setting.variance == "model":
        return np.asarray(fitted.bread[np.ix_(places, places)] * dispersion(problem, fitted))
    each = np.eye(len(fitted.coefficients))[places]
    return joint_covariance(problem, [regression.on_contrast(problem, fitted, row) for row in each])


def _places(variables: Sequence[str], name: str) -> np.ndarray:
    return np.flatnonzero(np.array(variables) == name)


def _independent(bread: Floats) -> bool:
    """Whether the columns could be told apart, by the correlations of the coefficients."""
    if not np.isfinite(bread).all() or (np.diag(bread) <= 0).any():
        return False
    lengths = np.sqrt(np.diag(bread))
    sizes = np.linalg.eigvalsh(bread / np.outer(lengths, lengths))
    return bool(sizes[0] > _RANK_TOLERANCE * sizes[-1])

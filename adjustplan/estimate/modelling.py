"""One model: from complete covariate patterns to an estimate with its interval, or why there is none.

The order matters. First what can be seen without fitting (an outcome that does not vary, too few rows,
collinearity), then the fit, then whether its numbers mean anything (separation, a model that fits everybody
exactly, overflow).
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from adjustplan.data import Patterns
from adjustplan.data.patterns import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.existence import (
    independent_columns,
    looks_separated,
    null_directions,
    parts,
    separating_direction,
)
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.kernel import NotEstimableError, Variance, contrast_of, regress
from adjustplan.estimate.matrix import ModelMatrix, model_matrix
from adjustplan.estimate.results import Estimate
from adjustplan.identify.showing import list_text
from adjustplan.study import Measure

_EXACT = 1e-24  # share of the variance that is rounding only


def estimate_effect(
    patterns: Patterns,
    exposure: str,
    coding: ExposureCoding,
    forms: Mapping[str, str],
    measure: Measure,
    variance: Variance,
) -> tuple[Estimate | None, tuple[Finding, ...]]:
    """Estimate the effect of the exposure, with every other variable of ``patterns`` in the model.

    Parameters
    ----------
    patterns : Patterns
        Of complete rows, with the exposure and the covariates.
    exposure : str
    coding : ExposureCoding
    forms : mapping of str to str
        The form of each covariate.
    measure, variance

    Returns
    -------
    estimate : Estimate or None
    findings : tuple of Finding
        Why there is no estimate, or what to know about it.
    """
    said: list[Finding] = []
    try:
        _needs_variation(patterns)
        matrix = model_matrix(patterns, exposure, coding, forms)
        said += matrix.findings
        matrix, collinear = _without_collinearity(matrix, patterns, exposure)
        said += collinear
        return _fit(patterns, matrix, measure, variance), tuple(said)
    except NotEstimableError as error:
        return None, (*said, error.finding)


def _needs_variation(patterns: Patterns) -> None:
    if np.ptp(patterns.mean) == 0 and patterns.deviations.sum() == 0:
        message = "The outcome has the same value in all complete rows."
        raise NotEstimableError("estimate-one-outcome", message, "Choose a set that loses fewer rows.")


def _without_collinearity(matrix: ModelMatrix, patterns: Patterns, exposure: str) -> tuple[ModelMatrix, list[Finding]]:
    """Drop columns that say nothing new; NotEstimableError where the exposure itself says nothing new."""
    weights = patterns.rows.astype(np.float64)
    said: list[Finding] = []
    directions = null_directions(matrix.columns, weights)
    if directions.shape[1]:
        names = _names(matrix, directions)
        if np.abs(matrix.contrast @ directions).max() > 1e-8 * np.abs(matrix.contrast).max():
            others = [name for name in names if name != exposure]
            message = f"“{exposure}” and {_listed(others)} determine each other in these rows (collinearity)."
            remedy = f"The data cannot tell their effects apart; take {_listed(others)} out or get other data."
            raise NotEstimableError("estimate-collinear", message, remedy)
        message = f"{_listed(names)} say partly the same (collinearity), so columns without news were dropped."
        remedy = "The effect of the exposure is not touched by it, but one of them may be enough."
        said.append(Finding("estimate-collinear", message, remedy, "warning"))
        kept = independent_columns(matrix.columns, weights)
        variables = tuple(matrix.variables[place] for place in kept)
        matrix = ModelMatrix(matrix.columns[:, kept], variables, matrix.contrast[kept])
    parameters, rows = matrix.columns.shape[1], int(patterns.rows.sum())
    if rows <= parameters:
        message = f"The model has {parameters} parameters but only {rows} complete rows."
        raise NotEstimableError("estimate-few-rows", message, "Adjust for less, or state simpler forms.")
    return matrix, said


def _fit(patterns: Patterns, matrix: ModelMatrix, measure: Measure, variance: Variance) -> Estimate:
    columns, mean = matrix.columns, patterns.mean
    rows = patterns.rows.astype(np.float64)
    regression = regress(columns, rows, mean, measure)
    if measure == "mean difference":
        _needs_residuals(patterns, rows, regression.fitted)
    elif looks_separated(regression, measure):
        if separating_direction(columns, mean, measure) is not None:
            names = _separating(matrix, mean, measure)
            verb = "predicts" if len(names) == 1 else "predict"
            message = f"{_listed(names)} {verb} the outcome without exception in some rows"
            remedy = "Merge levels with few rows, state a simpler form, or adjust for less."
            raise NotEstimableError("estimate-separation", f"{message} (separation); no finite estimate.", remedy)
        if not regression.converged:
            message = "The model did not converge."
            raise NotEstimableError("estimate-no-convergence", message, "Look for rare levels and extreme values.")
    value, error, quantile = contrast_of(
        regression, columns, rows, mean, patterns.deviations, matrix.contrast, measure, variance
    )
    numbers = [value, value - quantile * error, value + quantile * error]
    if measure != "mean difference":
        with np.errstate(over="ignore"):
            numbers = [float(np.exp(number)) for number in numbers]
    if not all(map(math.isfinite, [*numbers, error])) or (measure != "mean difference" and numbers[0] == 0):
        message = f"The {measure} or its interval is too large for the arithmetic."
        raise NotEstimableError("estimate-overflow", message, "Look for rare levels, or another unit of the exposure.")
    value, lower, upper = numbers
    return Estimate(value, lower, upper, error)


def _needs_residuals(patterns: Patterns, rows: Floats, fitted: Floats) -> None:
    """A linear model that fits everybody exactly has no variance, so no interval."""
    left = float(np.sum(patterns.deviations + rows * (patterns.mean - fitted) ** 2))
    centre = np.average(patterns.mean, weights=rows)
    whole = float(np.sum(patterns.deviations + rows * (patterns.mean - centre) ** 2))
    if left <= _EXACT * whole:
        message = "The model fits the outcome of everybody exactly, so there is no error to judge it by."
        raise NotEstimableError("estimate-exact", message, "Check whether the outcome was computed from the others.")


def _separating(matrix: ModelMatrix, mean: Floats, measure: Measure) -> list[str]:
    """A smallest group of variables that separates by itself, found by leaving out one after the other."""
    left = [name for name in dict.fromkeys(matrix.variables) if name]
    for name in tuple(left):
        fewer = [other for other in left if other != name]
        places = [place for place, owner in enumerate(matrix.variables) if owner in ("", *fewer)]
        if separating_direction(matrix.columns[:, places], mean, measure) is not None:
            left = fewer
    return left


def _names(matrix: ModelMatrix, directions: Floats) -> list[str]:
    """The variables that take part in these directions; the intercept is not one."""
    places = np.flatnonzero(parts(directions))
    return list(dict.fromkeys(name for name in (matrix.variables[place] for place in places) if name))


def _listed(names: Sequence[str]) -> str:
    return list_text([f"“{name}”" for name in names] or ["the covariates"])

"""One set: from complete covariate patterns to an estimate with its interval, or why there is none.

The order matters. First what can be seen without fitting (an outcome that does not vary, too few rows, collinearity),
then the fit, then whether its numbers mean anything (separation, a model that fits everybody exactly, overflow).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from adjustplan.data import Patterns
from adjustplan.errors import Finding
from adjustplan.estimate.collinearity import named, without_collinearity
from adjustplan.estimate.existence import looks_separated, separating_direction
from adjustplan.estimate.kernel import Regression
from adjustplan.estimate.matrix import model_matrix
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Projection, Setting, Solution
from adjustplan.estimate.results import Estimate
from adjustplan.estimate.row_models import RowFit, fit_rows, has_own_interval
from adjustplan.estimate.standard_errors import in_words, squared_residuals
from adjustplan.estimate.ways import solve, with_influence
from adjustplan.plan.analysis_schema import Model

_EXACT = 1e-24  # share of the variance that is rounding only


@dataclass(frozen=True, eq=False)
class Modelled:
    """What came of one set.

    Attributes
    ----------
    estimate : Estimate or None
    findings : tuple of Finding
        Why there is no estimate, or what to know about it.
    problem : Problem or None
        What was put to the way to adjust, where it came to that.
    solution : Solution or None
        What it found, with each person's influence.
    row_fit : RowFit or None
        The model, where it is one of those that need rows.
    model : str or None
        Its name in the plan.
    """

    estimate: Estimate | None
    findings: tuple[Finding, ...]
    problem: Problem | None = None
    solution: Solution | None = None
    row_fit: RowFit | None = None
    model: Model | None = None


def estimate_effect(
    patterns: Patterns, setting: Setting, members: Sequence[str], projection: Projection | None = None
) -> Modelled:
    """Estimate the effect of the exposure, adjusted for ``members``.

    Parameters
    ----------
    patterns : Patterns
        Of rows that are complete for the exposure and the members; other variables are passed over.
    setting : Setting
    members : sequence of str
    projection : Projection, optional
        Where the patterns are weighted for being complete.
    """
    said: list[Finding] = []
    problem = None
    try:
        if has_own_interval(setting):
            needs_variation(patterns)
            fitted = fit_rows(patterns, setting, members)
            return Modelled(fitted.estimate(), fitted.findings, row_fit=fitted, model=setting.model)
        problem, told = pose(patterns, setting, members)
        said += told
        problem = replace(problem, projection=projection)
        problem, solution, heard = _solved(problem)
        said += heard
        return Modelled(in_words(problem, solution), tuple(said), problem, solution, model=problem.setting.model)
    except NotEstimableError as error:
        return Modelled(None, (*said, error.finding), problem)


def pose(patterns: Patterns, setting: Setting, members: Sequence[str]) -> tuple[Problem, tuple[Finding, ...]]:
    """The problem that a set poses, and what to know of it.

    Raises
    ------
    NotEstimableError
        If it has no solution whatever the way to adjust.
    """
    needs_variation(patterns)
    modifier = setting.modifier if setting.way in ("standardisation", "doubly robust") else None
    matrix = model_matrix(
        patterns, setting.exposure, setting.coding, setting.forms, members, modifier if modifier in members else None
    )
    said = list(matrix.findings)
    matrix, collinear = without_collinearity(matrix, matrix.columns, patterns, setting)
    said += collinear
    cluster = pd.factorize(patterns.keys["cluster"], sort=True)[0] if setting.variance == "cluster" else None
    return Problem(
        matrix,
        patterns.moments,
        cluster,
        *setting.coding.groups(patterns.values[setting.exposure].to_numpy()),
        setting,
    ), tuple(said)


def needs_variation(patterns: Patterns) -> None:
    """NotEstimableError where the outcome is the same for everybody."""
    if np.ptp(patterns.mean) == 0 and patterns.deviations.sum() == 0 and np.ptp(patterns.moments.time) == 0:
        message = "The outcome has the same value in all complete rows."
        raise NotEstimableError("estimate-one-outcome", message, "Choose a set that loses fewer rows.")


def _solved(problem: Problem) -> tuple[Problem, Solution, list[Finding]]:
    """The solution with its influence, once it is sure that there is one, and the problem that it solves."""
    setting = problem.setting
    found = solve(problem)
    regression = found.regression
    if regression is not None and regression.family.name == "linear":
        _needs_residuals(problem, regression)
    elif regression is not None and looks_separated(regression):
        if separating_direction(problem.matrix.columns, problem.mean, regression.family) is not None:
            raise _separation(problem, regression)
        if not regression.converged and setting.model == "log-binomial":
            again, solution, told = _solved(replace(problem, setting=in_place_of_log_binomial(setting)))
            return again, solution, [_fallen_back(), *told]
        if not regression.converged:
            message = "The model did not converge."
            raise NotEstimableError("estimate-no-convergence", message, "Look for rare levels and extreme values.")
    return problem, with_influence(problem, found), list(found.findings)


def in_place_of_log_binomial(setting: Setting) -> Setting:
    """The modified Poisson model, whose variance is robust because a 0/1 outcome varies less than a Poisson one."""
    return replace(setting, model="poisson", variance="robust" if setting.variance == "model" else setting.variance)


def _fallen_back() -> Finding:
    message = "The log-binomial model did not converge, so the modified Poisson model was fitted (Zou 2004)."
    remedy = "Nothing needs to be done; say in the methods that it was used."
    return Finding("estimate-log-binomial", message, remedy, "note")


def _separation(problem: Problem, regression: Regression) -> NotEstimableError:
    names = _separating(problem, regression)
    verb = "predicts" if len(names) == 1 else "predict"
    message = f"{named(names)} {verb} the outcome without exception in some rows"
    remedy = "Merge levels with few rows, state a simpler form, or adjust for less."
    if problem.setting.model == "logistic" and problem.setting.way == "regression":
        remedy = f'{remedy[:-1]}; or plan model = "penalised logistic".'
    return NotEstimableError("estimate-separation", f"{message} (separation); no finite estimate.", remedy)


def _needs_residuals(problem: Problem, regression: Regression) -> None:
    """A linear model that fits everybody exactly has no variance, so no interval."""
    left = squared_residuals(problem, regression)
    weight = problem.weight
    centre = np.average(problem.mean, weights=weight)
    whole = float(np.sum(problem.moments.deviations + weight * (problem.mean - centre) ** 2))
    if left <= _EXACT * whole and problem.setting.kind != "rate":
        message = "The model fits the outcome of everybody exactly, so there is no error to judge it by."
        raise NotEstimableError("estimate-exact", message, "Check whether the outcome was computed from the others.")


def _separating(problem: Problem, regression: Regression) -> list[str]:
    """A smallest group of variables that separates by itself, found by leaving out one after the other."""
    matrix = problem.matrix
    left = [name for name in dict.fromkeys(matrix.variables) if name]
    for name in tuple(left):
        fewer = [other for other in left if other != name]
        places = [place for place, owner in enumerate(matrix.variables) if owner in ("", *fewer)]
        if separating_direction(matrix.columns[:, places], problem.mean, regression.family) is not None:
            left = fewer
    return left

"""The probability of each person's exposure level given the covariates, and the weights made from it.

A logistic regression of "has this level" on the covariates gives the probability e (the propensity score, Rosenbaum and
Rubin 1983, Biometrika 70:41). People who have the level are weighted by 1/e, so that they stand for everybody
(Robins, Hernán and Brumback 2000, Epidemiology 11:550). A *stabilised* weight is multiplied by the level's share of all
people, which changes no mean of a level but makes the weights comparable; *truncated* weights are set to a quantile
where they lie beyond it, which trades some bias for less noise (Cole and Hernán 2008, Am J Epidemiol 168:656).

With more than two levels each of the two compared has a regression of its own against all others.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.existence import looks_separated, separating_direction
from adjustplan.estimate.kernel import FAMILIES, Influence, Regression, regress
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem


@dataclass(frozen=True, eq=False)
class LevelWeights:
    """Weights that make the people with one level stand for everybody.

    Attributes
    ----------
    here : array of bool, shape (patterns,)
        Who has the level.
    probability : array of float, shape (patterns,)
        Of having it, given the covariates.
    weight : array of float, shape (patterns,)
        0 for those who do not have it.
    slope : array of float, shape (patterns,)
        Derivative of the weight by the linear predictor; 0 where it was truncated.
    regression : Regression
    """

    here: NDArray[np.bool_]
    probability: Floats
    weight: Floats
    slope: Floats
    regression: Regression


def level_weights(
    problem: Problem, start: tuple[Regression, Regression] | None = None
) -> tuple[LevelWeights, LevelWeights]:
    """The weights of the exposed and of the reference level.

    Raises
    ------
    NotEstimableError
        If the exposure has no levels, or some people could not have had one of the two (positivity).
    """
    setting = problem.setting
    if not (problem.is_exposed.any() and problem.is_reference.any()):
        message = f"“{setting.exposure}” has no levels, which {setting.way} needs."
        remedy = f'State {setting.exposure} = "category" or "cut(…)" in [analysis.forms], or adjust another way.'
        raise NotEstimableError("estimate-no-levels", message, remedy)
    people = problem.moments.weight
    exposed = _regress(problem, problem.is_exposed, None if start is None else start[0])
    binary = bool((problem.is_exposed | problem.is_reference)[people > 0].all())
    reference = (
        _mirrored(exposed) if binary else _regress(problem, problem.is_reference, None if start is None else start[1])
    )
    parts = [
        _raw(problem, problem.is_exposed, exposed, stabilised=setting.weighting.stabilised),
        _raw(problem, problem.is_reference, reference, stabilised=setting.weighting.stabilised),
    ]
    if setting.weighting.truncate is not None:
        share = setting.weighting.truncate
        weight = parts[0].weight + parts[1].weight
        low, high = _quantiles(weight, np.where(weight > 0, people, 0.0), (share, 1 - share))
        parts = [_truncated(part, low, high) for part in parts]
    return parts[0], parts[1]


def covariate_columns(problem: Problem) -> Floats:
    """The model matrix of the covariates alone."""
    return problem.matrix.columns[:, problem.matrix.covariates]


def weight_influence(problem: Problem, part: LevelWeights, gradient: Floats) -> Influence:
    """What estimating the weights adds to an influence whose estimate moves by ``gradient`` with the coefficients."""
    columns = covariate_columns(problem)
    residual = part.here - part.probability
    constant = (columns @ (part.regression.bread @ gradient)) * residual
    return Influence(constant, 0.0 * constant, 0.0 * constant)


def _regress(problem: Problem, here: NDArray[np.bool_], start: Regression | None) -> Regression:
    columns = covariate_columns(problem)
    share = here.astype(np.float64)
    weight = problem.moments.weight
    at = None if start is None else start.coefficients
    regression = regress(columns, weight, share, FAMILIES["logistic"], at)
    if looks_separated(regression):
        seen = weight > 0
        if separating_direction(columns[seen], share[seen], FAMILIES["logistic"]) is not None:
            message = (
                f"In some groups of covariates everybody, or nobody, has one level of “{problem.setting.exposure}”"
            )
            remedy = "Restrict the population to people who could have had either, or coarsen the covariates."
            raise NotEstimableError("estimate-positivity", f"{message} (no positivity).", remedy)
        if not regression.converged:
            message = f"The model of “{problem.setting.exposure}” did not converge."
            raise NotEstimableError("estimate-no-convergence", message, "Look for rare levels and extreme values.")
    return regression


def _mirrored(regression: Regression) -> Regression:
    """The regression of not having the level."""
    return Regression(
        regression.family,
        -regression.coefficients,
        regression.bread,
        1 - regression.fitted,
        regression.gain,
        regression.converged,
        regression.steps,
    )


def _raw(problem: Problem, here: NDArray[np.bool_], regression: Regression, *, stabilised: bool) -> LevelWeights:
    people = problem.moments.weight
    factor = float(people[here].sum() / people.sum()) if stabilised else 1.0
    with np.errstate(divide="ignore", over="ignore"):
        weight = np.where(here, factor / regression.fitted, 0.0)
    return LevelWeights(here, regression.fitted, weight, -weight * (1 - regression.fitted), regression)


def _truncated(part: LevelWeights, low: float, high: float) -> LevelWeights:
    beyond = part.here & ((part.weight < low) | (part.weight > high))
    weight = np.where(part.here, np.clip(part.weight, low, high), 0.0)
    return LevelWeights(part.here, part.probability, weight, np.where(beyond, 0.0, part.slope), part.regression)


def _quantiles(values: Floats, people: Floats, shares: tuple[float, float]) -> tuple[float, float]:
    """Quantiles of the values over people: the smallest value with at least that share of people at or below it."""
    order = np.argsort(values, kind="stable")
    reached = np.cumsum(people[order]) / people.sum()
    low, high = (values[order][min(int(np.searchsorted(reached, share - 1e-12)), len(values) - 1)] for share in shares)
    return float(low), float(high)

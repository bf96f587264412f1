"""The probability of each person's exposure level given the covariates, and the weights made from it.

A logistic regression of "has this level" on the covariates gives the probability e (the propensity score, Rosenbaum and
Rubin 1983, Biometrika 70:41). People who have the level are weighted by 1/e, so that they stand for everybody
(Robins, Hernán and Brumback 2000, Epidemiology 11:550). A *stabilised* weight is multiplied by the level's share of all
people, which changes no mean of a level but makes the weights comparable; *truncated* weights are set to a quantile
where they lie beyond it, which trades some bias for less noise (Cole and Hernán 2008, Am J Epidemiol 168:656).

With more than two levels each of the two compared has a regression of its own against all others.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.existence import looks_separated, separating_direction
from adjustplan.estimate.kernel import FAMILIES, Influence, Regression
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Rows, Setting

_LOGISTIC = FAMILIES["logistic"]


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
    """

    here: NDArray[np.bool_]
    probability: Floats
    weight: Floats
    slope: Floats


@dataclass(frozen=True, eq=False)
class Propensity:
    """The models of the two levels, and what turns their probabilities into weights.

    Attributes
    ----------
    regressions : tuple of Regression
        Of having the exposed level, and of having the reference level.
    shares : tuple of float
        Of all people who have each level.
    stabilised : bool
        Whether weights are multiplied by these shares.
    limits : tuple of (float, float) or None
        Where weights are truncated.
    """

    regressions: tuple[Regression, Regression]
    shares: tuple[float, float]
    stabilised: bool
    limits: tuple[float, float] | None = None

    def weights(self, block: Problem) -> tuple[LevelWeights, LevelWeights]:
        """The weights of a block of rows, for the exposed and the reference level."""
        columns = covariate_columns(block)
        parts = []
        for place, here in enumerate((block.is_exposed, block.is_reference)):
            probability = self.regressions[place].means(columns)
            factor = self.shares[place] if self.stabilised else 1.0
            with np.errstate(divide="ignore", over="ignore"):
                weight = np.where(here, factor / probability, 0.0)
            slope = -weight * (1 - probability)
            if self.limits is not None:
                beyond = here & ((weight < self.limits[0]) | (weight > self.limits[1]))
                weight = np.where(here, np.clip(weight, *self.limits), 0.0)
                slope = np.where(beyond, 0.0, slope)
            parts.append(LevelWeights(here, probability, weight, slope))
        return parts[0], parts[1]


def propensity(rows: Rows, start: tuple[Regression, Regression] | None = None) -> Propensity:
    """Fit the models of the exposed and of the reference level.

    Raises
    ------
    NotEstimableError
        If the exposure has no levels, or some people could not have had one of the two (positivity).
    """
    setting = rows.setting
    people, exposed, reference, others = rows.total(_counted)
    if not (exposed > 0 and reference > 0):
        raise no_levels(setting)
    first = _regress(rows, lambda block: block.is_exposed, None if start is None else start[0])
    second = (
        replace(first, coefficients=-first.coefficients)
        if others == 0
        else _regress(rows, lambda block: block.is_reference, None if start is None else start[1])
    )
    shares = (float(exposed / people), float(reference / people))
    found = Propensity((first, second), shares, setting.weighting.stabilised)
    if setting.weighting.truncate is None:
        return found
    share = setting.weighting.truncate
    return replace(found, limits=_quantiles(rows, found, (share, 1 - share)))


def no_levels(setting: Setting) -> NotEstimableError:
    """The refusal of a way that compares groups, where the exposure has none."""
    message = f"“{setting.exposure}” has no levels, which {setting.way} needs."
    remedy = f'State {setting.exposure} = "category" or "cut(…)" in [analysis.forms], or adjust another way.'
    return NotEstimableError("estimate-no-levels", message, remedy)


def covariate_columns(block: Problem) -> Floats:
    """The model matrix of the covariates alone."""
    return block.matrix.columns[:, block.matrix.covariates]


def weight_influence(block: Problem, regression: Regression, part: LevelWeights, gradient: Floats) -> Influence:
    """What estimating the weights adds to an influence whose estimate moves by ``gradient`` with the coefficients."""
    constant = (covariate_columns(block) @ (regression.bread @ gradient)) * (part.here - part.probability)
    return Influence(constant, np.zeros(len(constant)), np.zeros(len(constant)))


def _counted(block: Problem) -> Floats:
    """People in all, at the two levels, and at neither."""
    weight = np.where(block.moments.weight > 0, block.moments.weight, 0.0)
    neither = ~(block.is_exposed | block.is_reference)
    return np.array([weight.sum(), *(weight[here].sum() for here in (block.is_exposed, block.is_reference, neither))])


def _regress(rows: Rows, having: Callable[[Problem], NDArray[np.bool_]], start: Regression | None) -> Regression:
    def model(block: Problem) -> tuple[Floats, Floats, Floats]:
        return covariate_columns(block), block.moments.weight, having(block).astype(np.float64)

    regression = rows.regress(model, _LOGISTIC, None if start is None else start.coefficients)
    if looks_separated(regression):
        if isinstance(rows, Problem):
            columns, weight, share = model(rows)
            seen = weight > 0
            if separating_direction(columns[seen], share[seen], _LOGISTIC) is not None:
                raise _no_positivity(rows)
        elif not regression.converged:
            raise _no_positivity(rows)
        if not regression.converged:
            message = f"The model of “{rows.setting.exposure}” did not converge."
            raise NotEstimableError("estimate-no-convergence", message, "Look for rare levels and extreme values.")
    return regression


def _no_positivity(rows: Rows) -> NotEstimableError:
    message = f"In some groups of covariates everybody, or nobody, has one level of “{rows.setting.exposure}”"
    remedy = "Restrict the population to people who could have had either, or coarsen the covariates."
    return NotEstimableError("estimate-positivity", f"{message} (no positivity).", remedy)


def _quantiles(rows: Rows, found: Propensity, shares: tuple[float, float]) -> tuple[float, float]:
    """Quantiles of the weights over people: the smallest weight with at least that share of people at or below it."""

    def listed(block: Problem) -> _Listed:
        first, second = found.weights(block)
        weight = first.weight + second.weight
        here = (weight > 0) & (block.moments.weight > 0)
        return _Listed([weight[here]], [block.moments.weight[here]])

    every = rows.total(listed)
    values, people = np.concatenate(every.values), np.concatenate(every.people)
    order = np.argsort(values, kind="stable")
    reached = np.cumsum(people[order]) / people.sum()
    low, high = (values[order][min(int(np.searchsorted(reached, share - 1e-12)), len(values) - 1)] for share in shares)
    return float(low), float(high)


@dataclass(frozen=True, eq=False)
class _Listed:
    """Weights of people, block after block."""

    values: list[Floats]
    people: list[Floats]

    def __add__(self, other: _Listed) -> _Listed:
        return _Listed([*self.values, *other.values], [*self.people, *other.people])

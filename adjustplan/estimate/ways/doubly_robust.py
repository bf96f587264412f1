"""The doubly robust combination (augmented inverse-probability weighting).

Standardisation trusts the model of the outcome, weighting trusts the model of the exposure. Their combination
predicts everybody's outcome and corrects the prediction by the weighted errors it makes where the outcome is seen. It
is right if either model is (Robins, Rotnitzky and Zhao 1994, J Am Stat Assoc 89:846; Bang and Robins 2005, Biometrics
61:962). The influence counts what each person does to both models, so that the interval holds when only one of them
is right.
"""

from __future__ import annotations

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.kernel import Influence, Regression
from adjustplan.estimate.kernel.influence import of_residual
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Problem, Solution
from adjustplan.estimate.ways.marginal import compare, influence_on
from adjustplan.estimate.ways.propensity import LevelWeights, covariate_columns, level_weights, weight_influence
from adjustplan.estimate.ways.regression import outcome_regression


def solve(
    problem: Problem, start: Regression | None = None, parts: tuple[LevelWeights, LevelWeights] | None = None
) -> Solution:
    """Fit both models and combine them."""
    if problem.setting.kind == "rate":
        message = "Rates have no doubly robust estimate here: time at risk follows from the exposure too."
        raise NotEstimableError("estimate-way-measure", message, "Adjust a rate another way.")
    parts, regression = parts or level_weights(problem), outcome_regression(problem, start)
    ends = (problem.matrix.exposed, problem.matrix.reference)
    means = tuple(_mean(problem, regression, end, part) for end, part in zip(ends, parts, strict=True))
    both = (means[0], means[1])
    balance = parts[0].weight + parts[1].weight
    return Solution(
        compare(both, problem.setting), both, regression=regression, balance=balance, scores=parts[0].probability
    )


def with_influence(problem: Problem, found: Solution) -> Solution:
    """The same with each person's influence on the two means and the effect."""
    assert found.means is not None
    assert found.regression is not None
    parts = level_weights(problem)
    exposed = _on_mean(problem, found.regression, problem.matrix.exposed, parts[0], found.means[0])
    reference = _on_mean(problem, found.regression, problem.matrix.reference, parts[1], found.means[1])
    both = (exposed, reference)
    influence = influence_on(found.means, both, problem.setting.scale)
    return Solution(found.value, found.means, influence, both, found.regression, found.balance, found.scores)


def _inverse(problem: Problem, part: LevelWeights) -> tuple[Floats, Floats]:
    """Weights and their slopes without the stabilising factor, which would not cancel here."""
    if not problem.setting.weighting.stabilised:
        return part.weight, part.slope
    people = problem.moments.weight
    share = float(people[part.here].sum() / people.sum())
    return part.weight / share, part.slope / share


def _mean(problem: Problem, regression: Regression, end: Floats, part: LevelWeights) -> float:
    people = problem.moments.weight
    predicted = regression.family.mean(end @ regression.coefficients)
    inverse, _ = _inverse(problem, part)
    error = inverse * (np.nan_to_num(problem.mean) - predicted)
    return float(people @ (predicted + error) / people.sum())


def _on_mean(problem: Problem, regression: Regression, end: Floats, part: LevelWeights, mean: float) -> Influence:
    people = problem.moments.weight
    total = float(people.sum())
    predictor = end @ regression.coefficients
    predicted = regression.family.mean(predictor)
    inverse, slope = _inverse(problem, part)
    own = Influence((predicted - mean) / total, 0.0 * inverse, 0.0 * inverse) + of_residual(inverse / total, predicted)
    gradient = (people * (1 - inverse) * regression.family.slope(predictor)) @ end / total
    factor = (problem.matrix.columns @ (regression.bread @ gradient)) * regression.gain
    influence = own + of_residual(factor, regression.fitted)
    if problem.setting.weighting.known:
        return influence
    moved = people * slope * (np.nan_to_num(problem.mean) - predicted) / total
    return influence + weight_influence(problem, part, moved @ covariate_columns(problem))

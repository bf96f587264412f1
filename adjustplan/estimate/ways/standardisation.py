"""Standardisation (g-computation): predict everybody's outcome at both levels of the exposure, and average.

The outcome regression says what to expect of each person; setting the exposure of all to one level and averaging over
the people there are gives the mean outcome had all had that level (Robins 1986, Mathematical Modelling 7:1393; Hernán
and Robins, What If, chapter 13). Rates are averaged over time at risk. The influence of a person has two parts: their
covariates shift who is averaged over, and their outcome shifts the regression.
"""

from __future__ import annotations

from adjustplan.data import Floats
from adjustplan.estimate.kernel import Influence, Regression
from adjustplan.estimate.kernel.influence import of_residual
from adjustplan.estimate.problem import Problem, Solution
from adjustplan.estimate.ways.marginal import compare, influence_on
from adjustplan.estimate.ways.regression import outcome_regression


def solve(problem: Problem, start: Regression | None = None) -> Solution:
    """Fit the outcome regression, predict, and average."""
    regression = outcome_regression(problem, start)
    weight = problem.weight
    ends = (problem.matrix.exposed, problem.matrix.reference)
    predicted = [regression.family.mean(end @ regression.coefficients) for end in ends]
    means = (float(weight @ predicted[0] / weight.sum()), float(weight @ predicted[1] / weight.sum()))
    return Solution(compare(means, problem.setting), means, regression=regression)


def with_influence(problem: Problem, found: Solution) -> Solution:
    """The same with each person's influence on the two means and the effect."""
    assert found.means is not None
    assert found.regression is not None
    matrix = problem.matrix
    exposed = _on_mean(problem, found.regression, matrix.exposed, found.means[0])
    reference = _on_mean(problem, found.regression, matrix.reference, found.means[1])
    both = (exposed, reference)
    influence = influence_on(found.means, both, problem.setting.scale)
    return Solution(found.value, found.means, influence, both, found.regression)


def _on_mean(problem: Problem, regression: Regression, end: Floats, mean: float) -> Influence:
    weight = problem.weight
    predictor = end @ regression.coefficients
    apart = (regression.family.mean(predictor) - mean) / weight.sum()
    gradient = (weight * regression.family.slope(predictor)) @ end / weight.sum()
    nothing = 0.0 * apart
    factor = (problem.matrix.columns @ (regression.bread @ gradient)) * regression.gain
    return Influence(nothing, nothing, apart) + of_residual(factor, regression.fitted)

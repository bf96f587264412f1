"""Standardisation (g-computation): predict everybody's outcome at both levels of the exposure, and average.

The outcome regression says what to expect of each person; setting the exposure of all to one level and averaging over
the people there are gives the mean outcome had all had that level (Robins 1986, Mathematical Modelling 7:1393; Hernán
and Robins, What If, chapter 13). Rates are averaged over time at risk. The influence of a person has two parts: their
covariates shift who is averaged over, and their outcome shifts the regression.
"""

from __future__ import annotations

from functools import partial

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.kernel import Influence, Regression
from adjustplan.estimate.problem import Problem, Rows, Solution
from adjustplan.estimate.ways.marginal import compare, influence_on
from adjustplan.estimate.ways.regression import of_score, outcome_regression


def solve(rows: Rows, start: Regression | None = None) -> Solution:
    """Fit the outcome regression, predict, and average."""
    regression = outcome_regression(rows, start)

    def predicted(block: Problem) -> Floats:
        weight = block.weight
        ends = (block.matrix.exposed, block.matrix.reference)
        return np.array([weight.sum(), *(weight @ regression.means(end) for end in ends)])

    weight, exposed, reference = rows.total(predicted)
    means = (float(exposed / weight), float(reference / weight))
    return Solution(compare(means, rows.setting), means, regression=regression)


def with_influence(rows: Rows, found: Solution) -> Solution:
    """The same with each person's influence on the effect."""
    regression, means = found.regression, found.means
    assert regression is not None
    assert means is not None

    def gradients(block: Problem) -> Floats:
        ends = (block.matrix.exposed, block.matrix.reference)
        slopes = [(block.weight * regression.family.slope(end @ regression.coefficients)) @ end for end in ends]
        return np.vstack([*slopes, np.full(len(slopes[0]), block.weight.sum())])

    exposed, reference, weight = rows.total(gradients)
    whole = float(weight[0])
    directions = (regression.bread @ exposed / whole, regression.bread @ reference / whole)

    def rule(block: Problem) -> Influence:
        on = partial(_on_mean, block, regression, whole)
        both = (
            on(block.matrix.exposed, means[0], directions[0]),
            on(block.matrix.reference, means[1], directions[1]),
        )
        return influence_on(means, both, block.setting.scale)

    return found.ruled(rule, rows)


def _on_mean(
    block: Problem, regression: Regression, whole: float, end: Floats, mean: float, direction: Floats
) -> Influence:
    apart = (regression.means(end) - mean) / whole
    nothing = np.zeros(len(apart))
    return Influence(nothing, nothing, apart) + of_score(block, regression, direction)

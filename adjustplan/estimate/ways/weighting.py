"""Inverse-probability weighting: make the exposed and the reference group each look like everybody.

The mean outcome of a level is the weighted mean of the people who have it. No outcome regression is needed; the model
is that of the exposure. Because the weights are estimated from the same data, the mean varies *less* than if they had
been known; the influence of each person therefore also counts what they do to the weights (Lunceford and Davidian 2004,
Stat Med 23:2937).
"""

from __future__ import annotations

import numpy as np

from adjustplan.estimate.kernel import Influence
from adjustplan.estimate.problem import Problem, Solution
from adjustplan.estimate.ways.marginal import compare, influence_on
from adjustplan.estimate.ways.propensity import LevelWeights, covariate_columns, level_weights, weight_influence


def solve(problem: Problem, parts: tuple[LevelWeights, LevelWeights] | None = None) -> Solution:
    """Weight both groups and compare their means."""
    parts = parts or level_weights(problem)
    means = (_mean(problem, parts[0]), _mean(problem, parts[1]))
    balance = parts[0].weight + parts[1].weight
    return Solution(compare(means, problem.setting), means, balance=balance, scores=parts[0].probability)


def with_influence(problem: Problem, found: Solution) -> Solution:
    """The same with each person's influence on the two means and the effect."""
    assert found.means is not None
    parts = level_weights(problem)
    both = (_on_mean(problem, parts[0], found.means[0]), _on_mean(problem, parts[1], found.means[1]))
    influence = influence_on(found.means, both, problem.setting.scale)
    return Solution(found.value, found.means, influence, both, balance=found.balance, scores=found.scores)


def _mean(problem: Problem, part: LevelWeights) -> float:
    weight = problem.weight * part.weight
    return float(weight @ np.nan_to_num(problem.mean) / weight.sum())


def _on_mean(problem: Problem, part: LevelWeights, mean: float) -> Influence:
    total = float((problem.weight * part.weight).sum())
    factor = part.weight / total
    own = Influence(np.zeros(len(factor)), factor, -factor * mean)
    if problem.setting.weighting.known:
        return own
    moved = problem.weight * part.slope * (np.nan_to_num(problem.mean) - mean) / total
    return own + weight_influence(problem, part, moved @ covariate_columns(problem))

"""Inverse-probability weighting: make the exposed and the reference group each look like everybody.

The mean outcome of a level is the weighted mean of the people who have it. No outcome regression is needed; the model
is that of the exposure. Because the weights are estimated from the same data, the mean varies *less* than if they had
been known; the influence of each person therefore also counts what they do to the weights (Lunceford and Davidian 2004,
Stat Med 23:2937).
"""

from __future__ import annotations

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.kernel import Influence, Regression
from adjustplan.estimate.problem import Problem, Rows, Solution
from adjustplan.estimate.ways.marginal import compare, influence_on
from adjustplan.estimate.ways.propensity import (
    LevelWeights,
    Propensity,
    covariate_columns,
    propensity,
    weight_influence,
)


def solve(rows: Rows, start: tuple[Regression, Regression] | None = None) -> Solution:
    """Weight both groups and compare their means."""
    found = propensity(rows, start)
    totals = rows.total(lambda block: np.array([_sums(block, part) for part in found.weights(block)]))
    means = (float(totals[0, 0] / totals[0, 1]), float(totals[1, 0] / totals[1, 1]))
    return _shown(Solution(compare(means, rows.setting), means, propensity=found), rows)


def with_influence(rows: Rows, found: Solution) -> Solution:
    """The same with each person's influence on the effect."""
    means, models = found.means, found.propensity
    assert means is not None
    assert models is not None
    whole = rows.total(lambda block: np.array([_sums(block, part)[1] for part in models.weights(block)]))
    gradients = rows.total(
        lambda block: np.array(
            [_moved(block, part, mean) for part, mean in zip(models.weights(block), means, strict=True)]
        )
    )

    def rule(block: Problem) -> Influence:
        parts = models.weights(block)
        both = [
            _on_mean(block, models, place, parts[place], means[place], float(whole[place]), gradients[place])
            for place in (0, 1)
        ]
        return influence_on(means, (both[0], both[1]), block.setting.scale)

    return found.ruled(rule, rows)


def _shown(found: Solution, rows: Rows) -> Solution:
    """The same with the weights themselves, where the rows are at hand."""
    if not isinstance(rows, Problem) or found.propensity is None:
        return found
    first, second = found.propensity.weights(rows)
    return found.showing(first.weight + second.weight, first.probability)


def _sums(block: Problem, part: LevelWeights) -> Floats:
    """Weighted outcomes, and weights."""
    weight = block.weight * part.weight
    return np.array([weight @ np.nan_to_num(block.mean), weight.sum()])


def _moved(block: Problem, part: LevelWeights, mean: float) -> Floats:
    """How the weighted sum of what lies above the mean moves with the coefficients of the model of the exposure."""
    return np.asarray((block.weight * part.slope * (np.nan_to_num(block.mean) - mean)) @ covariate_columns(block))


def _on_mean(
    block: Problem, models: Propensity, place: int, part: LevelWeights, mean: float, whole: float, gradient: Floats
) -> Influence:
    factor = part.weight / whole
    own = Influence(np.zeros(len(factor)), factor, -factor * mean)
    if block.setting.weighting.known:
        return own
    # both regressions of a binary exposure have one model of the exposed level, whose sign is turned
    return own + weight_influence(block, models.regressions[place], part, gradient / whole)

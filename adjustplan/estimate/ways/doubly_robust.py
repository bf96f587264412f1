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
from adjustplan.estimate.problem import Problem, Rows, Solution
from adjustplan.estimate.ways.marginal import compare, influence_on
from adjustplan.estimate.ways.propensity import Propensity, covariate_columns, propensity, weight_influence
from adjustplan.estimate.ways.regression import of_score, outcome_regression


def solve(
    rows: Rows, start: Regression | None = None, exposure: tuple[Regression, Regression] | None = None
) -> Solution:
    """Fit both models and combine them."""
    if rows.setting.kind == "rate":
        message = "Rates have no doubly robust estimate here: time at risk follows from the exposure too."
        raise NotEstimableError("estimate-way-measure", message, "Adjust a rate another way.")
    models, regression = propensity(rows, exposure), outcome_regression(rows, start)

    def combined(block: Problem) -> Floats:
        people = _people(block)
        sums = [people.sum()]
        for end, inverse, _ in _sides(block, models):
            predicted = regression.means(end)
            sums.append(people @ (predicted + inverse * (np.nan_to_num(block.mean) - predicted)))
        return np.array(sums)

    whole, exposed, reference = rows.total(combined)
    means = (float(exposed / whole), float(reference / whole))
    found = Solution(compare(means, rows.setting), means, regression=regression, propensity=models)
    if not isinstance(rows, Problem):
        return found
    first, second = models.weights(rows)
    return found.showing(first.weight + second.weight, first.probability)


def with_influence(rows: Rows, found: Solution) -> Solution:
    """The same with each person's influence on the effect."""
    means, regression, models = found.means, found.regression, found.propensity
    assert means is not None
    assert regression is not None
    assert models is not None
    whole = float(rows.total(lambda block: np.array([_people(block).sum()]))[0])

    def outcome_gradients(block: Problem) -> Floats:
        people = _people(block)
        return np.array(
            [
                (people * (1 - inverse) * regression.family.slope(end @ regression.coefficients)) @ end
                for end, inverse, _ in _sides(block, models)
            ]
        )

    def exposure_gradients(block: Problem) -> Floats:
        people, columns = _people(block), covariate_columns(block)
        return np.array(
            [
                (people * slope * (np.nan_to_num(block.mean) - regression.means(end))) @ columns
                for end, _, slope in _sides(block, models)
            ]
        )

    by_outcome, by_exposure = rows.total(outcome_gradients) / whole, rows.total(exposure_gradients) / whole

    def rule(block: Problem) -> Influence:
        parts, both = models.weights(block), []
        for place, (end, inverse, _) in enumerate(_sides(block, models)):
            predicted = regression.means(end)
            nothing = np.zeros(len(predicted))
            own = Influence((predicted - means[place]) / whole, nothing, nothing)
            own = own + of_residual(inverse / whole, predicted)
            own = own + of_score(block, regression, regression.bread @ by_outcome[place])
            if not block.setting.weighting.known:
                own = own + weight_influence(block, models.regressions[place], parts[place], by_exposure[place])
            both.append(own)
        return influence_on(means, (both[0], both[1]), block.setting.scale)

    return found.ruled(rule, rows)


def _people(block: Problem) -> Floats:
    return np.where(block.moments.weight > 0, block.moments.weight, 0.0)


def _sides(block: Problem, models: Propensity) -> list[tuple[Floats, Floats, Floats]]:
    """For both levels: the model matrix as if all had it, and inverse probabilities with their slopes.

    Without the stabilising share, which would not cancel here.
    """
    ends = (block.matrix.exposed, block.matrix.reference)
    shares = models.shares if models.stabilised else (1.0, 1.0)
    return [
        (end, part.weight / share, part.slope / share)
        for end, part, share in zip(ends, models.weights(block), shares, strict=True)
    ]

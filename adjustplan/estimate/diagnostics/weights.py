"""Weights: does a handful of people carry the estimate?

A weight is one over the probability of what happened to a person, so somebody whose exposure was nearly impossible
counts for many. Then few people decide, the interval is wide, and the model of the exposure is put to the hardest
test just where it knows least. Stabilised weights have a mean near 1 if that model is right (Cole and Hernán 2008,
Am J Epidemiol 168:656).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.balance import effective_size

LEAST_EFFECTIVE = 0.5
"""Share of the people that the effective sample size should reach (a choice of ours)."""
MOST_IN_ONE_PERCENT = 0.1
"""Share of all weight above which the largest one percent of people hold too much (a choice of ours)."""


@dataclass(frozen=True, slots=True)
class WeightSummary:
    """How unequal the weights are.

    Attributes
    ----------
    people : float
    mean, largest, percentile_99 : float
        The percentile is the smallest weight that at least 99 % of the people do not exceed.
    held_by_one_percent : float
        Share of all weight that the one percent of people with the largest weights hold.
    effective : float
        Effective sample size (Kish 1965).
    """

    people: float
    mean: float
    largest: float
    percentile_99: float
    held_by_one_percent: float
    effective: float


def summarise_weights(weights: Floats, rows: Floats) -> WeightSummary:
    """Summarise the weights of all people.

    Parameters
    ----------
    weights : array of float, shape (patterns,)
        Weight of each person of a pattern.
    rows : array of float, shape (patterns,)
        People per pattern.

    Raises
    ------
    ValueError
        If a weight is negative or not finite, or no weight is above 0.
    """
    weights, rows = weights[rows > 0], rows[rows > 0]
    if not (np.all(np.isfinite(weights) & (weights >= 0)) and np.any(weights > 0)):
        raise ValueError("weights are finite and not negative, and some are above 0")
    order = np.argsort(weights)[::-1]
    sizes, counts = weights[order], rows[order]
    people, whole = float(rows.sum()), float(np.sum(weights * rows))
    before = np.cumsum(counts) - counts
    few = math.ceil(people / 100)
    of_the_few = np.clip(few - before, 0.0, counts)
    # counted from below, at least 99 % of the people: from above, the first weight with at most 1 % before it
    place = int(np.flatnonzero(people - before >= 0.99 * people)[-1])
    return WeightSummary(
        people,
        whole / people,
        float(sizes[0]),
        float(sizes[place]),
        float(np.sum(sizes * of_the_few)) / whole,
        effective_size(weights, rows),
    )


def weight_findings(result: WeightSummary) -> tuple[Finding, ...]:
    """A warning where the weights make few people out of many, or one percent of them too important."""
    reasons = []
    if result.effective < LEAST_EFFECTIVE * result.people:
        reasons.append(f"{result.people:.0f} weighted people tell as much as {result.effective:.0f} of equal weight")
    if result.held_by_one_percent > MOST_IN_ONE_PERCENT:
        reasons.append(f"the largest 1 % hold {100 * result.held_by_one_percent:.3g} % of all weight")
    if not reasons:
        return ()
    message = f"{' and '.join(reasons)} (largest {result.largest:.3g}, mean {result.mean:.3g})."
    remedy = "Truncate the weights, restrict the population to where both exposures occur, or adjust by regression."
    return (Finding("estimate-extreme-weights", message[0].upper() + message[1:], remedy, "warning"),)

"""The partial likelihood of Cox (1972) and its maximum, in array operations.

In each cell the person who falls ill is drawn, as it were, from those at risk with chances in proportion to their
hazards exp(x'β). Where m people fall ill at once, Breslow (1974) draws all of them from the whole risk set; Efron
(1977, J Am Stat Assoc 72:557) takes away a share of them after each draw: the l-th draw (l = 0, …, m - 1) is from
the risk set less l/m of those who fall ill. Both are a list of *draws*, each from one cell with one share.

statsmodels' PHReg maximises the same likelihood and is what the tests hold this file against. It is not called
here, because it takes one turn of a Python loop per event time, has no counts, counts a person as at risk at the
moment of entry, and its score residuals are Breslow's when Efron's ties are asked for.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.rows.newton import DIRECTION_TOLERANCE, Likelihood
from adjustplan.estimate.rows.risk_sets import Places, RiskSets, Ties


@dataclass(frozen=True, eq=False)
class Draws:
    """The draws that the ties make of the events.

    Attributes
    ----------
    cell : array of int, shape (draws,)
    share : array of float, shape (draws,)
        Share of those who fall ill that is no longer in the risk set.
    size : array of float, shape (draws,)
        Weight of the draw.
    """

    cell: Places
    share: Floats
    size: Floats


def draws(sets: RiskSets, counts: Floats, weights: Floats, ties: Ties) -> Draws:
    """List the draws of the events under a rule for ties; with unequal weights, each has their mean."""
    size = sets.failing @ (counts * weights)
    cells = np.arange(len(size))
    if ties == "breslow":
        return Draws(cells, np.zeros(len(size)), size)
    many = np.rint(sets.failing @ counts).astype(np.intp)
    cell = np.repeat(cells, many)
    number = np.arange(len(cell)) - np.repeat(np.cumsum(many) - many, many)
    return Draws(cell, number / many[cell], (size / many)[cell])


def partial_likelihood(
    sets: RiskSets,
    drawn: Draws,
    columns: Floats,
    coefficients: Floats,
    weight: Floats,
    *,
    factor: Floats | None = None,
    scores: bool = False,
) -> Likelihood:
    """Evaluate the log partial likelihood.

    Parameters
    ----------
    sets : RiskSets
    drawn : Draws
    columns : array of float, shape (rows, parameters)
    coefficients : array of float, shape (parameters,)
    weight : array of float, shape (rows,)
        Count times weight of each row.
    factor : array of float, shape (cells,), optional
        Multiplies what each cell contributes; by default 1.
    scores : bool
        Whether to compute the score residuals, of one person of each row and without its weight (Therneau and
        Grambsch 2000, Modeling Survival Data, ch. 4).

    Notes
    -----
    Cost O(rows × parameters²). With S₀, S₁ the sums of weight·exp(x'β) and of the same times x over the risk set,
    and F₀, F₁ over those who fall ill, a draw of share a has the denominator c = S₀ - a F₀ and the mean
    covariates (S₁ - a F₁) / c. The second moments of the covariates are not summed by cell but by row, where they
    are x x' times the hazard that the row has gathered.
    """
    predictor = columns @ coefficients
    highest = np.full(len(sets.labels), -np.inf)
    np.maximum.at(highest, sets.stratum, predictor)
    predictor = predictor - highest[sets.stratum]
    ratio = np.exp(predictor)
    risk = weight * ratio
    cell, share = drawn.cell, drawn.share
    size = drawn.size if factor is None else drawn.size * factor[cell]
    cells = len(sets.times)
    s0, s1 = sets.at_risk(risk), sets.at_risk(risk[:, None] * columns)
    f0, f1 = sets.failing @ risk, sets.failing @ (risk[:, None] * columns)
    c = s0[cell] - share * f0[cell]

    def per_cell(values: Floats) -> Floats:
        return np.bincount(cell, weights=values, minlength=cells).astype(np.float64)

    own = weight if factor is None else weight * (sets.failing.T @ factor)
    own = np.where(sets.event, own, 0.0)
    value = float(own @ predictor) - float(size @ np.log(c))
    once, shared = per_cell(size / c), per_cell(size * share / c)
    gathered = sets.over_time(once) - sets.failing.T @ shared
    expected = risk * gathered
    gradient = columns.T @ (own - expected)
    twice = [per_cell(size * share**power / c**2)[:, None] for power in range(3)]
    mixed = s1.T @ (twice[1] * f1)
    means = s1.T @ (twice[0] * s1) - mixed - mixed.T + f1.T @ (twice[2] * f1)
    information = columns.T @ (columns * expected[:, None]) - means
    left = None
    if scores:
        average = (once[:, None] * s1 - shared[:, None] * f1) / per_cell(size)[:, None]
        met = sets.over_time(twice[0] * s1 - twice[1] * f1) - sets.failing.T @ (twice[1] * s1 - twice[2] * f1)
        left = np.where(sets.event[:, None], columns - sets.failing.T @ average, 0.0)
        left = left - ratio[:, None] * (columns * gathered[:, None] - met)
    return Likelihood(value, gradient, information, left)


def separates(sets: RiskSets, columns: Floats, direction: Floats) -> bool:
    """Whether everybody with the event has the highest x'b of all at risk, so that the likelihood rises for ever.

    That is when every factor of the likelihood, under either rule for ties, grows or stays along the direction b
    (the condition of Albert and Anderson 1984, applied to risk sets).
    """
    if not np.isfinite(direction).all():
        return False
    values = columns @ direction
    size = float(np.ptp(values))
    if not size > 0:
        return False
    lowest = np.full(len(sets.times), np.inf)
    np.minimum.at(lowest, sets.last[sets.event] - 1, values[sets.event])
    return bool((values <= sets.lowest_over_time(lowest) + DIRECTION_TOLERANCE * size).all())

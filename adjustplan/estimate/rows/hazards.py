"""Whether hazards are proportional: does the hazard ratio stay the same over time?

At each event the covariates of the one who fell ill are compared with their mean over the risk set (Schoenfeld
1982). If the hazard ratio is constant these differences have mean zero at all times; if it grows, they are below
zero early and above it late. Grambsch and Therneau (1994, Biometrika 81:515) test their correlation with a
function g of time. It is the score test of the model with the coefficients β + θ g(t) against θ = 0, and is
computed as such here, with the variance that each risk set has, not with an average over them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows.partial_likelihood import draws, partial_likelihood
from adjustplan.estimate.rows.result import Labels, standardised
from adjustplan.estimate.rows.risk_sets import Ties, risk_sets

TimeScale = Literal["survival", "rank", "identity", "log"]


@dataclass(frozen=True, eq=False)
class ProportionalHazards:
    """The test that some coefficients do not change over time.

    Attributes
    ----------
    chi_square, p_value : float
    freedom : int
        Coefficients tested.
    slope : array of float, shape (freedom,)
        How much each coefficient (a log hazard ratio) changes per unit of g, to first order. On the scale
        "survival" that is from the beginning to a time when nobody is left.
    """

    chi_square: float
    freedom: int
    p_value: float
    slope: Floats


def proportional_hazards(
    columns: Floats,
    time: Floats,
    event: NDArray[Any],
    coefficients: Floats,
    tested: Sequence[int],
    *,
    scale: TimeScale = "survival",
    entry: Floats | None = None,
    stratum: Labels | None = None,
    ties: Ties = "efron",
    counts: NDArray[Any] | None = None,
) -> ProportionalHazards:
    """Test whether the coefficients of some columns change over time.

    Parameters
    ----------
    columns, time, event, entry, stratum, ties, counts
        As of ``cox``.
    coefficients : array of float, shape (parameters,)
        The fit of ``cox`` to the same rows.
    tested : sequence of int
        Places of the columns whose coefficients are tested together, such as those of the exposure.
    scale : {"survival", "rank", "identity", "log"}
        The function of time: one minus the Kaplan–Meier survival before it (of all strata together), its rank
        among the event times, itself, or its logarithm.

    Raises
    ------
    NotEstimableError
        "estimate-few-event-times" with events at fewer than two moments, or so few that the test has no variance.
    """
    people = np.ones(len(time)) if counts is None else np.asarray(counts, dtype=np.float64)
    there = people > 0
    entry, stratum = (None if part is None else part[there] for part in (entry, stratum))
    columns, time, event, people = (part[there] for part in (columns, time, event, people))
    sets = risk_sets(time, event, entry, stratum)
    remedy = "Judge by a plot of the survival curves, or by what is known of the disease."
    few = NotEstimableError(
        "estimate-few-event-times", "There are too few event times to see whether hazards are proportional.", remedy
    )
    g = _function_of_time(sets.times, scale, time, event, entry, people)
    g = g - np.average(g, weights=sets.failing @ people)
    spread = float(np.abs(g).max())
    if not spread > 0:
        raise few
    g = g / spread
    scaled, units = standardised(columns, people)
    drawn = draws(sets, people, np.ones(len(people)), ties)
    at = coefficients * units
    plain = partial_likelihood(sets, drawn, scaled, at, people)
    once = partial_likelihood(sets, drawn, scaled, at, people, factor=g)
    twice = partial_likelihood(sets, drawn, scaled, at, people, factor=g**2)
    places = list(tested)
    cross = once.information[:, places]
    variance = twice.information[np.ix_(places, places)] - cross.T @ np.linalg.solve(plain.information, cross)
    scores = once.gradient[places]
    own = np.diag(twice.information)[places]
    if not (np.linalg.eigvalsh(variance / np.sqrt(np.outer(own, own)))[0] > 1e-10):
        raise few
    slope = np.linalg.solve(variance, scores)
    from scipy.stats import chi2

    chi_square = float(scores @ slope)
    p_value = float(chi2.sf(chi_square, len(places)))
    return ProportionalHazards(chi_square, len(places), p_value, slope / units[places] / spread)


def _function_of_time(
    moments: Floats, scale: TimeScale, time: Floats, event: NDArray[Any], entry: Floats | None, people: Floats
) -> Floats:
    """g at the moment of each cell."""
    if scale == "identity":
        return moments
    if scale == "log":
        if moments.min() <= 0:
            message = "The logarithm of time needs times above zero."
            raise NotEstimableError("estimate-log-time", message, "Choose another scale of time for the test.")
        return np.log(moments)
    different, place = np.unique(moments, return_inverse=True)
    if scale == "rank":
        return place.astype(np.float64)
    together = risk_sets(time, event, entry)
    survival = np.cumprod(1 - (together.failing @ people) / together.at_risk(people))
    assert len(survival) == len(different)
    return np.asarray(1 - np.concatenate([[1.0], survival[:-1]])[place])

"""The baseline hazard of a Cox model, and the survival of people with given covariates.

The cumulative baseline hazard jumps in each cell by the events there over the summed hazard ratios of those at
risk (Breslow 1972, J R Stat Soc B 34:216). Survival to a time is exp(-baseline × exp(x'β)). Averaging it over
people, once as if all were exposed and once as if none were, gives standardised survival curves, and
log S₁ / log S₀ is a marginal hazard ratio at that time.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows.result import Labels
from adjustplan.estimate.rows.risk_sets import Places, risk_sets


@dataclass(frozen=True, eq=False)
class BaselineHazard:
    """Cumulative baseline hazards, one per stratum.

    Attributes
    ----------
    labels : array, shape (strata,)
        Sorted.
    times, cumulative : array of float, shape (cells,)
        Event times, stratum after stratum, and the cumulative hazard from then on at the covariates ``centre``.
    stratum : array of int, shape (cells,)
        Number of the stratum of each cell in ``labels``.
    end : array of float, shape (strata,)
        Longest follow-up in each stratum.
    centre : array of float, shape (parameters,)
        Mean covariates, at which the baseline is taken to keep it within the arithmetic.
    """

    labels: Labels
    times: Floats
    cumulative: Floats
    stratum: Places
    end: Floats
    centre: Floats


def baseline_hazard(
    columns: Floats,
    time: Floats,
    event: NDArray[Any],
    coefficients: Floats,
    *,
    entry: Floats | None = None,
    stratum: Labels | None = None,
    counts: NDArray[Any] | None = None,
    weights: Floats | None = None,
) -> BaselineHazard:
    """Breslow's estimator of the cumulative baseline hazard; parameters as of ``cox``."""
    weight = np.ones(len(time)) if counts is None else np.asarray(counts, dtype=np.float64)
    weight = weight if weights is None else weight * weights
    there = weight > 0
    entry, stratum = (None if part is None else part[there] for part in (entry, stratum))
    columns, time, event, weight = (part[there] for part in (columns, time, event, weight))
    sets = risk_sets(time, event, entry, stratum)
    centre = np.average(columns, axis=0, weights=weight)
    risk = weight * np.exp((columns - centre) @ coefficients)
    jumps = (sets.failing @ weight) / sets.at_risk(risk)
    begins = np.flatnonzero(np.diff(sets.cell_stratum)) + 1
    cumulative = np.concatenate([np.cumsum(part) for part in np.split(jumps, begins)])
    end = np.full(len(sets.labels), -np.inf)
    np.maximum.at(end, sets.stratum, time)
    return BaselineHazard(sets.labels, sets.times, cumulative, sets.cell_stratum, end, centre)


def survival_at(
    baseline: BaselineHazard, columns: Floats, coefficients: Floats, time: float, stratum: Labels | None = None
) -> Floats:
    """Survival of people with given covariates to a time.

    Parameters
    ----------
    baseline : BaselineHazard
    columns : array of float, shape (rows, parameters)
        As they are, or as they would be under an exposure.
    coefficients : array of float, shape (parameters,)
    time : float
    stratum : array, shape (rows,), optional
        Stratum of each row; needed where the baseline has strata.

    Returns
    -------
    array of float, shape (rows,)
        With late entry: survival from the earliest entry on.

    Raises
    ------
    NotEstimableError
        "estimate-beyond-follow-up" where nobody in the stratum of a row was followed up to the time.
    """
    if stratum is None:
        if len(baseline.labels) > 1:
            raise ValueError("the baseline has strata, so the stratum of each row is needed")
        place = np.zeros(len(columns), dtype=np.intp)
    else:
        place = np.searchsorted(baseline.labels, stratum)
    shortest = float(baseline.end[np.unique(place)].min())
    if time > shortest:
        message = f"Survival at time {time:g} is asked for, but follow-up ends at {shortest:g}"
        message += " in one of the strata." if len(baseline.labels) > 1 else "."
        raise NotEstimableError("estimate-beyond-follow-up", message, f"State a time up to {shortest:g}.")
    gone = baseline.times <= time
    reached = np.zeros(len(baseline.labels))
    np.maximum.at(reached, baseline.stratum[gone], baseline.cumulative[gone])
    ratio = np.exp((columns - baseline.centre) @ coefficients)
    return np.asarray(np.exp(-reached[place] * ratio))

"""Cox regression: hazard ratios from times, with strata, late entry and ties.

The hazard of a person is a baseline hazard, about which nothing is assumed, times exp(x'β). There is no intercept:
whatever everybody in a stratum shares is part of its baseline. The hazard ratio is conditional on the covariates
and, like an odds ratio, changes when covariates are added even where they do not confound.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.rows.comparisons import needs_comparisons, within
from adjustplan.estimate.rows.newton import climb
from adjustplan.estimate.rows.partial_likelihood import draws, partial_likelihood, separates
from adjustplan.estimate.rows.result import (
    Labels,
    RowRegression,
    RowVariance,
    chosen_covariance,
    standardised,
)
from adjustplan.estimate.rows.risk_sets import Ties, risk_sets


def cox(
    columns: Floats,
    time: Floats,
    event: NDArray[Any],
    *,
    entry: Floats | None = None,
    stratum: Labels | None = None,
    ties: Ties = "efron",
    variance: RowVariance = "model",
    cluster: Labels | None = None,
    counts: NDArray[Any] | None = None,
    weights: Floats | None = None,
    variables: tuple[str, ...] = (),
) -> RowRegression:
    """Fit a Cox model.

    Parameters
    ----------
    columns : array of float, shape (rows, parameters)
        Without an intercept.
    time : array of float, shape (rows,)
        When follow-up ended, on any time scale.
    event : array of bool or 0/1, shape (rows,)
        Whether it ended with the event.
    entry : array of float, shape (rows,), optional
        When follow-up began. A row is at risk after its entry, up to and including its end.
    stratum : array, shape (rows,), optional
        Each stratum has a baseline hazard of its own.
    ties : {"efron", "breslow"}
    variance : {"model", "robust", "cluster"}
        "robust" takes rows for independent people (Lin and Wei 1989, J Am Stat Assoc 84:1074), "cluster" clusters.
    cluster : array, shape (rows,), optional
    counts : array of int, shape (rows,), optional
        People per row; the same as giving the row so many times. Rows with none are passed over.
    weights : array of float, shape (rows,), optional
        Sampling weights, or inverse probabilities. They need a robust variance.
    variables : tuple of str, optional
        The variable behind each column, for messages.

    Returns
    -------
    RowRegression

    Raises
    ------
    NotEstimableError
        "estimate-one-outcome", "estimate-entry-after-end", "estimate-collinear" (see ``columns_within_risk_sets``),
        "estimate-separation" or "estimate-no-convergence".
    """
    rows = len(time)
    people = np.ones(rows) if counts is None else np.asarray(counts, dtype=np.float64)
    each = np.ones(rows) if weights is None else weights
    there = np.flatnonzero(people * each > 0)
    if len(there) < rows:
        entry, stratum, cluster = (None if part is None else part[there] for part in (entry, stratum, cluster))
        columns, time, event, people, each = (part[there] for part in (columns, time, event, people, each))
    sets = risk_sets(time, event, entry, stratum)
    weight = people * each
    needs_comparisons(within(sets.comparable(), columns, weight), weight, variables, "among people at risk together")
    scaled, scale = standardised(columns, weight)
    drawn = draws(sets, people, each, ties)
    coefficients = climb(
        lambda at: partial_likelihood(sets, drawn, scaled, at, weight),
        columns.shape[1],
        lambda direction: separates(sets, scaled, direction),
        variables,
        "who has the event first among those at risk",
    )
    final = partial_likelihood(sets, drawn, scaled, coefficients, weight, scores=True)
    assert final.scores is not None
    bread = np.linalg.inv(final.information)
    influence = (each[:, None] * final.scores) @ bread / scale
    covariance = chosen_covariance(variance, bread / np.outer(scale, scale), influence, people, cluster)
    given = np.zeros((rows, len(scale)))
    given[there] = influence
    events = int(people[sets.event].sum())
    return RowRegression(coefficients / scale, covariance, True, int(people.sum()), events, final.value, given)


def columns_within_risk_sets(
    columns: Floats,
    time: Floats,
    event: NDArray[Any],
    *,
    entry: Floats | None = None,
    stratum: Labels | None = None,
    counts: NDArray[Any] | None = None,
) -> Floats:
    """The columns less their means among the rows that a Cox model compares; zero for rows that it compares to none.

    A combination of columns that is zero here everywhere has no coefficient: ``null_directions`` and
    ``independent_columns`` of the floor above the models say which. A covariate that is constant in every stratum is
    such a case, and may be left out, for the strata adjust for it already.
    """
    people = np.ones(len(time)) if counts is None else np.asarray(counts, dtype=np.float64)
    there = people > 0
    entry, stratum = (None if part is None else part[there] for part in (entry, stratum))
    part = risk_sets(time[there], event[there], entry, stratum).comparable()
    centred = np.zeros(columns.shape)
    centred[there] = within(part, columns[there], people[there])
    return centred

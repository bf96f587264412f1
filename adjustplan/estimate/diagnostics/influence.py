"""Influence: how far would the estimate move if one person had not been there?

Everybody has an *influence* on an estimate: to first order, an estimate is the truth plus the mean of the influences
of the people in it, and leaving one of N out moves it by minus that influence over N - 1. Measured in standard errors
this is what regression diagnostics call DFBETAS (Belsley, Kuh and Welsch 1980). Its square is about the share of the
variance that this one person makes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.errors import Finding

MOST_MOVED = 0.5
"""Standard errors that one person may move the estimate: beyond it a person makes over a quarter of the variance
(a choice of ours; the customary 2 / √N marks one person in twenty however large the study)."""


@dataclass(frozen=True, slots=True)
class Influence:
    """The person who moves the estimate most.

    Attributes
    ----------
    largest : float
        Change of the estimate when that person is left out, in standard errors, with its sign.
    cell : int
        Place of the cell that holds the person.
    people : float
        People in that cell, all of whom would do the same.
    """

    largest: float
    cell: int
    people: float


def largest_influence(influence: Floats, rows: Floats, standard_error: float) -> Influence:
    """Find the person without whom the estimate would change most.

    Parameters
    ----------
    influence : array of float, shape (cells,)
        Influence of each person of a cell (people alike in covariates, exposure and outcome), on the scale of the
        standard error: their mean is 0, and the sum of their squares over N² is the robust variance.
    rows : array of float, shape (cells,)
        People per cell; cells without people take no part.
    standard_error : float

    Raises
    ------
    ValueError
        If there are not two people, or the standard error is not above 0.
    """
    total = float(rows.sum())
    if not (total >= 2 and standard_error > 0):
        raise ValueError("influence needs two people and a standard error above 0")
    moved = np.where(rows > 0, -influence / (total - 1) / standard_error, 0.0)
    cell = int(np.argmax(np.abs(moved)))
    return Influence(float(moved[cell]), cell, float(rows[cell]))


def influence_findings(result: Influence) -> tuple[Finding, ...]:
    """A warning where one person moves the estimate by more than :data:`MOST_MOVED` standard errors."""
    if not abs(result.largest) > MOST_MOVED:
        return ()
    message = f"Leaving out one person would move the estimate by {abs(result.largest):.2f} standard errors."
    remedy = "Look at the largest values of exposure, covariates and outcome for errors of entry."
    return (Finding("estimate-influential", message, remedy, "warning"),)

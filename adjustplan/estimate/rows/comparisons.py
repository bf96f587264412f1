"""What a model that compares only within groups can see of its columns.

A Cox model compares people who are at risk together, a conditional logistic model those of one matched set. A
column, or a combination of columns, that does not vary within any such group has no coefficient.
"""

from __future__ import annotations

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.existence import null_directions, parts
from adjustplan.estimate.rows.result import collinear
from adjustplan.estimate.rows.risk_sets import Places


def within(part: Places, columns: Floats, weight: Floats) -> Floats:
    """Columns less their means in each part; zero where the part is -1."""
    seen = part >= 0
    parted = np.where(seen, part, 0)
    totals = np.bincount(parted, weights=weight * seen)
    totals = np.where(totals > 0, totals, 1.0)
    means = np.column_stack([np.bincount(parted, weights=weight * seen * column) / totals for column in columns.T])
    centred = np.where(seen[:, None], columns - means[parted], 0.0)
    # what is left of a column that is constant within all parts is rounding
    centred[:, np.abs(centred).max(axis=0) <= 1e-12 * np.abs(columns).max(axis=0)] = 0.0
    return centred


def needs_comparisons(centred: Floats, weight: Floats, variables: tuple[str, ...], where: str) -> None:
    """Refuse columns that have no coefficient because a combination of them is zero after ``within``."""
    directions = null_directions(centred, weight)
    if directions.shape[1]:
        raise collinear(variables, parts(directions), where)

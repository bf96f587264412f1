"""Balance: are exposed and reference people alike in what they are adjusted for?

A *standardised mean difference* is the difference between the means of the two groups in standard deviations, so
that age and an indicator can be laid side by side, and so that it does not grow with the number of people as a test
would (Austin 2009, Stat Med 28:3083). The standard deviation is that of the two groups before weighting, the root of
the mean of their variances, so that weighting changes only what is above the line; for a column of 0 and 1 the
variance is p (1 - p).

Before weighting the differences describe confounding that adjustment has to remove. After weighting they should be
close to zero: what is left is confounding that is still there.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.errors import Finding

Marks = NDArray[np.bool_]

LARGEST_DIFFERENCE = 0.1
"""Standardised difference above which groups are said to differ (common practice; Austin 2009)."""
_ROUNDING = 1e-12


@dataclass(frozen=True, slots=True)
class Difference:
    """How far one column lies apart between the groups.

    Attributes
    ----------
    name : str
    before, after : float or None
        Exposed minus reference in standard deviations, without and with weights. None where the column has one
        value in each group and not the same, so that no standard deviation exists; ``after`` is also None without
        weights.
    constant : bool
        Whether the column has one value in each group.
    """

    name: str
    before: float | None
    after: float | None
    constant: bool


@dataclass(frozen=True, slots=True)
class Balance:
    """Standardised mean differences of all columns.

    Attributes
    ----------
    differences : tuple of Difference
        In the order of the columns.
    weighted : bool
        Whether ``after`` was asked for.
    effective_exposed, effective_reference : float
        Effective sample sizes: how many people with equal weights would tell as much about a mean (Kish 1965).
    """

    differences: tuple[Difference, ...]
    weighted: bool
    effective_exposed: float
    effective_reference: float

    @property
    def largest(self) -> float | None:
        """Largest absolute difference, after weighting where there are weights; None where none exists."""
        sizes = [abs(value) for value in self.values() if value is not None]
        return max(sizes, default=None)

    def values(self) -> tuple[float | None, ...]:
        """The differences that count: after weighting where there are weights."""
        return tuple(row.after if self.weighted else row.before for row in self.differences)


def balance(
    columns: Floats,
    names: Sequence[str],
    exposed: Marks,
    reference: Marks,
    rows: Floats,
    weights: Floats | None = None,
) -> Balance:
    """Standardised mean differences of each column between two groups.

    Parameters
    ----------
    columns : array of float, shape (patterns, columns)
        Covariates as numbers: indicators of levels, values, spline terms.
    names : sequence of str
    exposed, reference : array of bool, shape (patterns,)
        The groups; patterns in neither take no part.
    rows : array of float, shape (patterns,)
        People per pattern.
    weights : array of float, shape (patterns,), optional
        Weight of each person of a pattern.

    Raises
    ------
    ValueError
        If a group is empty, or has no weight.
    """
    if not (rows[exposed].sum() > 0 and rows[reference].sum() > 0):
        raise ValueError("balance needs people in both groups")
    carried = rows if weights is None else rows * weights
    if not all(np.isfinite(carried[group]).all() and carried[group].sum() > 0 for group in (exposed, reference)):
        raise ValueError("balance needs finite weights that do not add up to 0 in a group")
    differences = []
    for name, column in zip(names, columns.T, strict=True):
        variance = (_variance(column[exposed], rows[exposed]) + _variance(column[reference], rows[reference])) / 2
        size = math.sqrt(variance)
        constant = size <= _ROUNDING * float(np.abs(column).max(initial=0.0))
        apart = [_apart(column, exposed, reference, rows)]
        if weights is not None:
            apart.append(_apart(column, exposed, reference, carried))
        shown = [None if constant and gap else gap if constant else gap / size for gap in apart]
        differences.append(Difference(name, shown[0], shown[1] if len(shown) > 1 else None, constant))
    each = np.ones_like(rows) if weights is None else weights
    sizes = (effective_size(each[group], rows[group]) for group in (exposed, reference))
    return Balance(tuple(differences), weights is not None, *sizes)


def effective_size(weights: Floats, rows: Floats) -> float:
    """(Σ w)² / Σ w² over people (Kish 1965, Survey Sampling); 0 where no weight is above 0."""
    squares = float(np.sum(rows * weights**2))
    return float(np.sum(rows * weights)) ** 2 / squares if squares > 0 else 0.0


def _variance(values: Floats, rows: Floats) -> float:
    count = float(rows.sum())
    mean = float(np.average(values, weights=rows))
    if np.isin(values, (0.0, 1.0)).all():
        return mean * (1 - mean)
    return float(np.sum(rows * (values - mean) ** 2)) / (count - 1) if count > 1 else 0.0


def _apart(column: Floats, exposed: Marks, reference: Marks, weights: Floats) -> float:
    means = [float(np.average(column[group], weights=weights[group])) for group in (exposed, reference)]
    gap = means[0] - means[1]
    return gap if abs(gap) > _ROUNDING * max(map(abs, means)) else 0.0


def balance_findings(result: Balance) -> tuple[Finding, ...]:
    """A warning where weighting leaves the groups apart, a note where they start apart."""
    pairs = list(zip(result.differences, result.values(), strict=True))
    said: list[Finding] = []
    never = [row.name for row, value in pairs if value is None]
    if never:
        message = f"“{never[0]}” has one value among the exposed and another in the reference group"
        more = f", and so have {len(never) - 1} more columns." if len(never) > 1 else "."
        remedy = "Restrict the question to people who could have had either exposure."
        said.append(Finding("estimate-imbalance", message + more, remedy, "warning"))
    far = [(abs(value), row.name) for row, value in pairs if value is not None and abs(value) > LARGEST_DIFFERENCE]
    if far:
        most, name = max(far)
        message = (
            f"{'After' if result.weighted else 'Before'} {'weighting' if result.weighted else 'adjustment'} the groups"
            f" lie more than {LARGEST_DIFFERENCE} standard deviations apart in {len(far)} of {len(pairs)} columns, most"
            f" in “{name}” ({most:.2f})."
        )
        remedy = (
            "State richer forms in the model of the exposure."
            if result.weighted
            else "This is what adjustment has to remove; the larger it is, the more hangs on the model."
        )
        said.append(Finding("estimate-imbalance", message, remedy, "warning" if result.weighted else "note"))
    return tuple(said)

"""Linearity: does a covariate that enters as a straight line deserve one?

A line through a curved relation leaves confounding by the rest of the curve. The question is asked by fitting a curve
in place of the line. A spline holds straight lines too: the combinations of its coefficients that vanish for every
straight line, and for nothing else, are its *curvature*, and a Wald test of these is the test of departure from
linearity (Harrell 2015, Regression Modeling Strategies, section 2.4).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.errors import Finding, Severity
from adjustplan.estimate.diagnostics.wald import WaldTest, wald_test

SIGNIFICANT = 0.05
"""Below this p a line is said not to fit (common practice)."""
SMALL_SHIFT = 0.1
"""Standard errors by which the estimate may move before a curve matters to it (a choice of ours)."""
_RANK_TOLERANCE = 1e-8


@dataclass(frozen=True, slots=True)
class Departure:
    """Departure of a covariate from linearity.

    Attributes
    ----------
    variable : str
    test : WaldTest
    shift : float or None
        Change of the estimate when the curve replaces the line, in standard errors; None where not known.
    """

    variable: str
    test: WaldTest
    shift: float | None


def departure_from_linearity(
    variable: str,
    values: Floats,
    basis: Floats,
    coefficients: Floats,
    covariance: Floats,
    shift: float | None = None,
) -> Departure:
    """Test a curve for being straight.

    Parameters
    ----------
    variable : str
    values : array of float, shape (patterns,)
        Of the covariate.
    basis : array of float, shape (patterns, k)
        The columns that carry the curve in the model; with the intercept they can draw a straight line.
    coefficients, covariance : array of float, shape (k,) and (k, k)
        Of these columns, in the fit with the curve.
    shift : float, optional
        Estimate with the curve minus estimate with the line, in standard errors.

    Raises
    ------
    NotEstimableError
        If the curvature has no usable covariance.
    ValueError
        If the columns can draw nothing but straight lines.
    """
    constraints = curvature(values, basis)
    test = wald_test(constraints @ coefficients, constraints @ covariance @ constraints.T)
    return Departure(variable, test, shift)


def curvature(values: Floats, basis: Floats) -> Floats:
    """Combinations of a curve's coefficients that are zero exactly for straight lines; shape (k - 1, k).

    What is left of the columns after a regression on the values spans everything that is not straight; its right
    singular vectors are the combinations.
    """
    distinct, place = np.unique(values, return_index=True)
    scaled = (distinct - distinct.mean()) / max(float(np.ptp(distinct)), 1e-300)
    line, _ = np.linalg.qr(np.column_stack([np.ones_like(scaled), scaled]))
    columns = basis[place]
    lengths = np.linalg.norm(columns - columns.mean(axis=0), axis=0)
    lengths[lengths == 0] = 1.0
    columns = columns / lengths
    left = columns - line @ (line.T @ columns)
    _, sizes, directions = np.linalg.svd(left, full_matrices=False)
    kept = directions[sizes > _RANK_TOLERANCE]
    if not len(kept):
        raise ValueError("a test of linearity needs columns that can draw a curve")
    return np.asarray(kept * lengths)


def linearity_findings(result: Departure) -> tuple[Finding, ...]:
    """A warning where a curve fits better than the line, a note where that hardly moves the estimate."""
    if not result.test.p < SIGNIFICANT:
        return ()
    message = f"“{result.variable}” enters as a straight line, but a curve fits better ({result.test.text})"
    severity: Severity = "warning"
    if result.shift is None:
        message += "."
    else:
        message += f"; it would move the estimate by {abs(result.shift):.2f} standard errors."
        severity = "warning" if abs(result.shift) > SMALL_SHIFT else "note"
    remedy = f'State {result.variable} = "spline(4)" in [analysis.forms].'
    return (Finding("estimate-nonlinear", message, remedy, severity),)

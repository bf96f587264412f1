"""Fitting a regression by Newton's method (Fisher scoring), from sums over covariate patterns or over blocks of rows.

At coefficients b the score is Σ x s w t (m - μ) and the information Σ x x' s μ' w t, with s = μ'/V; w t is the weight
of a pattern (people, times their sampling weights, times their time at risk) and m its mean outcome per unit of time. A
step solves the information for the score; one that would lower the likelihood, or push a fitted risk to 1, is halved.
Near the solution every step doubles the number of right digits, so the iterations stop when a step no longer changes
anything that could be seen, and then the estimate is right to rounding.

All that is ever asked of the data is a :class:`Sums`. They add up over any division of the rows, so that rows may come
in blocks, or be summed where they are; only some hundred numbers come back for each step.

A linear regression needs no iteration. Where its rows are in memory it is solved by a QR decomposition around the mean,
which keeps all the digits that the data have; otherwise by its sums.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.kernel.families import Family

_SETTLED = 1e-10
_MOST_STEPS = 100
_MOST_HALVINGS = 30


@dataclass(frozen=True, eq=False)
class Regression:
    """A regression.

    Attributes
    ----------
    family : Family
    coefficients : array of float, shape (parameters,)
    bread : array of float, shape (parameters, parameters)
        Inverse of the information at the fit (the observed one, which a sandwich needs).
    fitted : array of float, shape (patterns,)
        Fitted means (per unit of time); empty where the rows were not in memory.
    converged : bool
        False when the iterations ended without settling or broke down.
    steps : int
    lowest, highest : float
        Of the fitted means.
    """

    family: Family
    coefficients: Floats
    bread: Floats
    fitted: Floats
    converged: bool
    steps: int
    lowest: float
    highest: float

    def means(self, columns: Floats) -> Floats:
        """The fitted means of rows of a model matrix."""
        return self.family.mean(columns @ self.coefficients)

    def gain(self, fitted: Floats) -> Floats:
        """s = μ'/V of rows with these fitted means: a person's score is x s (y - t μ)."""
        # 1 for the linear, logistic and Poisson families, whose links are canonical
        return 1 / (1 - fitted) if self.family.name == "log-binomial" else np.ones(len(fitted))


class Sums(NamedTuple):
    """What a step of the iterations needs of the data.

    Attributes
    ----------
    score : array of float, shape (parameters,)
    information, slope : array of float, shape (parameters, parameters)
        The expected information, and the observed one: minus the derivative of the score.
    likelihood : float
        The quasi-likelihood; minus infinity where a mean is none the family allows.
    lowest, highest : float
        Of the fitted means.
    weight, total : float
        Sum of the weights, and of the weighted outcomes.
    """

    score: Floats
    information: Floats
    slope: Floats
    likelihood: float
    lowest: float
    highest: float
    weight: float
    total: float

    def __add__(self, other: Sums) -> Sums:  # type: ignore[override]
        return Sums(
            self.score + other.score,
            self.information + other.information,
            self.slope + other.slope,
            self.likelihood + other.likelihood,
            min(self.lowest, other.lowest),
            max(self.highest, other.highest),
            self.weight + other.weight,
            self.total + other.total,
        )


Summing = Callable[[Floats], Sums]
"""From coefficients to the sums over all rows."""


def sums_at(columns: Floats, weight: Floats, mean: Floats, family: Family, coefficients: Floats) -> Sums:
    """The sums over some patterns or rows; those without weight are passed over."""
    seen = weight > 0
    if not seen.all():
        columns, weight, mean = columns[seen], weight[seen], mean[seen]
    predictor = columns @ coefficients
    fitted = family.mean(predictor)
    lowest, highest = (float(fitted.min()), float(fitted.max())) if len(fitted) else (np.inf, -np.inf)
    slope = family.slope(predictor)
    gain = slope / family.variance(fitted)
    weighted = weight * gain
    information = (columns * (weighted * slope)[:, None]).T @ columns
    observed = information
    if family.name == "log-binomial":
        # the slope of the score itself, not its expectation: a sandwich needs it where the mean is modelled wrongly
        observed = (columns * (weight * fitted * (1 - mean) * gain**2)[:, None]).T @ columns
    likelihood = -np.inf if highest >= family.highest else float(weight @ family.likelihood(mean, fitted))
    return Sums(
        columns.T @ (weighted * (mean - fitted)),
        information,
        observed,
        likelihood if np.isfinite(likelihood) else -np.inf,
        lowest,
        highest,
        float(weight.sum()),
        float(weight @ mean),
    )


def regress(columns: Floats, weight: Floats, mean: Floats, family: Family, start: Floats | None = None) -> Regression:
    """Fit a regression to patterns in memory.

    Parameters
    ----------
    columns : array of float, shape (patterns, parameters)
        Model matrix with an intercept first and full column rank.
    weight, mean : array of float, shape (patterns,)
        Weight of each pattern and its mean outcome; patterns without weight are passed over.
    family : Family
    start : array of float, shape (parameters,), optional
        Where to start; by default at the crude mean.
    """
    if family.name == "linear":
        return _least_squares(columns, weight, mean, family)
    if start is None:
        start = np.zeros(columns.shape[1])
        start[0] = float(family.link(np.average(np.where(weight > 0, mean, 0.5), weights=weight)))
    found = iterate(lambda at: sums_at(columns, weight, mean, family, at), family, columns.shape[1], start)
    with np.errstate(all="ignore"):
        fitted = found.means(columns)
    return Regression(
        family,
        found.coefficients,
        found.bread,
        fitted,
        found.converged and bool(np.isfinite(fitted).all()),
        found.steps,
        found.lowest,
        found.highest,
    )


def iterate(summing: Summing, family: Family, parameters: int, start: Floats | None = None) -> Regression:
    """Fit a regression by its sums alone; ``fitted`` is empty.

    Parameters
    ----------
    summing : function of an array of float, shape (parameters,)
        The sums over all rows at these coefficients.
    family : Family
    parameters : int
    start : array of float, shape (parameters,), optional
    """
    with np.errstate(all="ignore"):
        return _iterate(summing, family, parameters, start)


def _iterate(summing: Summing, family: Family, parameters: int, start: Floats | None) -> Regression:
    if start is None:
        start = np.zeros(parameters)
        if family.name != "linear":
            # any point will do to learn the crude mean
            whole = summing(start if family.highest == np.inf else start - (np.arange(parameters) == 0))
            start[0] = float(family.link(np.array([whole.total / whole.weight]))[0])
    coefficients, sums = start, summing(start)
    converged, step, halvings = False, 0, 0
    while step < _MOST_STEPS:
        step += 1
        try:
            move = np.asarray(np.linalg.solve(sums.information, sums.score), dtype=np.float64)
        except np.linalg.LinAlgError:
            break
        if not np.isfinite(move).all():
            break
        halvings, after = 0, summing(coefficients + move)
        while not after.likelihood >= sums.likelihood - 1e-9 * abs(sums.likelihood) and halvings < _MOST_HALVINGS:
            move, halvings = move / 2, halvings + 1
            after = summing(coefficients + move)
        if halvings == _MOST_HALVINGS:
            break
        coefficients, sums = coefficients + move, after
        if not halvings and np.abs(move).max() <= _SETTLED * (1 + np.abs(coefficients).max()):
            converged = True
            break
        if family.name == "linear" and not halvings:
            converged = step > 1  # the second step only mends the rounding of the first
            if converged:
                break
    try:
        bread = np.asarray(np.linalg.inv(sums.slope), dtype=np.float64)
    except np.linalg.LinAlgError:
        bread, converged = np.full((parameters,) * 2, np.nan), False
    settled = converged and bool(np.isfinite(coefficients).all() and np.isfinite(bread).all())
    return Regression(family, coefficients, bread, np.empty(0), settled, step, sums.lowest, sums.highest)


def _least_squares(columns: Floats, weight: Floats, mean: Floats, family: Family) -> Regression:
    seen = weight > 0
    outcome = np.where(seen, mean, 0.0)
    centre = float(np.average(outcome, weights=weight))
    root = np.sqrt(weight)
    unitary, triangle = np.linalg.qr(columns * root[:, None])
    coefficients = np.linalg.solve(triangle, unitary.T @ ((outcome - centre) * root))
    inverse = np.linalg.inv(triangle)
    fitted = columns @ coefficients + centre
    coefficients = coefficients + centre * (np.arange(len(coefficients)) == 0)
    converged = bool(np.isfinite(coefficients).all() and np.isfinite(inverse).all())
    bread = inverse @ inverse.T
    return Regression(family, coefficients, bread, fitted, converged, 1, float(fitted.min()), float(fitted.max()))

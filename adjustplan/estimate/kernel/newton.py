"""Fitting a regression to covariate patterns by Newton's method (Fisher scoring).

At coefficients b the score is Σ x s w t (m - μ) and the information Σ x x' s μ' w t, with s = μ'/V; w t is the weight
of a pattern (people, times their sampling weights, times their time at risk) and m its mean outcome per unit of time. A
step solves the information for the score; one that would lower the likelihood, or push a fitted risk to 1, is halved.
Near the solution every step doubles the number of right digits, so the iterations stop when a step no longer changes
anything that could be seen, and then the estimate is right to rounding.

A linear regression needs no iteration; it is solved by a QR decomposition around the mean, which keeps all the digits
that the data have.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.kernel.families import Family

_SETTLED = 1e-10
_MOST_STEPS = 100
_MOST_HALVINGS = 30


@dataclass(frozen=True, eq=False)
class Regression:
    """A regression on covariate patterns.

    Attributes
    ----------
    family : Family
    coefficients : array of float, shape (parameters,)
    bread : array of float, shape (parameters, parameters)
        Inverse of the observed information at the fit (Efron and Hinkley 1978, Biometrika 65:457).
    fitted : array of float, shape (patterns,)
        Fitted means (per unit of time).
    gain : array of float, shape (patterns,)
        s = μ'/V: a person's score is x s (y - t μ). It is 1 for the linear, logistic and Poisson families.
    converged : bool
        False when the iterations ended without settling or broke down.
    steps : int
    """

    family: Family
    coefficients: Floats
    bread: Floats
    fitted: Floats
    gain: Floats
    converged: bool
    steps: int


def regress(columns: Floats, weight: Floats, mean: Floats, family: Family, start: Floats | None = None) -> Regression:
    """Fit a regression.

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
    with np.errstate(all="ignore"):
        return _iterate(columns, weight, mean, family, start)


def _iterate(columns: Floats, weight: Floats, mean: Floats, family: Family, start: Floats | None) -> Regression:
    seen = weight > 0
    outcome = np.where(seen, mean, 0.5)
    if start is None:
        start = np.zeros(columns.shape[1])
        start[0] = float(family.link(np.average(outcome, weights=weight)))
    coefficients = start
    likelihood = _likelihood(columns @ coefficients, outcome, weight, family)
    converged, bread, step = False, np.full((columns.shape[1],) * 2, np.nan), 0
    for step in range(1, _MOST_STEPS + 1):  # noqa: B007 — counted for the caller
        predictor = columns @ coefficients
        fitted, slope = family.mean(predictor), family.slope(predictor)
        gain = slope / family.variance(fitted)
        score = columns.T @ (weight * gain * (outcome - fitted))
        information = (columns * (weight * gain * slope)[:, None]).T @ columns
        try:
            move = np.linalg.solve(information, score)
        except np.linalg.LinAlgError:
            break
        if not np.isfinite(move).all():
            break
        share, halvings = 1.0, 0
        after = _likelihood(columns @ (coefficients + move), outcome, weight, family)
        while not after >= likelihood - 1e-9 * abs(likelihood) and halvings < _MOST_HALVINGS:
            share, halvings = share / 2, halvings + 1
            after = _likelihood(columns @ (coefficients + share * move), outcome, weight, family)
        if halvings == _MOST_HALVINGS:
            break
        coefficients, likelihood = coefficients + share * move, after
        if share == 1.0 and np.abs(move).max() <= _SETTLED * (1 + np.abs(coefficients).max()):
            converged = True
            break
    predictor = columns @ coefficients
    fitted, slope = family.mean(predictor), family.slope(predictor)
    gain = slope / family.variance(fitted) if family.name == "log-binomial" else np.ones(len(fitted))
    # the slope of the score itself, not its expectation: a sandwich needs it where the mean is modelled wrongly
    turn = fitted * (1 - outcome) * gain**2 if family.name == "log-binomial" else slope
    try:
        bread = np.linalg.inv((columns * (weight * turn)[:, None]).T @ columns)
    except np.linalg.LinAlgError:
        converged = False
    settled = converged and all(np.isfinite(part).all() for part in (coefficients, bread, fitted, gain))
    return Regression(family, coefficients, bread, fitted, gain, settled, step)


def _likelihood(predictor: Floats, outcome: Floats, weight: Floats, family: Family) -> float:
    """The quasi-likelihood; minus infinity where a mean is none the family allows."""
    fitted = family.mean(predictor)
    if fitted.max() >= family.highest and family.name == "log-binomial":
        return -np.inf
    value = float(weight @ family.likelihood(outcome, fitted))
    return value if np.isfinite(value) else -np.inf


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
    return Regression(family, coefficients, inverse @ inverse.T, fitted, np.ones(len(fitted)), converged, 1)

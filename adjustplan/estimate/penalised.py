"""Firth's penalised likelihood for logistic regression: finite under separation, and less biased in small data.

The likelihood is multiplied by the square root of the determinant of the information (Firth 1993, Biometrika 80:27),
which is a prior that draws estimates a little towards no effect. In a 2×2 table that means adding 1/2 to each cell. The
estimate is always finite, even where the exposure predicts the outcome without exception and the odds ratio of ordinary
logistic regression is infinite (Heinze and Schemper 2002, Stat Med 21:2409).

There the estimate ± 1.96 standard errors is a poor interval, because the likelihood is far from symmetrical. The
interval given is that of the profile: all values of the log odds ratio at which the penalised likelihood, made as high
as it can be with the odds ratio held there, falls short of its maximum by no more than 1.92 (half of the 95 % point of
chi-square with one degree of freedom).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError

_MOST_STEPS = 100
_MOST_HALVINGS = 40
_LONGEST_STEP = 5.0
_NOTHING_TO_GAIN = 1e-8
_SETTLED = 1e-9  # the step after it is as small as the square of this
_HALF_QUANTILE = 1.9207294103470621  # half the 95 % point of chi-square with one degree of freedom


@dataclass(frozen=True, eq=False)
class PenalisedRegression:
    """A penalised logistic regression and a contrast of its coefficients.

    Attributes
    ----------
    estimate : float
        The contrast: a log odds ratio.
    standard_error : float
        From the inverse of the information.
    lower, upper : float
        95 % profile penalised-likelihood interval of the contrast.
    coefficients : array of float, shape (parameters,)
    covariance : array of float, shape (parameters, parameters)
        Inverse of the information.
    log_likelihood : float
        Penalised.
    converged : bool
        Always True: a model that does not converge raises.
    """

    estimate: float
    standard_error: float
    lower: float
    upper: float
    coefficients: Floats
    covariance: Floats
    log_likelihood: float
    converged: bool


def penalised_logistic(columns: Floats, rows: Floats, mean: Floats, contrast: Floats) -> PenalisedRegression:
    """Fit a logistic regression by Firth's penalised likelihood.

    Parameters
    ----------
    columns : array of float, shape (patterns, parameters)
        Model matrix of full column rank, with an intercept.
    rows : array of float, shape (patterns,)
        People per pattern; patterns with none are passed over.
    mean : array of float, shape (patterns,)
        Share of them with the outcome.
    contrast : array of float, shape (parameters,)
        Exposed minus reference.

    Raises
    ------
    NotEstimableError
        "estimate-no-convergence" if the maximum, or a limit, was not found.

    Notes
    -----
    Holding the contrast c'β at θ is done by moving in the directions at right angles to c only; the penalty stays
    that of all parameters, as in Heinze and Schemper (2002).
    """
    from scipy.optimize import brentq

    there = rows > 0
    columns, rows, mean = columns[there], rows[there], mean[there]
    everything = np.eye(columns.shape[1])
    best, top = _maximise(columns, rows, mean, np.zeros(columns.shape[1]), everything)
    information = _information(columns, rows, columns @ best)
    covariance: Floats = np.asarray(np.linalg.inv(information), dtype=np.float64)
    estimate = float(contrast @ best)
    error = float(np.sqrt(contrast @ covariance @ contrast))
    across = np.linalg.svd(contrast[None, :])[2][1:].T
    along = covariance @ contrast / error**2  # how the other coefficients follow the contrast, to first order

    def short(distance: float) -> float:
        """How far the profile at this distance from the estimate is above the limit."""
        _, value = _maximise(columns, rows, mean, best + distance * along, across)
        return value - top + _HALF_QUANTILE

    limits = []
    for sign in (-1.0, 1.0):
        inner, outer = 0.0, 2.0 * error
        while short(sign * outer) > 0:
            inner, outer = outer, 2 * outer
            if outer > 1e4 * error:
                raise _no_convergence()
        limits.append(estimate + sign * float(brentq(lambda size, s=sign: short(s * size), inner, outer, xtol=1e-10)))
    return PenalisedRegression(estimate, error, limits[0], limits[1], best, covariance, top, True)


def _maximise(columns: Floats, rows: Floats, mean: Floats, start: Floats, directions: Floats) -> tuple[Floats, float]:
    """The greatest penalised likelihood that can be reached from ``start`` in these directions."""
    coefficients = start
    value = _penalised(columns, rows, mean, coefficients)
    if directions.shape[1] == 0:
        return coefficients, value
    for _ in range(_MOST_STEPS):
        score, curvature, information = _derivatives(columns, rows, mean, coefficients)
        score, within = directions.T @ score, directions.T @ curvature @ directions
        try:
            if not np.linalg.eigvalsh(within)[0] > 0:  # not concave here: a slower step, but upwards
                within = directions.T @ information @ directions
            move = np.linalg.solve(within, score)
        except np.linalg.LinAlgError:
            break
        step = directions @ move
        size = float(np.abs(step).max())
        step = step * min(1.0, _LONGEST_STEP / max(size, 1e-300))
        for _ in range(_MOST_HALVINGS):
            after = _penalised(columns, rows, mean, coefficients + step)
            if after >= value - 1e-12 * (1 + abs(value)):
                break
            step = step / 2
        else:
            if float(score @ move) <= _NOTHING_TO_GAIN:  # rounding of the determinant hides what is left to gain
                return coefficients, value
            break
        coefficients, value = coefficients + step, after
        if size <= _SETTLED * (1 + np.abs(coefficients).max()):
            return coefficients, value
    raise _no_convergence()


def _derivatives(columns: Floats, rows: Floats, mean: Floats, coefficients: Floats) -> tuple[Floats, Floats, Floats]:
    """Slope and (with its sign turned round) curvature of the penalised likelihood, and the information.

    Firth's score is Σ x (n (m - π) + h (1/2 - π)) with the leverages h = w x'I⁻¹x, w = n π (1 - π). Its derivative
    needs that of h, which has a part from w and a part from I: for parameter s the latter is -w x'I⁻¹ (∂I/∂s) I⁻¹x.
    """
    from scipy.special import expit

    predictor = columns @ coefficients
    risk, spread = expit(predictor), expit(predictor) * expit(-predictor)
    weight = rows * spread
    information = _information(columns, rows, predictor)
    inner = columns @ np.linalg.inv(information)
    leverage = weight * np.einsum("ij,ij->i", inner, columns)
    score = columns.T @ (rows * (mean - risk) + leverage * (0.5 - risk))
    skew = 1 - 2 * risk
    moved = (leverage * skew)[:, None] * columns
    for place, column in enumerate(columns.T):
        change = columns.T @ (columns * (weight * skew * column)[:, None])
        moved[:, place] -= weight * np.einsum("ij,ij->i", inner @ change, inner)
    curvature = columns.T @ (columns * (weight + leverage * spread)[:, None] - (0.5 - risk)[:, None] * moved)
    return score, (curvature + curvature.T) / 2, information


def _information(columns: Floats, rows: Floats, predictor: Floats) -> Floats:
    from scipy.special import expit

    return np.asarray(columns.T @ (columns * (rows * expit(predictor) * expit(-predictor))[:, None]))


def _penalised(columns: Floats, rows: Floats, mean: Floats, coefficients: Floats) -> float:
    predictor = columns @ coefficients
    sign, determinant = np.linalg.slogdet(_information(columns, rows, predictor))
    if not sign > 0:
        return -np.inf
    likelihood = float(rows @ (mean * predictor - np.logaddexp(0.0, predictor)))
    return likelihood + 0.5 * float(determinant)


def _no_convergence() -> NotEstimableError:
    message = "The penalised model did not converge."
    return NotEstimableError("estimate-no-convergence", message, "Look for rare levels and extreme values.")

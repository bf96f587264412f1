"""The numerical kernel: one regression on covariate patterns, and one contrast of its coefficients.

Nothing here knows files, plans or names. A pattern i has n people with the mean outcome m and the sum of
squared deviations s from it; the model gives all of them the fitted mean μ. Then the squared residuals of its
people add up to s + n (m - μ)², which is all that least squares, the variance of the residuals and the
sandwich need:

* the coefficients come from statsmodels, with the means as outcomes and the numbers of people as weights;
* the "bread" A is the inverse of X'WX, which statsmodels gives too;
* the model-based variance is φ A, with φ = Σ squared residuals / (n - p) for the linear model and 1 for the
  others;
* the robust variance is A M A with the "meat" M = Σ squared residuals · x x' (Huber 1967; White 1980; HC0,
  without a small-sample factor). statsmodels' own sandwich squares the weights, which is right for survey
  weights and wrong for counts, so the meat is made here.

The risk ratio is a Poisson regression of a 0/1 outcome with the robust variance (Zou 2004): the model's own
variance would be too large, because a 0/1 outcome varies less than a Poisson one.
"""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from typing import Literal

import numpy as np

from adjustplan.data.patterns import Floats
from adjustplan.errors import Finding
from adjustplan.study import Measure

Variance = Literal["model", "robust"]
_NORMAL_QUANTILE = 1.959963984540054


class NotEstimableError(Exception):
    """A model that cannot be estimated; ``finding`` says why. It never leaves this floor."""

    def __init__(self, code: str, message: str, remedy: str) -> None:
        super().__init__(message)
        self.finding = Finding(code, message, remedy)


@dataclass(frozen=True, eq=False)
class Regression:
    """A regression on covariate patterns.

    Attributes
    ----------
    coefficients : array of float, shape (parameters,)
    bread : array of float, shape (parameters, parameters)
        Inverse of X'WX at the fit.
    fitted : array of float, shape (patterns,)
        Fitted means.
    converged : bool
    """

    coefficients: Floats
    bread: Floats
    fitted: Floats
    converged: bool


def regress(columns: Floats, rows: Floats, mean: Floats, measure: Measure) -> Regression:
    """Fit the regression that belongs to a measure.

    Parameters
    ----------
    columns : array of float, shape (patterns, parameters)
        Model matrix with an intercept first and full column rank.
    rows, mean : array of float, shape (patterns,)
        People per pattern and their mean outcome.
    measure : {"mean difference", "odds ratio", "risk ratio"}
        Linear, logistic or log-linear (Poisson) regression.

    Returns
    -------
    Regression
        ``converged`` is False when the iterations ended without settling or broke down.
    """
    if measure == "mean difference":
        return _linear(columns, rows, mean)
    from statsmodels.genmod.families import Binomial, Poisson
    from statsmodels.genmod.generalized_linear_model import GLM

    average = float(np.average(mean, weights=rows))
    start = np.zeros(columns.shape[1])
    start[0] = math.log(average / (1 - average)) if measure == "odds ratio" else math.log(average)
    family = Binomial() if measure == "odds ratio" else Poisson()
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        try:
            result = GLM(mean, columns, family=family, freq_weights=rows).fit(
                start_params=start, tol_criterion="params", atol=1e-10, rtol=1e-10, maxiter=100
            )
            coefficients = np.asarray(result.params, dtype=np.float64)
            bread = np.asarray(result.normalized_cov_params, dtype=np.float64)
            fitted = np.asarray(result.mu, dtype=np.float64)
        except (ValueError, ArithmeticError, np.linalg.LinAlgError):
            nothing = np.full(columns.shape[1], np.nan)
            return Regression(nothing, np.diag(nothing), np.full(len(mean), np.nan), False)
    settled = bool(result.converged) and all(np.isfinite(part).all() for part in (coefficients, bread, fitted))
    return Regression(coefficients, bread, fitted, settled)


def _linear(columns: Floats, rows: Floats, mean: Floats) -> Regression:
    from statsmodels.regression.linear_model import WLS

    centre = float(np.average(mean, weights=rows))
    result = WLS(mean - centre, columns, weights=rows).fit(method="qr")
    coefficients = np.asarray(result.params, dtype=np.float64)
    fitted = columns @ coefficients + centre
    coefficients = coefficients + centre * (np.arange(len(coefficients)) == 0)
    return Regression(coefficients, np.asarray(result.normalized_cov_params, dtype=np.float64), fitted, True)


def contrast_of(
    regression: Regression,
    columns: Floats,
    rows: Floats,
    mean: Floats,
    deviations: Floats,
    contrast: Floats,
    measure: Measure,
    variance: Variance,
) -> tuple[float, float, float]:
    """A contrast of the coefficients, its standard error, and the factor of its 95 % interval.

    Parameters
    ----------
    regression : Regression
    columns, rows, mean
        What it was fitted to.
    deviations : array of float, shape (patterns,)
        Sum of squared deviations from ``mean`` within each pattern.
    contrast : array of float, shape (parameters,)
    measure, variance

    Returns
    -------
    value, standard_error, quantile : float
        On the scale of the linear predictor; the quantile is that of t with n - p degrees of freedom for the
        linear model, of the normal distribution for the others.
    """
    direction = regression.bread @ contrast
    squared_residuals = deviations + rows * (mean - regression.fitted) ** 2
    freedom = float(rows.sum()) - columns.shape[1]
    if variance == "robust":
        squared = float(np.sum(squared_residuals * (columns @ direction) ** 2))
    else:
        scale = float(squared_residuals.sum()) / freedom if measure == "mean difference" else 1.0
        squared = scale * float(contrast @ direction)
    if measure == "mean difference":
        from scipy.special import stdtrit

        return float(contrast @ regression.coefficients), math.sqrt(squared), float(stdtrit(freedom, 0.975))
    return float(contrast @ regression.coefficients), math.sqrt(squared), _NORMAL_QUANTILE

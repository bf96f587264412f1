"""Robustness of a linear model, in shares of variance.

In a linear regression the bias that an omitted confounder Z makes is exactly known from two numbers: the share of the
exposure's variance that Z explains beyond the covariates, R²(D~Z|X), and the share of the outcome's that it explains
beyond covariates and exposure, R²(Y~Z|D,X):

    |bias| = se √df √( R²(Y~Z|D,X) R²(D~Z|X) / (1 − R²(D~Z|X)) ),
    se with Z = se √( (1 − R²(Y~Z|D,X)) / (1 − R²(D~Z|X)) ) √( df / (df − 1) ),

with se and df the standard error of the exposure's coefficient and the residual degrees of freedom without Z. The
*robustness value* is the share that Z must explain of both to take away a portion q of the estimate, or to make it no
longer significant. All of it is Cinelli and Hazlett (2020, J R Stat Soc B 82:39). It holds for the standard error of
the model, not for a robust one.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy import stats

from adjustplan.estimate.stress.scales import Moved


@dataclass(frozen=True, slots=True)
class Robustness:
    """How much variance a confounder must explain to undo the estimate of a linear model.

    Attributes
    ----------
    partial_r2 : float
        The share of the outcome's remaining variance that the exposure explains.
    value : float
        The robustness value for moving the estimate to the target.
    limit_value : float
        The same for moving the limit of the 95 % interval there; 0 where it is there already.
    extreme : float
        The extreme scenario: a confounder that explains all that is left of the outcome needs to explain this share of
        the exposure. Where no effect is asked for, it equals ``partial_r2``.
    degrees_of_freedom : float
    """

    partial_r2: float
    value: float
    limit_value: float
    extreme: float
    degrees_of_freedom: float


@dataclass(frozen=True, slots=True)
class LinearMove:
    """A linear model's estimate after a confounder that explains given shares.

    Attributes
    ----------
    share_of_exposure, share_of_outcome : float
        R²(D~Z|X) and R²(Y~Z|D,X).
    moved : Moved
        The estimate nearer to zero by the whole bias, with its interval.
    standard_error : float
    """

    share_of_exposure: float
    share_of_outcome: float
    moved: Moved
    standard_error: float


def partial_r2(t: float, degrees_of_freedom: float) -> float:
    """The share of the remaining variance that a term with this t statistic explains."""
    return t * t / (t * t + degrees_of_freedom)


def robustness_value(t: float, degrees_of_freedom: float, portion: float = 1, alpha: float | None = None) -> float:
    """The share of both exposure and outcome that a confounder must explain.

    Parameters
    ----------
    t : float
        The t statistic of the exposure.
    degrees_of_freedom : float
        Of the residuals, above 1.
    portion : float
        The portion of the estimate that is to be taken away, 1 for all.
    alpha : float, optional
        Where given: to make the rest no longer significant at this level.

    Notes
    -----
    The t statistic that is left is smallest, with both shares at most r, where the confounder explains r of the
    exposure, and of the outcome r or r/(r + f²), whichever is less, with f the critical t by √(df − 1). The second case
    needs f² > 1 − r, that is a handful of rows, and then gives (g² − f²)/(1 + g²) with g = portion × |t| / √df.
    """
    strength = portion * abs(t) / math.sqrt(degrees_of_freedom)
    critical = 0.0
    if alpha is not None:
        critical = float(stats.t.ppf(1 - alpha / 2, degrees_of_freedom - 1)) / math.sqrt(degrees_of_freedom - 1)
    left = strength - critical
    if left <= 0:
        return 0.0
    square = left * left
    share = 2 / (1 + math.sqrt(1 + 4 / square))  # (√(g⁴ + 4g²) − g²) / 2, without cancellation
    if share > 1 - critical**2:
        return (strength**2 - critical**2) / (1 + strength**2)
    return share


def robustness(estimate: float, standard_error: float, degrees_of_freedom: float, target: float = 0) -> Robustness:
    """The robustness values of an estimate against a target, at 95 %.

    Raises
    ------
    ValueError
        If there are no more than one degree of freedom, or no standard error.
    """
    if degrees_of_freedom <= 1 or not 0 < standard_error < math.inf:
        raise ValueError("robustness needs a standard error and more than one degree of freedom")
    away = (estimate - target) / standard_error
    return Robustness(
        partial_r2(estimate / standard_error, degrees_of_freedom),
        robustness_value(away, degrees_of_freedom),
        robustness_value(away, degrees_of_freedom, alpha=0.05),
        partial_r2(away, degrees_of_freedom),
        degrees_of_freedom,
    )


def moved_by(
    estimate: float,
    standard_error: float,
    degrees_of_freedom: float,
    share_of_exposure: float,
    share_of_outcome: float,
    *,
    target: float = 0,
) -> LinearMove:
    """The estimate with a confounder that explains these shares in the model, moved towards ``target``."""
    if not (0 <= share_of_exposure < 1 and 0 <= share_of_outcome <= 1):
        raise ValueError("a confounder explains a share from 0 to 1 of the outcome, and less than 1 of the exposure")
    odds = share_of_exposure / (1 - share_of_exposure)
    bias = standard_error * math.sqrt(degrees_of_freedom * share_of_outcome * odds)
    shrunk = (1 - share_of_outcome) / (1 - share_of_exposure) * degrees_of_freedom / (degrees_of_freedom - 1)
    error = standard_error * math.sqrt(shrunk)
    value = estimate - bias if estimate >= target else estimate + bias
    reach = float(stats.t.ppf(0.975, degrees_of_freedom - 1)) * error
    return LinearMove(share_of_exposure, share_of_outcome, Moved(value, value - reach, value + reach), error)

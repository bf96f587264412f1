"""Rubin's rules: one result from the results of several imputations.

The pooled estimate is the mean of the estimates. Its variance has two parts: what each estimate would be
uncertain by if nothing had been missing (the mean of their variances, *within*), and what they differ by because
values are missing (the variance of the estimates, *between*), a little more of it because there are finitely many
(Rubin 1987, Multiple Imputation for Nonresponse in Surveys, section 3.1). Estimates are pooled on the scale on
which they are about normal: ratios as their logarithms.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from adjustplan.errors import Finding
from adjustplan.estimate.not_estimable import NotEstimableError


@dataclass(frozen=True)
class Pooled:
    """An estimate pooled over imputations.

    Attributes
    ----------
    estimate, standard_error, lower, upper : float
        On the scale on which it was pooled; 95 % limits by the t distribution.
    imputations : int
    within, between : float
        Mean of the variances, and variance of the estimates.
    degrees_of_freedom : float
        Of the t distribution; infinite when nothing is missing and no other limit was given.
    missing_information : float
        Fraction of the information about the estimate that is missing (Rubin 1987, formula 3.1.10).
    relative_efficiency : float
        Variance with infinitely many imputations over the variance with these: 1 / (1 + fraction / imputations).
    monte_carlo_error : float
        Standard error of the pooled estimate over other seeds (White, Royston and Wood 2011).
    """

    estimate: float
    standard_error: float
    lower: float
    upper: float
    imputations: int
    within: float
    between: float
    degrees_of_freedom: float
    missing_information: float
    relative_efficiency: float
    monte_carlo_error: float

    @property
    def enough(self) -> int:
        """Imputations that make the result repeatable: 100 times the missing fraction (White et al. 2011)."""
        return math.ceil(round(100 * self.missing_information, 6))


def pool_estimates(estimates: ArrayLike, variances: ArrayLike, complete_freedom: float = math.inf) -> Pooled:
    """Pool a single number.

    Parameters
    ----------
    estimates, variances : array of float, shape (imputations,)
        Of each imputation: the estimate and its squared standard error.
    complete_freedom : float
        Degrees of freedom that the interval would have without missing values, for the correction of Barnard and
        Rubin (1999, Biometrika 86:948); infinite for intervals by the normal distribution.

    Raises
    ------
    NotEstimableError
        If an imputation has no estimate: the others are not a fair selection.
    """
    from scipy.special import ndtri, stdtrit

    found = np.asarray(estimates, dtype=np.float64)
    squared = np.asarray(variances, dtype=np.float64)
    _refuse_gaps(np.asarray(np.isfinite(found) & np.isfinite(squared) & (squared > 0)))
    number = len(found)
    within, between = float(squared.mean()), float(found.var(ddof=1))
    added = (1 + 1 / number) * between
    total = within + added
    share, increase = added / total, added / within
    freedom = (number - 1) / share**2 if share > 0 else math.inf
    # Rubin's fraction uses his own degrees of freedom, whatever those of the complete data
    fraction = (increase + 2 / (freedom + 3)) / (1 + increase)
    if math.isfinite(complete_freedom):
        observed = (complete_freedom + 1) / (complete_freedom + 3) * complete_freedom * (1 - share)
        freedom = 1 / (1 / freedom + 1 / observed)
    quantile = float(stdtrit(freedom, 0.975)) if math.isfinite(freedom) else float(ndtri(0.975))
    estimate, error = float(found.mean()), math.sqrt(total)
    return Pooled(
        estimate,
        error,
        estimate - quantile * error,
        estimate + quantile * error,
        number,
        within,
        between,
        freedom,
        fraction,
        1 / (1 + fraction / number),
        math.sqrt(between / number),
    )


@dataclass(frozen=True)
class PooledTest:
    """A joint test that several coefficients are 0: F statistic, its degrees of freedom, p-value."""

    statistic: float
    numerator: int
    denominator: float
    p_value: float


def pool_test(estimates: ArrayLike, covariances: ArrayLike) -> PooledTest:
    """Test that all of several coefficients are 0 (statistic D1 of Li, Raghunathan and Rubin 1991, JASA 86:1065).

    Parameters
    ----------
    estimates : array of float, shape (imputations, coefficients)
    covariances : array of float, shape (imputations, coefficients, coefficients)

    Raises
    ------
    NotEstimableError
        If an imputation has no estimate.

    Notes
    -----
    The between-imputation covariance of a few imputations is too noisy to be inverted, so it is taken as a
    multiple of the one within.
    """
    from scipy.special import fdtrc

    found = np.asarray(estimates, dtype=np.float64)
    spread = np.asarray(covariances, dtype=np.float64)
    _refuse_gaps(np.asarray(np.isfinite(found).all(axis=1) & np.isfinite(spread).all(axis=(1, 2))))
    number, size = found.shape
    mean, within = found.mean(axis=0), spread.mean(axis=0)
    deviations = found - mean
    between = deviations.T @ deviations / (number - 1)
    increase = (1 + 1 / number) * float(np.trace(np.linalg.solve(within, between))) / size
    statistic = float(mean @ np.linalg.solve(within, mean)) / (size * (1 + increase))
    denominator = _wald_freedom(size * (number - 1), size, increase)
    limited = denominator if math.isfinite(denominator) else 1e12
    return PooledTest(statistic, size, denominator, float(fdtrc(size, limited, statistic)))


def _wald_freedom(pieces: int, size: int, increase: float) -> float:
    if increase == 0:
        return math.inf
    if pieces > 4:
        return 4 + (pieces - 4) * (1 + (1 - 2 / pieces) / increase) ** 2
    return pieces * (1 + 1 / size) * (1 + 1 / increase) ** 2 / 2


def _refuse_gaps(usable: NDArray[np.bool_]) -> None:
    failed = int((~usable).sum())
    if failed:
        message = f"The model could not be estimated in {failed} of {len(usable)} imputations."
        remedy = "Merge rare levels or state simpler forms; pooling only those that worked would be a selection."
        raise NotEstimableError("impute-model-failed", message, remedy)


def too_few(pooled: Pooled, what: str = "the estimate") -> Finding | None:
    """A warning when another seed could give a visibly different result."""
    if pooled.imputations >= pooled.enough:
        return None
    message = (
        f"{100 * pooled.missing_information:.0f} % of the information about {what} is missing, and"
        f" {pooled.imputations} imputations were made; another seed would move the estimate by about"
        f" {100 * pooled.monte_carlo_error / pooled.standard_error:.0f} % of its standard error."
    )
    remedy = f"Make {pooled.enough} or more (imputations in [analysis.imputation])."
    return Finding("impute-too-few", message, remedy, "warning")

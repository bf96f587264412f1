"""Standard errors from stacked estimating equations, row by row, with derivatives taken by machine.

Every estimate in question solves Σ u(row, θ) = 0, where θ holds all that is estimated at once: the coefficients of each
model and the means that are compared. Its covariance is A⁻¹ B A⁻ᵀ, with A the derivative of the sum and B the sum of
u u' over rows, or over the sums within clusters (Stefanski and Boos 2002, The American Statistician 56:29). Nothing is
worked out on paper: A comes from complex steps, u(θ + ih)/h, which are exact to rounding (Squire and Trapp 1998, SIAM
Review 40:110). Weighted rows have their equations multiplied by the weight.

The coefficients come from statsmodels; that they are roots of the equations written here is checked.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import statsmodels.api as sm
from numpy.typing import NDArray

Array = NDArray[np.float64]
Equations = Callable[[NDArray[np.complex128]], NDArray[np.complex128]]

MEANS = {
    "linear": lambda predictor: predictor,
    "logistic": lambda predictor: 1 / (1 + np.exp(-predictor)),
    "poisson": np.exp,
    "log-binomial": np.exp,
}
FAMILIES = {
    "linear": sm.families.Gaussian(),
    "logistic": sm.families.Binomial(),
    "poisson": sm.families.Poisson(),
    "log-binomial": sm.families.Binomial(sm.families.links.Log()),
}
SCALES = {
    "difference": lambda one, none: one - none,
    "ratio": lambda one, none: np.log(one) - np.log(none),
    "odds ratio": lambda one, none: np.log(one / (1 - one)) - np.log(none / (1 - none)),
}


@dataclass(frozen=True, eq=False)
class Rows:
    """What the equations are made of, one line for each person.

    ``design`` is the model matrix of the outcome as people are, ``ends`` the same with everybody exposed and with
    nobody exposed, ``covariates`` that of the exposure; ``time`` is 1 where no time is counted.
    """

    outcome: Array
    exposed: Array
    covariates: Array
    design: Array
    ends: tuple[Array, Array]
    weight: Array = field(default_factory=lambda: np.ones(1))
    time: Array = field(default_factory=lambda: np.ones(1))
    cluster: NDArray[np.int_] | None = None

    def __post_init__(self) -> None:
        for name in ("weight", "time"):
            object.__setattr__(self, name, np.broadcast_to(getattr(self, name), self.outcome.shape))


def covariance(rows: Rows, equations: Equations, root: Array) -> Array:
    """The covariance matrix of the root of the weighted equations."""
    value = equations(root.astype(complex)).real * rows.weight[:, None]
    size = np.abs(value).sum(axis=0)
    assert np.all(np.abs(value.sum(axis=0)) <= 1e-8 * size), "not a root of these equations"
    step = 1e-20
    slopes = np.empty((len(root), len(root)))
    for place in range(len(root)):
        moved = root.astype(complex)
        moved[place] += 1j * step
        slopes[:, place] = (equations(moved).imag * rows.weight[:, None]).sum(axis=0) / step
    if rows.cluster is not None:
        value = np.stack([value[rows.cluster == one].sum(axis=0) for one in np.unique(rows.cluster)])
    inverse = np.linalg.inv(slopes)
    return np.asarray(inverse @ (value.T @ value) @ inverse.T)


def coefficients(model: str, outcome: Array, design: Array, weight: Array, time: Array) -> Array:
    """Those of statsmodels: the outcome per unit of time, weighted by weight and time."""
    fitted = sm.GLM(outcome / time, design, family=FAMILIES[model], var_weights=weight * time).fit(
        maxiter=200, tol=1e-14, tol_criterion="params"
    )
    return np.asarray(fitted.params)


def score(
    model: str, outcome: Array, time: Array, design: Array, beta: NDArray[np.complex128]
) -> NDArray[np.complex128]:
    """The estimating equations of a regression, unweighted: x (y - t μ), for the log-binomial over 1 - μ."""
    fitted = MEANS[model](design @ beta)
    residual = outcome - time * fitted
    if model == "log-binomial":
        residual = residual / (1 - fitted)
    return np.asarray(design * residual[:, None])


def compared(scale: str, means: Array, matrix: Array) -> tuple[float, float]:
    """The measure of two means, and its standard error by the delta method."""
    measure, step = SCALES[scale], 1e-20
    slopes = np.array([measure(means[0] + 1j * step, means[1]), measure(means[0], means[1] + 1j * step)]).imag / step
    return float(measure(*means)), float(np.sqrt(slopes @ matrix @ slopes))


def regression(rows: Rows, model: str) -> tuple[float, float]:
    """The last coefficient of the outcome regression."""
    beta = coefficients(model, rows.outcome, rows.design, rows.weight, rows.time)
    matrix = covariance(rows, lambda theta: score(model, rows.outcome, rows.time, rows.design, theta), beta)
    return float(beta[-1]), float(np.sqrt(matrix[-1, -1]))


def standardised(rows: Rows, model: str, scale: str) -> tuple[float, float]:
    """Outcome regression, predictions at both ends, averages over time at risk."""
    beta = coefficients(model, rows.outcome, rows.design, rows.weight, rows.time)
    shares, width = rows.weight * rows.time, len(beta)
    means = np.array([np.average(MEANS[model](end @ beta), weights=shares) for end in rows.ends])

    def equations(theta: NDArray[np.complex128]) -> NDArray[np.complex128]:
        averaged = [
            rows.time * (MEANS[model](end @ theta[:width]) - mean)
            for end, mean in zip(rows.ends, theta[width:], strict=True)
        ]
        return np.column_stack([score(model, rows.outcome, rows.time, rows.design, theta[:width]), *averaged])

    return compared(scale, means, covariance(rows, equations, np.concatenate([beta, means]))[width:, width:])


def weighted(rows: Rows, scale: str, *, known: bool = False, truncate: float | None = None) -> tuple[float, float]:
    """Weights 1/e for the exposed and 1/(1 - e) for the others, and the weighted mean (or rate) of each.

    With ``known`` the weights count as fixed. With ``truncate`` they are first multiplied by the share of people with
    that exposure, and then set to the quantiles that lie this far from either end, which count as fixed.
    """
    alpha, width = _propensity(rows)
    weights = _weights(rows, alpha, truncate)
    means = np.array(
        [
            rows.weight @ (part.real * rows.outcome) / (rows.weight @ (part.real * rows.time))
            for part in weights(alpha + 0j)
        ]
    )

    def equations(theta: NDArray[np.complex128]) -> NDArray[np.complex128]:
        parts = weights(theta[:width])
        averaged = [part * (rows.outcome - rows.time * mean) for part, mean in zip(parts, theta[width:], strict=True)]
        return np.column_stack([_exposure_score(rows, theta[:width]), *averaged])

    return _of_means(rows, scale, equations, alpha, np.empty(0), means, known=known)


def doubly_robust(
    rows: Rows, model: str, scale: str, *, known: bool = False, truncate: float | None = None
) -> tuple[float, float]:
    """Predictions at both ends, each corrected by the weighted error of the prediction where it can be seen."""
    alpha, width = _propensity(rows)
    weights = _weights(rows, alpha, truncate)
    beta = coefficients(model, rows.outcome, rows.design, rows.weight, rows.time)
    whole = width + len(beta)

    def corrected(theta: NDArray[np.complex128]) -> list[NDArray[np.complex128]]:
        ends = [MEANS[model](end @ theta[width:whole]) for end in rows.ends]
        return [end + part * (rows.outcome - end) for end, part in zip(ends, weights(theta[:width]), strict=True)]

    means = [np.average(one.real, weights=rows.weight) for one in corrected(np.concatenate([alpha, beta]) + 0j)]

    def equations(theta: NDArray[np.complex128]) -> NDArray[np.complex128]:
        averaged = [one - mean for one, mean in zip(corrected(theta), theta[whole:], strict=True)]
        regressed = score(model, rows.outcome, rows.time, rows.design, theta[width:whole])
        return np.column_stack([_exposure_score(rows, theta[:width]), regressed, *averaged])

    return _of_means(rows, scale, equations, alpha, beta, np.array(means), known=known)


def _of_means(
    rows: Rows, scale: str, equations: Equations, alpha: Array, beta: Array, means: Array, *, known: bool
) -> tuple[float, float]:
    """The measure of two means that come last in the equations; with ``known``, the exposure's model is left out."""
    left_out = len(alpha) if known else 0

    def fewer(theta: NDArray[np.complex128]) -> NDArray[np.complex128]:
        return equations(np.concatenate([alpha[:left_out], theta]))[:, left_out:]

    matrix = covariance(rows, fewer, np.concatenate([alpha[left_out:], beta, means]))
    return compared(scale, means, matrix[-2:, -2:])


def _propensity(rows: Rows) -> tuple[Array, int]:
    alpha = coefficients("logistic", rows.exposed, rows.covariates, rows.weight, np.ones(len(rows.exposed)))
    return alpha, len(alpha)


def _exposure_score(rows: Rows, alpha: NDArray[np.complex128]) -> NDArray[np.complex128]:
    return score("logistic", rows.exposed, np.ones(len(rows.exposed)), rows.covariates, alpha)


def _weights(
    rows: Rows, alpha: Array, truncate: float | None
) -> Callable[[NDArray[np.complex128]], list[NDArray[np.complex128]]]:
    """The weights of exposed and others, 0 for whoever is not one, as a function of the coefficients."""

    def inverse(theta: NDArray[np.complex128]) -> list[NDArray[np.complex128]]:
        probability = MEANS["logistic"](rows.covariates @ theta)
        return [rows.exposed / probability, (1 - rows.exposed) / (1 - probability)]

    if truncate is None:
        return inverse
    share = float(np.average(rows.exposed, weights=rows.weight))
    shares = (share, 1 - share)
    stabilised = sum(one * part.real for one, part in zip(shares, inverse(alpha + 0j), strict=True))
    low, high = _quantiles(stabilised, rows.weight, truncate)

    def truncated(theta: NDArray[np.complex128]) -> list[NDArray[np.complex128]]:
        parts = [one * part for one, part in zip(shares, inverse(theta), strict=True)]
        parts = [np.where((part.real > 0) & (part.real < low), low, part) for part in parts]
        parts = [np.where(part.real > high, high, part) for part in parts]
        return [part / one for one, part in zip(shares, parts, strict=True)]

    return truncated


def _quantiles(weight: Array, people: Array, share: float) -> tuple[float, float]:
    """For either end, the smallest weight with at least that share of people at or below it."""
    below = [(people[weight <= one].sum() / people.sum(), one) for one in np.unique(weight)]
    low, high = (min(one for reached, one in below if reached >= level - 1e-12) for level in (share, 1 - share))
    return float(low), float(high)

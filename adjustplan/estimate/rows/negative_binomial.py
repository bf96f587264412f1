"""Negative binomial regression: rate ratios from counts that vary more than a Poisson count does.

A person's count has the mean μ = time at risk × exp(x'β) and the variance μ + α μ², as it would have if each person
had a rate of their own, spread around the expected one as a gamma variable with variance α (Greenwood and Yule 1920).
Coefficients and α are estimated together by maximum likelihood; the interval of a coefficient allows for α being
estimated.

Where counts vary no more than Poisson counts do, the likelihood is greatest at α = 0. The model is then the Poisson
model, which is what is fitted and said.
"""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import digamma, gammaln, xlogy

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.existence import looks_separated, parts, separating_direction
from adjustplan.estimate.kernel import FAMILIES, regress
from adjustplan.estimate.rows.result import (
    Labels,
    RowRegression,
    RowVariance,
    chosen_covariance,
    no_convergence,
    separation,
)

_NO_OVERDISPERSION = 1e-4  # a variance larger than Poisson by this share, on average, changes nothing to be seen
_SETTLED = 1e-12


def negative_binomial(
    columns: Floats,
    outcome: Floats,
    person_time: Floats | None = None,
    counts: NDArray[Any] | None = None,
    *,
    variance: RowVariance = "model",
    cluster: Labels | None = None,
    variables: tuple[str, ...] = (),
) -> RowRegression:
    """Fit a negative binomial model with a logarithmic link.

    Parameters
    ----------
    columns : array of float, shape (rows, parameters)
        With an intercept first, and of full column rank.
    outcome : array of float, shape (rows,)
        Counts of events, 0, 1, 2, …
    person_time : array of float, shape (rows,), optional
        Above zero; by default 1.
    counts : array of int, shape (rows,), optional
        People per row; the same as giving the row so many times. Rows with none are passed over.
    variance : {"model", "robust", "cluster"}
    cluster : array, shape (rows,), optional
    variables : tuple of str, optional
        The variable behind each column, for messages.

    Returns
    -------
    RowRegression
        ``dispersion`` is α; 0 with the finding "estimate-no-overdispersion" where the Poisson model was fitted.

    Raises
    ------
    NotEstimableError
        "estimate-separation" or "estimate-no-convergence".
    """
    time = np.ones(len(outcome)) if person_time is None else person_time
    people = np.ones(len(outcome)) if counts is None else np.asarray(counts, dtype=np.float64)
    rows, there = len(outcome), people > 0
    columns, outcome, time, people = (part[there] for part in (columns, outcome, time, people))
    cluster = None if cluster is None else cluster[there]
    poisson = regress(columns, people * time, outcome / time, FAMILIES["poisson"])
    if looks_separated(poisson):
        direction = separating_direction(columns, outcome, FAMILIES["poisson"])
        if direction is not None:
            raise separation(variables, parts(direction[:, None]), "that there is no event in some rows")
        if not poisson.converged:
            raise no_convergence()
    mean = time * np.exp(columns @ poisson.coefficients)
    excess = float(people @ ((outcome - mean) ** 2 - outcome))
    spread = float(people @ mean**2)
    found, bread = None, poisson.bread
    note: tuple[Finding, ...] = ()
    if excess > _NO_OVERDISPERSION * float(people @ mean):
        found, bread = _fit(columns, outcome, time, people, np.append(poisson.coefficients, excess / spread))
        mean = time * np.exp(columns @ found[:-1])
        if found[-1] * float(people @ mean**2) <= _NO_OVERDISPERSION * float(people @ mean):
            found = None
    if found is None:
        coefficients, dispersion = poisson.coefficients, 0.0
        mean = time * np.exp(columns @ coefficients)
        scores, bread = columns * (outcome - mean)[:, None], poisson.bread
        likelihood = float(people @ (xlogy(outcome, mean) - mean - gammaln(outcome + 1)))
        message = "The counts vary no more than Poisson counts do, so the negative binomial model is a Poisson model."
        note = (Finding("estimate-no-overdispersion", message, "Nothing needs to be done.", "note"),)
    else:
        coefficients, dispersion = found[:-1], float(found[-1])
        scores = _scores(columns, outcome, mean, dispersion)
        likelihood = float(people @ _log_likelihood(outcome, mean, dispersion))
        if not float((people @ scores) @ bread @ (people @ scores)) <= _SETTLED * max(1.0, abs(likelihood)):
            raise no_convergence()
    width = columns.shape[1]
    influence = (scores @ bread)[:, :width]
    given = np.zeros((rows, width))
    given[there] = influence
    return RowRegression(
        coefficients,
        chosen_covariance(variance, bread[:width, :width], influence, people, cluster),
        True,
        int(people.sum()),
        None,
        likelihood,
        given,
        dispersion=dispersion,
        findings=note,
    )


def _fit(columns: Floats, outcome: Floats, time: Floats, people: Floats, start: Floats) -> tuple[Floats, Floats]:
    """Coefficients and α, and the inverse of the information, from statsmodels; it has no counts, so rows repeat."""
    from statsmodels.discrete.discrete_model import NegativeBinomial

    again = np.repeat(np.arange(len(outcome)), people.astype(np.intp))
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        try:
            model = NegativeBinomial(outcome[again], columns[again], offset=np.log(time[again]))
            near = model.fit(start_params=start, method="bfgs", maxiter=300, disp=0, skip_hessian=True).params
            if not near[-1] > 0:
                near = start
            found = model.fit(start_params=near, method="newton", maxiter=50, disp=0, skip_hessian=True).params
            return np.asarray(found), np.linalg.inv(-model.hessian(found))
        except (ValueError, ArithmeticError, np.linalg.LinAlgError):
            raise no_convergence() from None


def _log_likelihood(outcome: Floats, mean: Floats, dispersion: float) -> Floats:
    """Of each person, with the variance mean + dispersion × mean²."""
    size = 1 / dispersion
    chance = gammaln(outcome + size) - gammaln(size) - gammaln(outcome + 1)
    return np.asarray(chance - size * np.log1p(dispersion * mean) + xlogy(outcome, mean / (size + mean)))


def _scores(columns: Floats, outcome: Floats, mean: Floats, dispersion: float) -> Floats:
    """Derivatives of each person's log-likelihood by the coefficients and by the dispersion."""
    size, wide = 1 / dispersion, 1 + dispersion * mean
    of_dispersion = size**2 * (np.log(wide) + digamma(size) - digamma(outcome + size)) + (outcome - mean) * size / wide
    return np.column_stack([columns * ((outcome - mean) / wide)[:, None], of_dispersion])

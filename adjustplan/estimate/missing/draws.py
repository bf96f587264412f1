"""Drawing a regression: not the best coefficients, but likely ones.

An imputed value must be as uncertain as the model that it comes from. So each imputation first draws the
coefficients from their (approximate) posterior distribution, and then draws the values given these (Rubin 1987,
Multiple Imputation for Nonresponse in Surveys, section 5.3).

* A number: linear regression. The residual variance is the sum of squared residuals over a draw from a
  chi-squared distribution, the coefficients are normal around the least-squares ones.
* Classes (two or more): multinomial logistic regression; the coefficients are normal around the maximum
  likelihood estimate with the inverse of its information.

Where a predictor tells a class without exception, the likelihood has no maximum and a normal draw around
wherever the iterations stopped would be nonsense. Then a few people are added who contradict it: for each
predictor and each class one a standard deviation above and one below the mean, whose weights sum to the number
of parameters (White, Daniel and Royston 2010, Comput Stat Data Anal 54:2267). They are added only where they
are needed, because they pull rare classes towards equal shares.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.missing.coding import Whole

_FLAT = 1e-10  # a direction of the predictors along which people do not differ
_FAR = 15.0  # a log odds this far out shows perfect prediction
_STEPS = 40
_SETTLED = 1e-7


def draw_linear(
    columns: Floats, counts: Floats, values: Floats, random: np.random.Generator
) -> tuple[Floats, Floats, float]:
    """The least-squares coefficients, drawn ones, and the drawn standard deviation of the residuals.

    Parameters
    ----------
    columns : array of float, shape (rows, parameters)
        Model matrix with an intercept; it may be collinear, predictions are then those of least norm.
    counts, values : array of float, shape (rows,)
        People per row and their value; more people than parameters.
    random : numpy.random.Generator

    Returns
    -------
    estimated, drawn : array of float, shape (parameters,)
    deviation : float
    """
    whitening = _whitening(columns, counts)
    projected = whitening.T @ (columns.T @ (counts * values))
    estimated = whitening @ projected
    squares = float(counts @ (values - columns @ estimated) ** 2)
    freedom = float(counts.sum()) - whitening.shape[1]
    deviation = float(np.sqrt(squares / random.chisquare(freedom)))
    drawn = whitening @ (projected + deviation * random.standard_normal(len(projected)))
    return estimated, drawn, deviation


def draw_classes(
    columns: Floats, counts: Floats, classes: Whole, size: int, random: np.random.Generator
) -> tuple[Floats | None, bool]:
    """Coefficients of a multinomial logistic regression, drawn around the maximum likelihood estimate.

    Parameters
    ----------
    columns : array of float, shape (rows, parameters)
        Model matrix whose first column is the intercept; it may be collinear.
    counts : array of float, shape (rows,)
    classes : array of int, shape (rows,)
        0 to ``size`` - 1; class 0 is the reference.
    size : int
        Number of classes.
    random : numpy.random.Generator

    Returns
    -------
    coefficients : array of float, shape (parameters, size - 1), or None
        None if no estimate was found even with added people.
    augmented : bool
        Whether people were added against perfect prediction.
    """
    fitted = _fit_classes(columns, counts, classes, size)
    augmented = fitted is None
    if fitted is None:
        fitted = _fit_classes(*_augmented(columns, counts, classes, size), size, hard=True)
        if fitted is None:
            return None, True
    whitening, estimated, root = fitted
    noise = np.linalg.solve(root.T, random.standard_normal(len(root)))
    return whitening @ (estimated + noise.reshape(size - 1, -1).T), augmented


def class_probabilities(columns: Floats, coefficients: Floats) -> Floats:
    """Probability of each class, shape (rows, size), from the coefficients of all classes but the first."""
    logs = np.hstack([np.zeros((len(columns), 1)), columns @ coefficients])
    odds = np.exp(logs - logs.max(axis=1, keepdims=True))
    return np.asarray(odds / odds.sum(axis=1, keepdims=True))


def _whitening(columns: Floats, counts: Floats) -> Floats:
    """T such that the columns of XT are orthonormal over the people and span those of X."""
    gram = columns.T @ (columns * counts[:, None])
    lengths = np.sqrt(np.diag(gram))
    lengths[lengths == 0] = 1.0
    sizes, directions = np.linalg.eigh(gram / np.outer(lengths, lengths))
    kept = sizes > _FLAT * sizes[-1]
    return np.asarray(directions[:, kept] / np.sqrt(sizes[kept]) / lengths[:, None])


def _fit_classes(
    columns: Floats, counts: Floats, classes: Whole, size: int, *, hard: bool = False
) -> tuple[Floats, Floats, Floats] | None:
    """Newton's method in whitened columns; None where the likelihood shows no maximum.

    Returns the whitening, the coefficients (rank, size - 1) and the Cholesky root of the information, whose
    rows run through the coefficients class by class. ``hard`` accepts fitted probabilities near the edge.
    """
    # scaled so that a column has mean square 1, which makes one tolerance fit studies of every size
    whitening = _whitening(columns, counts) * np.sqrt(counts.sum())
    white = columns @ whitening
    indicator = (classes[:, None] == np.arange(1, size)).astype(np.float64)
    beta = np.zeros((white.shape[1], size - 1))
    likelihood = -np.inf
    step = np.zeros_like(beta)
    for _ in range(_STEPS):
        probabilities = class_probabilities(white, beta)
        now = float(counts @ np.log(np.maximum(probabilities[np.arange(len(classes)), classes], 1e-300)))
        halvings = 0
        while now < likelihood - 1e-9 * abs(likelihood) and halvings < 20:
            step = step / 2
            beta = beta - step
            halvings += 1
            probabilities = class_probabilities(white, beta)
            now = float(counts @ np.log(np.maximum(probabilities[np.arange(len(classes)), classes], 1e-300)))
        likelihood = now
        gradient = white.T @ (counts[:, None] * (indicator - probabilities[:, 1:]))
        information = _information(white, counts, probabilities[:, 1:])
        try:
            root = np.asarray(np.linalg.cholesky(information), dtype=np.float64)
        except np.linalg.LinAlgError:
            return None
        halfway = np.linalg.solve(root, gradient.T.ravel())
        step = np.linalg.solve(root.T, halfway).reshape(size - 1, -1).T
        # under perfect prediction a log odds grows by about one in every step
        if not hard and float(np.abs(white @ beta).max()) > _FAR:
            return None
        if float(np.abs(step).max()) < _SETTLED:
            return whitening, beta, root
        beta = beta + step
    return None


def _information(white: Floats, counts: Floats, probabilities: Floats) -> Floats:
    rank, classes = white.shape[1], probabilities.shape[1]
    information = np.empty((classes, rank, classes, rank))
    for first in range(classes):
        for second in range(first, classes):
            weight = counts * probabilities[:, first] * ((first == second) - probabilities[:, second])
            block = white.T @ (white * weight[:, None])
            information[first, :, second] = block
            information[second, :, first] = block
    return information.reshape(classes * rank, classes * rank)


def _augmented(columns: Floats, counts: Floats, classes: Whole, size: int) -> tuple[Floats, Floats, NDArray[np.int64]]:
    """The rows with people added against perfect prediction."""
    mean = np.average(columns, axis=0, weights=counts)
    spread = np.sqrt(np.average((columns - mean) ** 2, axis=0, weights=counts))
    varying = np.flatnonzero(spread > 0)
    varying = varying[varying > 0]
    if not len(varying):
        return columns, counts, classes
    shifts = np.zeros((len(varying), columns.shape[1]))
    shifts[np.arange(len(varying)), varying] = spread[varying]
    added = np.tile(np.vstack([mean + shifts, mean - shifts]), (size, 1))
    weight = (len(varying) + 1) / len(added)
    return (
        np.vstack([columns, added]),
        np.concatenate([counts, np.full(len(added), weight)]),
        np.concatenate([classes, np.repeat(np.arange(size), 2 * len(varying))]),
    )

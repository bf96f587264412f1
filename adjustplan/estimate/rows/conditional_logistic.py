"""Conditional logistic regression: odds ratios from matched sets.

Each set has an intercept of its own, which is not estimated but conditioned away: given that a set of n people has
k cases, the chance that it is these k is exp(Σ x'β over the cases) divided by the sum of the same over every choice of
k people out of the n. That sum has C(n, k) terms, but grows person by person: of those chosen from the first t,
either the t-th is one or not,

    B(t, k) = B(t - 1, k) + exp(x'β of t) B(t - 1, k - 1)

and so do its derivatives (Gail, Lubin and Rubinstein 1981, Biometrika 68:703). Sets of the same shape take the steps
together. A set with one case needs one product; one with more cases than controls is turned round.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from adjustplan.data import Floats
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.rows.comparisons import needs_comparisons, within
from adjustplan.estimate.rows.newton import DIRECTION_TOLERANCE, Likelihood, climb
from adjustplan.estimate.rows.result import Labels, RowRegression, RowVariance, chosen_covariance, standardised
from adjustplan.estimate.rows.risk_sets import Places

_MOST_NUMBERS = 2_000_000
_LARGEST_LOGARITHM = 700.0


@dataclass(frozen=True, eq=False)
class MatchedSets:
    """Matched sets, those of equal shape together.

    Attributes
    ----------
    part : array of int, shape (rows,)
        Number of the row's set; -1 where the set has no case or no control.
    first : array of int, shape (sets,)
        First row of each set that counts.
    left_out : int
        Sets that do not count.
    shapes : tuple of (rows, set number, k, sign)
        Rows of the sets of one shape, a line per set, and their numbers; how many of each are chosen; and 1 where those
        are the cases or -1 where they are the controls.
    """

    part: Places
    first: Places
    left_out: int
    shapes: tuple[tuple[Places, Places, int, float], ...]


def matched_sets(case: NDArray[np.bool_], matched_set: Labels) -> MatchedSets:
    """Find the matched sets that have cases and controls.

    Raises
    ------
    NotEstimableError
        If there are none, or one is too large.
    """
    from scipy.special import gammaln

    _, first, number, sizes = np.unique(matched_set, return_index=True, return_inverse=True, return_counts=True)
    cases = np.bincount(number, weights=case).astype(np.intp)
    counts = (cases > 0) & (cases < sizes)
    if not counts.any():
        message = "No matched set has both a case and a control."
        raise NotEstimableError("estimate-no-informative-sets", message, "Check the column of the matched sets.")
    choices = gammaln(sizes + 1) - gammaln(cases + 1) - gammaln(sizes - cases + 1)
    if choices.max() > _LARGEST_LOGARITHM:
        message = f"A matched set has {int(sizes[np.argmax(choices)])} people, too many for a conditional likelihood."
        remedy = "Adjust for what defines the sets in a logistic model; with sets so large nothing is lost."
        raise NotEstimableError("estimate-large-set", message, remedy)
    order = np.argsort(number, kind="stable")
    starts = np.concatenate([[0], np.cumsum(sizes)[:-1]])
    renumbered = np.where(counts, np.cumsum(counts) - 1, -1)
    shapes = []
    for size, chosen in np.unique(np.column_stack([sizes, cases])[counts], axis=0):
        here = np.flatnonzero(counts & (sizes == size) & (cases == chosen))
        lines = order[starts[here][:, None] + np.arange(size)]
        turned = 2 * chosen > size
        shapes.append((lines, renumbered[here], int(size - chosen if turned else chosen), -1.0 if turned else 1.0))
    return MatchedSets(renumbered[number], first[counts], int(np.sum(~counts)), tuple(shapes))


def conditional_logistic(
    columns: Floats,
    case: NDArray[Any],
    matched_set: Labels,
    *,
    variance: RowVariance = "model",
    cluster: Labels | None = None,
    variables: tuple[str, ...] = (),
) -> RowRegression:
    """Fit a conditional logistic model.

    Parameters
    ----------
    columns : array of float, shape (rows, parameters)
        Without an intercept.
    case : array of bool or 0/1, shape (rows,)
    matched_set : array, shape (rows,)
        Label of each row's set; any number of cases and controls per set.
    variance : {"model", "robust", "cluster"}
        "robust" takes sets for independent, "cluster" clusters of sets.
    cluster : array, shape (rows,), optional
        Cluster of each row; that of a set is the one of its first row.
    variables : tuple of str, optional
        The variable behind each column, for messages.

    Returns
    -------
    RowRegression
        ``rows`` and ``events`` are those of the sets that count, ``left_out`` is how many sets do not, and
        ``influence`` is that of a whole set and stands at its first row.

    Raises
    ------
    NotEstimableError
        "estimate-no-informative-sets", "estimate-large-set", "estimate-collinear" (see ``columns_within_sets``),
        "estimate-separation" or "estimate-no-convergence".
    """
    cases = np.asarray(case).astype(bool)
    sets = matched_sets(cases, matched_set)
    seen = sets.part >= 0
    centred = within(sets.part, columns, np.ones(len(columns)))
    needs_comparisons(centred, seen.astype(np.float64), variables, "within any matched set")
    scaled, scale = standardised(centred, seen.astype(np.float64))

    coefficients = climb(
        lambda at: conditional_likelihood(sets, scaled, cases, at),
        columns.shape[1],
        lambda direction: _separates(sets, scaled, cases, direction),
        variables,
        "who is the case in a matched set",
    )
    final = conditional_likelihood(sets, scaled, cases, coefficients)
    assert final.scores is not None
    bread = np.linalg.inv(final.information)
    influence = np.zeros(columns.shape)
    influence[sets.first] = final.scores @ bread / scale
    model = bread / np.outer(scale, scale)
    return RowRegression(
        coefficients / scale,
        chosen_covariance(variance, model, influence, None, cluster),
        True,
        int(seen.sum()),
        int(np.sum(cases & seen)),
        final.value,
        influence,
        left_out=sets.left_out,
    )


def columns_within_sets(columns: Floats, case: NDArray[Any], matched_set: Labels) -> Floats:
    """The columns less their means in each matched set that counts; zero for the rows of the others.

    A combination of columns that is zero here everywhere has no coefficient: ``null_directions`` and
    ``independent_columns`` say which. A covariate that was matched on is such a case, and may be left out, for the
    sets adjust for it already.
    """
    return within(matched_sets(np.asarray(case).astype(bool), matched_set).part, columns, np.ones(len(columns)))


def conditional_likelihood(
    sets: MatchedSets, columns: Floats, case: NDArray[np.bool_], coefficients: Floats
) -> Likelihood:
    """The conditional log-likelihood; ``scores`` has a line per set."""
    parameters = columns.shape[1]
    value, information = 0.0, np.zeros((parameters, parameters))
    scores = np.zeros((len(sets.first), parameters))
    for rows, numbers, chosen, sign in sets.shapes:
        most = max(1, _MOST_NUMBERS // ((chosen + 1) * parameters**2))
        for start in range(0, len(rows), most):
            lines = rows[start : start + most]
            x = sign * columns[lines]
            picked = case[lines] if sign > 0 else ~case[lines]
            predictor = x @ coefficients
            predictor = predictor - predictor.max(axis=1)[:, None]
            total, slope, curvature = _choices(x, np.exp(predictor), chosen)
            mean = slope / total[:, None]
            value += float(np.sum(predictor * picked)) - float(np.sum(np.log(total)))
            scores[numbers[start : start + most]] = np.einsum("sn,snp->sp", picked.astype(np.float64), x) - mean
            information += np.tensordot(1 / total, curvature, axes=1) - mean.T @ mean
    return Likelihood(value, scores.sum(axis=0), information, scores)


def _choices(x: Floats, ratio: Floats, chosen: int) -> tuple[Floats, Floats, Floats]:
    """The sum over all choices of so many people of each set, and its first and second derivatives."""
    sets, size, parameters = x.shape
    total = np.zeros((sets, chosen + 1))
    slope = np.zeros((sets, chosen + 1, parameters))
    curvature = np.zeros((sets, chosen + 1, parameters, parameters))
    total[:, 0] = 1.0
    for person in range(size):
        e, z = ratio[:, person, None], x[:, person, None, :]
        before, slope_before = total[:, :-1], slope[:, :-1]
        crossed = slope_before[..., :, None] * z[..., None, :]
        outer = z[..., :, None] * z[..., None, :] * before[..., None, None]
        gained = curvature[:, :-1] + crossed + np.swapaxes(crossed, -1, -2) + outer
        curvature[:, 1:] += e[..., None, None] * gained
        slope[:, 1:] += e[..., None] * (slope_before + z * before[..., None])
        total[:, 1:] += e * before
    return total[:, -1], slope[:, -1], curvature[:, -1]


def _separates(sets: MatchedSets, columns: Floats, case: NDArray[np.bool_], direction: Floats) -> bool:
    """Whether no control of any set has a higher x'b than a case of it."""
    if not np.isfinite(direction).all():
        return False
    values = columns @ direction
    size = float(np.ptp(values))
    if not size > 0:
        return False
    lowest = np.full(len(sets.first), np.inf)
    highest = np.full(len(sets.first), -np.inf)
    cases, controls = case & (sets.part >= 0), ~case & (sets.part >= 0)
    np.minimum.at(lowest, sets.part[cases], values[cases])
    np.maximum.at(highest, sets.part[controls], values[controls])
    return bool((highest <= lowest + DIRECTION_TOLERANCE * size).all())

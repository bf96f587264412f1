"""Chained equations on cells: one variable after the other, again and again.

Missing values start as random draws from the observed ones. Then each incomplete variable in turn is regressed
on all others among the people who have it, and those who lack it get a new draw from the regression, given the
current values of everything else. After some rounds the draws are as good as draws from all variables together
(van Buuren 2018, Flexible Imputation of Missing Data, section 4.5; White, Royston and Wood 2011, Stat Med
30:377).

People who lack the same variables and currently agree in everything else are interchangeable, whatever their
values were a round ago. So the state of the chain is itself a table of cells: which variables were missing, the
current value of each, and a count. A step pools the cells over the variable to be drawn and shares the people of
each out anew. The table has never more lines than combinations of values that can occur, or people.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from adjustplan.data import Floats
from adjustplan.errors import Finding
from adjustplan.estimate.missing.coding import MISSING, Coding, Whole, pool, predictors
from adjustplan.estimate.missing.draws import class_probabilities, draw_classes, draw_linear
from adjustplan.estimate.missing.matching import Shares, share_alike, share_by, share_matched
from adjustplan.estimate.not_estimable import NotEstimableError

_Cells = tuple[Whole, Whole]  # codes and counts
_UNLIKE = 0.2  # residual standard deviations
_VISIBLE = 0.02  # standard deviations of the variable, where the residual ones are nearly nothing


@dataclass(frozen=True, eq=False)
class Incomplete:
    """Cells with missing values, checked and ready to be imputed.

    Attributes
    ----------
    names : tuple of str
        The columns as they came.
    codings : tuple of Coding
        The variables of the imputation models, then those carried along.
    models : int
        How many of the codings are in the models.
    codes : array of int, shape (cells, codings)
    counts : array of int, shape (cells,)
        People.
    order : tuple of int
        Places of the incomplete variables, in the order in which they are visited: fewest missing first.
    products : tuple of pairs of int
        Places of variables whose product is a predictor.
    normal : frozenset of int
        Places of numbers that are drawn from a normal distribution instead of matched.
    missing : mapping of str to float
        Share of people who lack each incomplete variable.
    findings : tuple of Finding
    """

    names: tuple[str, ...]
    codings: tuple[Coding, ...]
    models: int
    codes: Whole
    counts: Whole
    order: tuple[int, ...]
    products: tuple[tuple[int, int], ...]
    normal: frozenset[int]
    missing: Mapping[str, float]
    findings: tuple[Finding, ...]


@dataclass(frozen=True, eq=False)
class Trace:
    """How one chain went: what is kept of an imputation when its values have been used.

    Attributes
    ----------
    means : array of float, shape (iterations, incomplete variables)
        Mean of the imputed values after each iteration (of a text: share of its most frequent level).
    augmented : frozenset of str
        Variables with perfect prediction in the last iteration, met by added people.
    far : mapping of str to float
        Share of the people matched in the last iteration who are unlike their donors: the predicted means are more
        than a fifth of the residual standard deviation, and a fiftieth of the variable's, apart.
    """

    means: Floats
    augmented: frozenset[str]
    far: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Completed:
    """One imputation.

    Attributes
    ----------
    values : pandas.DataFrame, shape (cells, columns)
        The columns as they came, without missing values in the imputed ones.
    counts : array of int, shape (cells,)
        People.
    trace : Trace
    """

    values: pd.DataFrame
    counts: Whole
    trace: Trace


@dataclass(frozen=True, eq=False)
class _Draw:
    """Levels for the recipients of one step, the coding they refer to, and what was odd about it."""

    shares: Shares
    coding: Coding
    augmented: bool = False
    far: float | None = None


def run_chain(data: Incomplete, iterations: int, random: np.random.Generator) -> Completed:
    """Run one chain and return where it ends.

    Parameters
    ----------
    data : Incomplete
    iterations : int
        Rounds through the incomplete variables; a single incomplete variable needs only one.
    random : numpy.random.Generator

    Raises
    ------
    NotEstimableError
        If the regression of a variable cannot be fitted.
    """
    rounds = iterations if len(data.order) > 1 else 1
    lacking = data.codes[:, list(data.order)] == MISSING
    codes, counts = np.hstack([data.codes, lacking.astype(np.int64)]), data.counts
    codings = list(data.codings)
    for step, place in enumerate(data.order):
        kept, recipients = _parted(codes, counts, place, len(codings) + step)
        codes, counts = _joined(kept, recipients, place, share_alike(recipients[1], codings[place].people, random))
    means = np.empty((rounds, len(data.order)))
    last: dict[str, _Draw] = {}
    for turn in range(rounds):
        for step, place in enumerate(data.order):
            flag = len(codings) + step
            kept, recipients = _parted(codes, counts, place, flag)
            draw = _drawn(data, codings, kept, recipients, place, random)
            codings[place], last[draw.coding.name] = draw.coding, draw
            codes, counts = _joined(kept, recipients, place, draw.shares)
            imputed = codes[:, flag] == 1
            means[turn, step] = np.average(draw.coding.scores[codes[imputed, place]], weights=counts[imputed])
    codes, counts = pool(codes[:, : len(codings)], counts)
    trace = Trace(
        means,
        frozenset(name for name, draw in last.items() if draw.augmented),
        {name: draw.far for name, draw in last.items() if draw.far is not None},
    )
    return Completed(_decoded(data.names, codings, codes), counts, trace)


def _parted(codes: Whole, counts: Whole, place: int, flag: int) -> tuple[_Cells, _Cells]:
    """The cells that have a variable, and those that lacked it, the latter pooled over its current values."""
    lacking = codes[:, flag] == 1
    forgotten = codes[lacking]
    forgotten[:, place] = MISSING
    return (codes[~lacking], counts[~lacking]), pool(forgotten, counts[lacking])


def _joined(kept: _Cells, recipients: _Cells, place: int, shares: Shares) -> _Cells:
    """The kept cells and the recipients with the levels that they were given."""
    row, level, share = shares
    given = recipients[0][row]
    given[:, place] = level
    given, share = pool(given, share)
    return np.vstack([kept[0], given]), np.concatenate([kept[1], share])


def _drawn(
    data: Incomplete,
    current: Sequence[Coding],
    kept: _Cells,
    recipients: _Cells,
    place: int,
    random: np.random.Generator,
) -> _Draw:
    """Levels for the recipients from a newly drawn regression."""
    coding, people = data.codings[place], recipients[1]
    if len(coding.levels) == 1:
        return _Draw((np.arange(len(people)), np.zeros(len(people), dtype=np.int64), people), coding)
    others = [other for other in range(data.models) if other != place]
    products = [(others.index(one), others.index(two)) for one, two in data.products if one in others and two in others]
    codings = [current[other] for other in others]
    columns = predictors(codings, kept[0][:, others], products)
    wanted = predictors(codings, recipients[0][:, others], products)
    levels, donors = kept[0][:, place], kept[1].astype(np.float64)
    if coding.measured:
        estimated, drawn, deviation = draw_linear(columns, donors, coding.scores[levels], random)
        if place in data.normal:
            row = np.repeat(np.arange(len(people)), people)
            values = (wanted @ drawn)[row] + deviation * random.standard_normal(len(row))
            fresh = len(coding.levels) + np.arange(len(row))
            return _Draw((row, fresh, np.ones(len(row), dtype=np.int64)), coding.with_values(values))
        shares, gaps = share_matched(people, wanted @ drawn, levels, donors, columns @ estimated, random)
        unlike = gaps > max(_UNLIKE * deviation, _VISIBLE * _spread(coding))
        return _Draw(shares, coding, far=float(np.average(unlike, weights=people)))
    coefficients, augmented = draw_classes(columns, donors, levels, len(coding.levels), random)
    if coefficients is None:
        message = f"The imputation model of “{coding.name}” found no best estimate."
        remedy = "Merge its rare levels, or those of the variables it depends on."
        raise NotEstimableError("impute-no-convergence", message, remedy)
    return _Draw(share_by(people, class_probabilities(wanted, coefficients), random), coding, augmented)


def _spread(coding: Coding) -> float:
    mean = float(np.average(coding.scores, weights=coding.people))
    return float(np.sqrt(np.average((coding.scores - mean) ** 2, weights=coding.people)))


def _decoded(names: Sequence[str], codings: Sequence[Coding], codes: Whole) -> pd.DataFrame:
    columns = {}
    for coding, column in zip(codings, codes.T, strict=True):
        values = pd.Series(coding.levels.to_numpy()[column], name=coding.name)
        columns[coding.name] = values.where(column != MISSING) if (column == MISSING).any() else values
    return pd.DataFrame(columns)[list(names)]

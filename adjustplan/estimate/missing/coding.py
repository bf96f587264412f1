"""Cells in whole numbers: the form in which values are imputed.

A *cell* is one distinct combination of values, missing ones included, and the number of people who have it.
A value that is imputed is nearly always one that somebody really has, so a variable is kept as the place of each
value among its *levels*; -1 stands for missing. What a variable contributes to the model of
another one is a small table with one line per level: 0/1 columns for a category, one standardised column for a
number that enters as a line.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from adjustplan.data import Floats

Entry = Literal["category", "linear"]
Whole = NDArray[np.int64]
MISSING = -1
_MOST_KEYS = 2**62


@dataclass(frozen=True, eq=False)
class Coding:
    """One variable and its levels.

    Attributes
    ----------
    name : str
    levels : pandas.Index
        The distinct observed values, sorted; during a chain also values drawn from a normal distribution.
    people : array of float, shape (observed levels,)
        People observed at each level.
    entry : {"category", "linear"}
        How it enters the models of other variables.
    columns : array of float, shape (levels, width)
        What it contributes to them; for a category one column for each level but the most frequent.
    scores : array of float, shape (levels,)
        What its chain is summarised by: the number itself, or 1 at the most frequent level of a text.
    """

    name: str
    levels: pd.Index[Any]
    people: Floats
    entry: Entry
    columns: Floats
    scores: Floats

    @property
    def measured(self) -> bool:
        """Whether its missing values come from a linear regression; else classes are drawn."""
        return self.entry == "linear" and len(self.people) > 2

    def with_values(self, drawn: Floats) -> Coding:
        """The same variable with values that nobody was observed to have as further levels."""
        observed = len(self.people)
        slope = np.ptp(self.columns[:observed, 0]) / np.ptp(self.scores[:observed])
        entered = self.columns[0, 0] + slope * (drawn - self.scores[0])
        return replace(
            self,
            levels=pd.Index(np.concatenate([self.scores[:observed], drawn])),
            columns=np.concatenate([self.columns[:observed, 0], entered])[:, None],
            scores=np.concatenate([self.scores[:observed], drawn]),
        )


def code(values: pd.Series[Any], counts: Whole, entry: Entry) -> tuple[Whole, Coding]:
    """The place of each value among the levels of its variable, and the variable's coding.

    Parameters
    ----------
    values : pandas.Series, shape (cells,)
        Numbers or text, NaN or None where missing.
    counts : array of int, shape (cells,)
    entry : {"category", "linear"}

    Returns
    -------
    codes : array of int, shape (cells,)
    coding : Coding
    """
    places, levels = pd.factorize(values, sort=True)
    codes = places.astype(np.int64)
    index = pd.Index(levels)
    seen = codes != MISSING
    people = np.bincount(codes[seen], weights=counts[seen], minlength=len(index)).astype(np.float64)
    numeric = pd.api.types.is_numeric_dtype(index.dtype)
    common = int(people.argmax()) if len(index) else 0
    numbers = index.to_numpy(dtype=np.float64) if numeric else (np.arange(len(index)) == common).astype(np.float64)
    if len(index) < 2:
        columns = np.zeros((len(index), 0))
    elif entry == "linear":
        centre = float(np.average(numbers, weights=people))
        spread = float(np.sqrt(np.average((numbers - centre) ** 2, weights=people)))
        columns = ((numbers - centre) / spread)[:, None]
    else:
        columns = np.delete(np.eye(len(index)), common, axis=1)
    return codes, Coding(str(values.name), index, people, entry, columns, numbers)


def predictors(codings: Sequence[Coding], codes: Whole, products: Sequence[tuple[int, int]] = ()) -> Floats:
    """The model matrix of the given variables: an intercept, their columns, and products of pairs of them.

    Parameters
    ----------
    codings : sequence of Coding
    codes : array of int, shape (rows, variables)
        Without missing values.
    products : sequence of pairs of int
        Places of the variables whose columns are multiplied with each other.

    Returns
    -------
    array of float, shape (rows, parameters)
    """
    blocks = [coding.columns[codes[:, place]] for place, coding in enumerate(codings)]
    multiplied = [
        (blocks[first][:, :, None] * blocks[second][:, None, :]).reshape(len(codes), -1) for first, second in products
    ]
    return np.hstack([np.ones((len(codes), 1)), *blocks, *multiplied])


def pool(codes: Whole, counts: Whole) -> tuple[Whole, Whole]:
    """Rows with the same codes become one; the result is sorted by the codes, whatever the order before.

    Parameters
    ----------
    codes : array of int, shape (rows, variables)
        -1 or more.
    counts : array of int, shape (rows,)
    """
    key = np.zeros(len(codes), dtype=np.int64)
    room = 1
    for column in codes.T:
        size = int(column.max(initial=MISSING)) + 2
        if room > _MOST_KEYS // size:
            distinct, key = np.unique(key, return_inverse=True)
            room = len(distinct)
        key = key * size + (column + 1)
        room *= size
    _, first, group = np.unique(key, return_index=True, return_inverse=True)
    pooled = np.zeros(len(first), dtype=np.int64)
    np.add.at(pooled, group, counts)
    return codes[first], pooled

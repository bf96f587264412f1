"""Covariate patterns: all that the models need to know of the rows.

Rows that agree in the exposure and every covariate form a *pattern*. How many rows a pattern has and the moments of
their outcomes are enough to fit a regression exactly as if every row had been there. Ten million rows of a few
categories become some hundred patterns; with continuous covariates nearly every row is a pattern of its own, and
nothing is lost then either.

What must not be summed away stays apart: the cluster, the matched set, the times of a survival analysis. And where
people are to be resampled or their missing values imputed, the outcome stays apart too, so that a pattern is one kind
of person; such patterns are called *atoms*.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from adjustplan.data.moments import Floats, Moments

Kind = Literal["number", "boolean", "text", "other"]


@dataclass(frozen=True, slots=True)
class Outcome:
    """What the whole file says about the outcome, over rows of every pattern.

    Attributes
    ----------
    kind : {"number", "boolean", "text", "other"}
        Of its column.
    observed : int
        Rows that have a value.
    infinite : int
        Rows whose value is infinite.
    not_binary : int
        Rows whose value is neither 0 nor 1.
    lowest, highest : float
        Its range; not a number where nothing was observed.
    """

    kind: Kind
    observed: int
    infinite: int
    not_binary: int
    lowest: float
    highest: float


@dataclass(frozen=True, eq=False)
class Patterns:
    """Counts and outcome moments of each covariate pattern.

    Attributes
    ----------
    values : pandas.DataFrame, shape (patterns, variables)
        The exposure and the covariates; numbers and booleans as floats, text as text, missing as missing.
    kinds : mapping of str to {"number", "boolean", "text", "other"}
        The kind of each variable.
    rows : array of int, shape (patterns,)
        Rows of the file with this pattern.
    moments : Moments
        Of the outcomes of those rows that have one.
    outcome : Outcome
        The outcome over the whole file.
    keys : pandas.DataFrame, shape (patterns, keys)
        What stays apart besides: any of "cluster", "matched_set", "time", "entry".
    """

    values: pd.DataFrame
    kinds: Mapping[str, Kind]
    rows: NDArray[np.int64]
    moments: Moments
    outcome: Outcome
    keys: pd.DataFrame

    def __len__(self) -> int:
        return len(self.rows)

    @property
    def observed(self) -> NDArray[np.int64]:
        """Rows of each pattern that have an outcome."""
        return self.moments.people

    @property
    def mean(self) -> Floats:
        """Mean outcome of each pattern, in the outcome's unit; not a number where none was observed."""
        return self.moments.mean

    @property
    def deviations(self) -> Floats:
        """Sum of squared deviations of the outcomes of each pattern from that mean."""
        return self.moments.deviations

    @property
    def total(self) -> int:
        """Rows of the file."""
        return int(self.rows.sum())

    @property
    def people(self) -> int:
        """Rows that have an outcome."""
        return int(self.moments.people.sum())

    def levels(self, variable: str) -> pd.Series:
        """The distinct values of a variable, sorted, each with its number of rows (values as index)."""
        counts = pd.Series(self.rows).groupby(self.values[variable].to_numpy(), sort=True).sum()
        counts.index.name = variable
        return counts

    def missing(self, variable: str) -> int:
        """Rows that lack this variable."""
        return int(self.rows[self.values[variable].isna().to_numpy()].sum())

    def is_complete(self, variables: Sequence[str]) -> NDArray[np.bool_]:
        """Which patterns have the outcome and each of ``variables``, and whatever stays apart."""
        known = self.values[list(variables)].notna().all(axis=1).to_numpy() & (self.observed > 0)
        return np.asarray(known & self.keys.notna().all(axis=1).to_numpy())

    def complete(self, variables: Sequence[str], *, pooled: bool = True) -> Patterns:
        """The rows that have the outcome and each of ``variables``, as patterns of these variables alone.

        Patterns that differ only in other variables are pooled, unless ``pooled`` is false.
        """
        kinds = {variable: self.kinds[variable] for variable in variables}
        kept = replace(self, values=self.values[list(variables)], kinds=kinds).only(self.is_complete(variables))
        if not pooled:
            return replace(kept, rows=kept.moments.people)
        values, keys = kept.values, kept.keys
        group, order = self._grouping(values, keys)
        moments = kept.moments.pool(group, len(order))
        values, keys = values.iloc[order].reset_index(drop=True), keys.iloc[order].reset_index(drop=True)
        return Patterns(values, kinds, moments.people, moments, self.outcome, keys)

    def only(self, chosen: NDArray[np.bool_]) -> Patterns:
        """Some of the patterns."""
        values, keys = self.values[chosen].reset_index(drop=True), self.keys[chosen].reset_index(drop=True)
        return replace(self, values=values, rows=self.rows[chosen], moments=self.moments.of(chosen), keys=keys)

    def place(self, variables: Sequence[str]) -> NDArray[np.intp]:
        """Which pattern of ``complete(variables)`` each pattern went to; -1 for those that are not complete."""
        kept = self.is_complete(variables)
        places = np.full(len(self), -1, dtype=np.intp)
        places[kept] = self._grouping(self.values.loc[kept, list(variables)], self.keys[kept])[0]
        return places

    @staticmethod
    def _grouping(values: pd.DataFrame, keys: pd.DataFrame) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
        """The number of each line's group, groups being sorted by their values, and a line of each group."""
        apart = pd.concat([values, keys.add_prefix("\0")], axis=1)
        group = apart.groupby(list(apart.columns), sort=True).ngroup().to_numpy(dtype=np.intp)
        _, order = np.unique(group, return_index=True)
        return np.asarray(group, dtype=np.intp), np.asarray(order, dtype=np.intp)

    def grouped(self, variable: str, cuts: Sequence[float]) -> Patterns:
        """The same with a number replaced by its group: 0 below the first cut, 1 from it to the second, and so on."""
        numbers = self.values[variable]
        group = np.searchsorted(np.asarray(cuts, dtype=np.float64), numbers.to_numpy(dtype=np.float64), side="right")
        values = self.values.assign(**{variable: np.where(numbers.isna(), np.nan, group.astype(np.float64))})
        return replace(self, values=values)

"""Covariate patterns: all that a regression needs to know about the rows.

People who share the same exposure and the same covariates form a *covariate pattern*. A regression gives
everybody in a pattern the same fitted value, so it makes no difference to it who in the pattern had which
outcome: how many people there are, the mean of their outcomes and the sum of the squared deviations from that
mean say everything. For an outcome of 0 and 1 the mean is the share with the outcome; for a continuous
outcome the squared deviations carry what the residuals need. Estimates and standard errors from the patterns
are those from the rows, exactly.

A value can be missing, so "missing" is a level of its own until a model asks for the rows that are complete
for its variables; only then is it known who is left out, and why.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

Kind = Literal["number", "boolean", "text", "other"]
Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Outcome:
    """The outcome over the whole file.

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
    observed : array of int, shape (patterns,)
        Those of them that have an outcome.
    mean : array of float, shape (patterns,)
        Mean outcome, in the outcome's unit; not a number where none was observed.
    deviations : array of float, shape (patterns,)
        Sum of squared deviations of the outcomes from that mean.
    outcome : Outcome
        The outcome over the whole file.
    """

    values: pd.DataFrame
    kinds: Mapping[str, Kind]
    rows: NDArray[np.int64]
    observed: NDArray[np.int64]
    mean: Floats
    deviations: Floats
    outcome: Outcome

    def __len__(self) -> int:
        return len(self.rows)

    @property
    def total(self) -> int:
        """Rows of the file."""
        return int(self.rows.sum())

    def levels(self, variable: str) -> pd.Series:
        """The distinct values of a variable, sorted, each with its number of rows (values as index)."""
        counts = pd.Series(self.rows).groupby(self.values[variable].to_numpy(), sort=True).sum()
        counts.index.name = variable
        return counts

    def missing(self, variable: str) -> int:
        """Rows that lack this variable."""
        return int(self.rows[self.values[variable].isna().to_numpy()].sum())

    def complete(self, variables: Sequence[str]) -> Patterns:
        """The rows that have the outcome and each of ``variables``, as patterns of these variables alone.

        Patterns that differ only in other variables are pooled: their means are averaged by their numbers of
        rows, and what their means lie apart is added to the squared deviations.
        """
        values = self.values[list(variables)]
        kept = values.notna().all(axis=1).to_numpy() & (self.observed > 0)
        parts = pd.DataFrame({"n": self.observed[kept], "mean": self.mean[kept], "ss": self.deviations[kept]})
        group = values[kept].groupby(list(variables), sort=True).ngroup().to_numpy()
        first = pd.Series(group).drop_duplicates()
        order = first.index[np.argsort(first.to_numpy())]
        count = len(order)
        n = np.bincount(group, weights=parts["n"], minlength=count)
        mean = np.bincount(group, weights=parts["n"] * parts["mean"], minlength=count) / n
        apart = parts["ss"] + parts["n"] * (parts["mean"] - mean[group]) ** 2
        rows = n.astype(np.int64)
        return Patterns(
            values[kept].iloc[order].reset_index(drop=True),
            {variable: self.kinds[variable] for variable in variables},
            rows,
            rows,
            mean,
            np.bincount(group, weights=apart, minlength=count).astype(np.float64),
            self.outcome,
        )

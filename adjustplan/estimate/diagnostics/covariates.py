"""Balance of the covariates of a set, each shown as what it is: a level of a category, a number, or its spread.

Two groups are compared by standardised differences (``balance.py``). An exposure that is a number has no groups; there
the correlation of exposure and covariate takes their place, which is 0 in a balanced population too, and 0.1 is the
customary bound for it as well (Austin 2019, Stat Methods Med Res 28:1365).

A category needs only the sums over its levels, so its patterns are pooled first: that is exact, and a hundred thousand
patterns cost no more than the reading of them.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd

from adjustplan.data import Floats, Patterns
from adjustplan.data.checks import show
from adjustplan.errors import Finding
from adjustplan.estimate.diagnostics.balance import (
    LARGEST_DIFFERENCE,
    Balance,
    Difference,
    Marks,
    balance,
    balance_findings,
)

_LEVELS_AT_ONCE = 200
_ROUNDING = 1e-12


@dataclass(frozen=True, slots=True)
class CovariateBalance:
    """How far each covariate lies apart, or how closely it goes with the exposure.

    Attributes
    ----------
    measure : {"standardised difference", "correlation"}
    weighted : bool
        Whether the rows have a value after weighting.
    rows : tuple of Difference
        In the order of the set; levels of a category under each other, of two only the rarer one.
    """

    measure: Literal["standardised difference", "correlation"]
    weighted: bool
    rows: tuple[Difference, ...]

    def size(self, row: Difference) -> float:
        """How far it lies from balance, after weighting where there are weights; infinite without a number."""
        value = row.after if self.weighted else row.before
        return math.inf if value is None else abs(value)

    @property
    def findings(self) -> tuple[Finding, ...]:
        """A warning where weighting leaves the groups apart, a note where they start apart."""
        if self.measure == "standardised difference":
            return balance_findings(Balance(self.rows, self.weighted, math.nan, math.nan))
        far = [row for row in self.rows if row.before is not None and abs(row.before) > LARGEST_DIFFERENCE]
        if not far:
            return ()
        most = max(far, key=self.size)
        message = (
            f"Before adjustment {len(far)} of {len(self.rows)} covariate columns correlate with the exposure by more"
            f" than {LARGEST_DIFFERENCE}, most of all “{most.name}” ({most.before:.2f})."
        )
        remedy = "This is what adjustment has to remove; the larger it is, the more hangs on the model."
        return (Finding("estimate-imbalance", message, remedy, "note"),)


def balance_of_groups(
    patterns: Patterns,
    members: Sequence[str],
    forms: Mapping[str, str],
    groups: tuple[Marks, Marks],
    rows: Floats,
    weights: Floats | None,
) -> CovariateBalance:
    """Standardised differences between two groups.

    Parameters
    ----------
    patterns : Patterns
        Complete for ``members``.
    members : sequence of str
    forms : mapping of str to str
    groups : tuple of (array of bool, array of bool), shape (patterns,) each
        Exposed and reference people.
    rows : array of float, shape (patterns,)
        People, with their sampling weights.
    weights : array of float, shape (patterns,), optional
        Of inverse probability.
    """
    either = (groups[0] | groups[1]) & (rows > 0)
    part = patterns.only(either)
    exposed, rows = groups[0][either], rows[either]
    weights = None if weights is None else weights[either]
    found: list[Difference] = []
    for name in members:
        if forms[name] in ("category", "stratum"):
            found += _levels(part, name, exposed, rows, weights)
        else:
            names, columns = _numbers(part, name, forms[name], rows)
            found += balance(columns, names, exposed, ~exposed, rows, weights).differences
    return CovariateBalance("standardised difference", weights is not None, tuple(found))


def balance_of_number(
    patterns: Patterns, members: Sequence[str], forms: Mapping[str, str], exposure: Floats, rows: Floats
) -> CovariateBalance:
    """Correlations of an exposure that is a number with each covariate; parameters as above."""
    found = []
    for name in members:
        for shown, column in _columns(patterns, name, forms[name], rows):
            value = _correlation(column, exposure, rows)
            found.append(Difference(shown, value, None, value is None))
    return CovariateBalance("correlation", False, tuple(found))


def _levels(part: Patterns, name: str, exposed: Marks, rows: Floats, weights: Floats | None) -> list[Difference]:
    """The balance of a category, from one cell for each level and group."""
    codes, levels = pd.factorize(part.values[name].to_numpy(), sort=True)
    cell = 2 * codes + exposed
    count = 2 * len(levels)
    people = np.bincount(cell, weights=rows, minlength=count).astype(np.float64)
    some = people > 0
    carried = None
    if weights is not None:
        carried = np.asarray(np.bincount(cell, weights=rows * weights, minlength=count)[some] / people[some])
    level, group = np.divmod(np.flatnonzero(some), 2)
    chosen = _shown(people[0::2] + people[1::2])
    found: list[Difference] = []
    for start in range(0, len(chosen), _LEVELS_AT_ONCE):
        here = chosen[start : start + _LEVELS_AT_ONCE]
        columns = (level[:, None] == here).astype(np.float64)
        names = [_named(name, levels[place]) for place in here]
        found += balance(columns, names, group == 1, group == 0, people[some], carried).differences
    return found


def _shown(people: Floats) -> np.ndarray:
    """Which levels are shown: all, but of two the rarer one, for the other says the same."""
    if len(people) == 1:
        return np.empty(0, dtype=np.intp)
    if len(people) == 2:
        return np.array([int(people[1] <= people[0])])
    return np.arange(len(people))


def _named(name: str, level: object) -> str:
    return f"{name}: {show([level])[1:-1]}"


def _numbers(part: Patterns, name: str, form: str, rows: Floats) -> tuple[list[str], Floats]:
    """A number as it is; where it enters as a curve, also how far it lies from its mean."""
    values = part.values[name].to_numpy(dtype=np.float64)
    if form == "linear":
        return [name], values[:, None]
    middle = float(np.average(values, weights=rows))
    return [name, f"{name}, squared distance from the mean"], np.column_stack([values, (values - middle) ** 2])


def _columns(part: Patterns, name: str, form: str, rows: Floats) -> Iterator[tuple[str, Floats]]:
    if form not in ("category", "stratum"):
        names, columns = _numbers(part, name, form, rows)
        yield from zip(names, columns.T, strict=True)
        return
    codes, levels = pd.factorize(part.values[name].to_numpy(), sort=True)
    for place in _shown(np.bincount(codes, weights=rows).astype(np.float64)):
        yield _named(name, levels[place]), (codes == place).astype(np.float64)


def _correlation(one: Floats, other: Floats, rows: Floats) -> float | None:
    """The weighted correlation; None where one of the two does not vary."""
    apart = [values - np.average(values, weights=rows) for values in (one, other)]
    sizes = [math.sqrt(float(rows @ values**2)) for values in apart]
    reach = [math.sqrt(float(rows @ values**2)) for values in (one, other)]
    if any(size <= _ROUNDING * whole for size, whole in zip(sizes, reach, strict=True)):
        return None
    return float(np.clip(float(rows @ (apart[0] * apart[1])) / (sizes[0] * sizes[1]), -1.0, 1.0))

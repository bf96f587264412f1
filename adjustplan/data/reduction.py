"""The reduction: the engine turns rows into covariate patterns in one pass.

One GROUP BY over the exposure and every covariate that any model will need, with missing values as a level of
their own, serves the crude and all adjusted models. It is written in ibis expressions; names and values of
the user's columns never become part of a query's text.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from adjustplan.data.patterns import Kind, Outcome, Patterns
from adjustplan.data.source import Source

if TYPE_CHECKING:
    import ibis


def reduce_to_patterns(source: Source, outcome: str, variables: Mapping[str, str]) -> Patterns:
    """Count the rows of each pattern of ``variables`` and summarise their outcomes.

    Parameters
    ----------
    source : Source
        The open file.
    outcome : str
        The column that holds the outcome: numbers or booleans. A text column counts as wholly missing here,
        so that the checks can still look at everything else.
    variables : mapping of str to str
        Each variable and the column that holds it; kinds other than number, boolean and text are not allowed.

    Returns
    -------
    Patterns
        Sorted by their values, so that the same data in another order give the same arrays. Memory grows with
        the number of patterns, not with the number of rows.
    """
    import ibis
    from ibis.expr.datatypes import float64, int64

    keys = {f"key_{place}": _key(source, column) for place, column in enumerate(variables.values())}
    told = source.kinds[outcome] in ("number", "boolean")
    value = _numbers(source, outcome) if told else ibis.null().cast(float64)
    plain = source.table.select(**keys, outcome=value)
    infinite = plain.outcome.isinf()
    table = plain.mutate(finite=ibis.ifelse(infinite, ibis.null(), plain.outcome), infinite=infinite)
    finite = table.finite
    counted = (
        table.group_by(list(keys))
        .aggregate(
            rows=table.count(),
            observed=finite.count(),
            mean=finite.mean(),
            deviations=finite.var(how="pop") * finite.count(),
            infinite=table.infinite.cast(int64).sum().fill_null(0),
            not_binary=finite.notin([0.0, 1.0]).cast(int64).sum().fill_null(0),
            lowest=finite.min(),
            highest=finite.max(),
        )
        .order_by(list(keys))
        .execute()
    )
    observed = counted["observed"].to_numpy(dtype=np.int64)
    values = counted[list(keys)].set_axis(list(variables), axis="columns")
    kinds: dict[str, Kind] = {variable: source.kinds[column] for variable, column in variables.items()}
    numeric = [variable for variable, kind in kinds.items() if kind != "text"]
    return Patterns(
        values.astype(dict.fromkeys(numeric, "float64")),
        kinds,
        counted["rows"].to_numpy(dtype=np.int64),
        observed,
        counted["mean"].to_numpy(dtype=np.float64),
        np.maximum(counted["deviations"].fillna(0.0).to_numpy(dtype=np.float64), 0.0),
        Outcome(
            source.kinds[outcome],
            int(observed.sum()),
            int(counted["infinite"].sum()),
            int(counted["not_binary"].sum()),
            float(counted["lowest"].min()),
            float(counted["highest"].max()),
        ),
    )


def distinct_values(source: Source, column: str, most: int) -> list[str] | None:
    """The distinct values of a column as text, sorted; None when there are more than ``most``."""
    table = source.table
    shown = table.select(value=table[column].cast("string")).distinct().limit(most + 2).execute()
    values = sorted(str(value) for value in shown["value"].dropna())
    return values if len(values) <= most else None


def _key(source: Source, column: str) -> ibis.Value:
    """A grouping key: numbers and booleans as floats, text with blank as missing."""
    import ibis

    if source.kinds[column] != "text":
        return _numbers(source, column)
    values = source.table[column]
    return ibis.ifelse(values.strip() == "", ibis.null(), values)


def _numbers(source: Source, column: str) -> ibis.Value:
    """A column of numbers or booleans as floats, with NaN as missing.

    A boolean is spelt out by cases: a cast would be handed down to the reader of a CSV file, which then tries
    to read "yes" as a number.
    """
    import ibis
    from ibis.expr.datatypes import float64

    values = source.table[column]
    if source.kinds[column] == "boolean":
        return ibis.cases((values, 1.0), (~values, 0.0))
    number = values.cast(float64)
    return ibis.ifelse(number.isnan(), ibis.null(), number)

"""The reduction: the engine turns rows into covariate patterns in one pass.

One GROUP BY over the exposure and every covariate that any model will need, with missing values as a level of their
own, serves the crude and all adjusted models. It is written in ibis expressions; names and values of the user's
columns never become part of a query's text.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from adjustplan.data.moments import Floats, Moments
from adjustplan.data.patterns import Kind, Outcome, Patterns
from adjustplan.data.source import Source

if TYPE_CHECKING:
    import ibis


@dataclass(frozen=True)
class Wanted:
    """Which columns the models need, and for what.

    Attributes
    ----------
    outcome : str
        The column that holds the outcome: numbers or booleans. A text column counts as wholly missing here, so that the
        checks can still look at everything else.
    variables : mapping of str to str
        Each variable and the column that holds it; kinds other than number, boolean and text are not allowed.
    keys : mapping of str to str
        What stays apart, such as "cluster" or "entry", and its column.
    person_time, weight : str or None
        The columns with the time at risk and with the sampling weight; rows without one count as unobserved.
    atoms : bool
        Keep outcome, time and weight apart too, so that each pattern is one kind of person.
    """

    outcome: str
    variables: Mapping[str, str]
    keys: Mapping[str, str] = field(default_factory=dict)
    person_time: str | None = None
    weight: str | None = None
    atoms: bool = False


def reduce_to_patterns(source: Source, wanted: Wanted) -> Patterns:
    """Count the rows of each pattern and summarise their outcomes.

    Returns
    -------
    Patterns
        Sorted by their values, so that the same data in another order give the same arrays. Memory grows with the
        number of patterns, not with the number of rows.
    """
    table = _plain(source, wanted)
    grouped = [name for name in table.columns if name.startswith(("key_", "apart_"))]
    if wanted.atoms:
        grouped += ["finite", "elapsed", "weight"]
    finite, centre = table.finite, (0.0, 0.0)
    totals = {
        "rows": table.count(),
        "observed": finite.count(),
        "infinite": table.count(where=table.infinite),
        "not_binary": table.count(where=finite.notin([0.0, 1.0])),
        "lowest": finite.min(),
        "highest": finite.max(),
    }
    if not wanted.atoms and not (wanted.person_time or wanted.weight):
        totals |= {"mean": finite.mean(), "deviations": finite.var(how="pop") * finite.count()}
    elif not wanted.atoms:
        means = table.aggregate(y=finite.mean(), t=table.elapsed.mean()).execute().iloc[0].fillna(0.0)
        centre = (float(means["y"]), float(means["t"]))
        totals |= _weighted_sums(table, *centre)
    counted = table.group_by(grouped).aggregate(**totals).order_by(grouped).execute()
    kinds: dict[str, Kind] = {variable: source.kinds[column] for variable, column in wanted.variables.items()}
    values = counted[[f"key_{place}" for place in range(len(kinds))]].set_axis(list(kinds), axis="columns")
    apart = counted[[f"apart_{place}" for place in range(len(wanted.keys))]].set_axis(list(wanted.keys), axis="columns")
    numeric = [variable for variable, kind in kinds.items() if kind != "text"]
    return Patterns(
        values.astype(dict.fromkeys(numeric, "float64")),
        kinds,
        counted["rows"].to_numpy(dtype=np.int64),
        _moments(counted, wanted, centre),
        Outcome(
            source.kinds[wanted.outcome],
            int(counted["observed"].sum()),
            int(counted["infinite"].sum()),
            int(counted["not_binary"].sum()),
            float(counted["lowest"].min()),
            float(counted["highest"].max()),
        ),
        apart,
    )


def _plain(source: Source, wanted: Wanted) -> ibis.Table:
    """The rows with our own names: keys, what stays apart, the finite outcome, time and weight."""
    import ibis
    from ibis.expr.datatypes import float64

    names = {f"key_{place}": column for place, column in enumerate(wanted.variables.values())}
    names |= {f"apart_{place}": column for place, column in enumerate(wanted.keys.values())}
    told = source.kinds[wanted.outcome] in ("number", "boolean")
    outcome = numbers(source, wanted.outcome) if told else ibis.null().cast(float64)
    one = ibis.literal(1.0)
    plain = source.table.select(
        **{name: key(source, column) for name, column in names.items()},
        outcome=outcome,
        elapsed=numbers(source, wanted.person_time) if wanted.person_time else one,
        weight=numbers(source, wanted.weight) if wanted.weight else one,
    )
    infinite = plain.outcome.isinf()
    lacking = infinite | plain.elapsed.isnull() | plain.weight.isnull()
    return plain.mutate(finite=ibis.ifelse(lacking, ibis.null(), plain.outcome), infinite=infinite.fill_null(False))


def _weighted_sums(table: ibis.Table, middle_outcome: float, middle_time: float) -> dict[str, ibis.Value]:
    """Sums under weights and their squares, taken around the middle of the whole file so that no digits are lost."""
    y, t, w = table.finite - middle_outcome, table.elapsed - middle_time, table.weight
    here = table.finite.notnull()
    terms = {
        "w": w,
        "wy": w * y,
        "wt": w * t,
        "wyy": w * y * y,
        "s": w * w,
        "sy": w * w * y,
        "st": w * w * t,
        "syy": w * w * y * y,
        "syt": w * w * y * t,
        "stt": w * w * t * t,
    }
    return {name: term.sum(where=here) for name, term in terms.items()}


def _moments(counted: pd.DataFrame, wanted: Wanted, centre: tuple[float, float]) -> Moments:
    observed = counted["observed"].to_numpy(dtype=np.int64)

    def column(name: str) -> Floats:
        return counted[name].to_numpy(dtype=np.float64, na_value=np.nan)

    if wanted.atoms:
        return Moments.of_equals(observed, column("finite"), column("elapsed"), column("weight"))
    if "mean" in counted:
        return Moments.plain(observed, column("mean"), np.maximum(np.nan_to_num(column("deviations")), 0.0))
    w, s = column("w"), column("s")
    with np.errstate(invalid="ignore", divide="ignore"):
        y, t = column("wy") / w, column("wt") / w
        y2, t2 = column("sy") / s, column("st") / s
    return Moments(
        observed,
        w,
        y + centre[0],
        t + centre[1],
        np.maximum(column("wyy") - w * y**2, 0.0),
        s,
        y2 + centre[0],
        t2 + centre[1],
        np.maximum(column("syy") - s * y2**2, 0.0),
        column("syt") - s * y2 * t2,
        np.maximum(column("stt") - s * t2**2, 0.0),
    )


def distinct_values(source: Source, column: str, most: int) -> list[str] | None:
    """The distinct values of a column as text, sorted; None when there are more than ``most``."""
    table = source.table
    shown = table.select(value=table[column].cast("string")).distinct().limit(most + 2).execute()
    values = sorted(str(value) for value in shown["value"].dropna())
    return values if len(values) <= most else None


def key(source: Source, column: str) -> ibis.Value:
    """A grouping key: numbers and booleans as floats, text with blank as missing."""
    import ibis

    if source.kinds[column] != "text":
        return numbers(source, column)
    values = source.table[column]
    return ibis.ifelse(values.strip() == "", ibis.null(), values)


def numbers(source: Source, column: str) -> ibis.Value:
    """A column of numbers or booleans as floats, with NaN as missing.

    A boolean is spelt out by cases: a cast would be handed down to the reader of a CSV file, which then tries to read
    "yes" as a number.
    """
    import ibis
    from ibis.expr.datatypes import float64

    values = source.table[column]
    if source.kinds[column] == "boolean":
        return ibis.cases((values, 1.0), (~values, 0.0))
    number = values.cast(float64)
    return ibis.ifelse(number.isnan(), ibis.null(), number)

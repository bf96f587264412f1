"""Derived columns and missing codes: from the columns of the source to those that the plan speaks of.

Codes that stand for a missing value are taken out first, because 999 kilograms must not be cut into a group or divided
by anything. Then columns are derived, each after those it uses. What is lost on the way (values without a new one,
dates out of order) becomes missing, is marked in a hidden column, and is counted with everything else in one query.
"""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from graphlib import CycleError, TopologicalSorter
from itertools import pairwise
from typing import TYPE_CHECKING

from adjustplan.data.expressions import Node, Problem, ValueKind, check, columns_of, parse
from adjustplan.data.expressions.compiling import Rows, opposite
from adjustplan.data.expressions.faults import of_expression
from adjustplan.data.expressions.kinds import HOLDS, kind_of
from adjustplan.data.expressions.tree import ConstantValue, mentions
from adjustplan.errors import did_you_mean
from adjustplan.plan.data_schema import Data, Derivation, Span

if TYPE_CHECKING:
    import ibis

    from adjustplan.plan.places import Key

MOST_IN_A_ROW = 25
"""How many derived columns may build on one another."""

MOST_PARTS = 10_000
"""How many parts a derived column may have once the columns it uses are spelt out, as some engines do before they run;
columns that each use the last one twice would double without end."""

_FORMS = ("cut", "recode", "days", "years", "equals")
_DAYS_IN_A_YEAR = 365.25


@dataclass(frozen=True, slots=True)
class Mark:
    """A hidden column that is true where a value was changed, and what the change is."""

    hidden: str
    column: str
    what: str
    key: Key
    code: str


@dataclass(frozen=True, eq=False)
class Stage:
    """The rows so far, the marks in them, and the columns of numbers that have to hold 0 and 1 alone."""

    rows: Rows
    marks: tuple[Mark, ...] = ()
    zero_one: Mapping[str, Key] | None = None


def trees_of(data: Data) -> dict[str, Node]:
    """The trees of the derivations that are expressions; only those that can be read."""
    read = {name: parse(told.equals)[0] for name, told in data.derive.items() if told.equals is not None}
    return {name: tree for name, tree in read.items() if tree is not None}


def derivation_problems(data: Data) -> Iterator[Problem]:
    """What is wrong with the derivations whatever the data are."""
    for name, told in data.derive.items():
        yield from _form_problems(("data", "derive", name), told)
    folded: dict[str, str] = {}
    for name in sorted(data.derive):
        if folded.setdefault(name.casefold(), name) != name:
            message = f"“{folded[name.casefold()]}” and “{name}” differ only in capitals, which not every source tells."
            yield Problem("data-derive-name", message, "Rename one of them.", ("data", "derive", name))
    yield from _order_problems(data)


def check_missing(data: Data, kinds: Mapping[str, ValueKind]) -> Iterator[Problem]:
    """Missing codes of columns that are not there, or that hold something else."""
    for name, values in data.missing.items():
        key: Key = ("data", "missing", name)
        if name in data.derive:
            message = f"“{name}” is derived, so it has no missing codes of its own."
            yield Problem("data-missing-code", message, "Name the column it is derived from.", key)
        elif name not in kinds:
            yield _no_column(name, kinds, key)
        else:
            yield from _values_problems(name, values, kinds[name], key, "data-missing-code")


def check_derivations(
    data: Data, trees: Mapping[str, Node], kinds: Mapping[str, ValueKind], repeated: frozenset[str]
) -> tuple[dict[str, ValueKind], tuple[Problem, ...]]:
    """The kinds of all columns, derived ones among them, and what is wrong with the derivations in these data."""
    known, problems = dict(kinds), list[Problem]()
    taken = {name.casefold(): name for name in kinds}
    for name in in_order(data, trees):
        told, key = data.derive[name], ("data", "derive", name)
        if name.casefold() in taken:
            message = f"The data have a column “{taken[name.casefold()]}” already, so “{name}” cannot be derived."
            problems.append(Problem("data-derive-name", message, "Give the derived column another name.", key))
            continue
        kind: ValueKind = "text" if told.cut or told.recode else "number"
        if told.equals is not None:
            kind = "unknown"
            if name in trees:
                checked = check(trees[name], told.equals, known, repeated=repeated)
                problems += [of_expression(fault, told.equals, (*key, "equals")) for fault in checked.faults]
                kind = checked.kind if not checked.faults else "unknown"
                if kind not in ("number", "boolean", "unknown"):
                    message = f"“{name}” would equal {HOLDS[kind]}; “equals” works out numbers and conditions."
                    remedy = "Use the column itself, or recode it."
                    problems.append(Problem("data-derive-form", message, remedy, (*key, "equals")))
                    kind = "unknown"
        else:
            problems += _source_problems(name, told, known, repeated)
        known[name] = kind
    unordered = data.derive.keys() - known.keys()
    return known | dict.fromkeys(unordered, "unknown"), tuple(problems)


def in_order(data: Data, trees: Mapping[str, Node]) -> list[str]:
    """The derived columns, each behind those it uses; those that go round in circles are left out."""
    uses = {name: _uses(name, data, trees) for name in sorted(data.derive)}
    depths = _depths(uses)
    return sorted(depths, key=lambda name: (depths[name], name))


def without_codes(stage: Stage, data: Data, hidden: Callable[[], str]) -> Stage:
    """The rows with missing codes taken out."""
    import ibis

    rows, marks, changed = stage.rows, list(stage.marks), dict[str, "ibis.Value"]()
    for name, values in sorted(data.missing.items()):
        key: Key = ("data", "missing", name)
        for value in _distinct(values):
            mark = Mark(hidden(), name, f"{shown(value)} counts as missing", key, "data-missing-code-unused")
            changed[mark.hidden] = rows.among(name, [value])
            marks.append(mark)
        column = rows.table[name]
        changed[name] = ibis.ifelse(rows.among(name, values), ibis.null().cast(column.type()), column)
    table = rows.table.mutate(**changed) if changed else rows.table
    return replace(stage, rows=replace(rows, table=table), marks=tuple(marks))


def with_derived(
    stage: Stage, data: Data, trees: Mapping[str, Node], kinds: Mapping[str, ValueKind], hidden: Callable[[], str]
) -> Stage:
    """The rows with every derived column; ``kinds`` are those of all columns."""
    for name in in_order(data, trees):
        told, rows = data.derive[name], stage.rows
        new: dict[str, ibis.Value] = {}
        marks = list(stage.marks)
        if told.cut is not None:
            new[name] = _groups(rows, str(told.source), told.cut)
        elif told.recode is not None:
            new[name] = _recoded(rows, str(told.source), told.recode, told.otherwise)
            target = "so missing" if told.otherwise is None else f"so “{told.otherwise}”"
            mark = Mark(
                hidden(), name, f"no new value, {target}", ("data", "derive", name, "recode"), "data-recode-unlisted"
            )
            listed = rows.among(str(told.source), [value for values in told.recode.values() for value in values])
            new[mark.hidden] = opposite(listed)
            marks.append(mark)
        elif (span := told.days or told.years) is not None:
            days = _days(rows, span)
            key: Key = ("data", "derive", name)
            mark = Mark(hidden(), name, "dates out of order, so missing", key, "data-dates-order")
            new |= {name: _in_order(days, told.years is not None), mark.hidden: days < 0}
            marks.append(mark)
        else:
            new[name] = rows.compiled(trees[name])
        table = rows.table.mutate(**new)
        stage = replace(stage, rows=Rows(table, {**rows.kinds, name: kinds[name]}), marks=tuple(marks))
    return stage


def labels_of(cuts: Iterable[float | datetime.date]) -> list[str]:
    """What the groups between cuts are called, from the lowest."""
    limits = sorted(cuts)
    dates = isinstance(limits[0], datetime.date)
    first, middle, last = ("before", "to before", "or later") if dates else ("below", "to below", "or more")
    told = [shown(limit) for limit in limits]
    between = [f"{low} {middle} {high}" for low, high in pairwise(told)]
    return [f"{first} {told[0]}", *between, f"{told[-1]} {last}"]


def shown(value: object) -> str:
    """A value for a message: whole numbers without a decimal point, texts in quotation marks."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, (int, float)):
        return repr(value).removesuffix(".0")
    return f"“{value}”" if isinstance(value, str) else str(value)


def _groups(rows: Rows, source: str, cuts: Iterable[float | datetime.date]) -> ibis.Value:
    import ibis

    limits, labels = sorted(cuts), labels_of(cuts)
    cases = [(rows.below(source, limit), label) for limit, label in zip(limits, labels, strict=False)]
    return ibis.cases(*cases, (rows.value(source).notnull(), labels[-1]))


def _recoded(
    rows: Rows, source: str, recode: Mapping[str, Sequence[ConstantValue]], otherwise: str | None
) -> ibis.Value:
    import ibis

    cases = [(rows.among(source, values), new) for new, values in sorted(recode.items())]
    if otherwise is not None:
        cases.append((rows.value(source).notnull(), otherwise))
    return ibis.cases(*cases)


def _days(rows: Rows, span: Span) -> ibis.Value:
    import ibis

    begins, ends = (
        ibis.literal(end) if isinstance(end, datetime.date) else rows.value(end) for end in (span.begins, span.ends)
    )
    return ends.delta(begins, unit="day").cast("int64")


def _in_order(days: ibis.Value, in_years: bool) -> ibis.Value:
    import ibis

    counted = ibis.ifelse(days >= 0, days, ibis.null())
    return counted.cast("float64") / ibis.literal(_DAYS_IN_A_YEAR).cast("float64") if in_years else counted


def _form_problems(key: Key, told: Derivation) -> Iterator[Problem]:
    chosen = [form for form in _FORMS if getattr(told, form) is not None]
    name = key[-1]
    if len(chosen) != 1:
        found = f"both {' and '.join(chosen)}" if chosen else "nothing"
        message = f"“{name}” is derived by {found}."
        yield Problem("data-derive-form", message, f"State exactly one of {', '.join(_FORMS)}.", key)
        return
    needs_source = chosen[0] in ("cut", "recode")
    if needs_source and told.source is None:
        remedy = 'Add from = "…", the column it is worked out from.'
        yield Problem("data-derive-form", f"“{name}” does not say from which column.", remedy, key)
    if not needs_source and told.source is not None:
        remedy = f"Take it out; “{chosen[0]}” names its columns itself."
        yield Problem("data-derive-form", f"“{name}” has no use for “from”.", remedy, (*key, "from"))
    if told.otherwise is not None and told.recode is None:
        remedy = "Take it out; it belongs to a recode."
        yield Problem("data-derive-form", f"“{name}” has no use for “otherwise”.", remedy, (*key, "otherwise"))
    yield from _content_problems(key, told)


def _content_problems(key: Key, told: Derivation) -> Iterator[Problem]:
    name = key[-1]
    if told.cut is not None:
        if len({isinstance(cut, datetime.date) for cut in told.cut}) > 1:
            message = f"“{name}” is cut at numbers and at dates."
            yield Problem("data-derive-form", message, "Cut at one kind of value.", (*key, "cut"))
        elif len(set(told.cut)) < len(told.cut):
            message = f"“{name}” is cut at the same value twice."
            yield Problem("data-derive-form", message, "Name each limit once.", (*key, "cut"))
    owners: dict[tuple[ValueKind, object], str] = {}
    for new, values in sorted((told.recode or {}).items()):
        for value in values:
            first = owners.setdefault((kind_of(value), value), new)
            if first != new:
                message = f"{shown(value)} becomes both “{first}” and “{new}”."
                yield Problem("data-derive-form", message, "List it once.", (*key, "recode"))
    texts = [*(told.recode or {}), *(v for vs in (told.recode or {}).values() for v in vs), told.otherwise]
    if any(isinstance(text, str) and (not text.strip() or "\0" in text) for text in texts):
        message = f"“{name}” recodes from or to a text of nothing, which counts as missing."
        yield Problem("data-derive-form", message, "Write a text of at least one visible sign.", (*key, "recode"))
    if told.equals is not None:
        yield from (of_expression(fault, told.equals, (*key, "equals")) for fault in parse(told.equals)[1])
    span = told.days or told.years
    if span is not None and isinstance(span.begins, datetime.date) and isinstance(span.ends, datetime.date):
        remedy = "Name a column for at least one of them."
        yield Problem("data-derive-form", f"“{name}” is the time between two fixed dates.", remedy, key)


def _order_problems(data: Data) -> Iterator[Problem]:
    """Columns that use each other in a circle, and those that build on too many."""
    trees = trees_of(data)
    uses = {name: _uses(name, data, trees) for name in sorted(data.derive)}
    try:
        TopologicalSorter(uses).prepare()
    except CycleError as error:
        circle = error.args[1]
        message = f"Derived columns use each other in a circle: {' → '.join(f'“{name}”' for name in circle)}."
        yield Problem("data-derive-cycle", message, "Derive one of them from the data.", ("data", "derive", circle[0]))
        return
    depths = _depths(uses)
    too_deep = [name for name, depth in depths.items() if depth > MOST_IN_A_ROW]
    parts: dict[str, int] = {}
    for name in sorted(depths, key=lambda name: depths[name]):
        parts[name] = min(_parts(data.derive[name], trees.get(name), parts), MOST_PARTS + 1)
    too_large = [name for name, count in parts.items() if count > MOST_PARTS]
    if too_large and not too_deep:
        message = f"“{min(too_large)}” is very large once every column that it is derived from is spelt out."
        key: Key = ("data", "derive", min(too_large))
        yield Problem("data-expression-size", message, "Derive it more directly, or in the data.", key)
    if too_deep:
        message = f"“{min(too_deep)}” is derived through more than {MOST_IN_A_ROW} other columns, one from another."
        key = ("data", "derive", min(too_deep))
        yield Problem("data-expression-size", message, "Derive it more directly, or in the data.", key)


def _uses(name: str, data: Data, trees: Mapping[str, Node]) -> set[str]:
    """The other derived columns that one is worked out from."""
    told = data.derive[name]
    named: set[object] = {told.source}
    for span in (told.days, told.years):
        named |= {span.begins, span.ends} if span else set()
    named |= columns_of(trees[name]) if name in trees else set()
    return {other for other in data.derive if other in named}


def _parts(told: Derivation, tree: Node | None, parts: Mapping[str, int]) -> int:
    """How many parts a derivation has with every column spelt out, as far as the query repeats them."""
    if tree is not None:
        return sum(2 * times * parts.get(name, 1) for name, times in mentions(tree).items()) or 1
    span = told.days or told.years
    if span is not None:
        return 2 * sum(parts.get(str(end), 1) for end in (span.begins, span.ends))
    groups = len(told.cut or ()) + len(told.recode or ()) + 1
    return 2 * groups * parts.get(str(told.source), 1)


def _depths(uses: Mapping[str, set[str]]) -> dict[str, int]:
    """How many derived columns each builds on, one on another; those in circles have no depth."""
    depths: dict[str, int] = {}
    waiting = dict(uses)
    while ready := [name for name, used in waiting.items() if used <= depths.keys()]:
        for name in ready:
            depths[name] = max((depths[used] + 1 for used in waiting.pop(name)), default=0)
    return depths


def _source_problems(
    name: str, told: Derivation, kinds: Mapping[str, ValueKind], repeated: frozenset[str]
) -> Iterator[Problem]:
    """What is wrong with the columns that a cut, a recode or a span is worked out from."""
    key: Key = ("data", "derive", name)
    span = told.days or told.years
    form = "days" if told.days else "years" if told.years else "from"
    sources = [told.source] if span is None else [span.begins, span.ends]
    for source in sources:
        if not isinstance(source, str):
            continue
        if source not in kinds:
            yield _no_column(source, kinds, (*key, form))
            continue
        if source in repeated:
            message = f"The header has “{source}” more than once (capitals do not tell columns apart)."
            yield Problem("data-column-twice", message, "Rename one of the columns.", (*key, form))
            continue
        kind = kinds[source]
        if kind == "unknown":
            continue
        if span is not None and kind != "date":
            message = f"“{source}” holds {HOLDS[kind]}, not dates, so “{name}” cannot be worked out."
            remedy = "Store it as a date (2015-01-31), without a time zone."
            yield Problem("data-derive-form", message, remedy, (*key, form))
        elif told.cut is not None:
            wanted: ValueKind = "date" if isinstance(told.cut[0], datetime.date) else "number"
            if kind != wanted:
                message = f"“{source}” holds {HOLDS[kind]}, but “{name}” is cut at {HOLDS[wanted]}."
                yield Problem("data-derive-form", message, "Cut at values of the column's kind.", (*key, "cut"))
        elif told.recode is not None:
            values = [value for listed in told.recode.values() for value in listed]
            yield from _values_problems(source, values, kind, (*key, "recode"), "data-derive-form")


def _values_problems(
    name: str, values: Iterable[ConstantValue], kind: ValueKind, key: Key, code: str
) -> Iterator[Problem]:
    """Values that a column of this kind cannot hold."""
    for value in _distinct(values):
        told = kind_of(value)
        as_truth = kind == "boolean" and told == "number" and value in (0, 1)
        if kind not in (told, "unknown") and not as_truth:
            message = f"“{name}” holds {HOLDS[kind]}, so {shown(value)} cannot be among its values."
            remedy = "Write the value as the data have it." if kind != "other" else "Name another column."
            yield Problem(code, message, remedy, key)
        elif isinstance(value, str) and (not value.strip() or "\0" in value):
            yield Problem(code, "A text of nothing counts as missing anyway.", "Take it out.", key)


def _no_column(name: str, kinds: Mapping[str, ValueKind], key: Key) -> Problem:
    remedy = did_you_mean(name, kinds, "Name one of the data's columns.")
    return Problem("data-missing-column", f"The data have no column “{name}”.", remedy, key)


def _distinct(values: Iterable[ConstantValue]) -> list[ConstantValue]:
    """Each value once, in an order that the order in the file leaves alone; true is not 1."""
    return [value for _, value in sorted({(kind_of(value), value) for value in values})]

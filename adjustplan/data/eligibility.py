"""Eligibility: from the rows of a source to those that the plan speaks of, with everybody accounted for.

:func:`apply` takes the missing codes out, derives columns, and keeps the rows that meet every condition. A row for
which a condition is missing, because a value that it needs is missing, is not eligible, and is counted apart: nobody
knows whether that person belongs. All counts come from one query, whatever the number of steps.

Nothing is read before everything that can be known without reading is found to be right.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import count
from typing import TYPE_CHECKING

from adjustplan.data.derivation import (
    Mark,
    Stage,
    check_derivations,
    check_missing,
    derivation_problems,
    trees_of,
    with_derived,
    without_codes,
)
from adjustplan.data.expressions import Node, Place, Problem, ValueKind, check, parse
from adjustplan.data.expressions.compiling import Rows, opposite
from adjustplan.data.expressions.faults import alone, in_plan, of_expression
from adjustplan.data.flow import Change, Flow, LeftOut
from adjustplan.data.patterns import Kind
from adjustplan.data.source import Source
from adjustplan.errors import DataError, Finding
from adjustplan.plan import Plan
from adjustplan.plan.data_schema import Data

if TYPE_CHECKING:
    import ibis

    from adjustplan.plan.places import Key


@dataclass(frozen=True, eq=False)
class Prepared:
    """The rows that the plan speaks of.

    Attributes
    ----------
    table : ibis.Table
        Eligible rows alone, missing codes taken out, derived columns behind the others.
    kinds : mapping of str to {"number", "boolean", "text", "other"}
        The kind of each column, as sources have it.
    flow : Flow
        From the source to the eligible, and what was changed.
    findings : tuple of Finding
        Warnings and notes.
    """

    table: ibis.Table
    kinds: Mapping[str, Kind]
    flow: Flow
    findings: tuple[Finding, ...]


@dataclass(frozen=True, slots=True)
class Step:
    """One condition: its name (None where there is but one), its text and its key in the plan."""

    name: str | None
    expression: str
    key: Key


def steps_of(data: Data) -> list[Step]:
    """The conditions in the order in which they are taken: by name, numbers in names counting as numbers."""
    if data.where is None:
        return []
    if isinstance(data.where, str):
        return [Step(None, data.where, ("data", "where"))]
    return [Step(name, data.where[name], ("data", "where", name)) for name in sorted(data.where, key=_natural)]


def data_problems(data: Data) -> list[Problem]:
    """Everything wrong with ``[data]`` that can be known without the data."""
    problems = list(derivation_problems(data))
    for step in steps_of(data):
        problems += [of_expression(fault, step.expression, step.key) for fault in parse(step.expression)[1]]
    return problems


def apply(
    table: ibis.Table,
    kinds: Mapping[str, Kind],
    data: Data | None,
    repeated: frozenset[str] = frozenset(),
    place: Place = alone,
) -> Prepared:
    """Take missing codes out, derive columns, and keep eligible rows.

    Parameters
    ----------
    table : ibis.Table
        The rows of the source.
    kinds : mapping of str to Kind
        The kind of each of its columns.
    data : Data or None
        The plan's ``[data]``.
    repeated : frozenset of str
        Columns whose names do not tell them apart; they cannot be used.
    place : Place
        How problems become findings; ``in_plan(plan)`` gives them their lines.

    Raises
    ------
    DataError
        With everything wrong with ``[data]`` in these data; or if nobody is eligible, or a number that stands as a
        condition is neither 0 nor 1 somewhere.
    """
    data = data or Data.model_validate({})
    value_kinds = kinds_of(table, kinds)
    problems = [*data_problems(data), *check_missing(data, value_kinds)]
    trees = trees_of(data)
    all_kinds, further = check_derivations(data, trees, value_kinds, repeated)
    problems += further
    zero_one: dict[str, Key] = {}
    for name, tree in trees.items():
        checked = check(tree, str(data.derive[name].equals), all_kinds, repeated=repeated)
        zero_one |= dict.fromkeys(checked.zero_one, ("data", "derive", name, "equals"))
    conditions: list[tuple[Step, Node]] = []
    for step in steps_of(data):
        condition = parse(step.expression)[0]
        if condition is None:
            continue
        checked = check(condition, step.expression, all_kinds, condition=True, repeated=repeated)
        problems += [of_expression(fault, step.expression, step.key) for fault in checked.faults]
        zero_one |= dict.fromkeys(checked.zero_one, step.key)
        conditions.append((step, condition))
    if problems:
        raise DataError(dict.fromkeys(map(place, problems)))
    return _prepared(table, kinds, data, trees, all_kinds, conditions, zero_one, place)


def eligible_rows(plan: Plan, source: Source) -> tuple[Source, Prepared | None]:
    """The source with the rows that the plan speaks of, and how they came about; as it is where the plan is silent."""
    if plan.file.data is None:
        return source, None
    prepared = apply(source.table, source.kinds, plan.file.data, source.repeated, in_plan(plan))
    return replace(source, table=prepared.table, kinds=prepared.kinds), prepared


def kinds_of(table: ibis.Table, kinds: Mapping[str, Kind]) -> dict[str, ValueKind]:
    """The kinds of columns with dates told apart: days, and moments without a time zone, whose day is certain."""
    found: dict[str, ValueKind] = {}
    for name, dtype in table.schema().items():
        kind: ValueKind = kinds.get(name, "other")
        day = dtype.is_date() or (dtype.is_timestamp() and dtype.timezone is None)
        found[name] = "date" if day and kind == "other" else kind
    return found


def _prepared(
    table: ibis.Table,
    kinds: Mapping[str, Kind],
    data: Data,
    trees: Mapping[str, Node],
    all_kinds: Mapping[str, ValueKind],
    conditions: list[tuple[Step, Node]],
    zero_one: Mapping[str, Key],
    place: Place,
) -> Prepared:

    hidden = _hidden_names([*table.columns, *data.derive])
    given = Rows(table, {name: all_kinds[name] for name in table.columns})
    stage = with_derived(without_codes(Stage(given), data, hidden), data, trees, all_kinds, hidden)
    met = {hidden(): stage.rows.condition(tree) for _, tree in conditions}
    rows = stage.rows.table.mutate(**met) if met else stage.rows.table
    fate = hidden()
    rows = rows.mutate(**{fate: _fate([rows[name] for name in met])})
    wanted: dict[str, ibis.Value] = {"rows": rows.count()}
    for number, mark in enumerate(stage.marks):
        wanted[f"changed_{number}"] = rows.count(where=rows[mark.hidden])
    judged = Rows(rows, stage.rows.kinds)
    for number, name in enumerate(zero_one):
        wanted[f"broken_{number}"] = rows.count(where=opposite(judged.among(name, [0, 1])))
    groups = rows.group_by(fate).aggregate(**wanted).execute().fillna(0).astype(int).set_index(fate)
    counted = {name: int(groups[name].sum()) for name in wanted}
    eligible = {name: int(groups[name].get(0, 0)) for name in wanted}
    for number in range(len(met)):
        counted[f"unmet_{number}"] = int(groups["rows"].get(2 * number + 1, 0))
        counted[f"unknown_{number}"] = int(groups["rows"].get(2 * number + 2, 0))
    _refuse_other_numbers(zero_one, counted, place)
    flow = Flow.start(counted["rows"])
    for number, (step, _) in enumerate(conditions):
        flow = flow.then_without(step.name or "eligible", _left_out(step, number, counted))
    changes = [
        Change(mark.column, mark.what, counted[f"changed_{n}"], eligible[f"changed_{n}"])
        for n, mark in enumerate(stage.marks)
    ]
    flow = replace(flow, changes=tuple(changes))
    if counted["rows"] and not flow.rows:
        raise DataError(place(_nobody(flow, conditions)))
    notes = [*_notes_of_changes(stage.marks, changes, data), *_notes_of_steps(conditions, counted)]
    kept = rows.filter(*(rows[name] for name in met)) if met else rows
    columns = [*table.columns, *(name for name in stage.rows.kinds if name not in table.columns)]
    derived: dict[str, Kind] = {name: _kind(all_kinds[name]) for name in data.derive}
    return Prepared(kept.select(*columns), {**kinds, **derived}, flow, tuple(map(place, notes)))


def _fate(conditions: list[ibis.Value]) -> ibis.Value:
    """0 for a row that meets every condition; else at which it is left out, told apart by whether that is known."""
    import ibis

    cases = [
        case
        for number, met in enumerate(conditions)
        for case in ((opposite(met), 2 * number + 1), (met.isnull(), 2 * number + 2))
    ]
    return ibis.cases(*cases, else_=0) if cases else ibis.literal(0)


def _left_out(step: Step, number: int, counted: Mapping[str, int]) -> tuple[LeftOut, ...]:
    told = step.name or " ".join(step.expression.split())
    parts = (
        LeftOut(f"not: {told}", counted[f"unmet_{number}"]),
        LeftOut(f"a value is missing for: {told}", counted[f"unknown_{number}"]),
    )
    return tuple(part for part in parts if part.rows)


def _refuse_other_numbers(zero_one: Mapping[str, Key], counted: Mapping[str, int], place: Place) -> None:
    broken = [
        Problem(
            "data-not-zero-one",
            f"“{name}” stands as a condition, but is neither 0 nor 1 in {counted[f'broken_{number}']} rows.",
            f"Say which values are meant, such as {name} = 1, or list its missing codes in [data.missing].",
            key,
        )
        for number, (name, key) in enumerate(zero_one.items())
        if counted[f"broken_{number}"]
    ]
    if broken:
        raise DataError(map(place, broken))


def _nobody(flow: Flow, conditions: list[tuple[Step, Node]]) -> Problem:
    """Nobody is left: say at which step, and why."""
    place = next(number for number, step in enumerate(flow.steps) if not step.rows)
    step = conditions[place - 1][0]
    reasons = "; ".join(f"{part.rows} rows: {part.reason}" for part in flow.steps[place].left_out)
    message = f"Nobody is eligible: of {flow.steps[0].rows} rows the last are left out here ({reasons})."
    remedy = "Hold the condition against how the data are coded."
    return Problem("data-none-eligible", message, remedy, step.key)


def _notes_of_changes(marks: tuple[Mark, ...], changes: list[Change], data: Data) -> Iterator[Problem]:
    for mark, change in zip(marks, changes, strict=True):
        name, rows = mark.column, f"{change.rows} rows, {change.eligible} of them eligible"
        if mark.code == "data-missing-code-unused" and not change.rows:
            message = f"“{name}” never holds the missing code {mark.what.removesuffix(' counts as missing')}."
            yield Problem("data-missing-code-unused", message, "Hold it against the code book.", mark.key, "note")
        if mark.code == "data-dates-order" and change.rows:
            message = f"For “{name}” the last date lies before the first in {rows}; it is missing there."
            yield Problem(
                "data-dates-order", message, "Correct the dates, or swap “from” and “to”.", mark.key, "warning"
            )
        if mark.code == "data-recode-unlisted" and change.rows and data.derive[name].otherwise is None:
            message = f"“{name}” has no new value for what stands in {rows}; it is missing there."
            remedy = 'List every old value, or add otherwise = "…".'
            yield Problem("data-recode-unlisted", message, remedy, mark.key, "warning")


def _notes_of_steps(conditions: list[tuple[Step, Node]], counted: Mapping[str, int]) -> Iterator[Problem]:
    for number, (step, _) in enumerate(conditions):
        if unknown := counted[f"unknown_{number}"]:
            message = f"{unknown} rows are left out because a value is missing that tells whether they are eligible."
            remedy = "Say so in the report; to keep them, allow it: age >= 18 or age is missing."
            yield Problem("data-eligibility-unknown", message, remedy, step.key, "note")


def _kind(kind: ValueKind) -> Kind:
    return kind if kind in ("number", "boolean", "text") else "other"


def _hidden_names(taken: list[str]) -> Callable[[], str]:
    """A maker of column names that nobody has, however capitals are taken."""
    stem = "adjustplan"
    while any(name.casefold().startswith(stem) for name in taken):
        stem += "_"
    numbers = count()
    return lambda: f"{stem}_{next(numbers)}"


def _natural(name: str) -> tuple[list[tuple[int, int, str]], str]:
    pieces = re.findall(r"[0-9]+|[^0-9]+", name)
    return [(0, int(piece), "") if piece.isdecimal() else (1, 0, piece) for piece in pieces], name

"""From a checked tree to an expression of the engine that holds the rows.

Missing is what the models take for missing: no value at all, not-a-number, and a text of nothing but white space. Logic
has three values, as SQL has it: a comparison with a missing value is missing; ``missing and false`` is false and
``missing or true`` is true; otherwise a missing part makes the whole missing. What is divided by 0 is missing.

Whole numbers are compared as such; everything else, and all arithmetic, is in double precision. A column stored in
single precision holds 0.1 only roughly, so it is compared with the single-precision 0.1, as whoever writes it means.
"""

from __future__ import annotations

import datetime
import operator
import struct
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import reduce
from typing import TYPE_CHECKING

from adjustplan.data.expressions.kinds import ValueKind, kind_of
from adjustplan.data.expressions.tree import (
    Arithmetic,
    Column,
    Comparison,
    Constant,
    ConstantValue,
    Inverse,
    Junction,
    Membership,
    Missingness,
    Negative,
    Node,
)

if TYPE_CHECKING:
    import ibis


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of a table, and the kind of each of their columns."""

    table: ibis.Table
    kinds: Mapping[str, ValueKind]

    def value(self, name: str) -> ibis.Value:
        """A column: missing where the models would take it for missing, a moment as its day."""
        import ibis

        column, kind = self.table[name], self.kinds[name]
        dtype = column.type()
        if kind == "text":
            return ibis.ifelse(column.strip() == "", ibis.null(), column)
        if kind == "number" and not dtype.is_integer():
            return column.cast("float64").nullif(ibis.literal("NaN").cast("float64"))
        return column.cast("date") if kind == "date" and not dtype.is_date() else column

    def condition(self, node: Node) -> ibis.Value:
        """A part that is true, false or missing; a column of numbers is true at 1 and false at 0."""
        import ibis

        value = self.compiled(node)
        if isinstance(node, Column) and self.kinds[node.name] == "number":
            return ibis.cases((value == 1, True), (value == 0, False))
        return value

    def among(self, name: str, values: Iterable[ConstantValue]) -> ibis.Value:
        """Whether a column holds one of the values; missing where it is missing."""
        return _among(self.value(name), self.kinds[name], values, self._single_precision(name))

    def below(self, name: str, limit: float | datetime.date) -> ibis.Value:
        """Whether a column of numbers or dates lies below a limit."""
        if isinstance(limit, datetime.date):
            return self.value(name) < _constant(limit)
        stored = _in_single_precision(limit) if self._single_precision(name) else float(limit)
        return _as_double(self.value(name)) < _constant(stored)

    def compiled(self, node: Node) -> ibis.Value:
        """The tree as an expression of the engine."""
        if isinstance(node, Column):
            return self.value(node.name)
        if isinstance(node, Constant):
            return _constant(node.value)
        if isinstance(node, Comparison):
            return self._comparison(node)
        if isinstance(node, Membership):
            return self._membership(node)
        if isinstance(node, Missingness):
            return _whether_missing(self.compiled(node.value), not node.negated)
        if isinstance(node, Inverse):
            return opposite(self.condition(node.part))
        if isinstance(node, Junction):
            return _joined(node.word, [self.condition(part) for part in node.parts])
        if isinstance(node, Negative):
            return -_as_double(self.compiled(node.part))
        return self._arithmetic(node)

    def _comparison(self, node: Comparison) -> ibis.Value:
        left, right = self.compiled(node.left), self.compiled(node.right)
        if left.type().is_boolean() != right.type().is_boolean():
            left, right = self._as_truth(node.left), self._as_truth(node.right)
        elif left.type().is_numeric() and not (left.type().is_integer() and right.type().is_integer()):
            left, right = self._beside(node.left, node.right), self._beside(node.right, node.left)
        match node.sign:
            case "=":
                return left == right
            case "!=":
                return left != right
            case "<":
                return left < right
            case "<=":
                return left <= right
            case ">":
                return left > right
            case ">=":
                return left >= right

    def _as_truth(self, node: Node) -> ibis.Value:
        return _constant(bool(node.value)) if isinstance(node, Constant) else self.condition(node)

    def _beside(self, node: Node, other: Node) -> ibis.Value:
        """A number in double precision, a single one as the column beside it stores it."""
        single = isinstance(other, Column) and self._single_precision(other.name)
        literal = _literal_number(node)
        if single and literal is not None:
            return _constant(_in_single_precision(literal))
        return _as_double(self.compiled(node))

    def _membership(self, node: Membership) -> ibis.Value:
        value = self.compiled(node.value)
        kind: ValueKind = "number" if value.type().is_numeric() else "boolean" if value.type().is_boolean() else "text"
        kind = "date" if value.type().is_date() else kind
        single = isinstance(node.value, Column) and self._single_precision(node.value.name)
        found = _among(value, kind, [option.value for option in node.options], single)
        return opposite(found) if node.negated else found

    def _arithmetic(self, node: Arithmetic) -> ibis.Value:
        total = _as_double(self.compiled(node.first))
        for sign, part in node.rest:
            value = _as_double(self.compiled(part))
            match sign:
                case "+":
                    total = total + value
                case "-":
                    total = total - value
                case "*":
                    total = total * value
                case "/":
                    total = total / value.nullif(_constant(0.0))
        return total

    def _single_precision(self, name: str) -> bool:
        return bool(self.table[name].type().is_float32())


def _among(value: ibis.Value, kind: ValueKind, values: Iterable[ConstantValue], single: bool) -> ibis.Value:
    listed = list(values)
    if kind == "boolean":
        return _joined("or", [value == _constant(bool(item)) for item in listed])
    if kind == "number":
        numbers = [float(item) if isinstance(item, float) else int(item) for item in listed]  # type: ignore[arg-type]
        if not value.type().is_integer() or any(isinstance(number, float) for number in numbers):
            value = _as_double(value)
            numbers = [_in_single_precision(number) if single else float(number) for number in numbers]
        return _listed(value, [_constant(number) for number in numbers])
    return _listed(value, [_constant(item) for item in listed])


def opposite(condition: ibis.Value) -> ibis.Value:
    """``not``: true where the condition is false.

    The builder of SQL writes ``NOT x IS NULL`` where whether ``not x`` is missing is asked, which is something else; so
    nothing here is a NOT. For the like reason, what is asked by IN and IS NULL stands inside a CASE: not every engine
    reads on behind them.
    """
    import ibis

    return condition == ibis.literal(False)


def _listed(value: ibis.Value, options: list[ibis.Value]) -> ibis.Value:
    import ibis

    return ibis.cases((value.isin(options), True), (value.notin(options), False))


def _whether_missing(value: ibis.Value, answer: bool) -> ibis.Value:
    import ibis

    return ibis.cases((value.isnull(), answer), else_=not answer)


def _joined(word: str, parts: list[ibis.Value]) -> ibis.Value:
    """Conditions joined pair by pair, so that a long list does not become a deep tree."""
    join = operator.and_ if word == "and" else operator.or_
    while len(parts) > 1:
        parts = [reduce(join, parts[place : place + 2]) for place in range(0, len(parts), 2)]
    return parts[0]


def _constant(value: ConstantValue) -> ibis.Value:
    """A value for the engine; a broken number goes as text to be read there, because engines differ in what 0.1 is."""
    import ibis

    return (
        ibis.literal(repr(value)).cast("float64")
        if kind_of(value) == "number" and isinstance(value, float)
        else (ibis.literal(value))
    )


def _as_double(value: ibis.Value) -> ibis.Value:
    return value if value.type().is_float64() else value.cast("float64")


def _literal_number(node: Node) -> float | None:
    if isinstance(node, Negative):
        inner = _literal_number(node.part)
        return None if inner is None else -inner
    return float(node.value) if isinstance(node, Constant) and kind_of(node.value) == "number" else None  # type: ignore[arg-type]


def _in_single_precision(number: float) -> float:
    try:
        return float(struct.unpack("f", struct.pack("f", number))[0])
    except OverflowError:
        return float(number)

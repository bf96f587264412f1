"""Holding an expression against the kinds of the columns, before anything runs.

A column holds numbers, texts, dates or true and false, and only like can be compared with like. One exception makes
the same plan run on files that know no true and false: a column of numbers may stand as a condition where it holds
nothing but 0 and 1, which the data then have to show.

Texts are equal or not; they have no order, because which of two texts comes first differs from engine to engine.
"""

from __future__ import annotations

import datetime
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from adjustplan.data.expressions.faults import Fault
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
from adjustplan.data.expressions.words import written
from adjustplan.errors import did_you_mean

ValueKind = Literal["number", "boolean", "text", "date", "other", "unknown"]
"""What a column or a part of an expression holds; "unknown" where something is wrong with it that is said elsewhere."""

HOLDS: Mapping[ValueKind, str] = {
    "number": "numbers",
    "boolean": "true and false",
    "text": "text",
    "date": "dates",
    "other": "neither numbers, text, true and false nor plain dates",
    "unknown": "something unknown",
}
_SINGLE = {"number": "a number", "boolean": "true or false", "text": "a text", "date": "a date"}


@dataclass(frozen=True, slots=True)
class Checked:
    """An expression that was held against the columns.

    Attributes
    ----------
    kind : ValueKind
        What it gives.
    faults : tuple of Fault
        Everything wrong with it.
    zero_one : frozenset of str
        Columns of numbers that stand as conditions, and so must hold nothing but 0 and 1.
    """

    kind: ValueKind
    faults: tuple[Fault, ...]
    zero_one: frozenset[str]


def check(
    node: Node,
    text: str,
    kinds: Mapping[str, ValueKind],
    *,
    condition: bool = False,
    repeated: frozenset[str] = frozenset(),
) -> Checked:
    """Hold an expression against the columns.

    Parameters
    ----------
    node, text
        The tree and the text it was read from.
    kinds : mapping of str to ValueKind
        The kind of every column there is.
    condition : bool
        Whether it has to be true or false.
    repeated : frozenset of str
        Columns whose names do not tell them apart.
    """
    work = _Checking(text, kinds, repeated)
    if condition:
        work.condition(node)
        kind: ValueKind = "boolean"
    else:
        kind = work.kind(node)
    return Checked(kind, tuple(work.faults), frozenset(work.zero_one))


def kind_of(value: ConstantValue) -> ValueKind:
    """The kind of a single value."""
    if isinstance(value, bool):
        return "boolean"
    if isinstance(value, (int, float)):
        return "number"
    return "date" if isinstance(value, datetime.date) else "text"


@dataclass(slots=True)
class _Checking:
    text: str
    kinds: Mapping[str, ValueKind]
    repeated: frozenset[str]
    faults: list[Fault] = field(default_factory=list)
    zero_one: set[str] = field(default_factory=set)

    def kind(self, node: Node) -> ValueKind:
        """The kind of a part; what is wrong in it is noted."""
        if isinstance(node, Column):
            return self._column(node)
        if isinstance(node, Constant):
            return kind_of(node.value)
        if isinstance(node, Comparison):
            self._comparison(node)
        elif isinstance(node, Membership):
            self._membership(node)
        elif isinstance(node, Missingness):
            self.kind(node.value)
        elif isinstance(node, Inverse):
            self.condition(node.part)
        elif isinstance(node, Junction):
            for part in node.parts:
                self.condition(part)
        elif isinstance(node, Negative):
            self._number(node.part)
            return "number"
        elif isinstance(node, Arithmetic):
            for part in (node.first, *(part for _, part in node.rest)):
                self._number(part)
            return "number"
        return "boolean"

    def condition(self, node: Node) -> None:
        """Note whatever keeps a part from being true or false."""
        kind = self.kind(node)
        if kind == "number" and isinstance(node, Column):
            self.zero_one.add(node.name)
        elif kind not in ("boolean", "unknown"):
            name = self._shown(node)
            if isinstance(node, Column):
                message = f"“{node.name}” holds {HOLDS[kind]}, so it is neither true nor false."
                example = {"text": f'{name} = "…"', "date": f"{name} < date(2015, 1, 31)"}.get(kind)
                remedy = f"Compare it with something: {example}." if example else "Name another column."
            else:
                message, remedy = f"“{name}” is {_SINGLE[kind]}, not a condition.", "Compare it with something."
            self._note(message, remedy, node)

    def _column(self, node: Column) -> ValueKind:
        if node.name not in self.kinds:
            remedy = did_you_mean(node.name, self.kinds, "Name one of the data's columns, or derive one.")
            message = f"The data have no column “{node.name}”."
            self.faults.append(Fault("data-missing-column", message, remedy, node.span.at))
            return "unknown"
        if node.name in self.repeated:
            message = f"The header has “{node.name}” more than once (capitals do not tell columns apart)."
            self.faults.append(Fault("data-column-twice", message, "Rename one of the columns.", node.span.at))
            return "unknown"
        return self.kinds[node.name]

    def _comparison(self, node: Comparison) -> None:
        left, right = self.kind(node.left), self.kind(node.right)
        if "unknown" in (left, right):
            return
        for part, kind in ((node.left, left), (node.right, right)):
            if kind == "other":
                self._note(f"“{self._shown(part)}” holds {HOLDS[kind]}.", "Only “is missing” can be asked of it.", part)
                return
        if left != right:
            if not self._alike_as_truth(node, left, right):
                self._unlike(node.left, left, node.right, right)
            return
        if node.sign not in ("=", "!=") and left in ("text", "boolean"):
            what = "Texts have" if left == "text" else "True and false have"
            remedy = 'Write “=”, “!=” or in ("…", "…").' if left == "text" else "Write “=” or “!=”."
            self._note(f"{what} no order here, so “{node.sign}” has no meaning.", remedy, node.left)

    def _alike_as_truth(self, node: Comparison, left: ValueKind, right: ValueKind) -> bool:
        """Whether numbers are compared with true and false in a way that has a meaning: through 0 and 1."""
        if {left, right} != {"number", "boolean"} or node.sign not in ("=", "!="):
            return False
        part = node.left if left == "number" else node.right
        if isinstance(part, Column):
            self.zero_one.add(part.name)
            return True
        return isinstance(part, Constant) and part.value in (0, 1)

    def _membership(self, node: Membership) -> None:
        kind = self.kind(node.value)
        if kind == "other":
            self._note(f"“{self._shown(node.value)}” holds {HOLDS[kind]}.", "Name another column.", node.value)
            return
        for option in node.options:
            told = kind_of(option.value)
            as_truth = kind == "boolean" and told == "number" and option.value in (0, 1)
            if kind not in (told, "unknown") and not as_truth:
                self._unlike(node.value, kind, option, told)

    def _number(self, node: Node) -> None:
        kind = self.kind(node)
        if kind in ("number", "unknown"):
            return
        remedy = "Work with numbers here."
        if kind == "date":
            remedy = "Derive the time between two dates: days = { from = …, to = … } in [data.derive.…]."
        shown = self._shown(node)
        message = f"“{shown}” {f'holds {HOLDS[kind]}' if isinstance(node, Column) else f'is {_SINGLE[kind]}'}"
        self._note(f"{message}, not {'numbers' if isinstance(node, Column) else 'a number'}.", remedy, node)

    def _unlike(self, left: Node, left_kind: ValueKind, right: Node, right_kind: ValueKind) -> None:
        if isinstance(left, Constant) and not isinstance(right, Constant):
            left, left_kind, right, right_kind = right, right_kind, left, left_kind
        verb = f"holds {HOLDS[left_kind]}" if isinstance(left, Column) else f"is {_SINGLE[left_kind]}"
        message = f"“{self._shown(left)}” {verb}, but “{self._shown(right)}” is {_SINGLE[right_kind]}."
        if isinstance(right, Column):
            message = f"“{self._shown(left)}” {verb}, but “{right.name}” holds {HOLDS[right_kind]}."
        at = right if isinstance(right, Constant) else left
        self._note(message, _remedy(left_kind, right, right_kind), at)

    def _shown(self, node: Node) -> str:
        if isinstance(node, Column):
            return written(node.name)
        shown = " ".join(self.text[node.span.at : node.span.end].split())
        return shown if len(shown) <= 60 else f"{shown[:59]}…"

    def _note(self, message: str, remedy: str, node: Node) -> None:
        self.faults.append(Fault("data-expression-type", message, remedy, node.span.at))


def _remedy(wanted: ValueKind, given: Node, kind: ValueKind) -> str:
    """How to write the value so that it fits."""
    if isinstance(given, Constant):
        if wanted == "text" and kind in ("number", "boolean"):
            return f'Put it in quotes if it is meant as text: "{str(given.value).lower()}".'
        if wanted == "number" and kind == "text":
            return "Take the quotes off if a number is meant."
        if wanted == "boolean":
            return "Write true or false, or the column alone."
    if wanted == "date" and not isinstance(given, Column):
        return "A date is written date(2015, 1, 31)."
    return "Compare like with like."

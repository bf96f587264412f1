"""The tree of an expression: what it says, apart from how it is written. Every node knows where it stands."""

from __future__ import annotations

import datetime
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

ConstantValue = bool | int | float | str | datetime.date
ComparisonSign = Literal["=", "!=", "<", "<=", ">", ">="]
ArithmeticSign = Literal["+", "-", "*", "/"]


@dataclass(frozen=True, slots=True)
class Span:
    """From which character to which, from 0; the last one is not part of it."""

    at: int
    end: int


@dataclass(frozen=True, slots=True)
class Column:
    """The value of a column."""

    name: str
    span: Span


@dataclass(frozen=True, slots=True)
class Constant:
    """A number, a text, true or false, or a day."""

    value: ConstantValue
    span: Span


@dataclass(frozen=True, slots=True)
class Comparison:
    """``left sign right``."""

    sign: ComparisonSign
    left: Node
    right: Node
    span: Span


@dataclass(frozen=True, slots=True)
class Membership:
    """``value in (…)``, or ``value not in (…)``."""

    value: Node
    options: tuple[Constant, ...]
    negated: bool
    span: Span


@dataclass(frozen=True, slots=True)
class Missingness:
    """``value is missing``, or ``value is not missing``; never missing itself."""

    value: Node
    negated: bool
    span: Span


@dataclass(frozen=True, slots=True)
class Inverse:
    """``not part``."""

    part: Node
    span: Span


@dataclass(frozen=True, slots=True)
class Junction:
    """Two or more conditions joined by one word."""

    word: Literal["and", "or"]
    parts: tuple[Node, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Arithmetic:
    """``first sign part sign part …``, from the left, with signs of one rank."""

    first: Node
    rest: tuple[tuple[ArithmeticSign, Node], ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Negative:
    """``- part``."""

    part: Node
    span: Span


Node = Column | Constant | Comparison | Membership | Missingness | Inverse | Junction | Arithmetic | Negative


def parts_of(node: Node) -> tuple[Node, ...]:
    """The nodes right below one."""
    if isinstance(node, Comparison):
        return node.left, node.right
    if isinstance(node, Membership):
        return node.value, *node.options
    if isinstance(node, Missingness):
        return (node.value,)
    if isinstance(node, (Inverse, Negative)):
        return (node.part,)
    if isinstance(node, Junction):
        return node.parts
    if isinstance(node, Arithmetic):
        return node.first, *(part for _, part in node.rest)
    return ()


def columns_of(node: Node) -> frozenset[str]:
    """The names of all columns in a tree."""
    return frozenset(mentions(node))


def mentions(node: Node) -> Counter[str]:
    """How often each column stands in a tree."""
    return Counter(part.name for part in _everything(node) if isinstance(part, Column))


def _everything(node: Node) -> Iterator[Node]:
    waiting = [node]
    while waiting:
        here = waiting.pop()
        yield here
        waiting += parts_of(here)

"""From the marks of an expression to its tree.

What binds closest is read last: ``or``, then ``and``, ``not``, comparisons, ``+ -``, ``* /``, a sign in front, and
last single values and what stands in parentheses. A comparison does not go on into another one. Nesting is limited,
so that no text, however written, exhausts the stack.
"""

from __future__ import annotations

import datetime
from collections.abc import Callable
from dataclasses import dataclass
from typing import NoReturn, cast

from adjustplan.data.expressions.faults import Fault
from adjustplan.data.expressions.tree import (
    Arithmetic,
    ArithmeticSign,
    Column,
    Comparison,
    ComparisonSign,
    Constant,
    Inverse,
    Junction,
    Membership,
    Missingness,
    Negative,
    Node,
    Span,
)
from adjustplan.data.expressions.words import KEYWORDS, Mark, marks
from adjustplan.errors import nearest

MOST_NESTED = 40

_COMPARISONS = ("=", "!=", "<", "<=", ">", ">=")
_DATE = "A date is written date(year, month, day): date(2015, 1, 31)."
_WORDS_FOR_MISSING = ("null", "na", "nan", "none", "nil")


def parse(text: str) -> tuple[Node | None, tuple[Fault, ...]]:
    """The tree of an expression, or None and what is wrong with the text.

    All characters that fit nowhere are reported together; of marks in a wrong order, the first.
    """
    found, faults = marks(text)
    if faults:
        return None, faults
    if len(found) == 1:
        remedy = 'Write a condition, such as "age >= 18", or take the key out.'
        return None, (Fault("data-expression-syntax", "The expression is empty.", remedy, 0),)
    try:
        return _Reading(found).whole(), ()
    except _StoppedError as stopped:
        return None, (stopped.fault,)


class _StoppedError(Exception):
    """Reading cannot go on."""

    def __init__(self, fault: Fault) -> None:
        super().__init__(fault.message)
        self.fault = fault


@dataclass(slots=True)
class _Reading:
    """The marks, and how far they are read."""

    marks: tuple[Mark, ...]
    place: int = 0
    depth: int = 0

    def whole(self) -> Node:
        node = self._either()
        if self._here.kind != "end":
            self._refuse_after(node)
        return node

    def _either(self) -> Node:
        return self._junction("or", self._both)

    def _both(self) -> Node:
        return self._junction("and", self._inverse)

    def _junction(self, word: str, below: Callable[[], Node]) -> Node:
        parts = [below()]
        while self._take("keyword", word):
            parts.append(below())
        if len(parts) == 1:
            return parts[0]
        return Junction("and" if word == "and" else "or", tuple(parts), Span(parts[0].span.at, parts[-1].span.end))

    def _inverse(self) -> Node:
        if (start := self._take("keyword", "not")) is None:
            return self._comparison()
        part = self._deeper(start, self._inverse)
        return Inverse(part, Span(start.at, part.span.end))

    def _comparison(self) -> Node:
        left = self._sum()
        mark = self._here
        if mark.kind == "sign" and mark.text in _COMPARISONS:
            self.place += 1
            self._refuse_missing()
            right = self._sum()
            if self._here.kind == "sign" and self._here.text in _COMPARISONS:
                remedy = "Join two comparisons: 18 <= age and age < 65."
                self._stop("A comparison cannot go on into another one.", remedy, self._here)
            return Comparison(cast(ComparisonSign, mark.text), left, right, Span(left.span.at, right.span.end))
        if self._take("keyword", "is"):
            negated = self._take("keyword", "not") is not None
            if (last := self._take("keyword", "missing")) is None:
                self._expected("“missing” or “not missing”", "For any other value write “=” or “!=”.")
            return Missingness(left, negated, Span(left.span.at, last.end))
        following = self.marks[min(self.place + 1, len(self.marks) - 1)]
        negated = (mark.kind, mark.text, following.kind, following.text) == ("keyword", "not", "keyword", "in")
        self.place += negated
        if self._take("keyword", "in"):
            options, end = self._options()
            return Membership(left, options, negated, Span(left.span.at, end))
        return left

    def _options(self) -> tuple[tuple[Constant, ...], int]:
        remedy = 'A list is written in parentheses: in ("north", "south").'
        if self._take("sign", "(") is None:
            self._expected("“(”", remedy)
        options = [self._option()]
        while self._take("sign", ","):
            options.append(self._option())
        if (last := self._take("sign", ")")) is None:
            self._expected("a comma or “)”", remedy)
        return tuple(options), last.end

    def _option(self) -> Constant:
        start = self._here
        self._refuse_missing()
        if start.kind == "name" and not self._is_date():
            remedy = f'A text stands in quotes: "{start.value}". To compare with a column, write “=” and “or”.'
            self._stop(f"A list holds values, but “{start.value}” is the name of a column.", remedy, start)
        negative = self._take("sign", "-")
        node = self._single()
        if not isinstance(node, Constant) or (negative and self.marks[self.place - 1].kind != "number"):
            self._stop("A list holds single values.", "Work them out, and list the results.", start)
        if negative:
            value = cast("int | float", node.value)
            return Constant(-value, Span(start.at, node.span.end))
        return node

    def _sum(self) -> Node:
        return self._arithmetic(("+", "-"), self._product)

    def _product(self) -> Node:
        return self._arithmetic(("*", "/"), self._signed)

    def _arithmetic(self, signs: tuple[ArithmeticSign, ...], below: Callable[[], Node]) -> Node:
        first = below()
        rest: list[tuple[ArithmeticSign, Node]] = []
        while self._here.kind == "sign" and self._here.text in signs:
            sign = self._here.text
            self.place += 1
            rest.append((sign, below()))
        return Arithmetic(first, tuple(rest), Span(first.span.at, rest[-1][1].span.end)) if rest else first

    def _signed(self) -> Node:
        if start := self._take("sign", "-"):
            part = self._deeper(start, self._signed)
            return Negative(part, Span(start.at, part.span.end))
        return self._single()

    def _single(self) -> Node:
        mark = self._here
        span = Span(mark.at, mark.end)
        if mark.kind in ("number", "text"):
            self.place += 1
            return Constant(mark.value, span)
        if mark.kind == "keyword" and mark.text in ("true", "false"):
            self.place += 1
            return Constant(mark.text == "true", span)
        if mark.kind == "name":
            if self._is_date():
                return self._date()
            self.place += 1
            if self._here.kind == "sign" and self._here.text == "(":
                message = f"There is no function “{mark.value}”."
                remedy = "Known are comparisons, in (…), is missing, and, or, not, + - * / and date(…)."
                self._stop(message, remedy, mark)
            return Column(str(mark.value), span)
        if start := self._take("sign", "("):
            node = self._deeper(start, self._either)
            if self._take("sign", ")") is None:
                if self._here.kind == "end":
                    self._stop("A parenthesis is opened and never closed.", "Close it with “)”.", start)
                self._refuse_after(node)
            return node
        self._refuse_missing()
        return self._expected("a column or a value")

    def _is_date(self) -> bool:
        following = self.marks[min(self.place + 1, len(self.marks) - 1)]
        return self._here.kind == "name" and self._here.text == "date" and following.text == "("

    def _date(self) -> Node:
        start = self._here
        self.place += 2
        numbers: list[int] = []
        for closing in (",", ",", ")"):
            mark = self._here
            if mark.kind != "number" or not isinstance(mark.value, int):
                self._expected("a whole number", _DATE)
            numbers.append(int(mark.value))
            self.place += 1
            if self._take("sign", closing) is None:
                self._expected(f"“{closing}”", _DATE)
        try:
            day = datetime.date(*numbers)
        except (ValueError, OverflowError):
            self._stop("There is no such day.", _DATE, start)
        return Constant(day, Span(start.at, self.marks[self.place - 1].end))

    @property
    def _here(self) -> Mark:
        return self.marks[self.place]

    def _take(self, kind: str, text: str) -> Mark | None:
        mark = self._here
        if mark.kind != kind or mark.text != text:
            return None
        self.place += 1
        return mark

    def _deeper(self, start: Mark, below: Callable[[], Node]) -> Node:
        self.depth += 1
        if self.depth > MOST_NESTED:
            message = f"The expression is nested more than {MOST_NESTED} deep."
            remedy = "Derive columns with “equals” first, or name several steps."
            raise _StoppedError(Fault("data-expression-size", message, remedy, start.at))
        node = below()
        self.depth -= 1
        return node

    def _refuse_missing(self) -> None:
        """A comparison with a missing value is never true, so whoever writes one means something else."""
        mark = self._here
        unknown_word = mark.kind == "name" and mark.text.casefold() in _WORDS_FOR_MISSING
        if unknown_word or (mark.kind == "keyword" and mark.text == "missing"):
            self._stop(f"“{mark.text}” is no value to compare with.", "Write “is missing” or “is not missing”.", mark)

    def _refuse_after(self, node: Node) -> NoReturn:
        """What stands behind a whole expression and does not belong there."""
        mark, remedy = self._here, "Join conditions with “and” or “or”."
        if mark.kind == "name":
            near = nearest(mark.text, KEYWORDS)
            if near:
                remedy = f"Did you mean “{near}”?"
            elif isinstance(node, Column):
                remedy = "A column name with spaces stands in backticks: `systolic pressure`."
        elif mark.text == ")":
            remedy = "Take it out, or open a parenthesis before."
        expected = "“and” or “or”" if self.depth else "“and”, “or” or the end"
        self._expected(expected, remedy)

    def _expected(self, what: str, remedy: str = "") -> NoReturn:
        mark = self._here
        found = "the end" if mark.kind == "end" else f"“{mark.text}”"
        self._stop(f"Expected {what}, found {found}.", remedy or "Complete the expression here.", mark)

    def _stop(self, message: str, remedy: str, mark: Mark) -> NoReturn:
        raise _StoppedError(Fault("data-expression-syntax", message, remedy, mark.at))

"""The marks of an expression: from its characters to names, numbers, texts and signs.

::

    age >= 18 and not prior_diabetes and site in ("north", "south") and `systolic pressure` is not missing

A name stands as it is where it is made of letters, digits, ``_`` and ``.``; any other column name stands in backticks.
A text stands in double or in single quotes, so that it fits into either kind of quotes of the plan. A quote inside its
own kind is written twice; there are no other escapes. White space and line breaks only separate.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

from adjustplan.data.expressions.faults import Fault
from adjustplan.graph.words import is_bare_name

MarkKind = Literal["name", "keyword", "number", "text", "sign", "end"]

KEYWORDS = ("and", "or", "not", "in", "is", "missing", "true", "false")
MOST_CHARACTERS = 20_000
MOST_MARKS = 1_000

_LARGEST_WHOLE = 2**63
_MARK = re.compile(
    r"""(?P<space>\s+)
      | (?P<number>(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)
      | (?P<text>"(?:[^"]|"")*"|'(?:[^']|'')*')
      | (?P<backticks>`(?:[^`]|``)*`)
      | (?P<wrong>==+|<>|=<|=>|!(?!=)|≤|≥|≠|&+|\|+|\*\*|\^|%|[“”‘’„«»]|[;:?{}\[\]@\#$~\\]|["'`])
      | (?P<sign><=|>=|!=|[<>=(),+*/-])
      | (?P<word>[^\s"'`“”‘’„«»=<>!≤≥≠&|^%;:?{}\[\]@\#$~\\(),+*/-]+)""",
    re.VERBOSE,
)
_REMEDIES: Mapping[str, str] = MappingProxyType(
    {
        "<>": "Unequal is written “!=”.",
        "≠": "Unequal is written “!=”.",
        "!": "Write “not”; unequal is written “!=”.",
        "=<": "Write “<=”.",
        "≤": "Write “<=”.",
        "=>": "Write “>=”.",
        "≥": "Write “>=”.",
        "**": "There are no powers; multiply.",
        "^": "There are no powers; multiply.",
        "%": "There are no remainders or percentages; write a number.",
    }
)


@dataclass(frozen=True, slots=True)
class Mark:
    """One mark, its place from 0, the place behind it, and what it stands for."""

    kind: MarkKind
    text: str
    at: int
    value: str | int | float = ""

    @property
    def end(self) -> int:
        """The place behind the mark."""
        return self.at + len(self.text)


def marks(text: str) -> tuple[tuple[Mark, ...], tuple[Fault, ...]]:
    """The marks of an expression with an end mark behind them, and everything in it that is none."""
    if len(text) > MOST_CHARACTERS:
        return (), (_size(f"The expression has {len(text)} characters; at most {MOST_CHARACTERS} are read.", 0),)
    found: list[Mark] = []
    faults: list[Fault] = []
    for match in _MARK.finditer(text):
        kind, piece, at = match.lastgroup or "", match.group(), match.start()
        if kind == "space":
            continue
        mark = _mark(kind, piece, at, text)
        if isinstance(mark, Fault):
            faults.append(mark)
        else:
            found.append(mark)
    if len(found) > MOST_MARKS:
        message = f"The expression has {len(found)} names, values and signs; at most {MOST_MARKS} are read."
        faults.append(_size(message, found[MOST_MARKS].at))
    return (*found, Mark("end", "", len(text.rstrip()))), tuple(faults)


def written(name: str) -> str:
    """A column name as an expression writes it."""
    return name if is_bare_name(name) and name not in KEYWORDS else "`" + name.replace("`", "``") + "`"


def _mark(kind: str, piece: str, at: int, text: str) -> Mark | Fault:
    if kind == "number":
        return _number(piece, at, text)
    if kind == "text":
        value = piece[1:-1].replace(piece[0] * 2, piece[0])
        if "\0" in value:
            return _syntax("A text holds the character with the number 0.", "Take it out.", at)
        return Mark("text", piece, at, value)
    if kind == "backticks":
        name = piece[1:-1].replace("``", "`")
        if not name:
            return _syntax("Nothing stands between the backticks.", "Write a column name between them.", at)
        return Mark("name", piece, at, name)
    if kind == "sign":
        return Mark("sign", piece, at)
    if kind == "word":
        if piece in KEYWORDS:
            return Mark("keyword", piece, at)
        if is_bare_name(piece):
            return Mark("name", piece, at, piece)
        return _syntax(f"“{piece}” is not a name.", f"A column with such a name stands in backticks: `{piece}`.", at)
    return _wrong(piece, at)


def _number(piece: str, at: int, text: str) -> Mark | Fault:
    after = text[at + len(piece) : at + len(piece) + 1]
    if after and is_bare_name(f"a{after}"):
        message = f"“{piece}{after}” starts like a number and goes on like a name."
        return _syntax(message, "A column name that starts with a digit stands in backticks.", at)
    if piece.isdecimal() and len(piece) < 20 and int(piece) < _LARGEST_WHOLE:
        return Mark("number", piece, at, int(piece))
    value = float(piece)
    if value == float("inf"):
        return _syntax("The number is too large.", "Write a number below 1e308.", at)
    return Mark("number", piece, at, value)


def _wrong(piece: str, at: int) -> Fault:
    if piece in ('"', "'", "`"):
        what = "backtick" if piece == "`" else "quote"
        return _syntax(f"A {what} is opened and never closed.", "Close it; inside a text it is written twice.", at)
    if piece in "“”‘’„«»":
        return _syntax(f"“{piece}” is no plain quotation mark.", "Write \" or ' around texts.", at)
    if piece[0] in "&|":
        return _syntax(f"“{piece}” is not known here.", f"Write “{'and' if piece[0] == '&' else 'or'}”.", at)
    if piece.startswith("=="):
        return _syntax(f"“{piece}” is not known here.", "Equality is written with one “=”.", at)
    remedy = _REMEDIES.get(piece, "Take it out; a column with such a sign in its name stands in backticks.")
    return _syntax(f"“{piece}” is not known here.", remedy, at)


def _syntax(message: str, remedy: str, at: int) -> Fault:
    return Fault("data-expression-syntax", message, remedy, at)


def _size(message: str, at: int) -> Fault:
    return Fault("data-expression-size", message, "Derive columns with “equals” first, or name several steps.", at)

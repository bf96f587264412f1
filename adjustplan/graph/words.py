"""The words of the edge list: from the characters of one line to marks, names and what stands behind the colon.

A line is read from the left. Up to the first colon it is made of names, commas and arrows; behind the colon stands
either the reason for the arrows, which is free text, or what is said of variables. ``#`` starts a comment, except
inside double quotes.
"""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from typing import Literal

Kind = Literal["name", "arrow", "comma", "unsure", "bad"]

_HEAD = re.compile(
    r"""(?P<space>\s+)
      | (?P<unsure>(?:->|→)\?)
      | (?P<arrow>->|→)
      | (?P<comma>,)
      | (?P<colon>:)
      | (?P<comment>\#)
      | (?P<quoted>"(?:[^"\\]|\\.)*")
      | (?P<word>(?:(?!->)[^\s,:\#"→])+)
      | (?P<bad>.)""",
    re.VERBOSE,
)
_QUOTED = re.compile(r'"(?:[^"\\]|\\.)*"')
_TAIL = re.compile(r'"(?:[^"\\]|\\.)*"|#|[^"#]+|"')
_ESCAPES = {"n": "\n", "t": "\t", "r": "\r"}


@dataclass(frozen=True, slots=True)
class Word:
    """A name or mark of the head of a line, and the column, from 1, at which it starts."""

    kind: Kind
    text: str
    column: int


@dataclass(frozen=True, slots=True)
class Line:
    """A line split at its colon: the words before it, and the text after it without comment (None: no colon)."""

    number: int
    raw: str
    head: tuple[Word, ...]
    tail: str | None = None
    tail_column: int = 0


def split_line(number: int, raw: str) -> Line:
    """The words of one line. Characters that fit nowhere become words of the kind ``bad``."""
    head: list[Word] = []
    for match in _HEAD.finditer(raw):
        kind, text, column = match.lastgroup, match.group(), match.start() + 1
        if kind == "comment":
            break
        if kind == "colon":
            return Line(number, raw, tuple(head), without_comment(raw[match.end() :]), match.end() + 1)
        if kind == "word":
            head.append(Word("name" if is_bare_name(text) else "bad", unicodedata.normalize("NFC", text), column))
        elif kind == "quoted":
            head.append(Word("name", unquote(text), column))
        elif kind in ("arrow", "unsure", "comma", "bad"):
            head.append(Word(kind, text, column))  # type: ignore[arg-type]
    return Line(number, raw, tuple(head))


def without_comment(text: str) -> str:
    """``text`` up to the first ``#`` outside double quotes; a quote that is never closed is a plain character."""
    kept = []
    for piece in _TAIL.findall(text):
        if piece == "#":
            break
        kept.append(piece)
    return "".join(kept)


def is_bare_name(text: str) -> bool:
    """Whether a name can stand without quotes: letters and digits of any script, ``_``, ``.``, no digit first."""
    first = unicodedata.category(text[0])[0] if text else ""
    return first not in ("N", "M") and all(
        letter in "_." or unicodedata.category(letter)[0] in "LMN" for letter in text
    )


def quote(text: str) -> str:
    """``text`` in double quotes, such that :func:`unquote` gives it back."""
    escaped = text.replace("\\", "\\\\").replace('"', '\\"')
    return '"' + escaped.replace("\n", "\\n").replace("\t", "\\t").replace("\r", "\\r") + '"'


def unquote(quoted: str) -> str:
    """The text inside double quotes, with backslash escapes for quote, backslash, n, t and r."""
    return re.sub(r"\\(.)", lambda match: _ESCAPES.get(match[1], match[1]), quoted[1:-1])


def is_quoted(text: str) -> bool:
    """Whether the whole of ``text`` is one quoted string."""
    return _QUOTED.fullmatch(text) is not None


def written_name(name: str) -> str:
    """A name as the edge list writes it: bare where it can be, else quoted."""
    bare = is_bare_name(name) and unicodedata.is_normalized("NFC", name)
    return name if bare and name else quote(name)

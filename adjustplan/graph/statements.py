"""The statements of the edge list: from the words of a line to arrows drawn or variables described."""

from __future__ import annotations

import math
import re
import unicodedata
from collections.abc import Callable
from dataclasses import dataclass

from adjustplan.errors import did_you_mean
from adjustplan.graph.words import Line, Word, is_quoted, unquote

Value = str | bool | int | float
Complaint = Callable[[str, str, str, int], None]
"""Called with the code, message, remedy and column of what is wrong in a line."""

_ITEM = re.compile(r'\s*((?:"(?:[^"\\]|\\.)*"|[^",])*|.+?)\s*(?:,|$)')
_PROXY = re.compile(r"proxy\s+of\s+(\S.*)")
_ITEMS = ("unmeasured", "restricted", "proxy of", "wave=", "cost=")


@dataclass(frozen=True, slots=True)
class ArrowLine:
    """``a, b -> c -> d : reason``: each variable of a group points at each of the next."""

    groups: tuple[tuple[Word, ...], ...]
    reason: str


@dataclass(frozen=True, slots=True)
class VariableLine:
    """``a, b: unmeasured, "label"``: what is said, by attribute, with the column where it is said."""

    names: tuple[Word, ...]
    items: tuple[tuple[str, Value, int], ...]


def parse_line(line: Line, complain: Complaint) -> ArrowLine | VariableLine | None:
    """The statement a line makes, or None where it makes none or is wrong, in which case ``complain`` was called."""
    if not line.head and line.tail is None:
        return None
    groups = _groups(line, complain)
    if groups is None:
        return None
    if len(groups) > 1:
        return ArrowLine(groups, _reason(line.tail or ""))
    if line.tail is None:
        message = "Expected an arrow “->” or a colon after the name."
        remedy = "Write cause -> effect, or name: unmeasured."
        complain("graph-syntax", message, remedy, len(line.raw.rstrip()) + 1)
        return None
    items = _items(line.tail, line.tail_column, complain)
    return None if items is None else VariableLine(groups[0], items)


def _groups(line: Line, complain: Complaint) -> tuple[tuple[Word, ...], ...] | None:
    """The comma lists between the arrows; names and separators must alternate."""
    groups: list[list[Word]] = [[]]
    name_expected = True
    for word in line.head:
        if word.kind == "unsure":
            message = "The arrow “->?” (one the team is not sure of) is reserved and not built yet."
            remedy = "Write “->”, or leave the arrow out and say so in a comment."
            complain("graph-reserved", message, remedy, word.column)
            return None
        if word.kind == "bad":
            complain("graph-syntax", *_bad_word(word), word.column)
            return None
        if (word.kind == "name") is not name_expected:
            expected = "a name" if name_expected else "“->”, a comma or a colon"
            message = f"Expected {expected}, found “{word.text}”."
            remedy = "A name with spaces needs double quotes." if word.kind == "name" else "Write cause -> effect."
            complain("graph-syntax", message, remedy, word.column)
            return None
        if word.kind == "name":
            groups[-1].append(word)
        elif word.kind == "arrow":
            groups.append([])
        name_expected = word.kind != "name"
    if name_expected:
        column = line.tail_column - 1 if line.tail is not None else len(line.raw.split("#")[0].rstrip()) + 1
        complain("graph-syntax", "Expected a name here.", "Write cause -> effect, or name: unmeasured.", max(column, 1))
        return None
    return tuple(map(tuple, groups))


def _bad_word(word: Word) -> tuple[str, str]:
    text = word.text
    if text == '"':
        return "A double quote is opened and never closed.", "Close it on the same line."
    if "<" in text or ">" in text or set(text) <= set("-=–—"):
        return f"Expected an arrow “->”, found “{text}”.", "An arrow is written “->” and points from cause to effect."
    if text[0].isdigit():
        return f"“{text}” starts with a digit.", f'Start with a letter, or put it in double quotes: "{text}".'
    return (
        f"“{text}” is not a name.",
        f'A name is letters, digits, “_” and “.”; anything else goes in double quotes: "{text}".',
    )


def _reason(tail: str) -> str:
    reason = tail.strip()
    return unquote(reason) if is_quoted(reason) else reason


def _items(tail: str, column: int, complain: Complaint) -> tuple[tuple[str, Value, int], ...] | None:
    if not tail.strip():
        return ()
    items: list[tuple[str, Value, int]] = []
    start, sound = 0, True
    while start <= len(tail):
        match = _ITEM.match(tail, start)
        assert match is not None  # the pattern matches the empty text too
        place = column + match.start(1)
        item = _item(match[1].strip(), place, complain)
        sound = sound and item is not None
        if item is not None:
            items.append((*item, place))
        if match.end() == len(tail) and not match[0].endswith(","):
            break
        start = match.end()
    return tuple(items) if sound else None


def _item(text: str, column: int, complain: Complaint) -> tuple[str, Value] | None:
    if is_quoted(text):
        return "label", unquote(text)
    if text in ("unmeasured", "restricted"):
        return text, True
    if proxy := _PROXY.fullmatch(text):
        named = unquote(proxy[1]) if is_quoted(proxy[1]) else unicodedata.normalize("NFC", proxy[1])
        return "proxy_of", named
    name, equals, value = (part.strip() for part in text.partition("="))
    if equals and name == "wave":
        if re.fullmatch(r"[+-]?\d{1,18}", value, re.ASCII):
            return "wave", int(value)
        complain("graph-bad-wave", f"The wave is “{value}”.", "A wave is a whole number: wave=0.", column)
        return None
    if equals and name == "cost":
        return _cost(value, column, complain)
    if not text:
        complain("graph-syntax", "Expected an item here, found nothing.", "Take out the extra comma.", column)
    elif text.startswith('"'):
        complain("graph-syntax", "A double quote is opened and never closed.", "Close it on the same line.", column)
    else:
        otherwise = (
            "Known are unmeasured, restricted, proxy of <name>, wave=<integer>, cost=<number>, and a quoted label."
        )
        remedy = did_you_mean(f"{name}=" if equals else name, _ITEMS, otherwise)
        complain("graph-unknown-item", f"Unknown item “{text}”.", remedy, column)
    return None


def _cost(value: str, column: int, complain: Complaint) -> tuple[str, float] | None:
    try:
        cost = float(value)
    except ValueError:
        cost = math.nan
    if math.isfinite(cost) and cost >= 0 and "_" not in value:
        return "cost", cost
    complain("graph-bad-cost", f"The cost is “{value}”.", "A cost is a finite number, 0 or more: cost=2.5.", column)
    return None

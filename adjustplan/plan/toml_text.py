"""Text as TOML writes it, for the files the program itself writes: the seal, and the plan of a new study.

A text goes in double quotes. Whatever could end the quotes, break the line, or show a reader something other than what
stands there (control characters, marks that turn the direction of writing) becomes an escape, so every text comes back
from a TOML reader as it was.
"""

from __future__ import annotations

import datetime
import re

from adjustplan.errors import AdjustplanError, Finding

Plain = str | bool | int | float | datetime.date
"""What a statement can say of a key."""

_UNSAFE = re.compile('["\\\\\x00-\x1f\x7f-\x9f\u2028-\u202e\u2066-\u2069\ufeff]')
_LITERAL_UNSAFE = re.compile("['\x00-\x1f\x7f-\x9f\u2028-\u202e\u2066-\u2069\ufeff]")
_SHORT = {'"': '\\"', "\\": "\\\\", "\n": "\\n", "\t": "\\t", "\r": "\\r"}
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


def quoted(words: str) -> str:
    """A text in double quotes, as TOML reads it back."""
    return '"' + _UNSAFE.sub(lambda match: _SHORT.get(match[0], f"\\u{ord(match[0]):04x}"), words) + '"'


def in_single_quotes(words: str) -> str:
    """A text in single quotes, where TOML knows no escapes and so leaves it readable; in double ones where it must."""
    return quoted(words) if _LITERAL_UNSAFE.search(words) else f"'{words}'"


def key_text(key: str) -> str:
    """A key: bare where TOML allows that, else quoted."""
    return key if _BARE_KEY.fullmatch(key) else quoted(key)


def value_text(value: Plain) -> str:
    """A value, such that TOML reads back one equal to it and of its type."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, datetime.date):
        return value.isoformat()
    return quoted(value) if isinstance(value, str) else repr(value)


def collapsed(words: str) -> str:
    """A text with every run of white space made one space, and none at its ends."""
    return " ".join(words.split())


def refuse_undecodable(words: str, name: str, raises: type[AdjustplanError]) -> None:
    """Raise where ``words``, given as ``name``, holds bytes that were no UTF-8 and so cannot be written to a file."""
    try:
        words.encode("utf-8")
    except UnicodeEncodeError:
        shown = words.encode("utf-8", "replace").decode("utf-8")
        message = f"The {name} “{collapsed(shown)}” holds bytes that are not UTF-8."
        raise raises(Finding("text-not-utf8", message, "Type it in a terminal set to UTF-8.")) from None

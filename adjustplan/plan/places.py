"""On which line of a TOML file a key stands.

The standard library's reader gives values without places, but a finding without a line sends its reader searching.
This looks only for table headers and keys at the start of a line, which is where people write them; what is nested
deeper is placed at its parent.
"""

from __future__ import annotations

import re

Key = tuple[str | int, ...]

_HEADER = re.compile(r"\s*(\[\[?)\s*([^\[\]]+?)\s*\]")
_KEY = re.compile(r"""\s*((?:"[^"]*"|'[^']*'|[\w-]+)(?:\s*\.\s*(?:"[^"]*"|'[^']*'|[\w-]+))*)\s*=(.*)""")
_PART = re.compile(r"""\s*(?:"([^"]*)"|'([^']*)'|([\w-]+))\s*\.?""")
_TRIPLE = re.compile(r'"""|\'\'\'')


def line_numbers(text: str) -> dict[Key, int]:
    """The line, from 1, of every table header and key; members of an array of tables are counted from 0."""
    found: dict[Key, int] = {}
    counts: dict[Key, int] = {}
    table: Key = ()
    inside: str | None = None
    for number, line in enumerate(text.splitlines(), start=1):
        if inside is not None:
            inside = None if line.count(inside) % 2 else inside
            continue
        if header := _HEADER.match(line):
            table = _parts(header[2])
            if header[1] == "[[":
                counts[table] = counts.get(table, -1) + 1
                table = (*table, counts[table])
            found.setdefault(table, number)
        elif key := _KEY.match(line):
            found.setdefault(table + _parts(key[1]), number)
            marks = _TRIPLE.findall(key[2])
            inside = marks[0] if len(marks) % 2 else None
    return found


def line_of(key: Key, found: dict[Key, int]) -> int | None:
    """The line of ``key``, or of the nearest thing around it that has one."""
    return next((found[key[:end]] for end in range(len(key), 0, -1) if key[:end] in found), None)


def _parts(dotted: str) -> Key:
    return tuple(next(group for group in part if group) for part in _PART.findall(dotted) if any(part))

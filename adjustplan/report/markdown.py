"""Markdown by hand: text that stays text whatever it holds, names as code, and tables."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

_ANYWHERE = re.compile(r"([\\`*\[\]|~$]|(?<![^\W_])_|_(?![^\W_]))")
"""Marks that mean something wherever they stand; an underline inside a word is none of them."""
_AT_START = re.compile(r"^([-+#>=]|\d+(?=[.)]))")
_TAG = re.compile(r"<(?=[A-Za-z/!?])")
_ENTITY = re.compile(r"&(?=#?\w+;)")


def text(words: str) -> str:
    """Plain text that Markdown shows as it is, on one line; only marks that would mean something are escaped."""
    line = " ".join(words.split())
    safe = _ANYWHERE.sub(r"\\\1", _TAG.sub("&lt;", _ENTITY.sub("&amp;", line)))
    start = _AT_START.match(safe)
    if start is None:
        return safe
    return f"{start[1]}\\{safe[start.end() :]}" if start[1].isdigit() else f"\\{safe}"


def prose(words: str) -> str:
    """Plain text of several paragraphs, which blank lines part."""
    return "\n\n".join(text(part) for part in re.split(r"\n\s*\n", words.strip()))


def paths(words: str) -> str:
    """Plain text with paths in it, whose arrows are set as arrows, which do not break at the end of a line."""
    return text(words.replace(" -> ", " → ").replace(" <- ", " ← "))


def code(words: str) -> str:
    """A name or a path, set as code; a bar is escaped, so that it can stand in a table."""
    line = " ".join(words.split())
    fence = "`" * (1 + max((len(run) for run in re.findall("`+", line)), default=0))
    pad = " " if line.startswith("`") or line.endswith("`") else ""
    return f"{fence}{pad}{line}{pad}{fence}".replace("|", "\\|")


def codes(names: Iterable[str]) -> str:
    """Names set as code, in a list; “nothing” where there are none."""
    return ", ".join(map(code, names)) or "nothing"


def table(heads: Sequence[str], rows: Iterable[Sequence[str]], right: Iterable[int] = ()) -> str:
    """A table; cells are Markdown already. ``right`` names the columns, from 0, that are set flush right."""
    flush = set(right)
    rule = ["---:" if column in flush else "---" for column in range(len(heads))]
    return "\n".join(f"| {' | '.join(row)} |" for row in [heads, rule, *rows])

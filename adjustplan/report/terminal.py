"""Results on a terminal or in a pipe: as text to read or JSON for programs, on stdout.

Tables take the terminal's width; in a pipe they are 120 wide and without colour. ``NO_COLOR`` is obeyed.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Iterable, Sequence
from functools import singledispatch
from pathlib import Path
from typing import Any, Literal, Protocol

from rich.console import Console
from rich.table import Table
from rich.text import Text

from adjustplan.identify import Roles, TracedPath
from adjustplan.identify.showing import cell_text, set_text

Form = Literal["text", "json"]
PIPE_WIDTH = 120


class Result(Protocol):
    """What can be shown: it has text and a JSON form."""

    def to_dict(self) -> dict[str, Any]:
        """The result as JSON-ready values."""


def show(result: Result, form: Form) -> None:
    """Print a result."""
    if form == "json":
        print_json(result.to_dict())
    else:
        print_text(result)


def show_written(paths: Iterable[Path], form: Form) -> None:
    """Say which files were written: to a reader on stderr, to a program on stdout."""
    if form == "json":
        print_json({"written": [str(path) for path in paths]})
        return
    for path in paths:
        print(f"wrote {path}", file=sys.stderr)


def print_json(values: dict[str, Any]) -> None:
    """Print values as JSON; a number that is not finite is an error, never a word JSON does not know."""
    print(json.dumps(values, ensure_ascii=False, indent=2, allow_nan=False))


@singledispatch
def print_text(result: object) -> None:
    """Print a result as text: as it prints itself, unless a better way is registered for its kind."""
    console().print(Text(str(result)), soft_wrap=True)


@print_text.register
def _(result: Roles) -> None:
    out = console()
    out.print(Text(result.caption()), soft_wrap=True)
    out.print(table(result.records()))


def show_paths(
    paths: Sequence[TracedPath], exposure: str, outcome: str, held: Sequence[str], form: Form, *, complete: bool
) -> None:
    """Print traced paths."""
    if form == "json":
        listed = [
            {
                "path": path.text,
                "variables": list(path.variables),
                "causal": path.causal,
                "open": path.open,
                "blocked_by": list(path.blocked_by),
                "opened_by": list(path.opened_by),
                "reason": path.reason,
            }
            for path in paths
        ]
        print_json(
            {"exposure": exposure, "outcome": outcome, "adjust": list(held), "paths": listed, "complete": complete}
        )
        return
    out = console()
    out.print(Text(f"Paths between {exposure} and {outcome}, adjusting for {set_text(held)}:"), soft_wrap=True)
    out.print(
        table(
            {"path": path.text, "state": "open" if path.open else "blocked", "because": path.reason} for path in paths
        )
    )


def console() -> Console:
    """Where text goes."""
    return Console(width=None if sys.stdout.isatty() else PIPE_WIDTH, highlight=False, markup=False)


def table(rows: Iterable[dict[str, Any]]) -> Table:
    """A table of rows that share their columns; text columns wrap, nothing is cut off."""
    grid = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), show_edge=False)
    for row in rows:
        if not grid.columns:
            for column in row:
                grid.add_column(column.replace("_", " "), overflow="fold", header_style="bold")
        grid.add_row(*(Text(cell_text(value)) for value in row.values()))
    return grid

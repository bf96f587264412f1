"""A progress bar on stderr, for those who watch: only where stderr is a terminal."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from adjustplan.estimate.estimating import Progress


@contextmanager
def progress_bar() -> Iterator[Progress | None]:
    """What to tell how far a repeated piece of work has come; None where nobody watches."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import Progress as Bars
    from rich.progress import TaskID

    with Bars(console=Console(stderr=True), transient=True) as bars:
        tasks: dict[str, TaskID] = {}

        def tell(what: str, total: int, done: int) -> None:
            if what not in tasks:
                tasks[what] = bars.add_task(what, total=total)
            bars.update(tasks[what], completed=done)

        yield tell

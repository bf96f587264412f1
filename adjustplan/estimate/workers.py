"""Sharing work among processes, in a way that no script or notebook can break.

A pool of processes as Python's standard library makes it either copies the running process, which hangs where another
library has threads, or runs the user's own script again in every process, which ends badly where the script does not
expect it. Here a helper is a fresh Python that knows only where this package is, and gets its work and gives its
results through pipes.

What a helper computes must depend on nothing but the piece of work it was given; then the results are the same for any
number of helpers. That is also what makes it safe to lose one: its piece is done here instead.
"""

from __future__ import annotations

import os
import pickle
import queue
import signal
import subprocess
import sys
from collections.abc import Callable, Generator, Iterator, Sequence
from contextlib import suppress
from threading import Thread
from typing import Protocol

from adjustplan.data import Floats
from adjustplan.estimate.threads import one_thread

Run = Callable[[range], Floats]

_BEGIN = "import sys; sys.path[:] = sys.argv[1:]; from adjustplan.estimate.workers import help_out; help_out()"
_ONE_THREAD = dict.fromkeys(("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"), "1")
_MOST_BYTES = 4_000_000_000


class Work(Protocol):
    """What helpers are sent once; it must survive pickling."""

    def begin(self) -> Run:
        """Make ready, and return the function from a range of numbered pieces to their results."""


def processors() -> int:
    """How many processors this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def share(work: Work, pieces: Sequence[range], processes: int) -> Generator[tuple[range, Floats], None, None]:
    """Do all pieces, and yield each with its result as it is finished, in any order.

    Parameters
    ----------
    work : Work
    pieces : sequence of range
    processes : int
        How many helpers; with 1 everything is done here. There are fewer where the work is so large that copies of it
        would fill the memory, and none where Python does not know how to start itself.

    Notes
    -----
    Close the iterator when it is left early (``contextlib.closing``): that ends the helpers.
    """
    sent = pickle.dumps(work, protocol=5) if processes > 1 else b""
    processes = min(processes, len(pieces), _MOST_BYTES // max(len(sent), 1))
    if processes < 2 or not sys.executable or getattr(sys, "frozen", False):
        with one_thread():
            run = work.begin()
            for piece in pieces:
                yield piece, run(piece)
        return
    waiting: queue.SimpleQueue[range] = queue.SimpleQueue()
    finished: queue.SimpleQueue[tuple[range | None, Floats | None]] = queue.SimpleQueue()
    for piece in pieces:
        waiting.put(piece)
    helpers: list[subprocess.Popen[bytes]] = []
    try:
        for _ in range(processes):
            try:
                helpers.append(_start())
            except OSError:
                finished.put((None, None))
                continue
            Thread(target=_attend, args=(helpers[-1], sent, waiting, finished), daemon=True).start()
        yield from _collect(work, len(pieces), processes, waiting, finished)
    finally:
        for helper in helpers:
            helper.kill()
            helper.wait()


def _start() -> subprocess.Popen[bytes]:
    """A fresh Python that looks for packages where this one does."""
    return subprocess.Popen(
        [sys.executable, "-c", _BEGIN, *sys.path],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL,
        env=os.environ | _ONE_THREAD,
    )


def _attend(
    helper: subprocess.Popen[bytes],
    sent: bytes,
    waiting: queue.SimpleQueue[range],
    finished: queue.SimpleQueue[tuple[range | None, Floats | None]],
) -> None:
    """Give a helper one piece after the other; where it is lost, say so, with the piece it had."""
    piece = None
    assert helper.stdin is not None
    assert helper.stdout is not None
    try:
        with helper.stdin, helper.stdout:
            helper.stdin.write(sent)
            while True:
                piece = waiting.get_nowait()
                pickle.dump(piece, helper.stdin)
                helper.stdin.flush()
                finished.put((piece, pickle.load(helper.stdout)))
                piece = None
    except queue.Empty:
        pass
    except (OSError, EOFError, pickle.UnpicklingError, ValueError):
        finished.put((piece, None))


def _collect(
    work: Work,
    count: int,
    processes: int,
    waiting: queue.SimpleQueue[range],
    finished: queue.SimpleQueue[tuple[range | None, Floats | None]],
) -> Iterator[tuple[range, Floats]]:
    """Every piece with its result; what lost helpers leave is done here."""
    run: Run | None = None
    while count:
        left: list[range] = []
        try:
            piece, result = finished.get(timeout=1.0)  # an endless wait cannot be interrupted everywhere
        except queue.Empty:
            continue
        if piece is not None and result is not None:
            count -= 1
            yield piece, result
            continue
        processes -= 1
        left += [] if piece is None else [piece]
        if processes == 0:
            with suppress(queue.Empty):
                while True:
                    left.append(waiting.get_nowait())
        with one_thread():
            run = run or work.begin()
            for piece in left:
                count -= 1
                yield piece, run(piece)


def help_out() -> None:
    """What a helper does: read the work, then one piece after the other, until the pipe is closed."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the process that started it ends it
    source, sink = sys.stdin.buffer, os.fdopen(os.dup(1), "wb")
    os.dup2(2, 1)  # what a library prints must not get among the results
    work: Work = pickle.load(source)
    with one_thread():
        run = work.begin()
        while True:
            try:
                piece = pickle.load(source)
            except EOFError:
                return
            pickle.dump(run(piece), sink)
            sink.flush()

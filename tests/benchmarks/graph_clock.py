"""Timing one piece of work, with a limit for work that might not end today.

Work that may run for hours is broken off by an alarm when its time is up. What is then known is that it takes
*more than* the limit, and nothing else is claimed. The alarm reaches work that is written in Python, as the
rival's is; a child process would do the same but slow the work down while memory is copied on first use.
"""

from __future__ import annotations

import resource
import signal
import statistics
import time
import tracemalloc
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Timing:
    """Seconds taken and what came out; ``stopped`` when the limit was reached, then ``result`` is None."""

    seconds: float
    result: Any = None
    stopped: bool = False

    def __str__(self) -> str:
        return f"> {show(self.seconds)}" if self.stopped else show(self.seconds)


def show(seconds: float) -> str:
    """A duration in the unit that suits it."""
    for unit, size in (("s", 1.0), ("ms", 1e-3)):
        if seconds >= size:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds * 1e6:.3g} µs"


def once(work: Callable[[], Any]) -> Timing:
    """The work done once."""
    start = time.perf_counter()
    result = work()
    return Timing(time.perf_counter() - start, result)


def median(work: Callable[[], Any], repeats: int = 5) -> Timing:
    """The work done several times; the median time and the last result."""
    runs = [once(work) for _ in range(repeats)]
    return Timing(statistics.median(run.seconds for run in runs), runs[-1].result)


def limited(work: Callable[[], Any], limit: float) -> Timing:
    """The work done once, and broken off after ``limit`` seconds."""

    def stop(*_: object) -> None:
        raise TimeIsUpError

    signal.signal(signal.SIGALRM, stop)
    signal.setitimer(signal.ITIMER_REAL, limit)
    try:
        return once(work)
    except TimeIsUpError:
        return Timing(limit, stopped=True)
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)


class TimeIsUpError(Exception):
    """Raised in the middle of work that has reached its limit."""


def ratio(rival: Timing, ours: Timing) -> str:
    """How many times longer the rival takes, or a lower bound where it was stopped."""
    times = rival.seconds / ours.seconds
    text = f"{times:,.0f} times" if times >= 10 else f"{times:.2g} times"
    return f"more than {text} (stopped after {rival.seconds:.0f} s)" if rival.stopped else text


def peak_memory(stream: Callable[[], Iterable[Any]]) -> tuple[float, float]:
    """Megabytes that running through a stream adds at most: allocated by Python, and resident in the process.

    The process's figure comes from its high-water mark and is an upper bound; kilobytes, as Linux counts.
    """
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    tracemalloc.start()
    for _ in stream():
        pass
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak / 1e6, (after - before) / 1e3

"""Small regressions are slower on many threads.

The models here have thousands of lines, not millions, and the linear algebra library hands even those to all
processors. On a machine that is doing something else as well, the threads then wait for each other, and a fit
takes ten times as long. So one thread does the work; the numbers are the same.
"""

from __future__ import annotations

from contextlib import AbstractContextManager

from threadpoolctl import threadpool_limits


def one_thread() -> AbstractContextManager[object]:
    """A context in which linear algebra keeps to one thread."""
    limits: AbstractContextManager[object] = threadpool_limits(limits=1, user_api="blas")
    return limits

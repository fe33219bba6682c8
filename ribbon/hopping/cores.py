"""How many cores there are to work on, and work shared out among them."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

__all__ = ["share_out", "workers"]

T = TypeVar("T")
R = TypeVar("R")


def workers() -> int:
    """Cores to work on: all that this process may use, or RIBBON_THREADS.

    >>> workers() >= 1
    True
    """
    wanted = os.environ.get("RIBBON_THREADS", "")
    if wanted.isdigit() and int(wanted) > 0:
        return int(wanted)
    try:
        return len(os.sched_getaffinity(0))
    except AttributeError:  # not every system tells
        return os.cpu_count() or 1


def share_out(work: Callable[[T], R], jobs: Iterable[T], *, worth: bool = True) -> list[R]:
    """Results of ``work`` on every job, in their order, on all cores where it is ``worth`` it.

    The work must release the interpreter, as numpy does on large arrays.

    >>> share_out(abs, [-1, 2, -3])
    [1, 2, 3]
    """
    listed = list(jobs)
    cores = min(workers(), len(listed))
    if cores <= 1 or not worth:
        return [work(job) for job in listed]
    with ThreadPoolExecutor(cores) as pool:
        return list(pool.map(work, listed))

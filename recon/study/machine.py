"""The cores of this machine, and how processes share them."""

from __future__ import annotations

import os
import platform
from collections.abc import Iterator
from contextlib import contextmanager

THREAD_VARIABLES = ("NUMBA_NUM_THREADS", "OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")


def cores() -> int:
    """Return the number of cores that this process may use.

    Examples
    --------
    >>> cores() >= 1
    True
    """
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def machine() -> str:
    """Return what a result was computed on.

    Examples
    --------
    >>> machine().endswith((" core", " cores"))
    True
    """
    number = cores()
    return f"{platform.system()} {platform.machine()}, {number} core{'s' if number > 1 else ''}"


@contextmanager
def threads_of_children(threads: int) -> Iterator[None]:
    """Let the processes that start meanwhile use so many threads each.

    Libraries read these variables when they are loaded, so they have to be set before the process starts.

    Examples
    --------
    >>> with threads_of_children(2):
    ...     os.environ["OMP_NUM_THREADS"]
    '2'
    """
    before = {name: os.environ.get(name) for name in THREAD_VARIABLES}
    os.environ.update(dict.fromkeys(THREAD_VARIABLES, str(threads)))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value

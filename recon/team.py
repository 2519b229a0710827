"""A team of threads that share the lines of an array.

The kernels of this package are `numba` functions that release the interpreter lock and work on a range of
lines ``start <= i < stop``. A team cuts the range into equal parts, one a thread. Every line is computed by
the same instructions whoever computes it, so the result has the same bytes for any number of threads.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise
from typing import Any

SMALLEST_SHARE = 1 << 17
"""Elements below which handing work to a thread costs more than the work."""


class Team:
    """Threads that work on parts of a range.

    Parameters
    ----------
    threads : int
        Number of threads, at least 1. With 1 everything runs in the caller's thread.

    Examples
    --------
    >>> import numpy as np
    >>> squares = np.zeros(10, int)
    >>> def square(start, stop, out):
    ...     out[start:stop] = np.arange(start, stop) ** 2
    >>> Team(2).share(square, 10, squares)
    >>> squares[-1]
    np.int64(81)
    """

    def __init__(self, threads: int = 1):
        self.threads = max(1, int(threads))
        self._pool = ThreadPoolExecutor(self.threads) if self.threads > 1 else None

    def share(
        self, kernel: Callable[..., Any], lines: int, *args: Any, elements: int = 1 << 30, grain: int = 1
    ) -> None:
        """Call ``kernel(start, stop, *args)`` so that the parts cover ``range(lines)``.

        `elements` says how much work there is in all; little work stays in the caller's thread. Parts begin
        at multiples of `grain`.
        """
        parts = min(self.threads, lines, max(1, elements // SMALLEST_SHARE))
        if self._pool is None or parts == 1:
            kernel(0, lines, *args)
            return
        edges = [min(lines, -(-lines * part // parts // grain) * grain) for part in range(parts)] + [lines]
        futures = [self._pool.submit(kernel, start, stop, *args) for start, stop in pairwise(edges)]
        for future in futures:
            future.result()

    def each(self, work: Callable[[Any], Any], items: Any) -> list[Any]:
        """Return ``[work(item) for item in items]``, the items shared among the threads."""
        if self._pool is None:
            return [work(item) for item in items]
        return list(self._pool.map(work, items))

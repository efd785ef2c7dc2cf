"""A fixed number of threads for kernels that release the interpreter lock."""

from __future__ import annotations

import itertools
import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

# Below this many items per thread, starting the threads costs more than they save.
_GRAIN = 8192


def available_threads() -> int:
    """Cores this process may use."""
    try:
        return len(os.sched_getaffinity(0))
    except AttributeError:  # not on Linux
        return os.cpu_count() or 1


class Workers:
    """Threads that share the parts of a range.

    Parameters
    ----------
    threads : int, optional
        Number of threads; all cores of the process by default.
    """

    def __init__(self, threads: int | None = None):
        self.threads = available_threads() if threads is None else max(1, int(threads))
        self._pool = ThreadPoolExecutor(self.threads) if self.threads > 1 else None

    def split(self, n: int, grain: int = _GRAIN) -> list[tuple[int, int]]:
        """Cut ``range(n)`` into at most one part per thread."""
        parts = max(1, min(self.threads, n // grain))
        edges = [n * i // parts for i in range(parts + 1)]
        return list(itertools.pairwise(edges))

    def run(self, function: Callable, parts: list[tuple[int, int]]) -> list:
        """Call ``function(start, stop)`` for every part and return the values in order."""
        if self._pool is None or len(parts) == 1:
            return [function(a, b) for a, b in parts]
        return list(self._pool.map(lambda part: function(*part), parts))

    def each(self, function: Callable, n: int) -> list:
        """Run ``function(worker_number)`` on every one of `n` workers at once."""
        if self._pool is None or n == 1:
            return [function(i) for i in range(n)]
        return list(self._pool.map(function, range(n)))

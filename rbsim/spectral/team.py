"""A team of threads that shares columns or rows; loops and transforms release the interpreter."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np

#: Work on items start … stop−1 as member number `member`.
Share = Callable[[int, int, int], None]


class Team:
    """Fixed number of threads, the calling one included.

    Parameters
    ----------
    threads : int
        Number of threads.
    """

    def __init__(self, threads: int) -> None:
        if threads < 1:
            raise ValueError(f"threads {threads}: must be at least 1")
        self.threads = threads
        self._pool = ThreadPoolExecutor(threads - 1, "rbsim") if threads > 1 else None

    def share(self, items: int, work: Share) -> None:
        """Split `items` evenly among the threads and wait until all have done their share."""
        if self._pool is None:
            work(0, items, 0)
            return
        edges = np.linspace(0, items, self.threads + 1).astype(int).tolist()
        others = [self._pool.submit(work, edges[i], edges[i + 1], i) for i in range(1, self.threads)]
        work(0, edges[1], 0)
        for other in others:
            other.result()

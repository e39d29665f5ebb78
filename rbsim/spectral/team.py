"""A team of threads that shares columns or rows; loops and transforms release the interpreter."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise

import numpy as np

#: Borders of shares are multiples of this, the columns of one vector instruction: then each column is
#: computed in the same way whatever the number of threads.
GRANULE = 8

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
        """Split `items` about evenly among the threads and wait until all have done their share."""
        if self._pool is None:
            work(0, items, 0)
            return
        inner = np.rint(np.linspace(0, items, self.threads + 1)[1:-1] / GRANULE).astype(int) * GRANULE
        edges = [0, *np.minimum(inner, items).tolist(), items]
        shares = [(a, b, member) for member, (a, b) in enumerate(pairwise(edges)) if a < b]
        others = [self._pool.submit(work, *share) for share in shares[1:]]
        work(*shares[0])
        for other in others:
            other.result()

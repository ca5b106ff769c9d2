"""A field cut into blocks of rows that fit the cache, shared among threads."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

#: Points of a block: psi, a phase and a scratch of this size stay in cache.
BLOCK_POINTS = 1 << 14


class Blocks:
    """The rows of axis 0 in blocks; runs a function over all of them.

    Which thread works on which rows never changes what a row receives, so
    results do not depend on the number of threads.
    """

    def __init__(self, shape: tuple[int, ...], threads: int = 1) -> None:
        row = 1
        for points in shape[1:]:
            row *= points
        step = max(1, BLOCK_POINTS // row)
        self.slices = tuple(
            slice(first, min(first + step, shape[0])) for first in range(0, shape[0], step)
        )
        self.largest = max(s.stop - s.start for s in self.slices)
        share = -(-len(self.slices) // threads)
        self._shares = [self.slices[i : i + share] for i in range(0, len(self.slices), share)]
        self._pool = ThreadPoolExecutor(len(self._shares)) if len(self._shares) > 1 else None

    @property
    def single(self) -> bool:
        """Whether the whole field is one block."""
        return len(self.slices) == 1

    def each(self, work: Callable[[slice], None]) -> None:
        """Call ``work(rows)`` for every block; returns when all are done."""
        if self._pool is None:
            for rows in self.slices:
                work(rows)
            return

        def work_share(share: tuple[slice, ...]) -> None:
            for rows in share:
                work(rows)

        for _ in self._pool.map(work_share, self._shares):
            pass

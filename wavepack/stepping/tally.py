r"""What the absorbing layers remove, cell by cell.

A layer multiplies the state by a real factor d <= 1 and so removes exactly
:math:`(1-d^2)|\psi|^2\,dV` from each cell. The factor is applied once at the
open and closed ends of a stretch of steps and twice, fused, between steps:
the tally keeps the two sums of :math:`|\psi|^2` apart and weighs them when asked.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.grid import Grid

#: Copies of the layers kept before they are squared and added at once.
BUFFER_POINTS = 1 << 16
BUFFER_COPIES = 64


@dataclass(frozen=True)
class Patch:
    """A box of absorbing cells and the probability removed from each."""

    box: tuple[slice, ...]
    removed: RealArray


class Tally:
    """Books of what damping removes from a field.

    Parameters
    ----------
    psi : complex array
        The field that is damped; read, never written.
    grid : Grid
        Its space.
    factors : tuple of real vectors
        The damping d of one application, one vector an axis, multiplied.
    buffered : bool
        Copy small layers and square them many at a time (for small fields).
    """

    def __init__(
        self, psi: ComplexArray, grid: Grid, factors: tuple[RealArray, ...], *, buffered: bool
    ) -> None:
        self._psi = psi
        self._grid = grid
        self._factors = factors
        self.boxes = _absorbing_boxes(factors)
        shapes = [tuple(s.stop - s.start for s in box) for box in self.boxes]
        self._once = [np.zeros(shape) for shape in shapes]
        self._twice = [np.zeros(shape) for shape in shapes]
        cells = sum(int(np.prod(shape)) for shape in shapes)
        # Kept where they are small and asked for often.
        self._losses = [self._loss(box) for box in self.boxes] if buffered else []
        self._buffers: list[ComplexArray] = []
        self._filled = 0
        self._views = [psi[box] for box in self.boxes]
        if buffered and cells:
            copies = max(1, min(BUFFER_COPIES, BUFFER_POINTS // cells))
            self._buffers = [np.empty((copies, *s), dtype=np.complex128) for s in shapes]

    def add(self, rows: slice, *, twice: bool) -> None:
        """Book one damping of a block of rows that is about to happen."""
        if self._buffers and twice:
            self._keep()
            return
        sums = self._twice if twice else self._once
        for box, total in zip(self.boxes, sums, strict=True):
            first, last = max(box[0].start, rows.start), min(box[0].stop, rows.stop)
            if first < last:
                part = self._psi[(slice(first, last), *box[1:])]
                inside = total[first - box[0].start : last - box[0].start]
                inside += np.square(part.real)
                inside += np.square(part.imag)

    def patches(self) -> list[Patch]:
        """Return the probability removed so far, box by box of absorbing cells.

        Nothing is changed: when sums are made must depend on steps alone.
        """
        losses = self._losses or [self._loss(box) for box in self.boxes]
        found = []
        for i, (box, (loss, fused)) in enumerate(zip(self.boxes, losses, strict=True)):
            twice = self._twice[i] + self._copied(i) if self._filled else self._twice[i]
            found.append(Patch(box, self._grid.cell * (self._once[i] * loss + twice * fused)))
        return found

    def save(self) -> dict[str, np.ndarray]:
        """Return all sums, and what is only copied yet, to go on from later."""
        saved: dict[str, np.ndarray] = {}
        for i in range(len(self.boxes)):
            saved[f"once/{i}"] = self._once[i].copy()
            saved[f"twice/{i}"] = self._twice[i].copy()
            if self._buffers:
                saved[f"copies/{i}"] = self._buffers[i][: self._filled].copy()
        return saved

    def restore(self, saved: Mapping[str, np.ndarray]) -> None:
        """Take up what was saved before."""
        for i in range(len(self.boxes)):
            self._once[i][...] = saved[f"once/{i}"]
            self._twice[i][...] = saved[f"twice/{i}"]
            if self._buffers:
                self._filled = len(saved[f"copies/{i}"])
                self._buffers[i][: self._filled] = saved[f"copies/{i}"]

    def _copied(self, i: int) -> RealArray:
        """Return the sum of squares of what is copied from one box."""
        parts = self._buffers[i][: self._filled].view(np.float64).reshape(self._filled, -1)
        squares = np.einsum("ij,ij->j", parts, parts)
        sums: RealArray = squares.reshape(-1, 2).sum(axis=1)
        return sums.reshape(self._twice[i].shape)

    def _loss(self, box: tuple[slice, ...]) -> tuple[RealArray, RealArray]:
        """Return the share that one damping removes from each cell of a box, and a fused one."""
        keep = np.ones((1,) * len(box))
        for i, factor in enumerate(self._factors):
            keep = keep * self._grid.along(factor[box[i]] ** 2, i)
        return 1 - keep, 1 - keep**2

    def _keep(self) -> None:
        for view, buffer in zip(self._views, self._buffers, strict=True):
            buffer[self._filled] = view
        self._filled += 1
        if self._filled == len(self._buffers[0]):
            for i, total in enumerate(self._twice):
                total += self._copied(i)
            self._filled = 0


def _absorbing_boxes(factors: tuple[RealArray, ...]) -> list[tuple[slice, ...]]:
    """Cut the absorbing cells into boxes that do not overlap.

    Layers of the first axis take whole slabs, those of the next only what is
    left between them, and so on.
    """
    boxes: list[tuple[slice, ...]] = []
    inner: list[slice] = []
    for i, factor in enumerate(factors):
        whole = [slice(0, f.size) for f in factors[i + 1 :]]
        absorbing = factor < 1
        free = np.flatnonzero(~absorbing)
        edges = [0, *(np.flatnonzero(np.diff(absorbing)) + 1), factor.size]
        boxes += [
            (*inner, slice(int(first), int(last)), *whole)
            for first, last in pairwise(edges)
            if absorbing[first]
        ]
        if not free.size:
            return boxes
        inner.append(slice(int(free[0]), int(free[-1]) + 1))
    return boxes

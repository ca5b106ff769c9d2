"""Probability in named parts of space, on the grid and in the absorber's books."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Final, Literal, Protocol, TypeAlias

import numpy as np

from wavepack.arrays import RealArray
from wavepack.grid.grid import Grid

Role: TypeAlias = Literal["transmitted", "reflected", "none"]

#: The parts whose sum is the balance: each is added up on its own.
PARTS: Final = ("transmitted", "reflected", "neither")

#: Weights of fields up to this size are kept; larger ones are made box by box.
KEPT_POINTS: Final = 1 << 16


class Cells(Protocol):
    """A box of cells and a probability in each."""

    @property
    def box(self) -> tuple[slice, ...]:
        """Where they are."""

    @property
    def removed(self) -> RealArray:
        """The probability, shape of the box."""


@dataclass(frozen=True)
class Region:
    """A named part of space.

    A cell counts by the part of it that the region covers: ``windows`` holds
    that share along each axis, to be multiplied, or ``counts`` the number of
    covered samples of each cell out of ``samples``.
    """

    name: str
    role: Role
    windows: tuple[RealArray, ...] = ()
    counts: np.ndarray | None = field(default=None, repr=False)
    samples: int = 1

    def weights(self, box: tuple[slice, ...]) -> RealArray:
        """Return the covered share of each cell of a box."""
        if self.counts is not None:
            return np.asarray(self.counts[box] / self.samples)
        product = np.ones([1] * len(box))
        for i, window in enumerate(self.windows):
            shape = [-1 if j == i else 1 for j in range(len(box))]
            product = product * window[box[i]].reshape(shape)
        return product


class RegionBook:
    """All regions of a run; sums any probability per cell into them."""

    def __init__(self, grid: Grid, regions: Sequence[Region]) -> None:
        self.grid = grid
        self.regions = tuple(regions)
        self.names = tuple(region.name for region in regions)
        self._axis = _only_axis(self.regions, grid)
        self._kept: dict[tuple[tuple[int, int], ...], RealArray] = {}

    def overlap(self) -> float:
        """Return the largest total share of a cell that regions with a role claim."""
        largest = 0.0
        for first in range(0, self.grid.shape[0], 256):
            box = (
                slice(first, min(first + 256, self.grid.shape[0])),
                *(slice(0, n) for n in self.grid.shape[1:]),
            )
            claimed = self._part(box, "transmitted") + self._part(box, "reflected")
            largest = max(largest, float(np.max(claimed)))
        return largest

    def sums(self, box: tuple[slice, ...], values: RealArray) -> RealArray:
        """Return the sums of values over a box: the three parts, then each region."""
        if self._axis is not None:
            others = tuple(i for i in range(values.ndim) if i != self._axis)
            values = values.sum(axis=others)
            # Along the one axis that limits the regions; any row stands for all.
            box = tuple(s if i == self._axis else slice(0, 1) for i, s in enumerate(box))
        key = _key(box)
        if key in self._kept:
            return self._kept[key] @ values.ravel()
        weights = self._weights(box)
        if self._axis is None and self.grid.size > KEPT_POINTS:
            return np.array([np.sum(w * values) for w in weights])
        rows = [np.broadcast_to(w, [s.stop - s.start for s in box]).ravel() for w in weights]
        self._kept[key] = np.array(rows)
        return self._kept[key] @ values.ravel()

    def of_patches(self, patches: Sequence[Cells]) -> RealArray:
        """Return the same sums over boxes of removed probability."""
        total = np.zeros(len(PARTS) + len(self.regions))
        for patch in patches:
            total += self.sums(patch.box, patch.removed)
        return total

    def _weights(self, box: tuple[slice, ...]) -> tuple[RealArray, ...]:
        transmitted = self._part(box, "transmitted")
        reflected = self._part(box, "reflected")
        neither = 1.0 - transmitted - reflected
        own = (region.weights(box) for region in self.regions)
        return (transmitted, reflected, neither, *own)

    def _part(self, box: tuple[slice, ...], role: Role) -> RealArray:
        total = np.zeros([1] * len(box))
        for region in self.regions:
            if region.role == role:
                total = total + region.weights(box)
        return total


def _only_axis(regions: tuple[Region, ...], grid: Grid) -> int | None:
    """Return the one axis along which all regions are limited, if there is just one."""
    if any(region.counts is not None for region in regions):
        return None
    limiting = {
        i for region in regions for i, window in enumerate(region.windows) if np.any(window != 1)
    }
    if len(limiting) > 1 or grid.ndim == 1:
        return None
    return limiting.pop() if limiting else 0


def _key(box: tuple[slice, ...]) -> tuple[tuple[int, int], ...]:
    return tuple((int(s.start), int(s.stop)) for s in box)

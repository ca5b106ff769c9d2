"""A lattice finer than the grid: many samples a cell."""

from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.grid.grid import Grid

#: Samples along one axis of a cell, by number of axes.
SUBDIVISIONS: Final = {1: 64, 2: 8}

#: Samples evaluated at once, so that memory stays small.
BLOCK_SAMPLES: Final = 1 << 19


def lattice(grid: Grid, rows: slice, count: int, reach: int) -> tuple[RealArray, ...]:
    """Open mesh of the samples of those rows' cells and ``reach`` more on each side."""
    lines = []
    for i, axis in enumerate(grid.axes):
        first, last = (rows.start, rows.stop) if i == 0 else (0, axis.points)
        cells = np.arange(first - reach, last + reach)[:, None]
        places = (cells + (np.arange(count) + 0.5) / count - 0.5).ravel()
        lines.append(axis.coordinates[0] + axis.spacing * places)
    return tuple(np.ix_(*lines))


def wrapped(mesh: tuple[RealArray, ...], grid: Grid) -> tuple[RealArray, ...]:
    """Bring positions beyond the ends of a periodic axis back into it."""
    return tuple(
        axis.start + (x - axis.start) % axis.length if "periodic" in axis.ends else x
        for x, axis in zip(mesh, grid.axes, strict=True)
    )


def size(mesh: tuple[RealArray, ...]) -> tuple[int, ...]:
    """Return the shape to which positions along each axis broadcast."""
    return np.broadcast_shapes(*(x.shape for x in mesh))


def blocks(grid: Grid, rows: slice, points: int) -> list[slice]:
    """Cut rows of axis 0 into blocks of about that many points."""
    first, last, _ = rows.indices(grid.shape[0])
    step = max(1, points * grid.shape[0] // grid.size)
    return [slice(a, min(a + step, last)) for a in range(first, last, step)]

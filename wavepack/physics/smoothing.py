"""Functions that may jump anywhere, smoothed as `wavepack.physics.edges` says."""

from collections.abc import Callable
from typing import Final, TypeAlias

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray
from wavepack.grid.grid import Grid
from wavepack.physics.edges import density
from wavepack.physics.lattice import BLOCK_SAMPLES, SUBDIVISIONS, blocks, lattice, size, wrapped

#: A function of positions along each axis; what it returns broadcasts over them.
Function: TypeAlias = Callable[[tuple[RealArray, ...]], RealArray]

#: Reach of the kernel in spacings; beyond it is below 1e-15.
REACH: Final = 9

#: Fewest rows to smooth at once: each block needs `REACH` more on either side.
BLOCK_ROWS: Final = 128

#: Samples beyond a line's ends that tell a jump from a slope.
MARGIN: Final = 2


def smoothed(
    function: Function, grid: Grid, rows: slice = slice(None), slope: int | None = None
) -> RealArray:
    r"""Return a function that may jump, convolved with the kernel K along every axis.

    .. math:: V_s(x) = \int K(u)\,V(x + u\Delta)\,du

    by sums over a lattice of 64 samples a cell (8 x 8 in two dimensions). A
    sample next to a jump stands for as many finer ones around it, so a jump is
    placed to 1/4,000 of a spacing (1/64 in two dimensions). A periodic axis
    wraps; otherwise the function is evaluated beyond the ends too, or, where it
    is not finite there, taken from the nearest point.

    Parameters
    ----------
    function : Function
        V at an open mesh of positions, or at arrays of equal shape.
    grid : Grid
        Where the result is wanted.
    rows : slice
        Rows of axis 0.
    slope : int or None
        Axis along which to return the slope of the convolution instead.

    Returns
    -------
    real array
        Shape of those rows.
    """
    count = SUBDIVISIONS[grid.ndim]
    weights = [_weights(count, axis.spacing, slope=i == slope) for i, axis in enumerate(grid.axes)]
    points = max(BLOCK_ROWS * grid.size // grid.shape[0], BLOCK_SAMPLES // count**grid.ndim)
    extended = _extended(function, grid)
    return np.concatenate(
        [_block(extended, grid, block, weights) for block in blocks(grid, rows, points)]
    )


def _block(function: Function, grid: Grid, rows: slice, weights: list[RealArray]) -> RealArray:
    """Convolve one block of rows: along y strip by strip, then along x."""
    count = SUBDIVISIONS[grid.ndim]
    cells = rows.stop - rows.start + 2 * REACH
    if grid.ndim == 1:
        mesh = lattice(grid, rows, count, REACH)
        samples = _fine_samples(function, mesh, (grid.axes[0].spacing / count,))
        return _gather(samples.reshape(cells, count, 1), weights[0])[:, 0]
    x, y = lattice(grid, rows, count, REACH)
    spacing = tuple(axis.spacing / count for axis in grid.axes)
    columns = y.size // count
    strip = max(1, BLOCK_SAMPLES // y.size)
    lines = np.empty((x.shape[0], grid.shape[1]))
    for first in range(0, x.shape[0], strip):
        part = slice(first, min(first + strip, x.shape[0]))
        samples = _fine_samples(function, (x[part], y), spacing)
        along_y = np.moveaxis(samples.reshape(-1, columns, count), 0, 2)
        lines[part] = _gather(along_y, weights[1]).T
    return _gather(lines.reshape(cells, count, -1), weights[0])


def _weights(count: int, spacing: float, *, slope: bool) -> RealArray:
    """Kernel at the samples of each cell in reach, shape (cells, count)."""
    cells = np.arange(-REACH, REACH + 1)[:, None]
    u = cells + (np.arange(count) + 0.5) / count - 0.5
    if slope:
        return density(u) * (5 * u - u**3) / (2 * count * spacing)
    return density(u) * (3 - u**2) / (2 * count)


def _gather(samples: RealArray, weights: RealArray) -> RealArray:
    """Sum samples (cells + 2 reach, count, lines) with weights to (cells, lines)."""
    products = weights @ samples
    cells = len(samples) - 2 * REACH
    total = np.zeros((cells, samples.shape[2]))
    for offset in range(2 * REACH + 1):
        total += products[offset : offset + cells, offset]
    return total


def _fine_samples(
    function: Function, mesh: tuple[RealArray, ...], spacing: tuple[float, ...]
) -> RealArray:
    """Return samples on a mesh; those next to a jump are averages over their own cell."""
    padded = tuple(
        _padded(x, axis, step) for axis, (x, step) in enumerate(zip(mesh, spacing, strict=True))
    )
    samples = np.array(np.broadcast_to(function(padded), size(padded)), dtype=float)
    beside = np.zeros(samples.shape, dtype=bool)
    for axis in range(samples.ndim):
        _mark_jumps(np.moveaxis(samples, axis, 0), np.moveaxis(beside, axis, 0))
    places = np.argwhere(beside)
    count = SUBDIVISIONS[len(mesh)]
    offsets = np.meshgrid(*((np.arange(count) + 0.5) / count - 0.5 for _ in mesh), indexing="ij")
    for first in range(0, len(places), BLOCK_SAMPLES // count ** len(mesh)):
        chosen = places[first : first + BLOCK_SAMPLES // count ** len(mesh)].T
        points = tuple(
            x.ravel()[index][:, None] + step * offset.ravel()
            for x, index, step, offset in zip(padded, chosen, spacing, offsets, strict=True)
        )
        samples[tuple(chosen)] = np.broadcast_to(function(points), points[0].shape).mean(axis=1)
    return samples[(slice(MARGIN, -MARGIN),) * samples.ndim]


def _padded(x: RealArray, axis: int, step: float) -> RealArray:
    """Extend a line of samples by the margin that finding jumps needs."""
    steps = np.arange(1, MARGIN + 1) * step
    line = x.ravel()
    longer = np.concatenate((line[0] - steps[::-1], line, line[-1] + steps))
    return longer.reshape([-1 if i == axis else 1 for i in range(x.ndim)])


def _mark_jumps(samples: RealArray, beside: npt.NDArray[np.bool_]) -> None:
    """Mark both samples beside each jump along axis 0.

    A jump is a difference far above its neighbours, which no smooth function
    has on so fine a lattice; a millionth of the value is too little to matter.
    """
    change = np.abs(np.diff(samples, axis=0))
    jump = np.zeros(change.shape, dtype=bool)
    size_here = np.abs(samples[1:-2]) + np.abs(samples[2:-1])
    jump[1:-1] = change[1:-1] > 4 * (change[:-2] + change[2:]) + 1e-6 * size_here
    beside[:-1] |= jump
    beside[1:] |= jump


def _extended(function: Function, grid: Grid) -> Function:
    """Make a function defined everywhere, as `smoothed` says."""

    def everywhere(mesh: tuple[RealArray, ...]) -> RealArray:
        with np.errstate(all="ignore"):
            values = np.asarray(function(wrapped(mesh, grid)), dtype=float)
            if np.isfinite(values).all():
                return values
            nearest = tuple(
                np.clip(x, axis.coordinates[0], axis.coordinates[-1])
                for x, axis in zip(mesh, grid.axes, strict=True)
            )
            return np.where(np.isfinite(values), values, function(nearest))

    return everywhere

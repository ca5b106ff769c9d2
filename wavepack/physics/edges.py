r"""Sharp edges on a grid, and the covered part of a cell.

A potential that jumps between two points cannot be told from one that jumps a
little later. So a jump is convolved with a kernel one spacing s wide whose
second moment vanishes,

.. math::
    K(z) = \varphi(z)\,\frac{3 - z^2}{2}, \qquad
    \int_{-\infty}^z K = \Phi(z) + \frac z2\,\varphi(z), \qquad z = (x - x_e)/s

with the normal density and distribution :math:`\varphi`, :math:`\Phi`, the
fourth-order Gaussian kernel of [WandSchucany1990]_. Polynomials up to the third
degree pass unchanged. The kernel's spectrum :math:`(1 + q^2/2)\,e^{-q^2/2}` is
6e-8 at :math:`q = ks = 2\pi`, where the grid's first alias lies: so far do sums
over points not depend on where the jump falls between them.
"""

import math
from typing import TYPE_CHECKING, Any, Final, Literal

import numpy as np
import numpy.typing as npt

from wavepack.arrays import Mask, RealArray
from wavepack.fields import Span
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.lattice import BLOCK_SAMPLES, SUBDIVISIONS, blocks, lattice, size, wrapped

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression

#: Covered shares are kept as so many parts of a cell.
PARTS: Final = 1 << 31

#: Lines along each axis of a cell of a plane, and samples of each, where it is cut.
LINES: Final = 16

#: A change between two samples is found to this power of a half.
HALVINGS: Final = 30


def density(z: npt.ArrayLike) -> RealArray:
    r"""Return the normal density :math:`\varphi(z) = e^{-z^2/2}/\sqrt{2\pi}`."""
    return np.asarray(np.exp(-np.square(np.asarray(z, dtype=float)) / 2) / math.sqrt(2 * math.pi))


def profile(z: npt.ArrayLike) -> RealArray:
    r"""Return the smoothed unit step :math:`\Phi(z) + \tfrac z2\varphi(z)`.

    Infinite z give 0 and 1.
    """
    from scipy.special import ndtr  # noqa: PLC0415 - slow to import, and errors must be quick

    position = np.clip(np.asarray(z, dtype=float), -40.0, 40.0)
    return np.asarray(ndtr(position) + position / 2 * density(position))


def corner(z: npt.ArrayLike) -> RealArray:
    r"""Return the smoothed corner :math:`z\,\Phi(z) + \tfrac12\varphi(z)`.

    It is the integral of `profile`: 0 far to the left, z far to the right.
    """
    from scipy.special import ndtr  # noqa: PLC0415 - slow to import, and errors must be quick

    position = np.asarray(z, dtype=float)
    return np.asarray(position * ndtr(position) + density(position) / 2)


def window(span: Span, x: RealArray, spacing: float) -> RealArray:
    """Return 1 inside a span and 0 outside, both edges smoothed; shape of x."""
    inside = np.ones_like(x)
    if math.isfinite(span.lower):
        inside = profile((x - span.lower) / spacing)
    if math.isfinite(span.upper):
        inside = inside - profile((x - span.upper) / spacing)
    return inside


def clipped(x: RealArray, span: Span, spacing: float) -> RealArray:
    """Return x inside a span and its nearer end outside, both corners smoothed [length]."""
    value = x
    if math.isfinite(span.lower):
        value = span.lower + spacing * corner((x - span.lower) / spacing)
    if math.isfinite(span.upper):
        value = value - spacing * corner((x - span.upper) / spacing)
    return value


def covered_by_span(span: Span, axis: Axis) -> RealArray:
    """Return the part of each cell, one spacing wide, that a span covers; exact.

    The first cell of a periodic axis has half of itself before the other end. A
    span that reaches an end that absorbs goes on beyond it.
    """
    x, half = axis.coordinates, axis.spacing / 2
    lower, upper = span.lower, span.upper
    if axis.ends[0] != "periodic":
        lower = -math.inf if lower <= axis.start else lower
        upper = math.inf if upper >= axis.stop else upper
        covered = np.minimum(x + half, upper) - np.maximum(x - half, lower)
        return np.asarray(np.clip(covered / axis.spacing, 0.0, 1.0))
    lower, upper = max(lower, axis.start), min(upper, axis.stop)
    covered = np.minimum(x + half, upper) - np.maximum(x - half, lower)
    covered = np.clip(covered, 0.0, axis.spacing)
    covered[0] += max(0.0, upper - max(lower, axis.stop - half))
    return np.asarray(np.clip(covered / axis.spacing, 0.0, 1.0))


def covered_fraction(expression: "Expression", grid: Grid) -> tuple[npt.NDArray[np.uint32], int]:
    """Return how many parts of each cell an expression covers, and out of how many; grid's shape.

    On one axis the places where it changes are found by halving between samples,
    64 a cell. On two axes the cells it cuts, found from 8 x 8 samples each, are
    measured in the same way along `LINES` lines of the axis that it crosses more
    often: a straight edge through a cell is exact but for its ends, an edge
    along an axis exact.
    """
    test = _Test(expression, grid)
    if grid.ndim == 1:
        starts = grid.axes[0].coordinates - grid.axes[0].spacing / 2
        per = BLOCK_SAMPLES // SUBDIVISIONS[1]
        firsts = range(0, starts.size, per)
        shares = np.concatenate(
            [test.lengths((starts[i : i + per],), 0, SUBDIVISIONS[1])[0] for i in firsts]
        )
        return _parts(shares), PARTS
    coarse = _sampled(test, grid)
    covered = _parts(coarse / SUBDIVISIONS[2] ** 2)
    cut = np.argwhere(_cut(coarse, grid))
    per = BLOCK_SAMPLES // (LINES * LINES)
    for cells in (cut[i : i + per] for i in range(0, len(cut), per)):
        covered[tuple(cells.T)] = _parts(_measured(test, grid, cells))
    return covered, PARTS


class _Test:
    """Tells whether positions, also beyond a periodic axis, are inside an expression."""

    def __init__(self, expression: "Expression", grid: Grid) -> None:
        self._expression = expression
        self._grid = grid

    def inside(self, mesh: tuple[RealArray, ...]) -> Mask:
        """Return it for positions that broadcast to one shape."""
        places = dict(zip(self._grid.names, wrapped(mesh, self._grid), strict=True))
        with np.errstate(all="ignore"):
            value = np.nan_to_num(np.asarray(self._expression.evaluate(**places), dtype=float))
        return np.broadcast_to(value != 0, size(mesh))

    def lengths(
        self, starts: tuple[RealArray, ...], axis: int, count: int
    ) -> tuple[RealArray, npt.NDArray[np.signedinteger[Any]]]:
        """Return for lines one cell long the covered share, and how often it changes.

        ``starts`` are the lines' first points, vectors; each has ``count`` samples
        and its two ends.
        """
        u = np.concatenate(([0.0], (np.arange(count) + 0.5) / count, [1.0]))
        found = self._on_lines(tuple(start[:, None] for start in starts), axis, u)
        line, before = np.nonzero(found[:, :-1] != found[:, 1:])
        first = found[line, before]
        own = tuple(start[line] for start in starts)
        lower, upper = u[before], u[before + 1]
        for _ in range(HALVINGS):
            middle = (lower + upper) / 2
            same = self._on_lines(own, axis, middle) == first
            lower, upper = np.where(same, middle, lower), np.where(same, upper, middle)
        # What an interval counts as its first end does, but for what lies behind the change.
        behind = (u[before + 1] - (lower + upper) / 2) * np.where(first, -1.0, 1.0)
        lines = len(found)
        shares = found[:, :-1] @ np.diff(u) + np.bincount(line, behind, lines)
        return np.asarray(shares, dtype=float), np.bincount(line, minlength=lines)

    def _on_lines(self, starts: tuple[RealArray, ...], axis: int, u: RealArray) -> Mask:
        along = starts[axis] + self._grid.axes[axis].spacing * u
        return self.inside(tuple(along if i == axis else x for i, x in enumerate(starts)))


def _sampled(test: _Test, grid: Grid) -> npt.NDArray[np.uint8]:
    """Return how many samples of each cell of a plane are inside, out of 8 x 8."""
    count = SUBDIVISIONS[2]
    found = np.zeros(grid.shape, dtype=np.uint8)
    for rows in blocks(grid, slice(None), BLOCK_SAMPLES // count**2):
        # Reach 0: the samples of the cells themselves.
        mesh = lattice(grid, rows, count, reach=0)
        x, y = size(mesh)
        cells = test.inside(mesh).reshape(x // count, count, y // count, count)
        found[rows] = cells.sum(axis=(1, 3), dtype=np.uint8)
    return found


def _cut(counts: npt.NDArray[np.uint8], grid: Grid) -> Mask:
    """Mark cells partly covered, and those beside a cell covered otherwise.

    An edge may run between the outer samples of a cell and its border.
    """
    largest, smallest = counts, counts
    for i, axis in enumerate(grid.axes):
        mode: Literal["wrap", "edge"] = "wrap" if "periodic" in axis.ends else "edge"
        margin = [(1, 1) if j == i else (0, 0) for j in range(grid.ndim)]
        n = grid.shape[i]
        high, low = np.pad(largest, margin, mode=mode), np.pad(smallest, margin, mode=mode)
        parts = [np.arange(first, first + n) for first in range(3)]
        largest = np.max([high.take(part, axis=i) for part in parts], axis=0)
        smallest = np.min([low.take(part, axis=i) for part in parts], axis=0)
    return np.asarray((smallest < SUBDIVISIONS[2] ** 2) & (largest > 0))


def _measured(test: _Test, grid: Grid, cells: npt.NDArray[np.int64]) -> RealArray:
    """Return the covered share of cells of a plane, given by their indices."""
    corners = tuple(
        axis.coordinates[index] - axis.spacing / 2
        for axis, index in zip(grid.axes, cells.T, strict=True)
    )
    offsets = (np.arange(LINES) + 0.5) / LINES
    found = []
    for axis in range(2):
        starts = tuple(
            (corner[:, None] + (0.0 if i == axis else 1.0) * line.spacing * offsets).ravel()
            for i, (corner, line) in enumerate(zip(corners, grid.axes, strict=True))
        )
        shares, changes = test.lengths(starts, axis, LINES)
        found.append((shares.reshape(-1, LINES).mean(1), changes.reshape(-1, LINES).sum(1)))
    (along_x, crossed_x), (along_y, crossed_y) = found
    return np.asarray(np.where(crossed_x >= crossed_y, along_x, along_y))


def _parts(shares: RealArray) -> npt.NDArray[np.uint32]:
    """Return shares as whole numbers of parts; those of a set and the rest add up to all."""
    return np.rint(np.clip(shares, 0.0, 1.0) * PARTS).astype(np.uint32)

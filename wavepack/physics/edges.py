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
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray
from wavepack.fields import Span
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.lattice import BLOCK_SAMPLES, SUBDIVISIONS, blocks, lattice, size, wrapped

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression


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
    """Return the part of each cell, one spacing wide, that a span covers; exact."""
    x, half = axis.coordinates, axis.spacing / 2
    covered = np.minimum(x + half, span.upper) - np.maximum(x - half, span.lower)
    return np.asarray(np.clip(covered / axis.spacing, 0.0, 1.0))


def covered_fraction(expression: "Expression", grid: Grid) -> tuple[npt.NDArray[np.uint8], int]:
    """Return how many samples of each cell an expression covers, and out of how many.

    64 samples a cell, evenly spaced; shape of the grid.
    """
    count = SUBDIVISIONS[grid.ndim]
    inside = np.zeros(grid.shape, dtype=np.uint8)
    for rows in blocks(grid, slice(None), BLOCK_SAMPLES // count**grid.ndim):
        # Reach 0: the samples of the cells themselves.
        mesh = lattice(grid, rows, count, reach=0)
        with np.errstate(all="ignore"):
            value = expression.evaluate(**dict(zip(grid.names, wrapped(mesh, grid), strict=True)))
        true = np.broadcast_to(np.nan_to_num(np.asarray(value, dtype=float)) != 0, size(mesh))
        cells = [n for samples in size(mesh) for n in (samples // count, count)]
        within = tuple(range(1, 2 * grid.ndim, 2))
        inside[rows] = true.reshape(cells).sum(axis=within, dtype=np.uint8)
    return inside, count**grid.ndim

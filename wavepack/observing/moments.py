r"""Norm, means and spreads of a state, gathered block by block.

Position and energy come from one pass over the density, momentum from
transforms line by line, so that no temporary of the whole grid is made.
"""

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid import spectral
from wavepack.grid.axis import Axis
from wavepack.grid.blocks import Blocks
from wavepack.grid.grid import Grid
from wavepack.observing.regions import PARTS, RegionBook
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import StaggeredKinetic

#: Lines are transformed in groups of about this many points.
GROUP_POINTS = 1 << 17

#: Below this norm nothing is left to average over.
LEAST_NORM = 1e-9


@dataclass(frozen=True)
class Moments:
    """Averages over what is left of the state, in run units.

    ``parts`` and ``regions`` are probabilities on the grid; everything else
    but ``norm`` is divided by the norm and NaN below `LEAST_NORM`. Momentum is
    in hbar per length. ``beyond`` is the probability of a kinetic energy along
    some axis above the band asked for.
    """

    norm: float
    potential: float
    kinetic: float
    position: tuple[float, ...]
    spread: tuple[float, ...]
    momentum: tuple[float, ...]
    momentum_spread: tuple[float, ...]
    parts: RealArray
    regions: RealArray
    beyond: float = 0.0

    @property
    def energy(self) -> float:
        """Kinetic and potential energy, the layers apart."""
        return self.kinetic + self.potential


def moments(
    psi: ComplexArray,
    time: float,
    hamiltonian: Hamiltonian,
    book: RegionBook,
    *,
    band: float = float("inf"),
) -> Moments:
    """Gather the moments of a state at a time; ``band`` is a kinetic energy [energy]."""
    grid = hamiltonian.grid
    sums, marginals, potential = _densities(psi, time, hamiltonian, book)
    norm = float(marginals[0].sum())
    if norm < LEAST_NORM:
        nothing = (float("nan"),) * grid.ndim
        return Moments(
            norm,
            float("nan"),
            float("nan"),
            nothing,
            nothing,
            nothing,
            nothing,
            sums[: len(PARTS)],
            sums[len(PARTS) :],
        )
    position, spread = zip(
        *(_mean_and_spread(a.coordinates, m) for a, m in zip(grid.axes, marginals, strict=True)),
        strict=True,
    )
    limit = math.sqrt(band / hamiltonian.particle.stiffness)
    momentum, momentum_spread, squares, beyond = _momenta(psi, grid, norm, limit)
    if isinstance(hamiltonian.kinetic, StaggeredKinetic):
        kinetic = hamiltonian.kinetic.energy(psi) / norm
    else:
        kinetic = hamiltonian.particle.stiffness * sum(squares)
    return Moments(
        norm,
        potential / norm,
        kinetic,
        position,
        spread,
        momentum,
        momentum_spread,
        sums[: len(PARTS)],
        sums[len(PARTS) :],
        beyond,
    )


def _densities(
    psi: ComplexArray, time: float, hamiltonian: Hamiltonian, book: RegionBook
) -> tuple[RealArray, list[RealArray], float]:
    """Return the regions' sums, the density along each axis, and the potential energy."""
    grid = hamiltonian.grid
    landscape = hamiltonian.landscape
    marginals = [np.zeros(n) for n in grid.shape]
    sums = np.zeros(len(PARTS) + len(book.regions))
    potential = 0.0
    whole = tuple(slice(0, n) for n in grid.shape[1:])
    for rows in Blocks(grid.shape).slices:
        density = np.square(psi[rows].real)
        density += np.square(psi[rows].imag)
        density *= grid.cell
        sums += book.sums((rows, *whole), density)
        potential += float(np.vdot(landscape.static[rows], density))
        for axis in range(grid.ndim):
            others = tuple(i for i in range(grid.ndim) if i != axis)
            along = density.sum(axis=others)
            if axis == 0:
                marginals[axis][rows] = along
            else:
                marginals[axis] += along
        for part in landscape.driven:
            first = max(part.box[0].start, rows.start)
            last = min(part.box[0].stop, rows.stop)
            if first < last:
                own = part.values[first - part.box[0].start : last - part.box[0].start]
                inside = density[(slice(first - rows.start, last - rows.start), *part.box[1:])]
                potential += part.drive.factor(time) * float(np.sum(own * inside))
    return sums, marginals, potential


def _mean_and_spread(values: RealArray, weights: RealArray) -> tuple[float, float]:
    total = weights.sum()
    mean = float(values @ weights / total)
    variance = float(np.square(values - mean) @ weights / total)
    return mean, max(variance, 0.0) ** 0.5


def _momenta(
    psi: ComplexArray, grid: Grid, norm: float, limit: float
) -> tuple[tuple[float, ...], tuple[float, ...], tuple[float, ...], float]:
    """Return mean, spread and mean square of the momentum along each axis.

    Last, the largest probability, over the axes, of |k| above a limit.
    """
    means, spreads, squares, beyond = [], [], [], 0.0
    whole = _marginals(psi, grid) if grid.ndim > 1 and _all_fourier(grid) else None
    for i, axis in enumerate(grid.axes):
        weights = _momentum_weights(axis, limit)
        sums, first = np.zeros(3), 0.0
        if whole is not None:
            sums += weights @ whole[i]
        for lines in _lines(psi, grid, i) if whole is None else ():
            coefficients = spectral.forward(lines, axis)
            density = np.square(coefficients.real)
            density += np.square(coefficients.imag)
            along = density if density.ndim == 1 else density.sum(axis=0)
            sums += weights @ along
            if axis.basis == "sine":
                first += float(np.vdot(lines, spectral.slope(lines, axis)).imag)
        mean = (first or float(sums[0])) * grid.cell / norm
        square = float(sums[1]) * grid.cell / norm
        means.append(mean)
        squares.append(square)
        spreads.append(max(square - mean**2, 0.0) ** 0.5)
        beyond = max(beyond, float(sums[2]) * grid.cell)
    return tuple(means), tuple(spreads), tuple(squares), beyond


def _all_fourier(grid: Grid) -> bool:
    return all(axis.basis == "fourier" for axis in grid.axes)


def _marginals(psi: ComplexArray, grid: Grid) -> list[RealArray]:
    """Return the momentum density along each axis from one transform over all of them."""
    coefficients = spectral.forward_all(psi, grid)
    marginals = [np.zeros(n) for n in grid.shape]
    for rows in Blocks(grid.shape).slices:
        density = np.square(coefficients[rows].real)
        density += np.square(coefficients[rows].imag)
        for i, marginal in enumerate(marginals):
            along = density.sum(axis=tuple(j for j in range(grid.ndim) if j != i))
            if i == 0:
                marginal[rows] = along
            else:
                marginal += along
    return marginals


@lru_cache(maxsize=8)
def _momentum_weights(axis: Axis, limit: float) -> RealArray:
    """Return k (zero on a sine axis), its square, and whether |k| is above a limit."""
    k = axis.wavenumbers
    signed = spectral.signed_wavenumbers(axis) if axis.basis == "fourier" else np.zeros(k.size)
    return np.array([signed, k**2, np.abs(k) > limit])


def momentum_density(psi: ComplexArray, grid: Grid, axis: int) -> tuple[RealArray, RealArray]:
    r"""Return the wave numbers along an axis, ascending, and the density over them.

    Density [length] per unit wave number, so that its integral is the norm; on
    a sine axis it is over standing waves, k > 0.
    """
    line = grid.axes[axis]
    density = np.zeros(line.points)
    for lines in _lines(psi, grid, axis):
        coefficients = spectral.forward(lines, line)
        density += (np.abs(coefficients) ** 2).reshape(-1, line.points).sum(axis=0)
    step = abs(line.wavenumbers[1] - line.wavenumbers[0]) if line.points > 1 else 1.0
    order = np.argsort(line.wavenumbers)
    return line.wavenumbers[order], density[order] * grid.cell / step


def _lines(psi: ComplexArray, grid: Grid, axis: int) -> list[ComplexArray]:
    """Return groups of lines along an axis, that axis last."""
    if grid.ndim == 1:
        return [psi]
    moved = np.moveaxis(psi, axis, -1)
    rows = max(1, GROUP_POINTS * moved.shape[0] // grid.size)
    return [moved[first : first + rows] for first in range(0, moved.shape[0], rows)]

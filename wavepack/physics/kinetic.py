r"""The kinetic operator, spectral or by differences; one seam for all users.

Both say how they act, how energy depends on wave number in empty space, and how
amplitude, slope and current at a plane are read from the wavefunction, so that
detectors and energies always belong to the operator that propagates.
"""

import math
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
import scipy.sparse
import scipy.special

from wavepack.arrays import ComplexArray, IndexArray, RealArray
from wavepack.grid import spectral
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.particle import Particle

#: Points of the lines whose energy is summed at once.
BLOCK_POINTS = 1 << 16


@dataclass(frozen=True)
class Plane:
    r"""How to read a current through a plane across one axis.

    A reading is a few linear functionals of the lines along that axis,
    :math:`u_r = \sum_j R_{rj}\psi_j` (``rows``, or single points ``points``).
    The current density through the plane is

    .. math:: J = \sum_{(p,q,w)} w\,\mathrm{Im}(u_p^* u_q)

    with the ``pairs`` (p, q, w), w in length**2/time or, for differences, so
    that J comes out in probability per time and per transverse length. The first
    functional is the amplitude at ``position`` [length].
    """

    axis: int
    pairs: tuple[tuple[int, int, float | RealArray], ...]
    rows: RealArray | None = None
    points: tuple[int, ...] = ()
    position: float = math.nan

    def read(self, psi: ComplexArray) -> ComplexArray:
        """Return the functionals, shape (functionals, transverse points)."""
        if self.rows is None:
            taken = np.take(psi, self.points, axis=self.axis)
            return np.moveaxis(taken, self.axis, 0).reshape(len(self.points), -1)
        lines = psi.reshape(psi.shape[0], -1)
        if self.axis == 0:
            # Real rows times interleaved real and imaginary parts: half the work.
            parts = lines.view(np.float64)
            return np.ascontiguousarray(self.rows @ parts).view(np.complex128)
        return np.ascontiguousarray((lines @ self.rows.T).T)

    @property
    def functionals(self) -> int:
        """How many functionals a reading holds."""
        return len(self.points) if self.rows is None else len(self.rows)

    def current(self, reading: ComplexArray) -> RealArray:
        """Return the current density [1/(time transverse length)] of a reading."""
        total = np.zeros(reading.shape[1:])
        for p, q, weight in self.pairs:
            total += weight * (np.conj(reading[p]) * reading[q]).imag
        return total


class Kinetic(Protocol):
    """What every form of the kinetic operator offers."""

    grid: Grid
    particle: Particle

    def apply(self, psi: ComplexArray) -> ComplexArray:
        """Return T psi [energy psi]."""
        ...

    def energy_of(self, k: RealArray, axis: int) -> RealArray:
        """Return the kinetic energy [energy] of a plane wave in empty space."""
        ...

    def wavenumber_of(self, energy: RealArray, axis: int) -> RealArray:
        """Return k >= 0 [1/length] of a kinetic energy; NaN where none has it."""
        ...

    def energy_slope(self, k: RealArray, axis: int) -> RealArray:
        """Return dE/dk [energy length] of a plane wave: hbar times its speed."""
        ...

    def plane(self, axis: int, position: float, band: float) -> Plane:
        """Return how to read the current through a plane.

        ``band`` is the largest kinetic energy along the axis to read, where the
        operator can tell; infinite for all.
        """
        ...


@dataclass(frozen=True)
class SpectralKinetic:
    r"""The kinetic operator in wave-number space, for one mass everywhere.

    .. math:: \hat T = \frac{\hbar^2}{2m}\sum_a k_a^2
    """

    grid: Grid
    particle: Particle

    @cached_property
    def energies(self) -> tuple[RealArray, ...]:
        """Kinetic energy [energy] of each wave number, one vector an axis."""
        return tuple(self.particle.stiffness * axis.wavenumbers**2 for axis in self.grid.axes)

    @property
    def largest(self) -> float:
        """Largest kinetic energy on the grid [energy]."""
        return sum(float(values.max()) for values in self.energies)

    def apply(self, psi: ComplexArray) -> ComplexArray:
        """Return T psi [energy psi]."""
        result = np.zeros_like(psi)
        for i, axis in enumerate(self.grid.axes):
            coefficients = spectral.forward(psi, axis, i)
            coefficients *= self.grid.along(self.energies[i], i)
            result += spectral.backward(coefficients, axis, i)
        return result

    def energy_of(self, k: RealArray, axis: int) -> RealArray:
        """Return c k^2 [energy]; the same along every axis."""
        del axis
        return self.particle.stiffness * np.square(k)

    def wavenumber_of(self, energy: RealArray, axis: int) -> RealArray:
        """Return sqrt(E/c) [1/length]; NaN below zero."""
        del axis
        with np.errstate(invalid="ignore"):
            return np.sqrt(energy / self.particle.stiffness)

    def energy_slope(self, k: RealArray, axis: int) -> RealArray:
        """Return 2 c k [energy length]."""
        del axis
        return 2 * self.particle.stiffness * np.asarray(k)

    def plane(self, axis: int, position: float, band: float) -> Plane:
        r"""Read :math:`J = (\hbar/m)\,\mathrm{Im}\,\psi^*\psi'` below a kinetic energy.

        The band ends in a smooth taper over the upper half of its wave numbers:
        a sharp end would read the state far away from the plane as well.
        """
        last = math.sqrt(band / self.particle.stiffness)
        keep = taper(np.abs(self.grid.axes[axis].wavenumbers), last)
        rows = np.array(spectral.readout(self.grid.axes[axis], position, keep))
        speed = 2 * self.particle.stiffness / self.particle.hbar
        return Plane(axis, ((0, 1, speed),), rows=rows, position=position)


@dataclass(frozen=True)
class StaggeredKinetic:
    r"""The kinetic operator by staggered differences, for any mass.

    .. math:: \hat T = \sum_a S_a^T \frac{\hbar^2}{2 m_\ell} S_a

    S takes the slope on the links between points: order 2 by
    :math:`[-1, 1]/\Delta`, order 4 by :math:`[1, -27, 27, -1]/24\Delta`. With
    the mass averaged over each link this is the conservative form of
    :math:`-\tfrac{\hbar^2}{2}\partial_x \tfrac1m \partial_x`
    [BenDanielDuke1966]_; it is symmetric whatever the masses.

    Attributes
    ----------
    masses : tuple of float or real arrays
        For each axis the mass on its links [mass]: one number, or an array with
        the grid's shape but ``links`` entries along that axis.
    order : int
        2 or 4.
    """

    grid: Grid
    particle: Particle
    masses: tuple[float | RealArray, ...]
    order: int = 2

    def stiffness(self, axis: int) -> float | RealArray:
        r""":math:`\hbar^2/2m` on the links of one axis [energy length**2]."""
        return self.particle.hbar2_per_mass / (2 * self.masses[axis])

    @cached_property
    def slopes(self) -> tuple[scipy.sparse.csr_array, ...]:
        """The matrix S of each axis, shape (links, points) [1/length]."""
        return tuple(slope_matrix(axis, self.order) for axis in self.grid.axes)

    def apply(self, psi: ComplexArray) -> ComplexArray:
        """Return T psi [energy psi]."""
        result = np.zeros_like(psi)
        for i, matrix in enumerate(self.slopes):
            on_links = _along(matrix, psi, i) * self.stiffness(i)
            result += _along(matrix.T.tocsr(), on_links, i)
        return result

    def energy(self, psi: ComplexArray) -> float:
        r"""Return :math:`\sum_\ell \frac{\hbar^2}{2m_\ell}|S\psi|^2 dV` [energy]."""
        total = 0.0
        for i, matrix in enumerate(self.slopes):
            lines = np.moveaxis(psi, i, 0)
            stiffness = np.moveaxis(np.broadcast_to(self.stiffness(i), self._links(i)), i, 0)
            if psi.ndim == 1:
                lines, stiffness = lines[:, None], stiffness[:, None]
            step = max(1, BLOCK_POINTS // psi.shape[i])
            for first in range(0, lines.shape[1], step):
                chosen = slice(first, first + step)
                on_links = matrix @ lines[:, chosen]
                squares = np.square(on_links.real) + np.square(on_links.imag)
                total += float(np.sum(stiffness[:, chosen] * squares))
        return total * self.grid.cell

    def _links(self, axis: int) -> tuple[int, ...]:
        """Shape of the links of one axis."""
        shape = list(self.grid.shape)
        shape[axis] = self.slopes[axis].shape[0]
        return tuple(shape)

    def line_matrix(self, axis: int, stiffness: float | RealArray) -> scipy.sparse.csr_array:
        """Return S^T c S for one line, c a number or a vector over its links [energy]."""
        s = self.slopes[axis]
        c = np.broadcast_to(np.asarray(stiffness, dtype=float), (s.shape[0],))
        return (s.T @ scipy.sparse.diags_array(c) @ s).tocsr()

    def energy_of(self, k: RealArray, axis: int) -> RealArray:
        """Return c times the square of the differences' wave number [energy]."""
        slope, _ = self._slope_of(np.asarray(k), axis)
        return self.particle.stiffness * slope**2

    def energy_slope(self, k: RealArray, axis: int) -> RealArray:
        """Return the derivative of `energy_of` by k [energy length]."""
        slope, change = self._slope_of(np.asarray(k), axis)
        return 2 * self.particle.stiffness * slope * change

    def _slope_of(self, k: RealArray, axis: int) -> tuple[RealArray, RealArray]:
        """Return the wave number that the differences see, and its derivative by k."""
        dx = self.grid.axes[axis].spacing
        half = k * dx / 2
        if self.order == 2:
            return 2 * np.sin(half) / dx, np.cos(half)
        slope = (54 * np.sin(half) - 2 * np.sin(3 * half)) / (24 * dx)
        return slope, (27 * np.cos(half) - 3 * np.cos(3 * half)) / 24

    def wavenumber_of(self, energy: RealArray, axis: int) -> RealArray:
        """Return k [1/length] whose `energy_of` is the given one; NaN where none is."""
        target = np.asarray(energy, dtype=float)
        low = np.zeros_like(target)
        high = np.full_like(target, self.grid.axes[axis].largest_wavenumber)
        outside = ~((target >= 0) & (target <= self.energy_of(high, axis)))
        for _ in range(60):  # halving: energy_of grows with k up to the last wave number
            middle = (low + high) / 2
            beyond = self.energy_of(middle, axis) > target
            high, low = np.where(beyond, middle, high), np.where(beyond, low, middle)
        return np.where(outside, np.nan, (low + high) / 2)

    def plane(self, axis: int, position: float, band: float) -> Plane:
        r"""Read the current that these differences conserve exactly.

        Between points j <= cut < l, :math:`J = -\frac{2\Delta}{\hbar}\sum T_{jl}
        \mathrm{Im}\,\psi_j^*\psi_l`; the two cuts nearest to the plane are
        interpolated. All energies pass; with a reading at every step an implicit
        scheme cannot alias one.
        """
        del band
        line = self.grid.axes[axis]
        place = (position - line.coordinates[0]) / line.spacing - 0.5
        first = math.floor(place)
        if line.basis == "sine":
            first = min(max(first, 0), line.points - 3)
        share = place - first
        weights: dict[tuple[int, int], float | RealArray] = {}
        for cut, fraction in ((first, 1 - share), (first + 1, share)):
            for pair, weight in self._cut(axis, cut).items():
                weights[pair] = weights.get(pair, 0.0) + fraction * weight
        points = tuple(sorted({j for pair in weights for j in pair}))
        place_of = {j: i for i, j in enumerate(points)}
        pairs = tuple((place_of[j], place_of[m], w) for (j, m), w in sorted(weights.items()))
        first_point = float(line.coordinates[points[0]])
        return Plane(axis, pairs, points=points, position=first_point)

    def _cut(self, axis: int, cut: int) -> dict[tuple[int, int], float | RealArray]:
        """Weights of the pairs of points whose coupling crosses one cut."""
        reach = self.order - 1
        line = self.grid.axes[axis]
        before = [_point(j, line) for j in range(cut + 1 - reach, cut + 1)]
        beyond = [_point(m, line) for m in range(cut + 1, cut + reach + 1)]
        factor = -2 * line.spacing / self.particle.hbar
        weights: dict[tuple[int, int], float | RealArray] = {}
        columns = {
            j: self.slopes[axis][:, [j]].toarray().ravel()
            for j in (*before, *beyond)
            if j is not None
        }
        for j in before:
            for m in beyond:
                if j is None or m is None:
                    continue
                product = columns[j] * columns[m]
                links = np.flatnonzero(product)
                if links.size:
                    weights[j, m] = factor * self._weigh(axis, links, product[links])
        return weights

    def _weigh(self, axis: int, links: IndexArray, product: RealArray) -> float | RealArray:
        """Sum S_lj S_lm c_l over links; an array across the plane if the mass varies."""
        stiffness = self.stiffness(axis)
        if isinstance(stiffness, float):
            return float(stiffness * product.sum())
        chosen = np.moveaxis(np.take(stiffness, links, axis=axis), axis, 0)
        across = np.tensordot(product, chosen, axes=1)
        return float(across) if across.ndim == 0 else across.ravel()


def _point(number: int, line: Axis) -> int | None:
    """Return which point a number means: around the seam of a ring, none beyond walls."""
    if line.basis == "fourier":
        return number % line.points
    return number if 0 <= number < line.points else None


def taper(k: RealArray, last: float) -> RealArray:
    r"""Return a weight that falls from 1 at k = last/2 to 0 at k = last.

    .. math:: \tfrac12\,\mathrm{erfc}\,6\,(2k/k_l - 3/2)

    Within 2e-5 of 1 and 0 at its ends; its transform falls like a Gaussian of
    width :math:`12\sqrt2/k_l`, so that what is read stays local.
    """
    if math.isinf(last):
        return np.ones_like(k)
    return np.asarray(scipy.special.erfc(6 * (2 * k / last - 1.5)) / 2)


def slope_matrix(axis: Axis, order: int) -> scipy.sparse.csr_array:
    """Return S of one axis, shape (links, points) [1/length].

    A periodic axis has as many links as points, link l between points l and
    l + 1. Walls have one link more, link l between points l - 1 and l; beyond a
    wall the wavefunction goes on as its odd mirror image.
    """
    n = axis.points
    stencil = {2: ((0, -1.0), (1, 1.0))}.get(order) or (
        (-1, 1 / 24),
        (0, -27 / 24),
        (1, 27 / 24),
        (2, -1 / 24),
    )
    walls = axis.basis == "sine"
    links = n + walls
    rows, columns, values = [], [], []
    for link in range(links):
        for offset, weight in stencil:
            point, sign = _fold(link + offset - walls, n, walls=walls)
            if sign:
                rows.append(link)
                columns.append(point)
                values.append(sign * weight / axis.spacing)
    return scipy.sparse.csr_array((values, (rows, columns)), shape=(links, n))


def _fold(point: int, n: int, *, walls: bool) -> tuple[int, int]:
    """Return the point that stands for one beyond the ends, and its sign."""
    if not walls:
        return point % n, 1
    if point in (-1, n):
        return 0, 0
    if point < -1:
        return -2 - point, -1
    if point > n:
        return 2 * n - point, -1
    return point, 1


def link_positions(axis: Axis) -> RealArray:
    """Positions of the middles of the links of one axis [length]."""
    middles = axis.coordinates + axis.spacing / 2
    if axis.basis == "sine":
        return np.concatenate(([middles[0] - axis.spacing], middles))
    return middles


def _along(matrix: scipy.sparse.csr_array, values: ComplexArray, axis: int) -> ComplexArray:
    """Apply a matrix to every line along one axis."""
    lines = np.moveaxis(values, axis, 0)
    result = matrix @ lines.reshape(lines.shape[0], -1)
    return np.moveaxis(result.reshape(-1, *lines.shape[1:]), 0, axis)

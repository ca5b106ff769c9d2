r"""Stationary scattering along a guide: coupled transverse modes, transmitting ends.

With the modes :math:`\chi_m` of the near lead,
:math:`\psi = \sum_m f_m(s)\,\chi_m(y)`, so

.. math:: -c f_m'' + \sum_n H_{mn}(s) f_n = E f_m, \qquad
          H_{mn} = \int \chi_m \Big(-c\,\partial_y^2 + V(s,y)\Big) \chi_n\,dy .

The way is a lattice (`wavepack.analysis.lattice`) of a grid of its own. Two
spacings are extrapolated [RichardsonGaunt1927]_; their difference and that made by
more modes is the error stated.
"""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np

from wavepack.analysis.incoming import Incoming
from wavepack.analysis.lattice import Lattice
from wavepack.analysis.passage import Passage
from wavepack.arrays import RealArray
from wavepack.errors import MachineError
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.potentials import total

#: Points a shortest wavelength of the coarser grid, and by how much the other is finer.
POINTS_A_WAVE: Final = 16.0
FINER: Final = 1.5
#: Modes are kept up to this many times the highest kinetic energy, and so many more.
MODE_ENERGY: Final = 1.5
MORE_MODES: Final = 3
MOST_MODES: Final = 64
#: Points across for each mode kept.
POINTS_A_MODE: Final = 6
#: Numbers that one banded system may hold.
LARGEST: Final = 1 << 27


@dataclass(frozen=True)
class Basis:
    """Transverse functions as sines, or waves on a periodic axis, and their energies.

    Attributes
    ----------
    axis : Axis
        The axis across.
    coefficients : real, shape (functions, modes)
        Modes in orthonormal sines or waves.
    levels : real, shape (modes,)
        Their energies in the near lead [energy].
    """

    axis: Axis
    coefficients: RealArray
    levels: RealArray

    def at(self, y: RealArray) -> RealArray:
        """Return the modes at positions across [1/length**0.5], shape (positions, modes)."""
        values, _ = _functions(self.axis, y, len(self.coefficients))
        return np.asarray(values @ self.coefficients)


@dataclass(frozen=True)
class Guide:
    """Stationary scattering of a packet along a guide.

    Attributes
    ----------
    incoming : Incoming
        What the packet holds.
    coarse, fine : Lattice
        The same guide on two spacings.
    richer : Lattice
        The coarse one with half as many modes again.
    outside : float
        Probability of the packet in none of the modes.
    """

    incoming: Incoming
    coarse: Lattice
    fine: Lattice
    richer: Lattice
    outside: float

    def scatter(self, energies: RealArray) -> tuple[RealArray, RealArray]:
        """Return transmission and reflection, extrapolated to spacing 0."""
        low, high = (self._on(lattice, energies) for lattice in (self.coarse, self.fine))
        ratio = (self.coarse.h / self.fine.h) ** 4
        best = high + (high - low) / (ratio - 1)
        return best[0], best[1]

    def doubt(self, energies: RealArray) -> RealArray:
        """Return by how much spacing and number of modes may change the transmission."""
        low, high, rich = (
            self._on(lattice, energies)[0] for lattice in (self.coarse, self.fine, self.richer)
        )
        return np.asarray(np.abs(high - low) + np.abs(rich - low))

    def _on(self, lattice: Lattice, energies: RealArray) -> RealArray:
        amplitudes = self.incoming.amplitudes(np.asarray(energies))
        found = np.zeros((2, len(energies)))
        modes = lattice.matrices.shape[1]
        for i, energy in enumerate(energies):
            mixture = np.zeros(modes, dtype=complex)
            size = float(np.linalg.norm(amplitudes[:, i]))
            if size > 0:
                mixture[: len(amplitudes)] = amplitudes[:, i] / size
            found[:, i] = lattice.scatter(float(energy), mixture)
        return found


def guide_of(passage: Passage) -> Guide:
    """Return the guide of a passage in two dimensions.

    Raises
    ------
    MachineError
        If the system would be too large.
    """
    across = passage.across
    if across is None:
        raise ValueError("a guide needs two dimensions")
    c = passage.scenario.particle.stiffness
    highest = _highest(passage)
    wide = _basis(passage, across, MOST_MODES, 4 * MOST_MODES)
    kinetic = highest - float(wide.levels[0])
    count = int(np.sum(wide.levels < wide.levels[0] + MODE_ENERGY * kinetic)) + MORE_MODES
    count = max(4, min(count, MOST_MODES * 2 // 3))
    more = min(math.ceil(1.5 * count), MOST_MODES)
    lowest = float(_potential(passage, across, 200, 64).min())
    h = 2 * math.pi / math.sqrt(max(highest - lowest, kinetic) / c) / POINTS_A_WAVE
    basis = _basis(passage, across, more, POINTS_A_MODE * more)
    fewer = Basis(across, basis.coefficients[:, :count], basis.levels[:count])
    incoming, outside = _incoming(passage, fewer)
    return Guide(
        incoming,
        _lattice(passage, fewer, h),
        _lattice(passage, fewer, h / FINER),
        _lattice(passage, basis, h),
        outside,
    )


def _highest(passage: Passage) -> float:
    """Return a total energy [energy] that hardly anything of the packet exceeds."""
    line, c = passage.line, passage.scenario.particle.stiffness
    k = 2 * np.pi * np.fft.fftfreq(line.points, line.spacing)
    density = np.sum(np.abs(np.fft.fft(passage.psi, axis=0)) ** 2, axis=1)
    fastest = float(np.abs(k[density > 1e-5 * density.max()]).max())
    across = passage.across
    weight = np.sum(np.abs(passage.psi) ** 2, axis=0)
    row = _potential(passage, across, 200, len(weight))[0] if across else np.zeros(1)
    levels = float(row @ weight / weight.sum())
    if across is not None:
        sideways = np.abs(np.fft.fft(passage.psi, axis=1)) ** 2
        q = 2 * np.pi * np.fft.fftfreq(across.points, across.spacing)
        levels += c * float(sideways.sum(axis=0) @ q**2 / sideways.sum())
    return levels + c * fastest**2


def _potential(passage: Passage, across: Axis, along: int, points: int) -> RealArray:
    """Return V [energy] on a grid between the leads, shape (along the way, across)."""
    line = Axis(passage.line.name, *passage.inner, along, ("walls", "walls"))
    other = Axis(across.name, across.start, across.stop, points, across.ends)
    axes = (line, other) if passage.travel == 0 else (other, line)
    values = total(passage.pieces, Grid(axes), passage.scenario.particle)
    values = np.moveaxis(values, passage.travel, 0)
    return values[::-1] if passage.from_upper else values


def _functions(axis: Axis, y: RealArray, count: int) -> tuple[RealArray, RealArray]:
    """Return orthonormal sines, or waves where periodic, and their wave numbers squared."""
    s = (y - axis.start)[:, None] / axis.length
    if axis.basis == "sine":
        number = np.arange(1, count + 1)
        values = math.sqrt(2 / axis.length) * np.sin(np.pi * number * s)
        return values, np.asarray((np.pi * number / axis.length) ** 2, dtype=float)
    number = (np.arange(count) + 1) // 2
    angle = 2 * np.pi * number * s
    values = np.where(np.arange(count) % 2 == 1, np.sin(angle), np.cos(angle))
    size = np.where(number == 0, 1.0, math.sqrt(2)) / math.sqrt(axis.length)
    return values * size, np.asarray((2 * np.pi * number / axis.length) ** 2, dtype=float)


def _basis(passage: Passage, across: Axis, modes: int, points: int) -> Basis:
    """Return the lowest modes of the near lead."""
    c = passage.scenario.particle.stiffness
    # The row next to the lead, of a grid as fine along as needed to lie in it.
    row = _potential(passage, across, 2000, points)[0]
    axis = Axis(across.name, across.start, across.stop, points, across.ends)
    functions, squares = _functions(axis, axis.coordinates, points // 2)
    matrix = np.diag(c * squares) + functions.T @ (functions * row[:, None]) * axis.spacing
    levels, vectors = np.linalg.eigh(matrix)
    return Basis(across, vectors[:, :modes], levels[:modes])


def _lattice(passage: Passage, basis: Basis, h: float) -> Lattice:
    across, c = basis.axis, passage.scenario.particle.stiffness
    modes = len(basis.levels)
    length = passage.inner[1] - passage.inner[0]
    along = max(8, math.ceil(length / h) - 1)
    if along * modes * (6 * modes + 1) > LARGEST:
        raise MachineError(
            f"crosscheck: {along} points with {modes} modes across need more memory than it takes; "
            "a shorter box or a slower packet needs less"
        )
    points = 2 * len(basis.coefficients)
    potential = _potential(passage, across, along, points)
    axis = Axis(across.name, across.start, across.stop, points, across.ends)
    functions = basis.at(axis.coordinates)
    _, squares = _functions(axis, axis.coordinates, len(basis.coefficients))
    kinetic = basis.coefficients.T @ (c * squares[:, None] * basis.coefficients)
    matrices = (functions.T * potential[:, None, :]) @ functions * axis.spacing + kinetic
    h = length / (along + 1)
    start = -passage.inner[1] if passage.from_upper else passage.inner[0]
    return Lattice((matrices + matrices.transpose(0, 2, 1)) / 2, h, c, start + h)


def _incoming(passage: Passage, basis: Basis) -> tuple[Incoming, float]:
    """Return the packet by modes, and the probability in none of them."""
    line, across = passage.line, basis.axis
    s, psi = passage.way
    amplitudes = psi @ basis.at(across.coordinates) * across.spacing
    inside = float(np.sum(np.abs(amplitudes) ** 2) * line.spacing)
    c = passage.scenario.particle.stiffness
    return Incoming(s, amplitudes, basis.levels, c, line.spacing), max(0.0, 1 - inside)

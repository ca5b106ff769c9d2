"""Transmission of a packet on a line without propagating it, to compare potentials."""

from functools import cached_property
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.scenario.build import Setup

#: Energies of a packet that are told apart.
ENERGIES: Final = 160
#: Slices a spacing for a potential with sharp edges.
SLICES: Final = 4
#: A slice damps by no more than exp(20): what is left behind it is nothing either way, and
#: the 32 slices between two scalings stay below the largest number.
OPAQUE: Final = 20.0


class Line:
    """Transmission of a packet through a potential on a line, by slices of constant V.

    Parameters
    ----------
    setup : Setup
        On one axis, static.
    sign : float
        +1 or -1: where the packet moves.
    """

    def __init__(self, setup: Setup, sign: float) -> None:
        self._setup = setup
        self._sign = int(sign)
        self._axis = setup.grid.axes[0]
        self._c = setup.particle.stiffness
        k, w = setup.content.wavenumbers[0], setup.content.weights[0]
        self._energies, self._weights = gathered(self._c * k**2, w, ENERGIES)
        self.static = self._ahead(setup.landscape.static)

    def split(self, dt: float) -> RealArray:
        """Return the potential that a symmetric split moves in [energy]."""
        slope = np.gradient(self._setup.landscape.static, self._axis.spacing)
        shift = dt**2 * self._c / (12 * self._setup.particle.hbar**2) * slope**2
        return self._ahead(self._setup.landscape.static - shift)

    @cached_property
    def edges_smoothed(self) -> RealArray:
        """V as on the grid, on finer slices [energy]."""
        return self._finer(self._axis.spacing)

    @cached_property
    def edges_sharp(self) -> RealArray:
        """V with sharp edges and corners, on finer slices [energy]."""
        if not any(piece.edges(0) for piece in self._setup.landscape.static_pieces):
            return self.edges_smoothed
        return self._finer(self._axis.spacing / SLICES)

    def compare(self, one: RealArray, other: RealArray) -> float:
        """Return by how much the packet's transmission differs between two potentials."""
        if one is other or np.array_equal(one, other):
            return 0.0
        thickness = self._axis.spacing * len(self.static) / len(one)
        a, b = (self._transmission(v, thickness, self._energies) for v in (one, other))
        return float(abs((a - b) @ self._weights))

    @cached_property
    def sensitivity(self) -> float:
        """|dT/d ln E|, averaged over the packet."""
        a, b = (
            self._transmission(self.static, self._axis.spacing, self._energies * factor)
            for factor in (0.99, 1.01)
        )
        return float(np.abs(b - a) @ self._weights) / 0.02

    def _ahead(self, values: RealArray) -> RealArray:
        """Return the part of V between the packet's centre and the end it moves to."""
        here = nearest(self._axis.coordinates, self._setup.content.centre[0])
        return values[here:] if self._sign > 0 else values[here::-1]

    def _finer(self, width: float) -> RealArray:
        """Return V on `SLICES` slices a spacing with its edges smoothed to a width."""
        fine = self._axis.spacing / SLICES
        x = self._axis.coordinates[0] + fine * np.arange(self._axis.points * SLICES)
        total = np.zeros(x.size)
        for piece in self._setup.landscape.static_pieces:
            total += piece.evaluate((x,), (width,), self._setup.particle)
        here = SLICES * nearest(self._axis.coordinates, self._setup.content.centre[0])
        return total[here:] if self._sign > 0 else total[here::-1]

    def _transmission(self, values: RealArray, thickness: float, kinetic: RealArray) -> RealArray:
        """Return T at kinetic energies of the launch, from the first slice to the last."""
        energy = kinetic + values[0]
        k = np.sqrt((energy[:, None] - _trimmed(values)) / self._c + 0j)
        k[np.abs(k) < 1e-9] = 1e-9
        turns = k * thickness
        turns.imag = np.minimum(turns.imag, OPAQUE)
        cos, sin = np.cos(turns), np.sin(turns)
        inside, beyond = k[:, 0], k[:, -1]
        psi, slope = np.ones(energy.size, dtype=complex), 1j * beyond
        size = np.zeros(energy.size)
        for i in range(k.shape[1] - 2, 0, -1):
            q, c, s = k[:, i], cos[:, i], sin[:, i]
            psi, slope = c * psi - s / q * slope, q * s * psi + c * slope
            if i % 32 == 0:
                scale = np.abs(psi) + np.abs(slope)
                psi, slope = psi / scale, slope / scale
                size += np.log(scale)
        incoming = (psi + slope / (1j * inside)) / 2
        flux = np.where(beyond.imag == 0, (beyond / inside).real, 0.0)
        with np.errstate(under="ignore"):
            return np.asarray(flux * (np.exp(-size) / np.abs(incoming)) ** 2)


def gathered(energies: RealArray, weights: RealArray, count: int) -> tuple[RealArray, RealArray]:
    """Gather weighted energies into at most a number of them; weights add to one."""
    if energies.size <= count:
        return energies, weights / weights.sum()
    root = np.sqrt(np.maximum(energies, 0.0))
    edges = np.linspace(root.min(), root.max(), count + 1)
    weight, _ = np.histogram(root, edges, weights=weights)
    first, _ = np.histogram(root, edges, weights=weights * energies)
    keep = weight > 0
    return first[keep] / weight[keep], weight[keep] / weight.sum()


def _trimmed(values: RealArray) -> RealArray:
    """Drop what is constant at both ends but for one slice each."""
    differs = np.flatnonzero(np.abs(np.diff(values)) > 1e-14 * max(np.ptp(values), 1e-300))
    if not differs.size:
        return np.repeat(values[:1], 3)
    return values[differs[0] : differs[-1] + 2]


def nearest(coordinates: RealArray, position: float) -> int:
    """Return the index of the point nearest to a position."""
    return int(np.argmin(np.abs(coordinates - position)))

"""What the initial state is made of: its energies, and what may reach each end."""

import math
from dataclasses import dataclass

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.grid import Grid
from wavepack.observing.moments import momentum_density
from wavepack.physics.landscape import Landscape

#: Quantile of the momentum distribution taken as the fastest part.
FASTEST = 1e-9
#: Momenta whose weight is below this share of the largest are no part of the packet.
NEGLIGIBLE = 1e-9
#: How a driven potential spreads an energy over neighbouring sidebands.
SIDEBANDS = ((0, 0.6), (1, 0.15), (-1, 0.15), (2, 0.05), (-2, 0.05))


@dataclass(frozen=True)
class Content:
    """Momenta and energies of an initial state.

    Attributes
    ----------
    grid : Grid
        Its space.
    wavenumbers, weights : tuple of real vectors
        For each axis |k| [1/length] and the probability at it, adding to one.
    centre : tuple of float
        Mean position [length].
    launch : float
        Mean potential energy over the packet at t = 0 [energy].
    stiffness : float
        hbar^2/2m [energy length**2].
    photons : tuple of float
        Photon energies of the drives [energy].
    """

    grid: Grid
    wavenumbers: tuple[RealArray, ...]
    weights: tuple[RealArray, ...]
    centre: tuple[float, ...]
    launch: float
    stiffness: float
    photons: tuple[float, ...]

    @property
    def kinetic(self) -> float:
        """Mean kinetic energy [energy]."""
        return sum(
            self.stiffness * float(k**2 @ w)
            for k, w in zip(self.wavenumbers, self.weights, strict=True)
        )

    def fastest(self, axis: int) -> float:
        """Return the wave number [1/length] that all but a trace stay below."""
        k, w = self.wavenumbers[axis], self.weights[axis]
        order = np.argsort(k)
        share = np.cumsum(w[order][::-1])
        return float(k[order][::-1][int(np.searchsorted(share, FASTEST))])

    def slowest(self, axis: int, share: float = 1e-3) -> float:
        """Return the wave number [1/length] below which only a share lies."""
        k, w = self.wavenumbers[axis], self.weights[axis]
        order = np.argsort(k)
        total = np.cumsum(w[order])
        return float(k[order][min(int(np.searchsorted(total, share)), k.size - 1)])

    def largest_kinetic(self, lowest_potential: float) -> float:
        """Return a kinetic energy [energy] that hardly anything exceeds anywhere."""
        own = sum(self.stiffness * self.fastest(i) ** 2 for i in range(self.grid.ndim))
        gain = max(self.launch - lowest_potential, 0.0)
        return own + gain + 10 * max(self.photons, default=0.0)

    def towards(self, axis: int, landscape: Landscape, end: float) -> tuple[RealArray, RealArray]:
        """Return kinetic energies [energy] normal to a layer at one end, and weights.

        The packet's own momenta along the axis, changed by the difference of
        potential on the way; in 2D also what scattering into all directions
        makes of the whole kinetic energy; with a drive, neighbouring sidebands.
        Faster parts weigh more, since they get there.
        """
        k, w = self.wavenumbers[axis], self.weights[axis]
        gain = self._potential_at(axis, landscape, None) - self._potential_at(axis, landscape, end)
        energies, weights = [self.stiffness * k**2 + gain], [w]
        if self.grid.ndim > 1:
            directions = np.cos((np.arange(12) + 0.5) / 12 * math.pi / 2) ** 2
            energies.append((self.kinetic + gain) * directions)
            weights = [0.7 * w, np.full(12, 0.3 / 12)]
        energy, weight = np.concatenate(energies), np.concatenate(weights)
        if self.photons:
            photon = max(self.photons)
            energy = np.concatenate([energy + n * photon for n, _ in SIDEBANDS])
            weight = np.concatenate([share * weight for _, share in SIDEBANDS])
        scale = max(self.kinetic + gain, self.stiffness * float(k**2 @ w), 1e-300)
        keep = (energy > 1e-3 * scale) & (weight > 0)
        if not keep.any():
            return np.array([scale]), np.array([1.0])
        weight = weight[keep] * np.sqrt(energy[keep])
        return energy[keep], weight / weight.sum()

    def _potential_at(self, axis: int, landscape: Landscape, position: float | None) -> float:
        """Return V at t = 0 [energy] on the line along an axis through the centre."""
        index = []
        for i, line in enumerate(self.grid.axes):
            at = position if i == axis and position is not None else self.centre[i]
            index.append(int(np.argmin(np.abs(line.coordinates - at))))
        value = float(landscape.static[tuple(index)])
        return value if math.isfinite(value) else 0.0


def content(psi: ComplexArray, grid: Grid, landscape: Landscape) -> Content:
    """Analyse an initial state."""
    wavenumbers, weights = [], []
    for axis in range(grid.ndim):
        k, density = momentum_density(psi, grid, axis)
        keep = density > NEGLIGIBLE * density.max()
        wavenumbers.append(np.abs(k[keep]))
        weights.append(density[keep] / density[keep].sum())
    probability = np.abs(psi) ** 2
    probability /= probability.sum()
    centre = tuple(float(np.sum(probability * x)) for x in grid.coordinates)
    photons = tuple(
        part.drive.photon_energy for part in landscape.driven if part.drive.photon_energy
    )
    launch = float(np.sum(probability * landscape.at(0.0)))
    return Content(
        grid,
        tuple(wavenumbers),
        tuple(weights),
        centre,
        launch,
        landscape.particle.stiffness,
        photons,
    )

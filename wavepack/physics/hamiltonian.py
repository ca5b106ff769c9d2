"""The Hamiltonian: kinetic operator, real potential, absorbing layers."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.grid import Grid
from wavepack.physics.absorbers import Layer, damping_of
from wavepack.physics.kinetic import SpectralKinetic, StaggeredKinetic
from wavepack.physics.landscape import Landscape
from wavepack.physics.particle import Particle


@dataclass(frozen=True)
class Hamiltonian:
    r"""What propagates a state: :math:`\hat H(t) = \hat T + V(t)`, and layers apart.

    The layers are no part of `apply`: energies are of the real potential.
    """

    kinetic: SpectralKinetic | StaggeredKinetic
    landscape: Landscape
    layers: tuple[Layer, ...] = ()

    @property
    def grid(self) -> Grid:
        """Where it acts."""
        return self.landscape.grid

    @property
    def particle(self) -> Particle:
        """What moves."""
        return self.landscape.particle

    def apply(self, psi: ComplexArray, time: float = 0.0) -> ComplexArray:
        """Return H(t) psi [energy psi]."""
        return self.kinetic.apply(psi) + self.landscape.at(time) * psi

    def energy(self, psi: ComplexArray, time: float = 0.0) -> float:
        r"""Return :math:`\langle\psi|\hat H|\psi\rangle / \langle\psi|\psi\rangle` [energy]."""
        value = self.grid.inner(psi, self.apply(psi, time)).real
        return value / self.grid.norm(psi)

    @cached_property
    def damping(self) -> tuple[RealArray, ...]:
        """W [energy] of all layers, one vector an axis; they add up over axes."""
        return tuple(damping_of(self.layers, axis, i) for i, axis in enumerate(self.grid.axes))

    def damping_factors(self, duration: float) -> tuple[RealArray, ...]:
        r"""Return :math:`e^{-W\,\tau/\hbar}` for a duration, one vector an axis."""
        with np.errstate(over="ignore"):
            return tuple(np.exp(-w * duration / self.particle.hbar) for w in self.damping)

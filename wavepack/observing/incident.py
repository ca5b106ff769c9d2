r"""How much of the initial state comes in at each energy.

.. math:: \frac{dP}{dE} = \sum_m \frac{|g_m(k_m)|^2}{dE/dk}, \qquad
          E = \varepsilon_m + V + \frac{\hbar^2 k_m^2}{2m}

with :math:`g_m` the momentum amplitude along the travel axis in the transverse
state m of the launch plane (in 1D there is one, of no energy), counting only
what moves towards the plane that is asked for.
"""

from dataclasses import dataclass

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid import spectral
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import StaggeredKinetic

#: The packet's support leaves out this much probability.
OUTSIDE = 1e-6
#: The potential counts as uniform if, on average over the packet, it differs from
#: that at its centre by less than this share of the kinetic energy.
UNIFORM = 1e-4
#: Transverse states with less weight are left out.
LEAST_WEIGHT = 1e-13
#: Largest transverse problem solved densely.
DENSE_POINTS = 3000


@dataclass(frozen=True)
class Incident:
    """The incident weight by energy for one plane.

    Attributes
    ----------
    density : real, shape (n,)
        dP/dE [1/energy] of what moves towards the plane.
    away : real, shape (n,)
        The same of what moves away from it.
    reason : str or None
        Why a transmission by energy would not be defined, if so.
    """

    density: RealArray
    away: RealArray
    reason: str | None


def incident(
    psi: ComplexArray, hamiltonian: Hamiltonian, axis: int, position: float, energies: RealArray
) -> Incident:
    """Return the incident weight of an initial state for a plane across an axis."""
    launch = Launch(psi, hamiltonian, axis)
    sign = 1.0 if position >= launch.mean else -1.0
    density = launch.by_energy(energies, sign)
    away = launch.by_energy(energies, -sign)
    return Incident(density, away, launch.reason)


class Launch:
    """Where and how an initial state starts along one axis."""

    def __init__(self, psi: ComplexArray, hamiltonian: Hamiltonian, axis: int) -> None:
        self._hamiltonian = hamiltonian
        self._axis = axis
        grid = hamiltonian.grid
        line = grid.axes[axis]
        lines = np.moveaxis(psi, axis, 0).reshape(line.points, -1)
        weight = np.sum(np.abs(lines) ** 2, axis=1)
        self.mean = float(line.coordinates @ weight / weight.sum())
        self._centre = int(np.argmin(np.abs(line.coordinates - self.mean)))
        support = _support(weight)
        # The transform needs all that is not rounding error, the potential's
        # uniformity is asked only where the packet really is.
        self._wide = _support(weight, 1e-28)
        self._x = line.coordinates[self._wide]
        static = np.moveaxis(hamiltonian.landscape.static, axis, 0).reshape(line.points, -1)
        across = _support(np.sum(np.abs(lines) ** 2, axis=0))
        self._across = static[self._centre]
        kinetic = float((hamiltonian.kinetic.apply(psi).ravel().conj() @ psi.ravel()).real)
        kinetic = max(kinetic, 0.0)
        kinetic *= grid.cell / grid.norm(psi)
        density = np.abs(lines[support, across]) ** 2
        change = np.abs(static[support, across] - self._across[across])
        self.reason = self._reason(float(np.sum(density * change) / density.sum()), kinetic)
        self.levels, self._amplitudes = self._transverse(
            lines[self._wide], across, UNIFORM * kinetic
        )

    def by_energy(self, energies: RealArray, sign: float) -> RealArray:
        """Return dP/dE [1/energy] of what moves along ``sign`` times the axis."""
        kinetic = self._hamiltonian.kinetic
        line = self._hamiltonian.grid.axes[self._axis]
        total = np.zeros(len(energies))
        for level, amplitude in zip(self.levels, self._amplitudes.T, strict=True):
            k = kinetic.wavenumber_of(np.asarray(energies) - level, self._axis)
            moving = np.isfinite(k) & (k > 0)
            if not moving.any():
                continue
            wave = np.exp(-1j * sign * np.outer(k[moving], self._x))
            g = wave @ amplitude * (line.spacing / np.sqrt(2 * np.pi))
            total[moving] += np.abs(g) ** 2 / kinetic.energy_slope(k[moving], self._axis)
        return total

    def _reason(self, variation: float, kinetic: float) -> str | None:
        if self._hamiltonian.landscape.driven:
            return "the potential is driven: energy is not conserved; see flux and sidebands"
        if variation > UNIFORM * kinetic:
            name = self._hamiltonian.grid.names[self._axis]
            return (
                f"the potential is not uniform along {name} where the packet starts: on average "
                f"it differs from that at the centre by {variation / kinetic:.2%} of the kinetic "
                "energy"
            )
        return None

    def _transverse(
        self, lines: ComplexArray, across: slice, tolerance: float
    ) -> tuple[RealArray, ComplexArray]:
        """Return levels [energy] and amplitudes (points along, states) across the launch."""
        grid = self._hamiltonian.grid
        if grid.ndim == 1:
            return self._across[:1], lines
        other = 1 - self._axis
        line = grid.axes[other]
        kinetic = self._hamiltonian.kinetic
        uniform = float(np.ptp(self._across[across])) < tolerance
        if uniform or line.points > DENSE_POINTS:
            amplitudes = spectral.forward(lines, line) * np.sqrt(line.spacing)
            levels = kinetic.energy_of(line.wavenumbers, other)
            levels = levels + self._across[(across.start + across.stop) // 2]
        else:
            if isinstance(kinetic, StaggeredKinetic):
                stiffness = kinetic.stiffness(other)
                if isinstance(stiffness, np.ndarray):
                    stiffness = np.take(stiffness, self._centre, axis=self._axis)
                matrix = kinetic.line_matrix(other, stiffness).toarray()
            else:
                basis = spectral.forward(np.eye(line.points, dtype=complex), line)
                # Column j of the transform's matrix is row j here: T = B^T e B*.
                matrix = (basis * kinetic.energies[other]) @ basis.conj().T
            levels, states = np.linalg.eigh(matrix.real + np.diag(self._across))
            amplitudes = lines @ states * np.sqrt(line.spacing)
        weights = np.sum(np.abs(amplitudes) ** 2, axis=0)
        keep = weights > LEAST_WEIGHT * weights.sum()
        return levels[keep], amplitudes[:, keep]


def _support(weight: RealArray, outside: float = OUTSIDE) -> slice:
    """Return the cells that hold all but a share of a weight, tails cut alike."""
    share = np.cumsum(weight) / weight.sum()
    first = int(np.searchsorted(share, outside / 2))
    last = int(np.searchsorted(share, 1 - outside / 2))
    return slice(first, min(last + 1, weight.size))

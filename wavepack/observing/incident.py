r"""How much of the initial state comes in at each energy.

.. math:: \frac{dP}{dE} = \sum_m \frac{|g_m(k_m)|^2}{dE/dk}, \qquad
          E = \varepsilon_m + V + \frac{\hbar^2 k_m^2}{2m}

with :math:`g_m` the momentum amplitude along the travel axis in the transverse
state m of the launch plane (in 1D there is one, of no energy), counting only
what moves towards the plane that is asked for.
"""

from dataclasses import dataclass, replace

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid import spectral
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import SpectralKinetic, StaggeredKinetic

#: The packet's support leaves out this much probability.
OUTSIDE = 1e-6
#: The potential counts as uniform if, on average over the packet, it differs from
#: that at its centre by less than this share of the kinetic energy.
UNIFORM = 1e-4
#: Transverse states with less weight are left out.
LEAST_WEIGHT = 1e-13
#: Slower waves, as a share of the grid's last wave number, are at a threshold.
LEAST_WAVENUMBER = 1e-6
#: Masses that differ by a smaller share are one.
SAME_MASS = 1e-6
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
    free : complex, shape (n,), or None
        In 1D: the amplitude that free motion would bring to the plane, up to a
        factor that turns no phase; NaN where no wave has the energy.
    phase_reason : str or None
        Why the phase against free motion would not be defined, if so.
    """

    density: RealArray
    away: RealArray
    reason: str | None
    free: ComplexArray | None = None
    phase_reason: str | None = None


def incident(
    psi: ComplexArray,
    hamiltonian: Hamiltonian,
    axis: int,
    position: float,
    energies: RealArray,
    reading: float | None = None,
) -> Incident:
    """Return the incident weight of an initial state for a plane across an axis.

    ``reading`` is where amplitudes are read, if not at the plane's ``position``.
    """
    launch = Launch(psi, hamiltonian, axis)
    sign = 1.0 if position >= launch.mean else -1.0
    density = launch.by_energy(energies, sign)
    away = launch.by_energy(energies, -sign)
    phase_reason = launch.reason or launch.phase_reason(position)
    free = None
    if phase_reason is None:
        free = launch.free_amplitude(energies, sign, position if reading is None else reading)
    return Incident(density, away, launch.reason, free, phase_reason)


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
        self.kinetic, mass_varies = self._local_kinetic(support, across)
        kinetic = float((hamiltonian.kinetic.apply(psi).ravel().conj() @ psi.ravel()).real)
        kinetic = max(kinetic, 0.0)
        kinetic *= grid.cell / grid.norm(psi)
        density = np.abs(lines[support, across]) ** 2
        change = np.abs(static[support, across] - self._across[across])
        self._kinetic = kinetic
        variation = float(np.sum(density * change) / density.sum())
        self.reason = self._reason(variation, kinetic, mass_varies=mass_varies)
        self.levels, self._amplitudes = self._transverse(
            lines[self._wide], across, UNIFORM * kinetic
        )

    def by_energy(self, energies: RealArray, sign: float) -> RealArray:
        """Return dP/dE [1/energy] of what moves along ``sign`` times the axis."""
        kinetic = self.kinetic
        slowest = LEAST_WAVENUMBER * self._hamiltonian.grid.axes[self._axis].largest_wavenumber
        total = np.zeros(len(energies))
        for level, amplitude in zip(self.levels, self._amplitudes.T, strict=True):
            k = kinetic.wavenumber_of(np.asarray(energies) - level, self._axis)
            moving = np.isfinite(k) & (k > slowest)
            if not moving.any():
                continue
            g = self._momentum_amplitude(sign * k[moving], amplitude)
            total[moving] += np.abs(g) ** 2 / kinetic.energy_slope(k[moving], self._axis)
        return total

    def free_amplitude(self, energies: RealArray, sign: float, position: float) -> ComplexArray:
        r"""Return :math:`g(k)\,e^{ikx}` at a position, k of each energy; one axis only."""
        kinetic = self.kinetic
        k = sign * kinetic.wavenumber_of(np.asarray(energies) - self.levels[0], self._axis)
        free = np.full(k.size, np.nan, dtype=np.complex128)
        moving = np.isfinite(k) & (k != 0)
        g = self._momentum_amplitude(k[moving], self._amplitudes[:, 0])
        free[moving] = g * np.exp(1j * k[moving] * position)
        return free

    def phase_reason(self, position: float) -> str | None:
        """Return why waves at a plane would have no common phase with free ones, if so."""
        hamiltonian = self._hamiltonian
        if hamiltonian.grid.ndim > 1:
            return "in two dimensions waves of several transverse states share an energy"
        line = hamiltonian.grid.axes[0]
        there = int(np.argmin(np.abs(line.coordinates - position)))
        change = abs(float(hamiltonian.landscape.static[there] - self._across[0]))
        if change > UNIFORM * self._kinetic:
            return "the potential at the plane is not that where the packet starts"
        kinetic = hamiltonian.kinetic
        if isinstance(kinetic, StaggeredKinetic):
            masses = np.broadcast_to(kinetic.masses[0], kinetic.slopes[0].shape[:1])
            if not np.isclose(masses[self._centre], masses[there]):
                return "the mass at the plane is not that where the packet starts"
        return None

    def _momentum_amplitude(self, k: RealArray, amplitude: ComplexArray) -> ComplexArray:
        r"""Return :math:`g(k) = (2\pi)^{-1/2}\int e^{-ikx}\psi\,dx` at signed wave numbers."""
        spacing = self._hamiltonian.grid.axes[self._axis].spacing
        wave = np.exp(-1j * np.outer(k, self._x))
        g: ComplexArray = wave @ amplitude * (spacing / np.sqrt(2 * np.pi))
        return g

    def _local_kinetic(
        self, support: slice, across: slice
    ) -> tuple[SpectralKinetic | StaggeredKinetic, bool]:
        """Return the operator with the mass of the launch, and whether that varies there."""
        kinetic = self._hamiltonian.kinetic
        if isinstance(kinetic, SpectralKinetic):
            return kinetic, False
        masses = kinetic.masses[self._axis]
        if not isinstance(masses, np.ndarray):
            return kinetic, False
        lines = np.moveaxis(masses, self._axis, 0)
        lines = lines.reshape(lines.shape[0], -1)
        box = lines[support.start : support.stop + 1, across]
        middle = (across.start + across.stop - 1) // 2
        mass = float(lines[self._centre, middle])
        local = StaggeredKinetic(
            kinetic.grid,
            replace(kinetic.particle, mass=mass),
            (mass,) * kinetic.grid.ndim,
            kinetic.order,
        )
        return local, bool(np.abs(box - mass).max() > SAME_MASS * mass)

    def _reason(self, variation: float, kinetic: float, *, mass_varies: bool) -> str | None:
        if self._hamiltonian.landscape.driven:
            return "the potential is driven: energy is not conserved; see flux and sidebands"
        if mass_varies:
            return "the mass is not uniform where the packet starts"
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
            levels = self.kinetic.energy_of(line.wavenumbers, other)
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

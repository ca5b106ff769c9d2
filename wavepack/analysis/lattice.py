r"""Coupled modes on equidistant points between two uniform leads.

.. math:: -c f_m'' + \sum_n H_{mn}(s) f_n = E f_m

The second derivative is the central difference of order 4, a sparse (banded)
system solved directly. Beyond its ends only outgoing waves (and the incoming one)
of the lattice stand, mode by mode [Datta1995]_. The lattice conserves the current
exactly: reflection and transmission add up to one.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from wavepack.arrays import ComplexArray, RealArray


@dataclass(frozen=True)
class Lattice:
    """The coupled modes on one spacing.

    Attributes
    ----------
    matrices : real, shape (points, modes, modes)
        H at each point along the way [energy].
    h : float
        Spacing [length].
    c : float
        hbar^2/2m [energy length**2].
    first : float
        Position of the first point along the way [length].
    """

    matrices: RealArray
    h: float
    c: float
    first: float

    @cached_property
    def _bands(self) -> ComplexArray:
        """The matrix of the system at energy 0, without its ends, as LAPACK wants bands."""
        n, m, _ = self.matrices.shape
        bands = np.zeros((4 * m + 1, n * m), dtype=complex)
        unit = self.c / (12 * self.h**2)
        blocks = bands.reshape(4 * m + 1, n, m)
        for p in range(m):
            for q in range(m):
                blocks[2 * m + p - q, :, q] = self.matrices[:, p, q]
        bands[2 * m] += 30 * unit
        for away, weight in ((1, -16.0), (2, 1.0)):
            bands[2 * m + away * m, : (n - away) * m] = weight * unit
            bands[2 * m - away * m, away * m :] = weight * unit
        return bands

    def scatter(self, energy: float, incoming: ComplexArray) -> tuple[float, float]:
        """Return transmission and reflection of one coherent mixture of modes.

        Parameters
        ----------
        energy : float
            Total energy [energy].
        incoming : complex, shape (modes,)
            Amplitude of each mode at position 0 of the way, its square a flux.
        """
        from scipy.linalg import solve_banded  # noqa: PLC0415 - kept out of the program's start

        n, m, _ = self.matrices.shape
        near, far = (_Lead.of(self.matrices[i], self, energy) for i in (0, -1))
        unit = self.c / (12 * self.h**2)
        bands = self._bands.copy()
        bands[2 * m] -= energy
        for lead, site, inward in ((near, 0, 1), (far, n - 1, -1)):
            ghosts = [lead.ghost(j) for j in (1, 2)]
            _add(bands, m, (site, site), unit * (ghosts[1] - 16 * ghosts[0]))
            _add(bands, m, (site + inward, site), unit * ghosts[0])
        # From position 0, where the packet's amplitudes are meant, to the first point.
        kinetic = np.maximum(energy - near.levels, 0.0)
        phase = np.exp(1j * np.sqrt(kinetic / self.c) * self.first)
        speed = np.where(near.speed > 0, near.speed, 1.0)
        modal = near.modes.T @ incoming * phase / np.sqrt(speed)
        modal[near.speed <= 0] = 0.0
        source = np.zeros(n * m, dtype=complex)
        waves = [near.modes @ ((near.step**-j - near.step**j) * modal) for j in (1, 2)]
        source[:m] = -unit * (waves[1] - 16 * waves[0])
        source[m : 2 * m] = -unit * waves[0]
        f = solve_banded((2 * m, 2 * m), bands, source, overwrite_ab=True, check_finite=False)
        back = near.modes.T @ f[:m] - modal
        through = far.modes.T @ f[-m:]
        came = float(np.abs(modal) ** 2 @ near.speed)
        if came <= 0:
            return 0.0, 1.0
        return (
            float(np.abs(through) ** 2 @ far.speed) / came,
            float(np.abs(back) ** 2 @ near.speed) / came,
        )


@dataclass(frozen=True)
class _Lead:
    """Modes of a uniform lead of the lattice, and what one step outwards multiplies them by."""

    levels: RealArray
    modes: RealArray
    step: ComplexArray
    speed: RealArray

    @classmethod
    def of(cls, matrix: RealArray, lattice: Lattice, energy: float) -> "_Lead":
        r"""Return the lead of a transverse matrix.

        .. math:: E - \varepsilon = \frac{c}{12h^2}(30 - 32\cos\theta + 2\cos 2\theta)
        """
        levels, modes = np.linalg.eigh(matrix)
        kinetic = (energy - levels) * lattice.h**2 / lattice.c
        cosine = 4 - np.sqrt(np.maximum(9 + 3 * kinetic, 0.0))
        is_open = np.abs(cosine) < 1
        # Closed: the solution that falls outwards.
        decay = cosine - np.sign(cosine) * np.sqrt(np.maximum(cosine**2 - 1, 0.0))
        angle = np.arccos(np.clip(cosine, -1, 1))
        step = np.where(is_open, np.exp(1j * angle), decay)
        speed = np.where(is_open, 32 * np.sin(angle) - 4 * np.sin(2 * angle), 0.0)
        return cls(levels, modes, step, speed)

    def ghost(self, j: int) -> ComplexArray:
        """Return the matrix that takes the last point to the j-th one beyond it."""
        return np.asarray((self.modes * self.step**j) @ self.modes.T)


def _add(bands: ComplexArray, m: int, place: tuple[int, int], block: ComplexArray) -> None:
    """Add a block at (row, column) of the block matrix to its bands."""
    row, column = place
    p, q = np.meshgrid(np.arange(m), np.arange(m), indexing="ij")
    bands[2 * m + (row - column) * m + p - q, column * m + q] += block

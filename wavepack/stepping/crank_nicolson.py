r"""Crank-Nicolson propagation [CrankNicolson1947]_: unitary Cayley steps.

One axis: the potential stands inside the implicit step, taken at its middle,

.. math:: \psi_{n+1} = \frac{1 - i\,dt\,(H-E_r)/2\hbar}{1 + i\,dt\,(H-E_r)/2\hbar}\,
          e^{-iE_r dt/\hbar}\,\psi_n

where the reference energy :math:`E_r` near that of the state makes the error,
of order :math:`(E-E_r)^3 dt^3`, small. Several axes: a palindrome of
one-dimensional factors, each unitary,

.. math:: e^{-iV dt/2\hbar}\, X_{dt/2}\, Y_{dt}\, X_{dt/2}\, e^{-iV dt/2\hbar}

Both of order 2. The kinetic operator is by staggered differences and carries
any mass; see `wavepack.physics.kinetic.StaggeredKinetic`.
"""

import cmath
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.sparse

from wavepack.arrays import ComplexArray, IndexArray, RealArray
from wavepack.grid.blocks import Blocks
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import StaggeredKinetic
from wavepack.stepping.banded import BandedFactor
from wavepack.stepping.outer import damping_of_half_step, outer_kicks
from wavepack.stepping.scheme import Clock, Fill, Stepper, leave_empty
from wavepack.stepping.tally import Tally

#: Lines solved at once: their right-hand sides stay in cache.
BLOCK_POINTS = 1 << 16


@dataclass(frozen=True)
class CrankNicolson:
    """Cayley steps of order 2 in time."""

    def bind(
        self,
        hamiltonian: Hamiltonian,
        dt: float,
        *,
        threads: int = 1,
        reference: float = 0.0,
        fill: Fill = leave_empty,
    ) -> Stepper:
        """Return the stepper.

        Raises
        ------
        TypeError
            If the Hamiltonian's kinetic operator is not by differences.
        """
        kinetic = hamiltonian.kinetic
        if not isinstance(kinetic, StaggeredKinetic):
            raise TypeError("Crank-Nicolson needs the kinetic operator by differences")
        psi = np.zeros(hamiltonian.grid.shape, dtype=np.complex128)
        fill(psi)
        blocks = Blocks(psi.shape, threads)
        damping = damping_of_half_step(hamiltonian, dt)
        tally = Tally(psi, hamiltonian.grid, damping, buffered=blocks.single)
        hbar = hamiltonian.particle.hbar
        if psi.ndim == 1:
            kicks = outer_kicks(psi, hamiltonian, 0.0, dt, damping, blocks)
            inner = _implicit_line(psi, hamiltonian, kinetic, dt, reference)
            clock = Clock(dt, hbar, cayley=True, reference=reference)
            return Stepper(psi, blocks, kicks, inner, tally, clock)
        kicks = outer_kicks(psi, hamiltonian, 1 / 2, dt, damping, blocks)
        last = psi.ndim - 1
        halves = [_cayley_lines(psi, kinetic, axis, dt / 2) for axis in range(last)]
        whole = _cayley_lines(psi, kinetic, last, dt)
        palindrome = [*halves, whole, *reversed(halves)]

        def inner_lines(_: float) -> None:
            for factor in palindrome:
                factor()

        return Stepper(psi, blocks, kicks, inner_lines, tally, Clock(dt, hbar))


def _cayley_matrix(matrix: scipy.sparse.sparray, tau: float) -> scipy.sparse.sparray:
    """Return 1 + i tau H with tau = dt/2 hbar."""
    return scipy.sparse.eye_array(matrix.shape[0]) + 1j * tau * matrix


def _implicit_line(
    psi: ComplexArray,
    hamiltonian: Hamiltonian,
    kinetic: StaggeredKinetic,
    dt: float,
    reference: float,
) -> Callable[[float], None]:
    """Return the step of a one-dimensional field, potential included."""
    tau = dt / (2 * hamiltonian.particle.hbar)
    turn = cmath.exp(-2j * tau * reference)
    width = kinetic.order - 1
    kinetic_matrix = kinetic.line_matrix(0, kinetic.stiffness(0))

    def factor_at(time: float) -> BandedFactor:
        diagonal = scipy.sparse.diags_array(hamiltonian.landscape.at(time) - reference)
        return BandedFactor(_cayley_matrix(kinetic_matrix + diagonal, tau), width)

    fixed = None if hamiltonian.landscape.driven else factor_at(0.0)

    def step(time: float) -> None:
        factor = fixed or factor_at(time + dt / 2)
        # (1 - i tau H)/(1 + i tau H) = 2/(1 + i tau H) - 1: no product with H.
        solution = factor.solve(psi)
        solution *= 2
        np.subtract(solution, psi, out=psi)
        np.multiply(psi, turn, out=psi)

    return step


def _cayley_lines(
    psi: ComplexArray, kinetic: StaggeredKinetic, axis: int, duration: float
) -> Callable[[], None]:
    """Return the Cayley factor of the kinetic energy along one axis, for all lines."""
    tau = duration / (2 * kinetic.particle.hbar)
    width = kinetic.order - 1
    after = int(np.prod(psi.shape[axis + 1 :]))
    field = psi.reshape(-1, psi.shape[axis], after)
    groups = [
        (BandedFactor(_cayley_matrix(kinetic.line_matrix(axis, c), tau), width), lines)
        for c, lines in _equal_lines(kinetic, axis)
    ]
    step = max(1, BLOCK_POINTS // psi.shape[axis])

    def apply() -> None:
        for factor, lines in groups:
            for first in range(0, lines.size, step):
                outer, inner = np.divmod(lines[first : first + step], after)
                old = field[outer, :, inner].T
                new = factor.solve(old)
                new *= 2
                new -= old
                field[outer, :, inner] = new.T

    return apply


def _equal_lines(
    kinetic: StaggeredKinetic, axis: int
) -> list[tuple[float | RealArray, IndexArray]]:
    """Return the lines along an axis, grouped by equal masses: (stiffness, lines)."""
    count = kinetic.grid.size // kinetic.grid.shape[axis]
    stiffness = kinetic.stiffness(axis)
    if not isinstance(stiffness, np.ndarray):
        return [(stiffness, np.arange(count))]
    profiles = np.moveaxis(stiffness, axis, -1).reshape(-1, stiffness.shape[axis])
    distinct, member = np.unique(profiles, axis=0, return_inverse=True)
    return [(distinct[i], np.flatnonzero(member.ravel() == i)) for i in range(distinct.shape[0])]

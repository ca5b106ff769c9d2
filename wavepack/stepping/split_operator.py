r"""Split-operator propagation: the kinetic step in wave-number space.

Order 2 [Strang1968]_, [FeitFleckSteiger1982]_:

.. math:: e^{-iV\,dt/2\hbar}\; e^{-iT\,dt/\hbar}\; e^{-iV\,dt/2\hbar}

Order 4 [Chin1997]_, [ChinChen2001]_, with positive coefficients and the
potential corrected by its gradient in the middle factor:

.. math:: e^{-iV dt/6\hbar}\; e^{-iT dt/2\hbar}\; e^{-i 2\tilde V dt/3\hbar}\;
          e^{-iT dt/2\hbar}\; e^{-iV dt/6\hbar}

A driven potential is taken at t, t + dt/2 (middle factor and gradient) and
t + dt. The layers' damping stands before and after, a factor of its own.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from wavepack.arrays import ComplexArray
from wavepack.grid.blocks import Blocks
from wavepack.grid.spectral import TransformPair, empty_field
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import SpectralKinetic
from wavepack.stepping.outer import damping_of_half_step, gradient_kick, outer_kicks
from wavepack.stepping.scheme import Clock, Fill, Stepper, leave_empty
from wavepack.stepping.tally import Tally


@dataclass(frozen=True)
class SplitOperator:
    """The symmetric split of order 2 or 4."""

    order: Literal[2, 4] = 2

    def bind(
        self,
        hamiltonian: Hamiltonian,
        dt: float,
        *,
        threads: int = 1,
        reference: float = 0.0,
        fill: Fill = leave_empty,
    ) -> Stepper:
        """Return the stepper; the reference energy is not needed here.

        Raises
        ------
        TypeError
            If the Hamiltonian's kinetic operator is not spectral.
        """
        del reference
        kinetic = hamiltonian.kinetic
        if not isinstance(kinetic, SpectralKinetic):
            raise TypeError("the split operator needs the spectral kinetic operator")
        psi = empty_field(hamiltonian.grid.shape)
        pair = TransformPair(hamiltonian.grid, psi, threads)
        fill(psi)
        blocks = Blocks(psi.shape, threads)
        damping = damping_of_half_step(hamiltonian, dt)
        tally = Tally(psi, hamiltonian.grid, damping, buffered=blocks.single)
        clock = Clock(dt, hamiltonian.particle.hbar)
        if self.order == 2:
            kicks = outer_kicks(psi, hamiltonian, 1 / 2, dt, damping, blocks, spare=True)
            whole = _drift(psi, kinetic, dt, pair, blocks)
            return Stepper(psi, blocks, kicks, lambda _: whole(), tally, clock)
        kicks = outer_kicks(psi, hamiltonian, 1 / 6, dt, damping, blocks)
        middle = gradient_kick(psi, hamiltonian, 2 / 3, dt, blocks)
        half = _drift(psi, kinetic, dt / 2, pair, blocks)

        def inner(time: float) -> None:
            half()
            blocks.each(lambda rows: middle.apply(rows, time + dt / 2))
            half()

        return Stepper(psi, blocks, kicks, inner, tally, clock)


def _drift(
    psi: ComplexArray,
    kinetic: SpectralKinetic,
    duration: float,
    pair: TransformPair,
    blocks: Blocks,
) -> Callable[[], None]:
    """Return the free flight over a duration, transforms and their norm included."""
    vectors = [np.exp(-1j * e * duration / kinetic.particle.hbar) for e in kinetic.energies]
    first = vectors[0] / pair.norm
    if psi.ndim == 1:

        def turn(rows: slice) -> None:
            part = psi[rows]
            np.multiply(part, first[rows], out=part)
    else:
        rest = vectors[1]
        for vector in vectors[2:]:
            rest = rest[..., None] * vector
        column = first.reshape(-1, *[1] * (psi.ndim - 1))

        def turn(rows: slice) -> None:
            part = psi[rows]
            np.multiply(part, column[rows] * rest, out=part)

    if blocks.single:

        def drift_small() -> None:
            pair.forward()
            turn(blocks.slices[0])
            pair.backward()

        return drift_small

    def drift() -> None:
        pair.forward()
        blocks.each(turn)
        pair.backward()

    return drift

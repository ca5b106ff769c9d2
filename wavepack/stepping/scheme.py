"""How a state is stepped: a description (Scheme) and bound machinery (Stepper).

Every scheme here is a palindrome, kick - inner - kick: the kicks of
neighbouring steps are fused into one, except where the march stops. Stops are
fixed by step number alone, so a resumed run fuses where the first one did and
repeats its bits.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol, TypeAlias

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.blocks import Blocks
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.stepping.kick import Kick
from wavepack.stepping.tally import Tally

#: Writes a state into the array it is given.
Fill: TypeAlias = Callable[[ComplexArray], None]


def leave_empty(psi: ComplexArray) -> None:
    """Leave the array as it is, to be filled later."""
    del psi


class Scheme(Protocol):
    """A frozen description of a propagator; `bind` makes its stepper."""

    def bind(
        self,
        hamiltonian: Hamiltonian,
        dt: float,
        *,
        threads: int = 1,
        reference: float = 0.0,
        fill: Fill = leave_empty,
    ) -> "Stepper":
        """Return the machinery for one Hamiltonian and step.

        ``reference`` is an energy [energy] near that of the state, for schemes
        whose error grows away from their zero of energy. ``fill`` writes the
        first state into the array; it is called before phases are built, so
        that the caller can let go of its own copy.
        """
        ...


@dataclass(frozen=True)
class Clock:
    r"""How fast a stationary state turns under a scheme.

    .. math:: \theta(E) = \frac{E_r\,dt}{\hbar} + 2\arctan\frac{(E-E_r)\,dt}{2\hbar}

    for a Cayley step about :math:`E_r`; :math:`E\,dt/\hbar` for an exact one.
    """

    dt: float
    hbar: float
    cayley: bool = False
    reference: float = 0.0

    def angle(self, energy: RealArray) -> RealArray:
        """Return the angle [radians] by which a state of this energy turns each step."""
        if not self.cayley:
            return energy * self.dt / self.hbar
        offset = (energy - self.reference) * self.dt / (2 * self.hbar)
        return self.reference * self.dt / self.hbar + 2 * np.arctan(offset)

    def rate(self, energy: RealArray) -> RealArray:
        r"""Return :math:`(\hbar/dt)\,d\theta/dE`, 1 for an exact step."""
        if not self.cayley:
            return np.ones_like(energy)
        offset = (energy - self.reference) * self.dt / (2 * self.hbar)
        return 1 / (1 + offset**2)


@dataclass(frozen=True)
class Kicks:
    """The outer kick of a palindrome, alone and fused with its neighbour's."""

    single: Kick
    fused: Kick


class Stepper:
    """A scheme bound to a Hamiltonian, a step and the array it works on.

    Attributes
    ----------
    psi : complex array
        The state, changed in place by `advance`.
    tally : Tally
        What the layers have removed.
    clock : Clock
        How fast stationary states turn.
    """

    def __init__(
        self,
        psi: ComplexArray,
        blocks: Blocks,
        kicks: Kicks,
        inner: Callable[[float], None],
        tally: Tally,
        clock: Clock,
    ) -> None:
        self.psi = psi
        self.tally = tally
        self.clock = clock
        self._blocks = blocks
        self._kicks = kicks
        self._inner = inner

    @property
    def dt(self) -> float:
        """The time step."""
        return self.clock.dt

    def advance(self, first: int, last: int) -> None:
        """Take the state from step ``first`` to step ``last``, t = n dt."""
        if last <= first:
            return
        self._kick(self._kicks.single, first, twice=False)
        for step in range(first, last):
            self._inner(step * self.dt)
            if step + 1 < last:
                self._kick(self._kicks.fused, step + 1, twice=True)
        self._kick(self._kicks.single, last, twice=False)

    def _kick(self, kick: Kick, step: int, *, twice: bool) -> None:
        time = step * self.dt
        if self._blocks.single:
            rows = self._blocks.slices[0]
            self.tally.add(rows, twice=twice)
            kick.apply(rows, time)
            return

        def work(rows: slice) -> None:
            self.tally.add(rows, twice=twice)
            kick.apply(rows, time)

        self._blocks.each(work)

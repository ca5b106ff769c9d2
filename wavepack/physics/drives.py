r"""Factors in time that multiply a piece of the potential.

.. math:: f(t) = e(t)\,\bigl[\mathrm{offset} + \cos(\omega t + \phi)\bigr], \qquad
          \hbar\omega = \text{photon\_energy}

or any formula in t in place of the bracket. The envelope e rises from 0 to 1 as
:math:`\sin^2`, with continuous slope, and falls alike (`Envelope`).
"""

import dataclasses
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from wavepack.fields import declare

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression


@dataclass(frozen=True)
class Envelope:
    r"""A smooth switching on and off.

    0 before ``start``; :math:`\sin^2[\tfrac\pi2 (t-\mathrm{start})/\mathrm{rise}]` for one
    ``rise``; then 1; with ``stop`` the same fall within the last ``rise`` before
    it, and 0 after it.
    """

    rise: float = declare(
        "number",
        "duration of the sin^2 rise after `from`, and of the fall before `to`",
        dimension="time",
        above=0.0,
    )
    start: float = declare(
        "number", "when the rise begins", dimension="time", key="from", default=0.0
    )
    stop: float | None = declare(
        "number",
        "when the fall ends; left out, there is no fall",
        dimension="time",
        key="to",
        default=None,
    )

    def faults(self) -> tuple[tuple[str, str], ...]:
        """Return (key, message) for each contradiction between the fields."""
        if self.stop is not None and self.stop - self.start < 2 * self.rise:
            message = (
                f"need room for a rise and a fall, to - from >= {2 * self.rise:g}, "
                f"got {self.stop - self.start:g}"
            )
            return (("to", message),)
        return ()

    def factor(self, t: float) -> float:
        """Return e(t), from 0 to 1."""
        done = (t - self.start) / self.rise
        if self.stop is not None:
            done = min(done, (self.stop - t) / self.rise)
        return math.sin(math.pi / 2 * min(max(done, 0.0), 1.0)) ** 2


@dataclass(frozen=True)
class Drive:
    """The factor of a driven piece; give ``photon_energy`` or ``formula``.

    Attributes
    ----------
    hbar : float
        The constant [energy time]; not part of a scenario, set by `bound`.
    """

    photon_energy: float | None = declare(
        "number", "photon energy of an oscillation", dimension="energy", above=0.0, default=None
    )
    phase: float = declare("angle", "phase of the oscillation at t = 0", default=0.0)
    offset: float = declare("number", "constant added to the oscillation", default=0.0)
    formula: "Expression | None" = declare(
        "expression", "any factor, a pure number, in `t`", default=None
    )
    envelope: Envelope | None = declare(
        "table", "a smooth switching on and off of the whole factor", of=Envelope, default=None
    )
    hbar: float = dataclasses.field(default=math.nan, kw_only=True, compare=False)

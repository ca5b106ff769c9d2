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

from wavepack.errors import NumericalFault
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

    def faults(self) -> tuple[tuple[str, str], ...]:
        """Return (key, message) for each contradiction between the fields."""
        found = []
        if (self.photon_energy is None) == (self.formula is None):
            both = "both" if self.formula is not None else "neither"
            found.append(("photon_energy", f"need either photon_energy or formula, got {both}"))
        if self.formula is not None:
            if self.formula.names - {"t"}:
                unwanted = ", ".join(sorted(self.formula.names - {"t"}))
                found.append(("formula", f"need an expression in t alone, found {unwanted}"))
            found += [
                (key, "need photon_energy with it, got formula")
                for key in ("phase", "offset")
                if getattr(self, key)
            ]
        if self.envelope is not None:
            found += [(f"envelope.{key}", text) for key, text in self.envelope.faults()]
        return tuple(found)

    def bound(self, hbar: float) -> "Drive":
        """Return the drive with the constant [energy time] that its frequency needs."""
        return dataclasses.replace(self, hbar=hbar)

    def factor(self, t: float) -> float:
        """Return f(t), a pure number.

        Raises
        ------
        ValueError
            If the drive oscillates and was not `bound`.
        NumericalFault
            If its formula is not finite at t.
        """
        envelope = 1.0 if self.envelope is None else self.envelope.factor(t)
        # Outside the envelope a formula is not asked: it need not be finite there.
        return envelope * self._bare(t) if envelope else 0.0

    def _bare(self, t: float) -> float:
        if self.formula is not None:
            value = float(self.formula.evaluate(t=t))
            if not math.isfinite(value):
                raise NumericalFault(
                    f"drive formula: need a finite factor, got {value} at t = {t:g}"
                )
            return value
        if self.photon_energy is None:
            return self.offset
        if math.isnan(self.hbar):
            raise ValueError("drive: need hbar, bind the drive first")
        return self.offset + math.cos(self.photon_energy / self.hbar * t + self.phase)

    def period(self, hbar: float) -> float | None:
        """Return the period h/photon_energy [time]; None if it does not repeat.

        A drive with an envelope does not repeat.
        """
        if self.photon_energy is None or self.envelope is not None:
            return None
        return 2 * math.pi * hbar / self.photon_energy

    def largest(self, until: float = 1e4) -> float:
        """Return a bound of |f|; for a formula, the largest of many samples.

        Parameters
        ----------
        until : float
            Times from 0, or from the start of the envelope, to this one, or to
            the end of the envelope if that comes first [time].
        """
        if self.formula is None:
            return abs(self.offset) + (self.photon_energy is not None)
        start, stop = 0.0, until
        if self.envelope is not None:
            start = max(start, self.envelope.start)
            stop = min(until, math.inf if self.envelope.stop is None else self.envelope.stop)
        if not start < stop:
            return 0.0
        # Evenly, for what happens late; and ever finer towards the start.
        span = stop - start
        shares = np.concatenate((np.linspace(0, 1, 1 << 14), np.geomspace(1e-8, 1, 1 << 12)))
        values = np.abs(np.asarray(self.formula.evaluate(t=start + span * shares)))
        return float(np.max(values, where=np.isfinite(values), initial=0.0))

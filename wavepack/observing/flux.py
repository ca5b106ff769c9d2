r"""Flux through a plane, in time and by energy, gathered as the run goes.

Amplitude and slope at the plane are read at evenly spaced steps and turned into
a spectrum on the fly,

.. math:: F_r(E) = \sum_n \tau\, e^{i\theta(E)\,n}\, u_r(t_n), \qquad
          \frac{dP}{dE} = \frac{1}{2\pi\hbar}\,\frac{\hbar}{dt}\frac{d\theta}{dE}
          \sum_{(p,q,w)} w\,\mathrm{Im}\,F_p^* F_q

where :math:`\theta(E)` is the angle by which the propagator itself turns a
state of energy E each step and :math:`\tau` the time between readings
[NeuhauserBaer1991]_, [ZhangZhang1994]_. Nothing else of the state is kept.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.physics.kinetic import Plane

#: Readings kept before they are transformed together.
BUFFER_POINTS = 1 << 15
BUFFER_READINGS = 128

#: Amplitudes below this share of the largest add nothing to an overlap.
NEGLIGIBLE = 1e-13


@dataclass(frozen=True)
class Spectrum:
    """The energies of a detector and how a state of each turns.

    Attributes
    ----------
    energies : real, shape (n,)
        Total energies [energy].
    angle : real, shape (n,)
        Angle per step [radians].
    rate : real, shape (n,)
        hbar/dt times the derivative of the angle by the energy.
    """

    energies: RealArray
    angle: RealArray
    rate: RealArray


class FluxDetector:
    """Accumulates what crosses a plane.

    Parameters
    ----------
    name : str
        Its name.
    plane : Plane
        How to read it.
    weights : real, shape (transverse points,)
        Transverse cell size times the share of each transverse cell counted.
    sign : float
        +1 or -1: the direction that counts as forward.
    dt, hbar : float
        Time step and the constant, for times and the spectrum.
    every : int
        Steps between readings.
    spectrum : Spectrum or None
        Energies to resolve.
    """

    def __init__(
        self,
        name: str,
        plane: Plane,
        weights: RealArray,
        sign: float,
        dt: float,
        hbar: float,
        every: int,
        spectrum: Spectrum | None,
    ) -> None:
        self.name = name
        self.spectrum = spectrum
        self._plane = plane
        self._weights = weights
        self._sign = sign
        self._dt = dt
        self._hbar = hbar
        self._every = every
        shape = (plane.functionals, weights.size)
        count = max(1, min(BUFFER_READINGS, BUFFER_POINTS // (shape[0] * shape[1])))
        self._buffer = np.zeros((count, *shape), dtype=np.complex128)
        self._filled = 0
        self._start = 0
        self._last = np.array([np.nan, np.nan])
        self._integrals = np.zeros(4)
        self._pending: list[tuple[float, float]] = []
        self._sums = np.zeros(0, dtype=np.complex128)
        if spectrum is not None:
            self._sums = np.zeros((spectrum.energies.size, *shape), dtype=np.complex128)
            self._turns = np.exp(1j * np.outer(spectrum.angle * every, np.arange(count)))

    def add(self, step: int, psi: ComplexArray) -> None:
        """Read the plane at a step; steps off the stride count in time only."""
        reading = self._plane.read(psi)
        flux = self._sign * float(self._plane.current(reading) @ self._weights)
        self._integrate(step * self._dt, flux)
        if step % self._every or self.spectrum is None:
            return
        if self._filled == 0:
            self._start = step
        # The first reading stands for half an interval, as in the trapezoidal rule.
        self._buffer[self._filled] = reading if step else reading / 2
        self._filled += 1
        if self._filled == len(self._buffer):
            self._sums += self._transformed()
            self._filled = 0

    def drain(self) -> tuple[RealArray, RealArray]:
        """Return times and fluxes read since the last call."""
        rows = np.array(self._pending, dtype=float).reshape(-1, 2)
        self._pending.clear()
        return rows[:, 0], rows[:, 1]

    @property
    def crossed(self) -> float:
        """Net probability that has crossed forward."""
        return float(self._integrals[0])

    @property
    def forward(self) -> float:
        """Time integral of the positive part of the flux."""
        return float(self._integrals[1])

    @property
    def backward(self) -> float:
        """Time integral of the negative part of the flux, as a positive number."""
        return float(self._integrals[2])

    @property
    def mean_crossing_time(self) -> float:
        """Flux-weighted mean time [time]; NaN where nothing has crossed."""
        return float(self._integrals[3] / self._integrals[0]) if self._integrals[0] else np.nan

    def flux_by_energy(self) -> RealArray:
        """Return dP/dE [1/energy] through the plane, forward positive."""
        if self.spectrum is None:
            return np.zeros(0)
        sums = self._sums + self._transformed()
        total = np.zeros(self.spectrum.energies.size)
        for p, q, weight in self._plane.pairs:
            current = (np.conj(sums[:, p]) * sums[:, q]).imag
            total += (current * weight) @ self._weights
        return self._sign * total * self.spectrum.rate / (2 * np.pi * self._hbar)

    def amplitude_by_energy(self) -> ComplexArray | None:
        r"""Return :math:`F_0(E)`, the amplitude at a point by energy; None for a line."""
        if self.spectrum is None or self._weights.size > 1:
            return None
        sums = self._sums + self._transformed()
        return sums.reshape(len(sums), -1)[:, 0]

    def save(self) -> dict[str, np.ndarray]:
        """Return all that was gathered, the readings not yet transformed included."""
        return {
            "buffer": self._buffer[: self._filled].copy(),
            "start": np.array(self._start),
            "last": self._last.copy(),
            "integrals": self._integrals.copy(),
            "sums": self._sums.copy(),
        }

    def restore(self, saved: dict[str, np.ndarray]) -> None:
        """Take up what was saved."""
        self._filled = len(saved["buffer"])
        self._buffer[: self._filled] = saved["buffer"]
        self._start = int(saved["start"])
        self._last[:] = saved["last"]
        self._integrals[:] = saved["integrals"]
        self._sums[...] = saved["sums"]

    def _integrate(self, time: float, flux: float) -> None:
        self._pending.append((time, flux))
        before, old = self._last
        self._last[:] = time, flux
        if np.isnan(before):
            return
        half = (time - before) / 2
        self._integrals += (
            half * (old + flux),
            half * (max(old, 0.0) + max(flux, 0.0)),
            half * (max(-old, 0.0) + max(-flux, 0.0)),
            half * (before * old + time * flux),
        )

    def _transformed(self) -> ComplexArray:
        """Return what the readings in the buffer add to the sums."""
        if self.spectrum is None or self._filled == 0:
            return np.zeros_like(self._sums)
        block = self._buffer[: self._filled].reshape(self._filled, -1)
        part: ComplexArray = self._turns[:, : self._filled] @ block
        part *= (self._every * self._dt) * np.exp(1j * self.spectrum.angle * self._start)[:, None]
        return part.reshape(self._sums.shape)


class Overlap:
    r"""The autocorrelation :math:`\langle\psi(0)|\psi(t)\rangle`.

    Keeps the initial state only where it is not negligible, and only its real
    part where it has no other.
    """

    def __init__(self, start: np.ndarray, box: tuple[slice, ...], cell: float) -> None:
        self._start = start
        self._box = box
        self._cell = cell

    @classmethod
    def of(cls, psi: ComplexArray, cell: float) -> "Overlap":
        """Return the overlap with a state; ``cell`` is the volume of one cell."""
        size = np.abs(psi)
        keep = size > NEGLIGIBLE * float(size.max())
        box = []
        for axis in range(psi.ndim):
            others = tuple(i for i in range(psi.ndim) if i != axis)
            hit = np.flatnonzero(keep.any(axis=others))
            box.append(slice(int(hit[0]), int(hit[-1]) + 1))
        start = psi[tuple(box)]
        kept = start.copy() if np.any(start.imag) else start.real.copy()
        return cls(kept, tuple(box), cell)

    @classmethod
    def restored(cls, saved: Mapping[str, np.ndarray]) -> "Overlap":
        """Return the overlap that `save` described."""
        box = tuple(slice(int(a), int(b)) for a, b in saved["box"])
        return cls(saved["start"], box, float(saved["cell"]))

    def save(self) -> dict[str, np.ndarray]:
        """Return all that `restored` needs."""
        box = np.array([(s.start, s.stop) for s in self._box])
        return {"start": self._start, "box": box, "cell": np.array(self._cell)}

    def __call__(self, psi: ComplexArray) -> complex:
        """Return the overlap with a later state."""
        return complex(np.sum(np.conj(self._start) * psi[self._box])) * self._cell

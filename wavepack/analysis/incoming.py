"""What a packet holds at each energy, on its way to an obstacle."""

from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.errors import UsageError

#: Momenta with less weight than this share of the largest are no part of the packet.
NEGLIGIBLE: Final = 1e-11


class NotApplicableError(UsageError):
    """The stationary calculation does not apply to this scenario; the message says why."""


@dataclass(frozen=True)
class Incoming:
    r"""What the packet holds at each energy, by transverse mode.

    .. math:: a_m(E) = \frac{1}{\sqrt{2 c k_m}}\,\frac{1}{\sqrt{2\pi}}
              \int \psi_m(s)\,e^{-i k_m s}\,ds, \qquad E = \varepsilon_m + c\,k_m^2

    with s along the way towards the obstacle, so that the sum of
    :math:`|a_m|^2` is the incident weight dP/dE.

    Attributes
    ----------
    s : real vector
        Positions along the way [length].
    lines : complex, shape (positions, modes)
        Amplitude of each transverse mode.
    levels : real, shape (modes,)
        Energy of each mode in the near lead, V included [energy].
    c : float
        hbar^2/2m in the near lead [energy length**2].
    spacing : float
        Distance between positions [length].
    """

    s: RealArray
    lines: ComplexArray
    levels: RealArray
    c: float
    spacing: float

    def wavenumbers(self, energies: RealArray) -> RealArray:
        """Return k of each mode [1/length], 0 where it is closed; shape (modes, energies)."""
        kinetic = np.asarray(energies)[None, :] - self.levels[:, None]
        return np.asarray(np.sqrt(np.maximum(kinetic, 0.0) / self.c))

    def amplitudes(self, energies: RealArray, *, away: bool = False) -> ComplexArray:
        """Return a of each mode [1/energy**0.5], shape (modes, energies)."""
        k = self.wavenumbers(energies)
        found = np.zeros(k.shape, dtype=complex)
        sign = -1.0 if away else 1.0
        for m in range(len(self.levels)):
            moving = k[m] > 0
            g = np.exp(-1j * sign * np.outer(k[m][moving], self.s)) @ self.lines[:, m]
            found[m, moving] = g * self.spacing / np.sqrt(4 * np.pi * self.c * k[m][moving])
        return found

    def weight(self, energies: RealArray, *, away: bool = False) -> RealArray:
        """Return dP/dE [1/energy]."""
        found = self.amplitudes(energies, away=away)
        return np.asarray(np.sum(np.abs(found) ** 2, axis=0))

    @cached_property
    def _momenta(self) -> tuple[RealArray, RealArray]:
        """Wave numbers of both signs [1/length] and weights, shape (wave numbers, modes)."""
        count = 2 * len(self.s)
        k = 2 * np.pi * np.fft.fftfreq(count, self.spacing)
        density = np.abs(np.fft.fft(self.lines, count, axis=0)) ** 2
        weight = density * self.spacing**2 / (2 * np.pi) * (2 * np.pi / (count * self.spacing))
        return np.asarray(k, dtype=float), weight

    @property
    def away(self) -> float:
        """Probability that moves away from the obstacle."""
        k, weight = self._momenta
        return float(weight[k < 0].sum())

    @property
    def energies(self) -> tuple[float, float]:
        """Lowest and highest total energy of what moves towards the obstacle [energy].

        Raises
        ------
        NotApplicableError
            If nothing does.
        """
        k, weight = self._momenta
        held = (weight > NEGLIGIBLE * weight.max()) & (k > 0)[:, None]
        if not held.any():
            raise NotApplicableError("nothing of the packet moves towards the far end")
        step = float(2 * np.pi / (2 * len(self.s) * self.spacing))
        energies = self.levels[None, :] + self.c * np.maximum(k[:, None] - 2 * step, 0.0) ** 2
        highest = self.levels[None, :] + self.c * (k[:, None] + 2 * step) ** 2
        return float(energies[held].min()), float(highest[held].max())

"""One axis of space: its points, its ends, its wave numbers."""

import math
from dataclasses import dataclass
from functools import cached_property
from typing import Literal, TypeAlias

import numpy as np

from wavepack.arrays import RealArray

End: TypeAlias = Literal["absorbing", "walls", "periodic"]
Basis: TypeAlias = Literal["fourier", "sine"]


@dataclass(frozen=True)
class Axis:
    r"""A uniform axis [length].

    If either end is a wall the points are the interior ones of a sine basis,
    :math:`x_i = a + (i+1)\,\Delta`, :math:`\Delta = (b-a)/(n+1)`, and the
    wavefunction vanishes at both ``start`` and ``stop``. Otherwise the axis is
    periodic, :math:`x_i = a + i\,\Delta`, :math:`\Delta = (b-a)/n`; two
    absorbing ends share such an axis.

    Raises
    ------
    ValueError
        If the axis is empty, or one end alone is periodic.
    """

    name: str
    start: float
    stop: float
    points: int
    ends: tuple[End, End] = ("absorbing", "absorbing")

    def __post_init__(self) -> None:
        if not self.stop > self.start:
            raise ValueError(f"axis {self.name}: need stop > start, got {self.start}..{self.stop}")
        if self.points < 1:
            raise ValueError(f"axis {self.name}: need at least 1 point, got {self.points}")
        if self.ends.count("periodic") == 1:
            raise ValueError(f"axis {self.name}: a periodic end needs the other end periodic too")

    @property
    def basis(self) -> Basis:
        """``"sine"`` if either end is a wall, else ``"fourier"``."""
        return "sine" if "walls" in self.ends else "fourier"

    @property
    def length(self) -> float:
        """Distance between the two ends."""
        return self.stop - self.start

    @property
    def spacing(self) -> float:
        """Distance between neighbouring points."""
        return self.length / (self.points + (self.basis == "sine"))

    @cached_property
    def coordinates(self) -> RealArray:
        """Positions of the points, shape (points,)."""
        first = 1 if self.basis == "sine" else 0
        return self.start + self.spacing * np.arange(first, first + self.points, dtype=float)

    @cached_property
    def wavenumbers(self) -> RealArray:
        r"""Wave numbers in the order of the transform, shape (points,).

        Fourier: :math:`2\pi j/L`, negative ones in the upper half. Sine:
        :math:`\pi (j+1)/L`.
        """
        if self.basis == "sine":
            return math.pi / self.length * np.arange(1, self.points + 1, dtype=float)
        return np.asarray(2 * math.pi * np.fft.fftfreq(self.points, self.spacing))

    @property
    def largest_wavenumber(self) -> float:
        r"""The Nyquist wave number :math:`\pi/\Delta`."""
        return math.pi / self.spacing

    def walled(self) -> "Axis":
        """Return the same points closed by walls where the ends absorb.

        A shared periodic axis loses its first point, which becomes the wall.
        """
        if "absorbing" not in self.ends:
            return self
        points = self.points - (self.basis == "fourier")
        return Axis(self.name, self.start, self.stop, points, ("walls", "walls"))

"""Scales that stay fixed over a movie, found in one pass over its frames."""

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray
from wavepack.errors import UsageError
from wavepack.rendering import style
from wavepack.rendering.scene import Frames, density_of

#: The peak of the packet stands this high in a one-dimensional panel.
HEADROOM = 0.92


@dataclass(frozen=True)
class PowerScale:
    r"""Maps 0..peak to 0..1 by :math:`(v/v_\mathrm{peak})^p`; odd in v.

    A power below 1 lifts what is faint.
    """

    peak: float
    power: float

    def __call__(self, values: npt.NDArray[np.floating]) -> npt.NDArray[np.float32]:
        """Return scaled values within -1..1; not-a-number becomes 0."""
        scaled = np.asarray(values, np.float32) / np.float32(self.peak)
        scaled = np.fmin(np.fmax(scaled, np.float32(-1)), np.float32(1))
        if self.power == 1:
            return np.asarray(scaled)
        size = np.abs(scaled)
        root = np.sqrt(size) if self.power == 0.5 else size ** np.float32(self.power)
        return np.asarray(np.copysign(root, scaled))

    def ticks(self, gap: float) -> list[float]:
        """Round values from 0 to the peak, at least ``gap`` apart on the scale."""
        if self.power == 1:
            return _even_ticks(self.peak, gap)
        chosen: list[float] = []
        below = 1.0 + gap
        exponent = math.floor(math.log10(self.peak))
        for decade in range(exponent, exponent - 12, -1):
            for digit in (9, 8, 7, 6, 5, 4, 3, 2, 1):
                value = digit * 10.0**decade
                place = (value / self.peak) ** self.power
                # Even digits and halves first would leave holes; 5, 2, 1 read best.
                if digit in {5, 2, 1} and place <= 1 and below - place >= gap and place >= gap:
                    chosen.append(value)
                    below = place
        return [0.0, *reversed(chosen)]

    @property
    def remark(self) -> str:
        """What the axis must say about the scale; empty if it is linear."""
        return "" if self.power == 1 else f"power {self.power:g}"


def _even_ticks(peak: float, gap: float) -> list[float]:
    raw = max(gap, 0.05) * peak
    decade = 10.0 ** math.floor(math.log10(raw))
    step = next(m * decade for m in (1, 2, 5, 10) if m * decade >= raw * (1 - 1e-9))
    return [i * step for i in range(int(peak / step * (1 + 1e-9)) + 1)]


def number(value: float) -> str:
    """Write a tick: plainly, or with a power of ten where that would be long."""
    return _plain(value) if value == 0 or 1e-3 <= abs(value) < 1e5 else _raised(value)


def numbers(values: list[float]) -> list[str]:
    """Write ticks of one axis in one manner: all plain, or all with a power of ten."""
    sizes = [abs(value) for value in values if value]
    if not sizes or (min(sizes) >= 1e-4 and max(sizes) < 1e5):
        return [_plain(value) for value in values]
    return [_raised(value) if value else "0" for value in values]


def _plain(value: float) -> str:
    return f"{value:g}".replace("-", style.MINUS)


def _raised(value: float) -> str:
    digits, exponent = f"{value:.2e}".split("e")
    power = str(int(exponent)).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))
    return f"{float(digits):g}·10{power}".replace("-", style.MINUS)


def highest_density(frames: Frames) -> float:
    """Return the largest density of all frames, reading one at a time.

    Raises
    ------
    UsageError
        If there are no frames.
    """
    if not len(frames):
        raise UsageError("movie: the run has stored no frames; set output.frames to 1 or more")
    peak = 0.0
    for _, frame in frames:
        density = density_of(frame)
        peak = max(peak, float(np.max(density, initial=0.0, where=np.isfinite(density))))
    return peak or 1.0


def energy_window(potential: RealArray, mean: float | None) -> tuple[float, float]:
    """Return the energies to show: the potential and the packet's, extremes cut.

    Confinements and singular wells reach far beyond what the packet can feel;
    beyond six times its energy, or a tenth of the whole range, they are cut.
    """
    finite = potential[np.isfinite(potential)]
    low, high = (float(finite.min()), float(finite.max())) if finite.size else (0.0, 0.0)
    low, high = min(low, 0.0), max(high, 0.0)
    if mean is not None and math.isfinite(mean):
        reach = max(6 * abs(mean), 0.1 * (high - low))
        low, high = max(low, -reach), min(high, reach)
        low, high = min(low, 1.15 * mean), max(high, 1.15 * mean)
    if high == low:
        return -1.0, 1.0
    span = high - low
    return (low - 0.06 * span if low < 0 else low), high + 0.12 * span

r"""Resonances of a stack: the pole, and the peak of T(E).

The two differ where the line is broad: a Breit-Wigner line of the pole's width
on a background that varies has another maximum and another width at half height.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from wavepack.errors import NumericalFault
from wavepack.physics.exact.layers import Stack, incoming_amplitude, stack_transmission


@dataclass(frozen=True)
class Pole:
    r"""A pole of the scattering matrix at :math:`E_R - i\Gamma/2` [energy]."""

    energy: float
    width: float

    def lifetime(self, hbar: float) -> float:
        r"""Return :math:`\tau = \hbar/\Gamma` [time]."""
        return hbar / self.width


@dataclass(frozen=True)
class Peak:
    """A maximum of T(E): where [energy], how high, full width at half height [energy]."""

    energy: float
    transmission: float
    width: float


def resonance_pole(stack: Stack, near: complex, *, tolerance: float = 1e-13) -> Pole:
    r"""Return the resonance whose pole lies nearest to a guess.

    Newton's iteration on the incoming amplitude, :math:`a(E_R - i\Gamma/2) = 0`,
    with outgoing waves in both leads. Source: [RiccoAzbel1984]_ for the meaning
    in a double barrier.

    Parameters
    ----------
    stack : Stack
        Layers and leads.
    near : complex
        Guess of the energy [energy]; a real one is enough for a narrow line.
    tolerance : float
        Relative change of the energy at which the iteration ends.

    Returns
    -------
    Pole
        Position and width.

    Raises
    ------
    NumericalFault
        If the iteration does not settle on a decaying state.
    """
    growth = float(incoming_amplitude(stack, near)[1])

    def amplitude(energy: complex) -> complex:
        # One fixed scale: a scale that moved with the energy would not be analytic.
        mantissa, scale = incoming_amplitude(stack, energy)
        return complex(mantissa * np.exp(scale - growth))

    energy = complex(near)
    for _ in range(100):
        # Fourth-order difference: analytic, so any small step along the real axis serves.
        h = 1e-3 * max(abs(energy.imag), 1e-3 * abs(energy))
        near_pair = amplitude(energy + h) - amplitude(energy - h)
        far_pair = amplitude(energy + 2 * h) - amplitude(energy - 2 * h)
        change = amplitude(energy) * 12 * h / (8 * near_pair - far_pair)
        energy -= change
        if abs(change) <= tolerance * abs(energy):
            break
    else:
        raise NumericalFault(f"resonance pole near {near}: Newton's iteration did not settle")
    if not -energy.imag > tolerance * abs(energy):
        raise NumericalFault(f"resonance pole near {near}: found {energy}, which does not decay")
    return Pole(energy.real, -2 * energy.imag)


def _half_height(transmission: Callable[[float], float], peak: float, step: float) -> float:
    """Return where T has fallen to half its peak on the side that ``step`` points to."""
    from scipy.optimize import brentq  # noqa: PLC0415 - kept out of the program's start

    half = transmission(peak) / 2
    inner, outer = peak, peak + step
    for _ in range(100):
        if transmission(outer) < half:
            return float(brentq(lambda e: transmission(e) - half, inner, outer, xtol=1e-16))
        inner, outer = outer, outer + (outer - inner) * 1.3
    raise NumericalFault(f"peak at {peak}: T does not fall to half its height")


def resonance_peak(stack: Stack, lower: float, upper: float, *, samples: int = 4001) -> Peak:
    r"""Return the highest peak of T(E) between two energies and its width.

    The width is the full width at half the peak's own height, not
    :math:`\Gamma` of the pole.

    Parameters
    ----------
    stack : Stack
        Layers and leads.
    lower, upper : float
        Where to look [energy].
    samples : int
        Energies of the first scan; their distance must not miss the line.

    Returns
    -------
    Peak
        Position, height and full width at half height.

    Raises
    ------
    NumericalFault
        If T has no peak inside, or does not fall to half of it.
    """
    from scipy.optimize import minimize_scalar  # noqa: PLC0415 - kept out of the program's start

    def transmission(energy: float) -> float:
        return float(stack_transmission(stack, energy))

    energies = np.linspace(lower, upper, samples)
    top = int(np.argmax(stack_transmission(stack, energies)))
    if top in (0, samples - 1):
        raise NumericalFault(f"no peak of T(E) between {lower} and {upper}")
    left, right = float(energies[top - 1]), float(energies[top + 1])
    found = minimize_scalar(
        lambda e: -transmission(e), bounds=(left, right), method="bounded",
        options={"xatol": 1e-9 * (right - left)},
    )  # fmt: skip
    energy = float(found.x)
    step = (right - left) / 20
    width = _half_height(transmission, energy, step) - _half_height(transmission, energy, -step)
    return Peak(energy, transmission(energy), width)

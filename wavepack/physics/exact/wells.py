r"""Bound levels in closed form, or by one transcendental equation.

``c`` is :math:`\hbar^2/2m` [energy length**2]. Energies count from the bottom of
the well, except those of `sech2_well_levels` and `softcore_ground_state`, whose
potentials vanish far away.
"""

import math

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray


def box_levels(count: int, width: float, c: float) -> RealArray:
    r"""Return the lowest levels between hard walls.

    .. math:: E_n = c\,(\pi (n+1)/L)^2, \qquad n = 0, 1, \ldots

    Source: [LandauLifshitz1977]_, section 22.

    Parameters
    ----------
    count : int
        How many levels.
    width : float
        Distance L of the walls [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real, shape (count,)
        Levels [energy].
    """
    return np.asarray(c * (math.pi * np.arange(1, count + 1) / width) ** 2)


def finite_well_levels(
    depth: float, width: float, c: float, c_outside: float | None = None
) -> RealArray:
    r"""Return all bound levels of the finite square well.

    .. math:: q L + 2\arctan\frac{c\,q}{c_o\,\kappa} = n\pi, \qquad n = 1, 2, \ldots,
              \qquad E = c q^2, \qquad V_0 - E = c_o\kappa^2

    from :math:`\psi` and :math:`\psi'/m` continuous. The left side grows with the
    energy, so each n has at most one level. Source: [LandauLifshitz1977]_,
    section 22; [BenDanielDuke1966]_ for two masses.

    Parameters
    ----------
    depth, width : float
        Depth V0 [energy] and width L [length].
    c, c_outside : float
        :math:`\hbar^2/2m` inside and outside [energy length**2]; one serves both.

    Returns
    -------
    real array
        Levels above the bottom [energy], rising; never empty.
    """
    from scipy.optimize import brentq  # noqa: PLC0415 - kept out of the program's start

    outside = c if c_outside is None else c_outside

    def phase(energy: float) -> float:
        q, slope = math.sqrt(energy / c), math.sqrt(outside * (depth - energy))
        return q * width + 2 * math.atan2(math.sqrt(c * energy), slope)

    # At the brim the phase is q L + pi: each n below that has its level.
    most = math.ceil(phase(depth) / math.pi) - 1
    levels = [
        brentq(lambda e, n=n: phase(e) - n * math.pi, 0.0, depth, xtol=1e-15 * depth, rtol=1e-14)
        for n in range(1, most + 1)
    ]
    return np.array(levels)


def triangular_well_levels(count: int, slope: float, c: float) -> RealArray:
    r"""Return the lowest levels of a linear potential with a hard wall at its foot.

    .. math:: E_n = |a_{n+1}|\,(c F^2)^{1/3}

    with the zeros :math:`a_n` of the Airy function Ai. Source: [DLMF]_, section 9.9.

    Parameters
    ----------
    count : int
        How many levels.
    slope : float
        Slope F [energy/length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real, shape (count,)
        Levels above the foot [energy].
    """
    from scipy.special import ai_zeros  # noqa: PLC0415 - kept out of the program's start

    return np.asarray(-ai_zeros(count)[0] * (c * slope**2) ** (1 / 3))


def harmonic_levels(count: int, quantum: float) -> RealArray:
    r"""Return the lowest levels of the harmonic oscillator.

    .. math:: E_n = \hbar\omega\,(n + \tfrac12)

    Source: [LandauLifshitz1977]_, section 23.

    Parameters
    ----------
    count : int
        How many levels.
    quantum : float
        :math:`\hbar\omega` [energy].

    Returns
    -------
    real, shape (count,)
        Levels above the bottom [energy].
    """
    return np.asarray(quantum * (np.arange(count) + 0.5))


def morse_levels(depth: float, stiffness: float, c: float) -> RealArray:
    r"""Return all bound levels of the Morse oscillator :math:`D(1-e^{-a x})^2`.

    .. math:: E_n = \hbar\omega(n+\tfrac12) - \frac{[\hbar\omega(n+\tfrac12)]^2}{4D},
              \qquad \hbar\omega = 2a\sqrt{D c},
              \qquad n + \tfrac12 < \sqrt{D/c}/a

    Source: [Morse1929]_.

    Parameters
    ----------
    depth, stiffness : float
        Depth D [energy] and range parameter a [1/length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Levels above the bottom [energy], rising; empty if nothing is bound.
    """
    quantum = 2 * stiffness * math.sqrt(depth * c)
    count = max(0, math.ceil(math.sqrt(depth / c) / stiffness - 0.5))
    rung = quantum * (np.arange(count) + 0.5)
    return np.asarray(rung - rung**2 / (4 * depth))


def sech2_well_levels(depth: float, width: float, c: float) -> RealArray:
    r"""Return all bound levels of the well :math:`-V_0/\cosh^2(x/w)`.

    .. math:: E_n = -\frac{c}{w^2}(\lambda - n)^2, \qquad
              \lambda(\lambda+1) = V_0 w^2/c, \qquad n < \lambda

    Source: [PoschlTeller1933]_; [LandauLifshitz1977]_, section 23, problem 5.

    Parameters
    ----------
    depth, width : float
        Depth V0 [energy], positive, and width w [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Levels [energy], negative, rising.
    """
    strength = (math.sqrt(1 + 4 * depth * width**2 / c) - 1) / 2
    # A whole strength would bind its last level at zero: rounding must not count it.
    n = np.arange(math.ceil(strength * (1 - 1e-12)))
    return np.asarray(-c / width**2 * (strength - n) ** 2)


def softcore_ground_state(
    attraction: float, c: float, x: npt.ArrayLike = ()
) -> tuple[float, float, RealArray]:
    r"""Return the softening at which the soft-core ground state is known, and the state.

    .. math:: V = \frac{-A}{\sqrt{x^2 + s^2}}, \quad s = \sqrt2\,a, \quad a = 2c/A:
              \qquad E_0 = -\frac{A^2}{4c}, \qquad
              \psi_0 \propto (1 + r/a)\,e^{-r/a}, \quad r = \sqrt{x^2 + s^2}

    In atomic units s^2 = 2 and the energy is -1/2. Derived by insertion.

    Parameters
    ----------
    attraction : float
        Strength A [energy length], positive.
    c : float
        :math:`\hbar^2/2m` [energy length**2].
    x : array_like
        Positions [length].

    Returns
    -------
    softening : float
        s [length].
    energy : float
        Ground-state energy [energy], the potential being 0 far away.
    psi : real array
        State at ``x``, not normalised.
    """
    radius = 2 * c / attraction
    softening = math.sqrt(2) * radius
    r = np.hypot(np.asarray(x, dtype=float), softening) / radius
    return softening, -(attraction**2) / (4 * c), np.asarray((1 + r) * np.exp(-r))

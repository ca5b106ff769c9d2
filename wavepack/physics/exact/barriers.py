r"""Transmission of single barriers, wells and steps in closed form.

Each takes total energies [energy] on the scale where the incident side is at 0,
and ``c`` = :math:`\hbar^2/2m` [energy length**2]; each returns the probability
that the particle is transmitted (a ratio of fluxes), 0 where the incident
channel is closed.
"""

import math

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray


def _open(energy: npt.ArrayLike) -> tuple[RealArray, RealArray]:
    """Return the energies, and a copy in which closed ones are replaced by 1."""
    energy = np.asarray(energy, dtype=float)
    return energy, np.where(energy > 0, energy, 1.0)


def _sine_over_wavenumber(q2: RealArray, length: float) -> RealArray:
    r"""Return :math:`[\sin(qL)/q]^2` for real :math:`q^2` of either sign, 0 included."""
    q = np.sqrt(np.abs(q2))
    # Where qL underflows the quotient the limit is L; sinc and sinh need the same guard.
    small = q * length < 1e-8
    q = np.where(small, 1.0, q)
    with np.errstate(over="ignore"):  # sinh of a thick barrier is infinite, its T is 0
        ratio = np.where(q2 > 0, np.sin(q * length), np.sinh(q * length)) / q
        return np.asarray(np.where(small, length, ratio) ** 2)


def rectangular_barrier(energy: npt.ArrayLike, height: float, width: float, c: float) -> RealArray:
    r"""Return the transmission of a rectangular barrier, or well for negative height.

    .. math:: T = \Big[1 + \frac{V_0^2}{4 E c}\Big(\frac{\sin qL}{q}\Big)^2\Big]^{-1},
              \qquad q^2 = (E - V_0)/c

    Below the top :math:`\sin(qL)/q = \sinh(\kappa L)/\kappa`; at the top it is L.
    Source: [LandauLifshitz1977]_, section 25.

    Parameters
    ----------
    energy : array_like
        Total energy [energy].
    height, width : float
        Height V0 [energy] and width L [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Transmission, shape of ``energy``.
    """
    energy, safe = _open(energy)
    square = _sine_over_wavenumber((safe - height) / c, width)
    return np.asarray(np.where(energy > 0, 1 / (1 + height**2 * square / (4 * safe * c)), 0.0))


def sharp_step(
    energy: npt.ArrayLike, height: float, c: float, c_beyond: float | None = None
) -> RealArray:
    r"""Return the transmission of a sharp step of potential, mass, or both.

    .. math:: T = \frac{4 v_1 v_2}{(v_1 + v_2)^2}, \qquad v_i \propto \sqrt{c_i (E - V_i)}

    from :math:`\psi` and :math:`\psi'/m` continuous. A step of the mass alone
    transmits alike at every energy. Source: [LandauLifshitz1977]_, section 25;
    [BenDanielDuke1966]_ for the matching of masses.

    Parameters
    ----------
    energy : array_like
        Total energy [energy].
    height : float
        Potential beyond the step [energy].
    c, c_beyond : float
        :math:`\hbar^2/2m` before and beyond the step [energy length**2]; one
        value serves both.

    Returns
    -------
    real array
        Transmission, shape of ``energy``.
    """
    energy = np.asarray(energy, dtype=float)
    v1 = np.sqrt(c * np.maximum(energy, 0.0))
    v2 = np.sqrt((c if c_beyond is None else c_beyond) * np.maximum(energy - height, 0.0))
    total = np.where(v1 * v2 > 0, v1 + v2, 1.0)
    return np.asarray(4 * v1 * v2 / total**2)


def smooth_step_reflection(
    energy: npt.ArrayLike, height: float, width: float, c: float
) -> RealArray:
    r"""Return the reflection of the step :math:`V_0/(1 + e^{-x/w})`.

    .. math:: R = \Big[\frac{\sinh \pi w(k_1-k_2)}{\sinh \pi w(k_1+k_2)}\Big]^2

    Source: [LandauLifshitz1977]_, section 25, problem 3.

    Parameters
    ----------
    energy : array_like
        Total energy [energy].
    height, width : float
        Height V0 of the step [energy] and its width w [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Reflection, shape of ``energy``; 1 where either side is closed.
    """
    energy = np.asarray(energy, dtype=float)
    k1 = np.sqrt(np.maximum(energy, 0.0) / c)
    k2 = np.sqrt(np.maximum(energy - height, 0.0) / c)
    both = k1 * k2 > 0
    a, b = math.pi * width * np.abs(k1 - k2), np.where(both, math.pi * width * (k1 + k2), 1.0)
    # sinh a / sinh b with a < b, written so that nothing overflows.
    ratio = np.exp(a - b) * np.expm1(-2 * a) / np.expm1(-2 * b)
    return np.asarray(np.where(both, ratio**2, 1.0))


def sech2_barrier(energy: npt.ArrayLike, height: float, width: float, c: float) -> RealArray:
    r"""Return the transmission of :math:`V_0/\cosh^2(x/w)`, barrier or well.

    .. math:: T = \frac{\sinh^2 \pi k w}{\sinh^2 \pi k w + \cosh^2(\tfrac{\pi}{2} s)},
              \qquad s^2 = 4 V_0 w^2/c - 1

    with :math:`\cosh \to \cos` where :math:`s^2 < 0`; a well of
    :math:`V_0 = -\lambda(\lambda+1)c/w^2`, :math:`\lambda` whole, reflects nothing.
    Source: [Eckart1930]_; [LandauLifshitz1977]_, section 25, problem 4.

    Parameters
    ----------
    energy : array_like
        Total energy [energy].
    height, width : float
        Height V0 [energy], negative for a well, and width w [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Transmission, shape of ``energy``.
    """
    energy, safe = _open(energy)
    a = math.pi * width * np.sqrt(safe / c)
    s2 = 4 * height * width**2 / c - 1
    b = math.pi / 2 * math.sqrt(abs(s2))
    # Squares divided by e^(2a)/4, so that neither overflows before their quotient.
    below = np.expm1(-2 * a) ** 2
    with np.errstate(over="ignore"):
        if s2 > 0:
            above = (np.exp(b - a) + np.exp(-b - a)) ** 2
        else:
            above = 4 * math.cos(b) ** 2 * np.exp(-2 * a)
        return np.asarray(np.where(energy > 0, below / (below + above), 0.0))


def parabolic_barrier(energy: npt.ArrayLike, height: float, quantum: float) -> RealArray:
    r"""Return the transmission of the inverted parabola :math:`V_0 - m\omega^2 x^2/2`.

    .. math:: T = \frac{1}{1 + e^{-2\pi(E - V_0)/\hbar\omega}}

    Source: [Kemble1935]_; [HillWheeler1953]_.

    Parameters
    ----------
    energy : array_like
        Total energy [energy].
    height, quantum : float
        Top V0 and :math:`\hbar\omega` [energy].

    Returns
    -------
    real array
        Transmission, shape of ``energy``.
    """
    x = math.pi * (np.asarray(energy, dtype=float) - height) / quantum
    return np.asarray(0.5 * (1 + np.tanh(x)))  # the logistic function of 2x, without overflow


def saddle_transmission(
    energy: npt.ArrayLike, mode: int, height: float, quantum_x: float, quantum_y: float
) -> RealArray:
    r"""Return the transmission of one transverse mode through a saddle.

    .. math:: V = V_0 - \tfrac12 m\omega_x^2 x^2 + \tfrac12 m\omega_y^2 y^2, \qquad
              T_n = \frac{1}{1 + e^{-\pi\epsilon_n}}, \qquad
              \epsilon_n = \frac{2[E - \hbar\omega_y(n+\tfrac12) - V_0]}{\hbar\omega_x}

    The modes do not mix. Source: [Buttiker1990]_.

    Parameters
    ----------
    energy : array_like
        Total energy [energy].
    mode : int
        Transverse mode n, from 0.
    height, quantum_x, quantum_y : float
        V0, :math:`\hbar\omega_x` and :math:`\hbar\omega_y` [energy].

    Returns
    -------
    real array
        Transmission, shape of ``energy``.
    """
    return parabolic_barrier(energy, height + quantum_y * (mode + 0.5), quantum_x)

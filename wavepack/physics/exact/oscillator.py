r"""Gaussian packets in a harmonic trap, at rest or shaken.

The trap is :math:`m\omega^2 x^2/2`, centred at 0; ``quantum`` is
:math:`\hbar\omega` [energy], ``c`` is :math:`\hbar^2/2m` [energy length**2],
``hbar`` [energy time]. The ground state has :math:`\sigma = \sqrt{c/\hbar\omega}`.
"""

import math

import numpy as np
import numpy.typing as npt

from wavepack.arrays import ComplexArray, RealArray


def ground_width(quantum: float, c: float) -> float:
    r"""Return the standard deviation of the ground state.

    .. math:: \sigma_g = \sqrt{\hbar/2m\omega} = \sqrt{c/\hbar\omega}

    Parameters
    ----------
    quantum, c : float
        :math:`\hbar\omega` [energy]; :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    float
        Standard deviation [length].
    """
    return math.sqrt(c / quantum)


def oscillator_mean(
    t: npt.ArrayLike, center: float, k0: float, quantum: float, c: float, hbar: float
) -> RealArray:
    r"""Return the mean position of any packet in a harmonic trap.

    .. math:: \langle x\rangle = x_0\cos\omega t + \frac{2 c k_0}{\hbar\omega}\sin\omega t

    Source: [Schiff1968]_, section 13; [Husimi1953]_.

    Parameters
    ----------
    t : array_like
        Time [time].
    center, k0 : float
        Mean position [length] and mean wave number [1/length] at t = 0.
    quantum, c, hbar : float
        As in the module's heading.

    Returns
    -------
    real array
        Mean position [length].
    """
    angle = quantum * np.asarray(t, dtype=float) / hbar
    return np.asarray(center * np.cos(angle) + 2 * c * k0 / quantum * np.sin(angle))


def oscillator_wavenumber(
    t: npt.ArrayLike, center: float, k0: float, quantum: float, c: float, hbar: float
) -> RealArray:
    r"""Return the mean wave number of any packet in a harmonic trap.

    .. math:: \langle k\rangle = k_0\cos\omega t - \frac{\hbar\omega}{2c} x_0\sin\omega t

    Source: [Schiff1968]_, section 13; [Husimi1953]_.

    Parameters
    ----------
    t, center, k0, quantum, c, hbar
        As in `oscillator_mean`.

    Returns
    -------
    real array
        Mean wave number [1/length].
    """
    angle = quantum * np.asarray(t, dtype=float) / hbar
    return np.asarray(k0 * np.cos(angle) - quantum * center / (2 * c) * np.sin(angle))


def oscillator_width(
    t: npt.ArrayLike, sigma: float, quantum: float, c: float, hbar: float
) -> RealArray:
    r"""Return the standard deviation of a Gaussian packet in a harmonic trap.

    .. math:: \sigma(t)^2 = \sigma^2\cos^2\omega t
              + \Big(\frac{c}{\hbar\omega\,\sigma}\Big)^2\sin^2\omega t

    Constant for the width of the ground state (coherent), else it breathes twice a
    period (squeezed). Source: [Husimi1953]_.

    Parameters
    ----------
    t : array_like
        Time [time].
    sigma : float
        Standard deviation at t = 0, with no chirp [length].
    quantum, c, hbar : float
        As in the module's heading.

    Returns
    -------
    real array
        Standard deviation [length].
    """
    angle = quantum * np.asarray(t, dtype=float) / hbar
    return np.asarray(np.hypot(sigma * np.cos(angle), c / (quantum * sigma) * np.sin(angle)))


def oscillator_packet(
    x: npt.ArrayLike,
    t: float,
    center: float,
    sigma: float,
    k0: float,
    quantum: float,
    c: float,
    hbar: float,
) -> ComplexArray:
    r"""Return the wavefunction of a Gaussian packet in a harmonic trap.

    .. math:: \psi = (2\pi)^{-1/4} q^{-1/2} \exp\!\Big[\frac{i\hbar\dot q}{4 c q}\,\hbar z^2
              + i k z + \tfrac{i}{2}(x_t k_t - x_0 k_0)\Big], \qquad
              q = \sigma\cos\omega t + \frac{i c}{\hbar\omega\sigma}\sin\omega t

    with :math:`z = x - x_t`, and :math:`x_t, k_t` the classical mean; the root of q
    is continued through each period. Source: [Husimi1953]_.

    Parameters
    ----------
    x : array_like
        Positions [length].
    t : float
        Time [time].
    center, sigma, k0 : float
        Mean [length], standard deviation [length], mean wave number [1/length] at t = 0.
    quantum, c, hbar : float
        As in the module's heading.

    Returns
    -------
    complex array
        Wavefunction [length**-1/2], of norm 1; the overlap with t = 0 is the
        autocorrelation.
    """
    angle = quantum * t / hbar
    other = c / (quantum * sigma)
    q = sigma * math.cos(angle) + 1j * other * math.sin(angle)
    rate = -sigma * math.sin(angle) + 1j * other * math.cos(angle)  # dq/d(omega t)
    # q circles the origin once a period; beside the circle its argument strays < pi/2.
    turned = angle + np.angle(q * np.exp(-1j * angle))
    root = np.sqrt(abs(q)) * np.exp(0.5j * turned)
    mean = oscillator_mean(t, center, k0, quantum, c, hbar)
    k = oscillator_wavenumber(t, center, k0, quantum, c, hbar)
    z = np.asarray(x, dtype=float) - mean
    phase = k * z + (mean * k - center * k0) / 2
    chirp = quantum / (4 * c) * rate / q * z**2
    return np.asarray((2 * math.pi) ** -0.25 / root * np.exp(1j * (chirp + phase)))


def coherent_autocorrelation(
    t: npt.ArrayLike, center: float, k0: float, quantum: float, c: float, hbar: float
) -> ComplexArray:
    r"""Return :math:`\langle\psi(0)|\psi(t)\rangle` of a coherent state.

    .. math:: C = e^{-i\omega t/2}\exp[|a|^2(e^{-i\omega t} - 1)], \qquad
              |a|^2 = \frac{x_0^2}{4\sigma_g^2} + \sigma_g^2 k_0^2

    Source: [Schiff1968]_, section 13.

    Parameters
    ----------
    t, center, k0, quantum, c, hbar
        As in `oscillator_mean`; the packet has the width of the ground state.

    Returns
    -------
    complex array
        Autocorrelation.
    """
    angle = quantum * np.asarray(t, dtype=float) / hbar
    sigma = ground_width(quantum, c)
    quanta = (center / (2 * sigma)) ** 2 + (sigma * k0) ** 2
    return np.asarray(np.exp(-0.5j * angle + quanta * (np.exp(-1j * angle) - 1)))


def forced_mean(
    t: npt.ArrayLike,
    center: float,
    k0: float,
    quantum: float,
    force: float,
    drive_quantum: float,
    c: float,
    hbar: float,
    *,
    phase: float = 0.0,
) -> RealArray:
    r"""Return the mean position in a trap shaken by a uniform periodic force.

    .. math:: m\ddot x = -m\omega^2 x + F\cos(\Omega t + \varphi)

    The free motion of `oscillator_mean` plus the response from rest, written with
    :math:`\mathrm{sinc}` of the detuning, so it holds at resonance too (there it
    grows as :math:`F t\sin\omega t/2m\omega`). The width is that of the trap at rest.
    Source: [Husimi1953]_.

    Parameters
    ----------
    t, center, k0, quantum, c, hbar
        As in `oscillator_mean`.
    force : float
        Largest force F [energy/length].
    drive_quantum : float
        :math:`\hbar\Omega` [energy].
    phase : float
        :math:`\varphi` [rad].

    Returns
    -------
    real array
        Mean position [length].
    """
    t = np.asarray(t, dtype=float)
    middle = (drive_quantum + quantum) * t / (2 * hbar)
    beat = t / hbar * np.sinc((drive_quantum - quantum) * t / (2 * math.pi * hbar))
    in_phase = np.sin(middle) * beat
    quadrature = np.cos(middle) * beat - np.sin(quantum * t / hbar) / quantum
    scale = 2 * c * force / (drive_quantum + quantum)
    response = scale * (math.cos(phase) * in_phase + math.sin(phase) * quadrature)
    return np.asarray(oscillator_mean(t, center, k0, quantum, c, hbar) + response)

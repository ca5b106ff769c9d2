r"""Free motion of Gaussian packets.

A packet is :math:`\psi \propto \exp[-(x-x_0)^2/4\sigma^2 + i k_0 (x-x_0)]`, so
:math:`\sigma` is the standard deviation of :math:`|\psi|^2` and that of the wave
number is :math:`1/2\sigma`. Throughout, ``c`` is :math:`\hbar^2/2m`
[energy length**2] and ``hbar`` [energy time]; :math:`\hbar/m = 2c/\hbar`.
"""

import math

import numpy as np
import numpy.typing as npt

from wavepack.arrays import ComplexArray, RealArray


def wavenumber(energy: npt.ArrayLike, c: float) -> RealArray:
    r"""Return the wave number of a kinetic energy.

    .. math:: k = \sqrt{E/c}

    Parameters
    ----------
    energy : array_like
        Kinetic energy [energy], not negative.
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Wave number [1/length].
    """
    return np.asarray(np.sqrt(np.asarray(energy, dtype=float) / c))


def speed(k: npt.ArrayLike, c: float, hbar: float) -> RealArray:
    r"""Return the group speed of a wave number.

    .. math:: v = \hbar k/m = 2 c k/\hbar

    Parameters
    ----------
    k : array_like
        Wave number [1/length].
    c, hbar : float
        :math:`\hbar^2/2m` [energy length**2] and :math:`\hbar` [energy time].

    Returns
    -------
    real array
        Speed [length/time].
    """
    return np.asarray(2 * c * np.asarray(k, dtype=float) / hbar)


def free_mean(t: npt.ArrayLike, center: float, k0: float, c: float, hbar: float) -> RealArray:
    r"""Return the mean position of a free packet.

    .. math:: \langle x\rangle(t) = x_0 + 2 c k_0 t/\hbar

    Source: [CohenTannoudji1977]_, complement G-I.

    Parameters
    ----------
    t : array_like
        Time [time].
    center, k0 : float
        Mean position [length] and mean wave number [1/length] at t = 0.
    c, hbar : float
        :math:`\hbar^2/2m` [energy length**2] and :math:`\hbar` [energy time].

    Returns
    -------
    real array
        Mean position [length].
    """
    return np.asarray(center + speed(k0, c, hbar) * np.asarray(t, dtype=float))


def free_width(t: npt.ArrayLike, sigma: float, c: float, hbar: float) -> RealArray:
    r"""Return the standard deviation of a free Gaussian packet.

    .. math:: \sigma(t) = \sigma \sqrt{1 + (c t/\hbar\sigma^2)^2}

    Source: [CohenTannoudji1977]_, complement G-I.

    Parameters
    ----------
    t : array_like
        Time since the packet was narrowest [time].
    sigma : float
        Standard deviation of the density at t = 0 [length].
    c, hbar : float
        :math:`\hbar^2/2m` [energy length**2] and :math:`\hbar` [energy time].

    Returns
    -------
    real array
        Standard deviation [length].
    """
    return np.asarray(sigma * np.hypot(1.0, c * np.asarray(t, dtype=float) / (hbar * sigma**2)))


def free_packet(
    x: npt.ArrayLike, t: float, center: float, sigma: float, k0: float, c: float, hbar: float
) -> ComplexArray:
    r"""Return the wavefunction of a free Gaussian packet.

    .. math:: \psi = (2\pi)^{-1/4}\, q^{-1/2}
              \exp\!\Big[-\frac{(x-\langle x\rangle)^2}{4\sigma q}
              + i k_0 (x-\langle x\rangle) + \frac{i c k_0^2 t}{\hbar}\Big],
              \qquad q = \sigma + \frac{i c t}{\hbar\sigma}

    It solves :math:`i\hbar\,\partial_t\psi = -c\,\partial_x^2\psi`.
    Source: [CohenTannoudji1977]_, complement G-I.

    Parameters
    ----------
    x : array_like
        Positions [length].
    t : float
        Time [time].
    center, sigma, k0 : float
        Mean [length], standard deviation [length] and mean wave number [1/length] at t = 0.
    c, hbar : float
        :math:`\hbar^2/2m` [energy length**2] and :math:`\hbar` [energy time].

    Returns
    -------
    complex array
        Wavefunction [length**-1/2], of norm 1.
    """
    q = sigma + 1j * c * t / (hbar * sigma)
    z = np.asarray(x, dtype=float) - free_mean(t, center, k0, c, hbar)
    exponent = -(z**2) / (4 * sigma * q) + 1j * (k0 * z + c * k0**2 * t / hbar)
    return np.asarray((2 * math.pi) ** -0.25 / np.sqrt(q) * np.exp(exponent))


def rotated_covariance(widths: tuple[float, float], angle: float) -> RealArray:
    r"""Return the covariance of a packet whose principal axes are turned.

    .. math:: S = R\,\mathrm{diag}(\sigma_1^2, \sigma_2^2)\,R^T

    Parameters
    ----------
    widths : (float, float)
        Principal standard deviations [length].
    angle : float
        From +x to the principal axis of the first width, towards +y [rad].

    Returns
    -------
    real, shape (2, 2)
        Covariance of the density [length**2].
    """
    cos, sin = math.cos(angle), math.sin(angle)
    turn = np.array([[cos, -sin], [sin, cos]])
    return np.asarray(turn @ np.diag(np.square(widths)) @ turn.T)


def free_covariance(t: float, covariance: npt.ArrayLike, c: float, hbar: float) -> RealArray:
    r"""Return the covariance of a free Gaussian packet in any number of dimensions.

    .. math:: S(t) = S + (c t/\hbar)^2\, S^{-1}

    for a packet :math:`\exp(-\tfrac14 r^T S^{-1} r)` at t = 0. The principal axes
    stay; the narrower spreads faster. Source: [CohenTannoudji1977]_,
    complement G-I, along each principal axis.

    Parameters
    ----------
    t : float
        Time [time].
    covariance : array_like, shape (n, n)
        Covariance S of the density at t = 0 [length**2].
    c, hbar : float
        :math:`\hbar^2/2m` [energy length**2] and :math:`\hbar` [energy time].

    Returns
    -------
    real, shape (n, n)
        Covariance at time t [length**2].
    """
    start = np.asarray(covariance, dtype=float)
    return np.asarray(start + (c * t / hbar) ** 2 * np.linalg.inv(start))


def two_slits_density(
    y: npt.ArrayLike, t: float, separation: float, sigma: float, c: float, hbar: float
) -> RealArray:
    r"""Return the density behind two Gaussian slits.

    .. math:: \rho = \frac{e^{-(y-d/2)^2/2s^2} + e^{-(y+d/2)^2/2s^2}
              + 2 e^{-(y^2+d^2/4)/2s^2}\cos(y d\tau/2s^2)}
              {2\sqrt{2\pi}\,s\,(1 + e^{-d^2/8\sigma^2})},
              \quad \tau = \frac{c t}{\hbar\sigma^2},\quad s^2 = \sigma^2(1+\tau^2)

    Two free Gaussians, at rest across the slits, added and normalised; derived
    from `free_packet`.

    Parameters
    ----------
    y : array_like
        Position across the slits [length].
    t : float
        Time since the slits [time].
    separation, sigma : float
        Distance d of the centres and standard deviation of each density [length].
    c, hbar : float
        :math:`\hbar^2/2m` [energy length**2] and :math:`\hbar` [energy time].

    Returns
    -------
    real array
        Density [1/length].
    """
    y = np.asarray(y, dtype=float)
    tau = c * t / (hbar * sigma**2)
    s2 = sigma**2 * (1 + tau**2)
    direct = np.exp(-((y - separation / 2) ** 2) / (2 * s2))
    direct = direct + np.exp(-((y + separation / 2) ** 2) / (2 * s2))
    cross = np.exp(-(y**2 + separation**2 / 4) / (2 * s2)) * np.cos(y * separation * tau / (2 * s2))
    norm = 2 * math.sqrt(2 * math.pi * s2) * (1 + math.exp(-(separation**2) / (8 * sigma**2)))
    return np.asarray((direct + 2 * cross) / norm)


def fringe_period(t: float, separation: float, sigma: float, c: float, hbar: float) -> float:
    r"""Return the period of the interference term of `two_slits_density`.

    .. math:: \Lambda = \frac{4\pi\sigma^2(1+\tau^2)}{d\,\tau}
              \;\to\; \frac{\lambda L}{d}\quad(\tau\to\infty)

    The maxima of the density itself are drawn aside by the envelopes.

    Parameters
    ----------
    t, separation, sigma, c, hbar : float
        As in `two_slits_density`; t > 0.

    Returns
    -------
    float
        Period [length].
    """
    tau = c * t / (hbar * sigma**2)
    return 4 * math.pi * sigma**2 * (1 + tau**2) / (separation * tau)

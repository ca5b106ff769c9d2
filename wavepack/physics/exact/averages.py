r"""Averages of a stationary result over the momenta of a Gaussian packet."""

import itertools
import math
from collections.abc import Callable, Sequence

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray
from wavepack.errors import NumericalFault

_REACH = 10.0  # standard deviations of the wave number; beyond lie 2e-23


def momentum_density(k: npt.ArrayLike, k0: float, sigma: float) -> RealArray:
    r"""Return the density of wave numbers of a Gaussian packet.

    .. math:: |g(k)|^2 = \sigma\sqrt{2/\pi}\; e^{-2\sigma^2(k-k_0)^2}

    Parameters
    ----------
    k : array_like
        Wave number [1/length].
    k0, sigma : float
        Mean wave number [1/length]; standard deviation of the position [length].

    Returns
    -------
    real array
        Density [length]; its integral over all k is 1.
    """
    offset = np.asarray(k, dtype=float) - k0
    return np.asarray(sigma * math.sqrt(2 / math.pi) * np.exp(-2 * (sigma * offset) ** 2))


def _ladder(center: float, reach: float) -> list[float]:
    """Return wave numbers that close in on a place, so that no line there is stepped over."""
    rungs = [reach * 10.0**-j for j in range(13)]
    return [center, *(center - rung for rung in rungs), *(center + rung for rung in rungs)]


def packet_average(
    transmission: Callable[[float], float],
    k0: float,
    sigma: float,
    c: float,
    *,
    launch: float = 0.0,
    near: Sequence[float] = (),
    tolerance: float = 1e-10,
) -> float:
    r"""Return the probability that a Gaussian packet ends beyond an obstacle.

    .. math:: P = \int_0^\infty |g(k)|^2\; T(V_0 + c k^2)\; dk

    Exact for infinite time when the packet starts clear of the obstacle, moving
    towards it; what moves away (k < 0) never arrives. Adaptive quadrature.

    Parameters
    ----------
    transmission : callable
        T as a function of the total energy [energy].
    k0, sigma : float
        Mean wave number towards the obstacle [1/length], standard deviation of
        the position [length].
    c : float
        :math:`\hbar^2/2m` where the packet starts [energy length**2].
    launch : float
        Potential energy where the packet starts [energy].
    near : sequence of float
        Energies at which T is narrow or has a kink [energy]: resonances,
        thresholds.
    tolerance : float
        Absolute error allowed.

    Returns
    -------
    float
        Probability.

    Raises
    ------
    NumericalFault
        If the quadrature cannot reach the tolerance.
    """
    from scipy import integrate  # noqa: PLC0415 - kept out of the program's start

    lower, upper = max(0.0, k0 - _REACH / (2 * sigma)), max(0.0, k0 + _REACH / (2 * sigma))
    marks = (k for e in near if e > launch for k in _ladder(math.sqrt((e - launch) / c), upper))
    edges = sorted({lower, *(k for k in (k0, *marks) if lower < k < upper), upper})
    value, error = 0.0, 0.0
    for left, right in itertools.pairwise(edges):
        part, doubt, *_ = integrate.quad(
            lambda k: float(momentum_density(k, k0, sigma)) * transmission(launch + c * k * k),
            left, right, epsabs=tolerance / len(edges), epsrel=1e-13, limit=2000, full_output=1,
        )  # fmt: skip
        value, error = value + part, error + doubt
    if not error <= max(tolerance, 1e-12 * abs(value)):
        raise NumericalFault(
            f"packet average: need an error below {tolerance:g}, quadrature reached {error:.1e}; "
            "name the energies of narrow resonances in `near`"
        )
    return value

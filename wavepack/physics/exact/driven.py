r"""A region whose energy oscillates: exact exchange of quanta by mode matching.

Where :math:`V = V_0 + V_1\cos\omega t` uniformly, each solution
:math:`e^{iqx - iEt/\hbar}` becomes
:math:`e^{iqx - iEt/\hbar}\sum_n J_n(V_1/\hbar\omega)\,e^{-in\omega t}`: modes of the
quasi-energies :math:`E + m\hbar\omega`, joined by :math:`J_{n-m}` to the channels
outside. ``c`` is :math:`\hbar^2/2m` [energy length**2]; ``quantum`` is
:math:`\hbar\omega` [energy].
"""

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from wavepack.arrays import ComplexArray, RealArray


@dataclass(frozen=True)
class Sidebands:
    """Flux per outgoing channel over the incident flux.

    Attributes
    ----------
    orders : int array
        Quanta n absorbed, rising; energy of the channel is E + n quantum.
    transmitted, reflected : real arrays
        Probability in each channel, 0 where it is closed.
    """

    orders: npt.NDArray[np.int_]
    transmitted: RealArray
    reflected: RealArray

    def transmission(self, order: int) -> float:
        """Return the probability transmitted with ``order`` quanta absorbed; 0 beyond."""
        return float(self.transmitted[self.orders == order].sum())


def _channels(
    energy: float, quantum: float, amplitude: float, height: float, c: float, extra: int
) -> tuple[npt.NDArray[np.int_], ComplexArray, ComplexArray, RealArray]:
    """Return orders, wave numbers outside and in the region, and J of (order, mode)."""
    from scipy.special import jv  # noqa: PLC0415 - kept out of the program's start

    alpha = amplitude / quantum
    reach = math.ceil(2 * abs(alpha)) + extra
    orders = np.arange(-reach, reach + 1)
    kinetic = energy + orders * quantum
    for name, surplus in (("outside", kinetic), ("in the region", kinetic - height)):
        if np.min(np.abs(surplus)) < 1e-12 * quantum:
            raise ValueError(
                f"oscillating region: a channel {name} lies at its threshold; "
                f"move energy={energy:g} off a multiple of quantum={quantum:g}"
            )
    k, q = (np.sqrt(surplus / c + 0j) for surplus in (kinetic, kinetic - height))
    joined = jv(orders[:, None] - orders[None, :], alpha)
    return orders, k, q, np.asarray(joined, dtype=float)


def _weights(k: ComplexArray, amplitudes: ComplexArray, incident: complex) -> RealArray:
    """Return the flux of each channel over the incident one."""
    return np.asarray(k.real / incident.real * np.abs(amplitudes) ** 2)


def oscillating_region(
    energy: float,
    amplitude: float,
    quantum: float,
    length: float,
    c: float,
    *,
    height: float = 0.0,
    extra: int = 16,
) -> Sidebands:
    r"""Return the exact sidebands of a region of oscillating energy.

    .. math:: V = V_0 + V_1\cos\omega t \quad (0 < x < L), \qquad 0 \text{ outside}

    With modes :math:`a_m e^{iq_m x} + b_m e^{-iq_m(x-L)}` inside, continuity of
    :math:`\psi` and :math:`\psi'` at both faces in every channel gives

    .. math:: (KJ + JQ)\,a + (KJ - JQ)\,P b &= 2K e_0 \\
              (KJ - JQ)\,P a + (KJ + JQ)\,b &= 0

    with :math:`P = e^{iQL}`, which never grows, and :math:`J_{nm} = J_{n-m}(V_1/\hbar\omega)`.
    Source: [TienGordon1963]_ for the modes; [ButtikerLandauer1982]_ for the matching.

    Parameters
    ----------
    energy : float
        Incident energy, above 0 [energy].
    amplitude, quantum : float
        V1 and :math:`\hbar\omega` [energy].
    length : float
        Length L of the region [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].
    height : float
        Static part V0 of the region [energy].
    extra : int
        Channels kept beyond twice the argument of J, to either side.

    Returns
    -------
    Sidebands
        Transmitted and reflected probability per channel.

    Raises
    ------
    ValueError
        If the energy is not positive, or a channel lies exactly at its threshold.
    """
    if not energy > 0:
        raise ValueError(f"oscillating region: need energy > 0, got {energy:g}")
    orders, k, q, joined = _channels(energy, quantum, amplitude, height, c, extra)
    phase = np.exp(1j * q * length)
    plus, minus = k[:, None] * joined + joined * q, k[:, None] * joined - joined * q
    source = np.where(orders == 0, 2 * k, 0.0)
    system = np.block([[plus, minus * phase], [minus * phase, plus]])
    modes = np.linalg.solve(system, np.concatenate([source, np.zeros_like(source)]))
    a, b = np.split(modes, 2)
    incident = complex(k[orders == 0][0])
    reflected = joined @ (a + phase * b) - (orders == 0)
    transmitted = joined @ (phase * a + b)
    return Sidebands(orders, _weights(k, transmitted, incident), _weights(k, reflected, incident))


def oscillating_half_space(
    energy: float, amplitude: float, quantum: float, c: float, *, extra: int = 16
) -> Sidebands:
    r"""Return the exact sidebands behind the edge of an oscillating half-space.

    .. math:: V = V_1\cos\omega t\;(x > 0): \qquad (KJ + JQ)\,t = 2K e_0

    ``transmitted`` counts the modes of quasi-energy :math:`E + m\hbar\omega` inside,
    :math:`q_m|t_m|^2/k_0`, which tend to :math:`J_m^2(V_1/\hbar\omega)` for a fast
    particle. Source: [TienGordon1963]_.

    Parameters
    ----------
    energy, amplitude, quantum, c, extra
        As in `oscillating_region`.

    Returns
    -------
    Sidebands
        Probability per mode, and reflected per channel.

    Raises
    ------
    ValueError
        As `oscillating_region`.
    """
    if not energy > 0:
        raise ValueError(f"oscillating half-space: need energy > 0, got {energy:g}")
    orders, k, q, joined = _channels(energy, quantum, amplitude, 0.0, c, extra)
    source = np.where(orders == 0, 2 * k, 0.0)
    matching = k[:, None] * joined + joined * q
    modes = np.asarray(np.linalg.solve(matching, source), dtype=complex)
    incident = complex(k[orders == 0][0])
    reflected = joined @ modes - (orders == 0)
    return Sidebands(orders, _weights(q, modes, incident), _weights(k, reflected, incident))


def half_space_limit(order: int, amplitude: float, quantum: float) -> float:
    r"""Return the sideband weight of a fast particle entering an oscillating half-space.

    .. math:: J_n^2(V_1/\hbar\omega)

    Source: [TienGordon1963]_.

    Parameters
    ----------
    order : int
        Quanta n absorbed.
    amplitude, quantum : float
        V1 and :math:`\hbar\omega` [energy].

    Returns
    -------
    float
        Probability.
    """
    from scipy.special import jv  # noqa: PLC0415 - kept out of the program's start

    return float(jv(order, amplitude / quantum)) ** 2


def fast_limit(
    order: int, energy: float, amplitude: float, quantum: float, length: float, c: float
) -> float:
    r"""Return the sideband weight of a fast particle crossing an oscillating region.

    .. math:: J_n^2(\alpha), \qquad
              \alpha = \frac{2V_1}{\hbar\omega}\sin\frac{\omega L}{2v}, \qquad
              \frac{\omega L}{v} = \frac{\hbar\omega\,L}{2 c k}

    The phase :math:`\int V\,dt/\hbar` gathered on the way. Source: [TienGordon1963]_.

    Parameters
    ----------
    order : int
        Quanta n absorbed.
    energy, amplitude, quantum : float
        Incident energy, V1 and :math:`\hbar\omega` [energy].
    length, c : float
        Length L [length]; :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    float
        Probability.
    """
    from scipy.special import jv  # noqa: PLC0415 - kept out of the program's start

    transit = quantum * length / (2 * math.sqrt(c * energy))
    return float(jv(order, 2 * amplitude / quantum * math.sin(transit / 2))) ** 2

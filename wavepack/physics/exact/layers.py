r"""Exact scattering off a stack of layers, sharp edges, own masses, flat or tilted.

In each layer :math:`-(c\,\psi')' + V\psi = E\psi` with constant
:math:`c = \hbar^2/2m` and V constant or linear, so one 2x2 matrix of cosines or
of Airy functions carries :math:`(\psi, c\,\psi')` across; both stay continuous
where layers meet [BenDanielDuke1966]_. The outgoing wave of the right lead is
carried leftwards. In a barrier it grows that way, so rounding errors stay small
beside it however thick the barrier is.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from wavepack.arrays import ComplexArray, RealArray


@dataclass(frozen=True)
class Layer:
    r"""One layer of a stack.

    Attributes
    ----------
    thickness : float
        Thickness [length], not negative.
    height : float
        Potential [energy], at the left face if the layer is tilted.
    c : float
        :math:`\hbar^2/2m` inside [energy length**2].
    far_height : float or None
        Potential at the right face [energy]; None: flat.
    """

    thickness: float
    height: float
    c: float
    far_height: float | None = None

    def __post_init__(self) -> None:
        if not (self.thickness >= 0 and self.c > 0):
            raise ValueError(
                f"layer: need thickness >= 0 and c > 0, got {self.thickness} and {self.c}"
            )


@dataclass(frozen=True)
class Lead:
    r"""Uniform space that a stack ends in: potential [energy] and :math:`\hbar^2/2m`."""

    height: float
    c: float

    def __post_init__(self) -> None:
        if not self.c > 0:
            raise ValueError(f"lead: need c > 0, got {self.c}")


@dataclass(frozen=True)
class Stack:
    """Layers from left to right between two leads."""

    layers: tuple[Layer, ...]
    left: Lead
    right: Lead

    @property
    def thickness(self) -> float:
        """Distance between the leads [length]."""
        return sum(layer.thickness for layer in self.layers)


def uniform_stack(layers: Sequence[tuple[float, float]], c: float, lead: float = 0.0) -> Stack:
    """Return a stack of one mass between equal leads.

    Parameters
    ----------
    layers : sequence of (float, float)
        Thickness [length] and height [energy] of each, from left to right.
    c : float
        hbar^2/2m everywhere [energy length**2].
    lead : float
        Potential of both leads [energy].

    Returns
    -------
    Stack
        The stack.
    """
    ends = Lead(lead, c)
    return Stack(tuple(Layer(thickness, height, c) for thickness, height in layers), ends, ends)


@dataclass(frozen=True)
class _Crossing:
    """Matrix from right face to left face; its true value is matrix * exp(growth)."""

    uu: ComplexArray
    uw: ComplexArray
    wu: ComplexArray
    ww: ComplexArray
    growth: RealArray


def _cross_flat(layer: Layer, energy: ComplexArray) -> _Crossing:
    r"""Return the matrix of a flat layer: cos kd, sin(kd)/ck and their partners."""
    k = np.sqrt((energy - layer.height) / layer.c)
    phase = k * layer.thickness
    growth = np.abs(phase.imag)
    plus, minus = np.exp(1j * phase - growth), np.exp(-1j * phase - growth)
    cos, sin = (plus + minus) / 2, (plus - minus) / 2j
    # sin(kd)/k tends to d at the top of the layer, where k is 0.
    at_top = np.abs(phase) < 1e-8
    quotient = sin / np.where(at_top, 1.0, k)
    sin_over_k: ComplexArray = np.where(at_top, layer.thickness + 0j, quotient)
    return _Crossing(cos, -sin_over_k / layer.c, layer.c * k * sin, cos, growth)


def _cross_tilted(layer: Layer, far_height: float, energy: ComplexArray) -> _Crossing:
    r"""Return the matrix of a layer of linear V, by scaled Airy functions."""
    from scipy.special import airye  # noqa: PLC0415 - kept out of the program's start

    slope = (far_height - layer.height) / layer.thickness
    kappa = math.copysign((abs(slope) / layer.c) ** (1 / 3), slope)
    faces = [(v - energy) / (layer.c * kappa**2) for v in (layer.height, far_height)]
    (ai_l, dai_l, bi_l, dbi_l), (ai_r, dai_r, bi_r, dbi_r) = (airye(z) for z in faces)
    zeta_l, zeta_r = (2 / 3 * z * np.sqrt(z) for z in faces)
    # Of Ai(l) Bi(r) and of Bi(l) Ai(r); airye has taken these factors out.
    first, second = np.abs(zeta_r.real) - zeta_l, np.abs(zeta_l.real) - zeta_r
    growth = np.maximum(first.real, second.real)
    p, q = math.pi * np.exp(first - growth), math.pi * np.exp(second - growth)
    slope_unit = layer.c * kappa
    return _Crossing(
        p * ai_l * dbi_r - q * bi_l * dai_r,
        -(p * ai_l * bi_r - q * bi_l * ai_r) / slope_unit,
        slope_unit * (p * dai_l * dbi_r - q * dbi_l * dai_r),
        -(p * dai_l * bi_r - q * dbi_l * ai_r),
        growth,
    )


def _cross(layer: Layer, energy: ComplexArray) -> _Crossing:
    """Return the matrix of any layer."""
    far = layer.far_height
    if far is None or far == layer.height or layer.thickness == 0:
        return _cross_flat(layer, energy)
    return _cross_tilted(layer, far, energy)


def _impedance(lead: Lead, energy: ComplexArray) -> ComplexArray:
    r"""Return :math:`c k` of a lead; Im k > 0 where closed, Im k < 0 below a resonance."""
    return np.asarray(lead.c * np.sqrt((energy - lead.height) / lead.c))


def incoming_amplitude(stack: Stack, energy: npt.ArrayLike) -> tuple[ComplexArray, RealArray]:
    r"""Return what must come in from the left for one outgoing wave on the right.

    .. math:: a(E) = c_L k_L\,\psi(0) - i\, c_L \psi'(0)
              \qquad\text{for}\qquad \psi = e^{i k_R (x - D)},\; x > D

    that is :math:`2 c_L k_L` times the amplitude of :math:`e^{i k_L x}`. Its zeros
    at complex energy are the resonances.

    Parameters
    ----------
    stack : Stack
        Layers and leads.
    energy : array_like
        Total energy, real or complex [energy].

    Returns
    -------
    complex array, real array
        Mantissa m and growth g: :math:`a = m\,e^g`, never overflowing.
    """
    a, _, growth = _amplitudes(stack, energy)
    return a, growth


def _amplitudes(
    stack: Stack, energy: npt.ArrayLike
) -> tuple[ComplexArray, ComplexArray, RealArray]:
    """Return incoming and reflected amplitude (times 2 c k), and their common growth."""
    energies = np.asarray(energy, dtype=complex)
    u, w = np.ones_like(energies), 1j * _impedance(stack.right, energies)
    growth = np.zeros(energies.shape)
    for layer in reversed(stack.layers):
        m = _cross(layer, energies)
        u, w = m.uu * u + m.uw * w, m.wu * u + m.ww * w
        growth = growth + m.growth
    z = _impedance(stack.left, energies)
    return np.asarray(z * u - 1j * w), np.asarray(z * u + 1j * w), growth


def stack_transmission(stack: Stack, energy: npt.ArrayLike) -> RealArray:
    r"""Return the transmission of a stack for a particle from the left.

    .. math:: T = \frac{4\, c_L k_L\, c_R k_R}{|a(E)|^2}

    with the incoming amplitude a of `incoming_amplitude`: the ratio of the fluxes.
    Source: [TsuEsaki1973]_; [BenDanielDuke1966]_ for the matching.

    Parameters
    ----------
    stack : Stack
        Layers and leads.
    energy : array_like
        Total energy, real [energy].

    Returns
    -------
    real array
        Transmission, 0 where either lead is closed.
    """
    energies = np.asarray(energy, dtype=float)
    incoming, _, growth = _amplitudes(stack, energies)
    z_left, z_right = (_impedance(lead, energies + 0j).real for lead in (stack.left, stack.right))
    both = z_left * z_right > 0
    size = np.where(both, np.abs(incoming), 1.0)
    return np.asarray(np.where(both, 4 * z_left * z_right / size**2 * np.exp(-2 * growth), 0.0))


def stack_reflection(stack: Stack, energy: npt.ArrayLike) -> RealArray:
    r"""Return the reflection of a stack for a particle from the left.

    .. math:: R = \left|\frac{c_L k_L\psi + i c_L\psi'}{c_L k_L\psi - i c_L\psi'}\right|^2

    computed apart from T, so that T + R = 1 is a check.

    Parameters
    ----------
    stack : Stack
        Layers and leads.
    energy : array_like
        Total energy, real [energy].

    Returns
    -------
    real array
        Reflection, 1 where the left lead is closed.
    """
    energies = np.asarray(energy, dtype=float)
    incoming, outgoing, _ = _amplitudes(stack, energies)
    is_open = energies > stack.left.height
    ratio = np.abs(outgoing) / np.where(is_open, np.abs(incoming), 1.0)
    return np.asarray(np.where(is_open, ratio**2, 1.0))


def triangular_barrier(
    energy: npt.ArrayLike, height: float, slope: float, length: float, c: float
) -> RealArray:
    r"""Return the transmission of a tilted barrier, as in field emission.

    .. math:: V = 0\;(x<0), \qquad V_0 - F x\;(0<x<L), \qquad V_0 - F L\;(x>L)

    Exact, by Airy functions. For a barrier that is thick below the top
    :math:`\ln T \to -\tfrac43 (V_0-E)^{3/2}/(F\sqrt{c})` plus a slow prefactor.
    Source: [FowlerNordheim1928]_.

    Parameters
    ----------
    energy : array_like
        Total energy [energy], from the potential in front of the barrier.
    height : float
        Height V0 of the front face [energy].
    slope : float
        Fall F of the potential [energy/length].
    length : float
        Length L of the fall [length].
    c : float
        :math:`\hbar^2/2m` [energy length**2].

    Returns
    -------
    real array
        Transmission, shape of ``energy``.
    """
    foot = height - slope * length
    stack = Stack((Layer(length, height, c, foot),), Lead(0.0, c), Lead(foot, c))
    return stack_transmission(stack, energy)

r"""Absorbing layers: a negative imaginary potential -iW at the ends of an axis.

A layer is applied as a real damping factor of its own, never mixed into the
real potential, so that what it removes can be booked cell by cell.
"""

import math
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from wavepack.arrays import RealArray
from wavepack.grid.axis import Axis

#: sqrt(2) K(1/2), the width of the transmission-free form in its own variable.
LEMNISCATE: Final = 2.6220575542921198

#: Energies that the search for a strength tells apart.
MOST_ENERGIES: Final = 48

Form = Literal["transmission-free", "polynomial"]


@dataclass(frozen=True)
class Layer:
    r"""One absorbing layer at the start or the stop of an axis.

    Transmission-free, with :math:`u = C s/w` the depth s into the layer in
    units of its width [Manolopoulos2002]_:

    .. math::
        W = E_0\,\Bigl[A u - B u^3 + \frac{4}{(C-u)^2} - \frac{4}{(C+u)^2}\Bigr],
        \qquad A = 1 - \frac{16}{C^3},\ B = \frac{1 - 17/C^3}{C^2}

    singular at the far side, so nothing gets through. Polynomial
    [RissMeyer1996]_: :math:`W = E_0 (s/w)^p`.

    Attributes
    ----------
    axis : int
        Array axis.
    upper : bool
        At the stop (True) or the start (False) of the axis.
    start, stop : float
        Where the layer lies [length].
    strength : float
        :math:`E_0` [energy]: for the transmission-free form the lowest energy
        it is made for.
    """

    axis: int
    upper: bool
    start: float
    stop: float
    form: Form
    strength: float
    power: float = 3.0

    @property
    def width(self) -> float:
        """Thickness [length]."""
        return self.stop - self.start

    def damping(self, x: RealArray) -> RealArray:
        """Return W(x) >= 0 [energy]; infinite at the singular end, zero outside."""
        depth = (x - self.start if self.upper else self.stop - x) / self.width
        return self.strength * profile(self.form, np.clip(depth, 0.0, 1.0), self.power)


def profile(form: Form, depth: RealArray, power: float) -> RealArray:
    """Return W in units of its strength, for a depth of 0 to 1 into the layer."""
    if form == "polynomial":
        return np.asarray(depth, dtype=float) ** power
    c = LEMNISCATE
    u = c * np.asarray(depth, dtype=float)
    with np.errstate(divide="ignore"):
        singular = 4 / (c - u) ** 2
    return (1 - 16 / c**3) * u - (1 - 17 / c**3) / c**2 * u**3 + singular - 4 / (c + u) ** 2


def reflection(
    layer: Layer, energies: RealArray, stiffness: float, *, closed: bool, slices: int = 400
) -> RealArray:
    r"""Return what one layer gives back, by energy: reflection and what leaks through.

    The stationary problem :math:`-c\psi'' - iW\psi = E\psi` through the layer
    cut into slices of constant W. Behind the layer stands a wall (``closed``)
    or open space, whose transmission counts as given back: on a periodic axis
    it enters the opposite layer.

    Parameters
    ----------
    energies : real, shape (n,)
        Kinetic energies towards the layer [energy]; entries <= 0 give 1.
    stiffness : float
        :math:`\hbar^2/2m` [energy length**2].
    """
    given = np.asarray(energies, dtype=float)
    energy = np.where(given > 0, given, layer.strength)  # stand-ins; overruled below
    k = np.sqrt(energy / stiffness).astype(complex)
    thickness = layer.width / slices
    middles = (np.arange(slices) + 0.5) / slices
    w = layer.strength * profile(layer.form, middles, layer.power)
    # Reflection amplitude seen at the far side of each slice, from the back on.
    gamma = np.full(k.shape, -1.0 + 0j) if closed else np.zeros(k.shape, dtype=complex)
    passed = np.ones(k.shape, dtype=complex)
    behind = k
    for strength in w[::-1]:
        q = np.sqrt((energy + 1j * strength) / stiffness)
        step = (q - behind) / (q + behind)
        phase = np.exp(1j * q * thickness)
        denominator = 1 + step * gamma
        if not closed:
            passed = passed * (1 + step) / denominator * phase
        gamma = (step + gamma) / denominator * phase**2
        behind = q
    step = (k - behind) / (k + behind)
    denominator = 1 + step * gamma
    passed = passed * (1 + step) / denominator
    gamma = (step + gamma) / denominator
    back = np.abs(gamma) ** 2 + (0.0 if closed else np.abs(passed) ** 2)
    return np.where(given > 0, np.minimum(back, 1.0), 1.0)


def suited_strength(
    layer: Layer, energies: RealArray, weights: RealArray, stiffness: float, *, closed: bool
) -> float:
    """Return the strength [energy] that gives back least of a weighted set of energies.

    A search over two decades on either side of the mean energy; the layer's own
    strength is ignored.
    """
    energies, weights = _gathered(energies, weights)
    mean = float(np.sum(weights * energies) / np.sum(weights))

    def given_back(log_strength: float) -> float:
        trial = Layer(
            layer.axis,
            layer.upper,
            layer.start,
            layer.stop,
            layer.form,
            mean * math.exp(log_strength),
            layer.power,
        )
        back = reflection(trial, energies, stiffness, closed=closed, slices=120)
        return float(np.sum(weights * back))

    scale = np.linspace(math.log(1e-2), math.log(1e2), 25)
    costs = [given_back(s) for s in scale]
    best = int(np.argmin(costs))
    fine = np.linspace(scale[max(best - 1, 0)], scale[min(best + 1, scale.size - 1)], 9)
    return mean * math.exp(float(fine[int(np.argmin([given_back(s) for s in fine]))]))


def _gathered(energies: RealArray, weights: RealArray) -> tuple[RealArray, RealArray]:
    """Return at most `MOST_ENERGIES` energies with the weight of those around each."""
    order = np.argsort(energies)
    groups = np.array_split(order, min(MOST_ENERGIES, energies.size))
    weight = np.array([weights[group].sum() for group in groups])
    mean = np.array([energies[group] @ weights[group] for group in groups])
    keep = weight > 0
    return mean[keep] / weight[keep], weight[keep]


def damping_of(layers: tuple[Layer, ...], axis: Axis, array_axis: int) -> RealArray:
    """Return the summed W [energy] of all layers of one axis at its points."""
    total = np.zeros(axis.points)
    for layer in layers:
        if layer.axis == array_axis:
            total += layer.damping(axis.coordinates)
    return total

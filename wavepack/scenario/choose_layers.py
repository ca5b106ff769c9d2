r"""How wide an absorbing layer must be, and what grid and step it needs.

Steps and points too coarse for a layer make it give back more than the stationary
problem says. Measured with free packets (150 and 250 meV, mass 0.067, layers of 1.4 to 4
wavelengths):

.. math:: 13\,(k w)^{-3.45}\,(E\,dt/\hbar)^2
          + 5\cdot10^{-5}\,(9.2/k w)^{3.2}\,(k\Delta/0.82)^4
"""

import math
from collections.abc import Iterator, Mapping
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.physics.absorbers import Layer, reflection
from wavepack.scenario.build import Setup
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.slices import gathered
from wavepack.scenario.verdicts import up

#: Energies told apart and slices of a layer, coarse since the forecast looks again.
ENERGIES: Final = 24
SLICES: Final = 100
#: Widths looked at, in mean wavelengths.
NARROWEST: Final = 0.25
WIDEST: Final = 12.0
#: Halvings of the interval that holds the width.
HALVINGS: Final = 6
#: Wider layers that give back no less than this share of it are no better.
NO_BETTER: Final = 0.9
#: What steps and points too coarse for a layer add to what it gives back (see above).
STEP_SHARE: Final = (13.0, 3.45)
GRAIN_SHARE: Final = (5e-5, 9.2, 3.2, 0.82)


def least_width(setup: Setup, estimates: Estimates, layer: Layer, goal: float) -> float:
    """Return the least width [length] at which a layer gives back less than a goal.

    Where none does, one beyond which wider is no better.
    """
    energies, weights = estimates.arriving(layer)
    if not float(weights.sum()) > 0:
        energies, weights = setup.content.towards(
            layer.axis, setup.landscape, layer.start if layer.upper else layer.stop
        )
    energies, weights = gathered(energies, weights, ENERGIES)
    mean = float(energies @ weights) / float(weights.sum())
    wavelength = 2 * math.pi * math.sqrt(estimates.c / mean)
    closed = estimates.closed(layer)

    def back(width: float) -> float:
        strengths = _strengths(setup, mean)
        return min(
            _given_back(layer, width, strength, energies, weights, estimates.c, closed=closed)
            for strength in strengths
        )

    lower, upper = math.log(NARROWEST), math.log(WIDEST)
    reached = max(goal, back(WIDEST * wavelength) / NO_BETTER)
    for _ in range(HALVINGS):
        middle = (lower + upper) / 2
        enough = back(math.exp(middle) * wavelength) <= reached
        lower, upper = (lower, middle) if enough else (middle, upper)
    return up(math.exp(upper) * wavelength)


def step_for_layers(
    setup: Setup,
    estimates: Estimates,
    widths: Mapping[str, tuple[float, float]],
    goal: float,
) -> float:
    """Return the longest step [time] at which layers give back less than a goal through it."""
    longest = math.inf
    for _, width, k in _waves(setup, estimates, widths):
        share = STEP_SHARE[0] * (k * width) ** -STEP_SHARE[1]
        turn = estimates.hbar / (estimates.c * k**2)
        longest = min(longest, turn * math.sqrt(goal / share))
    return longest


def spacing_for_layers(
    setup: Setup,
    estimates: Estimates,
    widths: Mapping[str, tuple[float, float]],
    goal: float,
    axis: int,
) -> float:
    """Return the largest spacing [length] at which layers give back less than a goal through it."""
    share, waves, power, grain = GRAIN_SHARE
    largest = math.inf
    for index, width, k in _waves(setup, estimates, widths):
        if index == axis:
            added = share * (waves / (k * width)) ** power
            largest = min(largest, grain / k * (goal / added) ** 0.25)
    return largest


def _waves(
    setup: Setup, estimates: Estimates, widths: Mapping[str, tuple[float, float]]
) -> Iterator[tuple[int, float, float]]:
    """Yield axis, width and mean wave number [1/length] of each layer that is reached."""
    for layer in setup.bare_layers:
        energies, weights = estimates.arriving(layer)
        total = float(weights.sum())
        if total > 0:
            k = math.sqrt(float(energies @ weights) / total / estimates.c)
            yield layer.axis, widths[setup.grid.names[layer.axis]][layer.upper], k


def _strengths(setup: Setup, mean: float) -> list[float]:
    """Return the strengths that a layer may get, as `Setup` will choose among them."""
    spec = setup.scenario.absorber
    if spec is not None and spec.strength is not None:
        return [spec.strength]
    if spec is not None and spec.lowest_energy is not None and spec.form != "polynomial":
        return [spec.lowest_energy]
    return [mean * float(factor) for factor in np.geomspace(0.03, 10.0, 11)]


def _given_back(
    layer: Layer,
    width: float,
    strength: float,
    energies: RealArray,
    weights: RealArray,
    stiffness: float,
    *,
    closed: bool,
) -> float:
    trial = Layer(layer.axis, layer.upper, 0.0, width, layer.form, strength, layer.power)
    back = reflection(trial, energies, stiffness, closed=closed, slices=SLICES)
    return float(back @ weights)

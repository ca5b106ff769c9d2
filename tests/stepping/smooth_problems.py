"""Smooth problems in natural units (hbar = m = 1) with nothing absorbing."""

from itertools import pairwise

import numpy as np

from wavepack.arrays import ComplexArray
from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario

HEAD = """
title = "smooth"
[units]
system = "atomic"
[particle]
mass = 1.0
[time]
end = {end}
[propagator]
method = "{method}"
{orders}
step = {step}
[output]
frames = 2
"""
LINE = """
[grid]
x = {{ from = -12.0, to = 12.0, points = {points}, ends = "{ends}" }}
[[packet]]
shape = "gaussian"
center = {{ x = -3.0 }}
sigma = {{ x = 0.8 }}
wavenumber = {{ x = 1.5 }}
[[potential]]
shape = "gaussian"
height = 1.5
center = {{ x = 0.0 }}
sigma = {{ x = 1.2 }}
"""
PLANE = """
[grid]
x = {{ from = -10.0, to = 10.0, points = {points}, ends = "{ends}" }}
y = {{ from = -9.0, to = 9.0, points = {points}, ends = "periodic" }}
[[packet]]
shape = "gaussian"
center = {{ x = -2.5, y = 0.5 }}
sigma = {{ x = 0.9, y = 1.0 }}
wavenumber = {{ x = 1.5, y = -0.3 }}
[[potential]]
shape = "gaussian"
height = 1.5
center = {{ x = 0.0, y = 0.0 }}
sigma = {{ x = 1.2, y = 1.6 }}
"""
DRIVEN = """
[[potential]]
shape = "gaussian"
height = 0.8
center = {center}
sigma = {sigma}
drive = { photon_energy = 1.3, phase = "40 deg" }
"""

#: Widths of driven pieces: one acts on the whole grid, the other in a box of it.
DRIVES = {"": (), "wide": (1.5,), "narrow": (0.5,), "both": (1.5, 0.5)}


def problem(
    method: str,
    step: float,
    *,
    axes: int = 1,
    driven: bool = False,
    drives: str = "",
    orders: str = "",
    points: int = 128,
    ends: str = "periodic",
    end: float = 1.0,
) -> Setup:
    """Return a packet that meets a smooth barrier, driven or not, on one or two axes."""
    text = HEAD.format(method=method, orders=orders, step=step, end=end)
    text += (LINE if axes == 1 else PLANE).format(points=points, ends=ends)
    center = "{ x = 0.5 }" if axes == 1 else "{ x = 0.5, y = 0.2 }"
    for sigma in DRIVES["wide" if driven else drives]:
        text += DRIVEN.replace("{center}", center).replace("{sigma}", str(sigma))
    return Setup(parse_scenario(text))


def final_state(setup: Setup, stops: int = 1) -> ComplexArray:
    """Return the state at the end, stopping a number of times on the way."""
    stepper = setup.bind(threads=1)
    stepper.psi[...] = setup.start[0]
    marks = [round(i * setup.steps / stops) for i in range(stops + 1)]
    for first, last in pairwise(marks):
        stepper.advance(first, last)
    return np.array(stepper.psi)


def distance(setup: Setup, a: ComplexArray, b: ComplexArray) -> float:
    """Return the norm of the difference of two states."""
    return float(np.sqrt(setup.grid.norm(a - b)))

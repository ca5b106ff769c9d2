"""Small scenarios for the invariants, and how to step them."""

from wavepack.arrays import ComplexArray
from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario
from wavepack.stepping.scheme import Stepper

#: Packet, hill and well between walls; nothing absorbs.
LINE = """
title = "line"
[particle]
mass = 0.067
[grid]
x = { from = -30.0, to = 30.0, points = 63, ends = "walls" }
[[potential]]
name = "hill"
shape = "gaussian"
height = 0.1
center = { x = 6.0 }
sigma = { x = 4.0 }
[[packet]]
shape = "gaussian"
center = { x = -8.0 }
sigma = { x = 5.0 }
wavenumber = { x = 0.3 }
[propagator]
step = 0.5
[time]
end = 100.0
[output]
frames = 2
"""

#: The same in the plane, periodic along x.
PLANE = """
title = "plane"
[particle]
mass = 0.067
[grid]
x = { from = -30.0, to = 30.0, points = 24, ends = "periodic" }
y = { from = -25.0, to = 25.0, points = 19, ends = "walls" }
[[potential]]
name = "hill"
shape = "gaussian"
height = 0.1
center = { x = 6.0, y = -3.0 }
sigma = { x = 5.0, y = 6.0 }
[[packet]]
shape = "gaussian"
center = { x = -6.0, y = 2.0 }
sigma = { x = 6.0, y = 5.0 }
wavenumber = { x = 0.3, y = 0.1 }
[propagator]
step = 0.5
[time]
end = 100.0
[output]
frames = 2
"""

SPLIT_2 = ("propagator.order=2",)
SPLIT_4 = ("propagator.order=4",)
IMPLICIT = ('propagator.method="crank-nicolson"',)
METHODS = {"split-operator 2": SPLIT_2, "split-operator 4": SPLIT_4, "crank-nicolson": IMPLICIT}


def ready(text: str, *overrides: str) -> tuple[Setup, Stepper]:
    """Return a scenario made ready and its stepper, holding the initial state."""
    setup = Setup(parse_scenario(text, overrides=overrides))
    stepper = setup.bind(1)
    stepper.psi[...] = setup.start[0]
    return setup, stepper


def final(text: str, *overrides: str) -> ComplexArray:
    """Return the last state of a scenario."""
    setup, stepper = ready(text, *overrides)
    stepper.advance(0, setup.steps)
    return stepper.psi.copy()

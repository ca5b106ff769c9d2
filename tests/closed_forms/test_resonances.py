"""Double barriers and decaying states: resonances in energy and in time."""

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import propagate
from tests.closed_forms.reference_values import rows

#: Barriers of 3 nm about a well of 5 nm.
DOUBLE = """
title = "double barrier"
[particle]
mass = 0.067
[grid]
x = { from = -260.0, to = 200.0, points = 2000, ends = "absorbing" }
[[potential]]
shape = "layers"
start = -5.5
layers = [
  { thickness = 3.0, height = 0.3 },
  { thickness = 5.0, height = 0.0 },
  { thickness = 3.0, height = 0.3 },
]
[[packet]]
shape = "gaussian"
center = { x = -90.0 }
sigma = { x = 12.0 }
energy = 0.088
[absorber]
width = 120.0
[propagator]
step = 0.035
[time]
end = 2200.0
[[detector]]
name = "exit"
x = 50.0
energies = { from = 0.08, to = 0.10, points = 201 }
[output]
frames = 2
"""

#: The same where the barriers have a mass of their own.
MASSES = DOUBLE.replace("height = 0.3", "height = 0.3, mass = 0.092")


def line(energies: np.ndarray, transmission: np.ndarray) -> tuple[float, float, float]:
    """Return position, height and full width at half height of the highest peak."""
    top = int(np.argmax(transmission))
    a, b, height = np.polyfit(energies[top - 2 : top + 3] - energies[top],
                              transmission[top - 2 : top + 3], 2)  # fmt: skip
    position, peak = energies[top] - b / (2 * a), height - b * b / (4 * a)
    rising = np.interp(peak / 2, transmission[: top + 1], energies[: top + 1])
    falling = np.interp(-peak / 2, -transmission[top:], energies[top:])
    return float(position), float(peak), float(falling - rising)


def peak_of_table(check: str, barrier: float) -> tuple[float, float]:
    """Return position and width of the peak in the table [eV]."""
    energy = next(r for r in rows(check, "peak_energy") if r.parameters["barrier"] == barrier
                  and r.parameters["height"] == 0.3)  # fmt: skip
    width = next(r for r in rows(check, "peak_width") if r.parameters["barrier"] == barrier
                 and r.parameters["height"] == 0.3)  # fmt: skip
    return energy.value, width.value


def test_resonance_of_a_double_barrier() -> None:
    """Position, height and width of the line of T(E) at 88.6 meV, one mass."""
    outcome = propagate(DOUBLE)
    position, height, width = line(*outcome.spectrum("exit"))
    energy, fwhm = peak_of_table("P8", 3.0)
    agree("P8 position in widths", position / fwhm, energy / fwhm)
    agree("P8 width", width, fwhm)
    agree("P8 height", height, 1.0)


def test_resonance_with_two_masses() -> None:
    """Position and width of the line at 81.4 meV where the barriers have their own mass."""
    outcome = propagate(
        MASSES, 'propagator.method="crank-nicolson"',
        "propagator.step=0.4", "time.end=4400.0", "packet.energy=0.081",
        "detector.exit.energies.from=0.077", "detector.exit.energies.to=0.086",
        "detector.exit.energies.points=181",
    )  # fmt: skip
    position, height, width = line(*outcome.spectrum("exit"))
    energy, fwhm = peak_of_table("P9", 3.0)
    agree("P9 position", position, energy)
    agree("P9 width", width, fwhm)
    agree("P9 height", height, 1.0)


DECAY = """
title = "decay through thin walls"
[particle]
mass = 0.067
[grid]
x = { from = -230.0, to = 230.0, points = 3072, ends = "absorbing" }
[[potential]]
name = "walls"
shape = "layers"
start = -5.5
layers = [
  { thickness = 3.0, height = 0.3 },
  { thickness = 5.0, height = 0.0 },
  { thickness = 3.0, height = 0.3 },
]
[[potential]]
name = "left"
shape = "slab"
height = 0.3
x = { below = -5.5 }
acts = "before"
[[potential]]
name = "right"
shape = "slab"
height = 0.3
x = { above = 5.5 }
acts = "before"
[[packet]]
shape = "eigenstate"
[absorber]
width = 180.0
[propagator]
step = 0.025
[time]
end = 500.0
[[region]]
name = "well"
x = { from = -2.5, to = 2.5 }
[[region]]
name = "outside"
where = "x < -5.5 or x > 5.5"
[output]
frames = 2
record_every = 1.0
"""


def rate(times: np.ndarray, population: np.ndarray, first: float, last: float) -> float:
    """Return the rate [1/time] of the exponential that fits between two times."""
    keep = (times >= first) & (times <= last)
    return -float(np.polyfit(times[keep], np.log(population[keep]), 1)[0])


@pytest.mark.parametrize(
    "method",
    [(), ('propagator.method="crank-nicolson"', "propagator.step=0.2")],
    ids=["split-operator", "crank-nicolson"],
)
def test_decay_of_a_quasibound_state(method: tuple[str, ...]) -> None:
    """The well empties at Gamma/hbar after the outer walls are gone."""
    outcome = propagate(DECAY, *method)
    times, hbar = outcome.series("time"), outcome.setup.particle.hbar
    wanted = rows("P10", "pole_width")[0].value
    # The walls beyond are gone at t = 0; with them the state has its level's energy.
    prepared = outcome.series("energy")[0] + 0.3 * outcome.region("outside")[0]
    agree("P10 prepared energy", prepared, rows("P10", "prepared_energy")[0].value)
    agree("P10 rate", hbar * rate(times, outcome.region("well"), 150.0, 500.0), wanted)
    survival = np.abs(outcome.series("autocorrelation")) ** 2
    agree("P10 rate of survival", hbar * rate(times, survival, 150.0, 500.0), wanted)


EXPONENTIAL = """
title = "V = 7.5 r^2 exp(-r)"
[units]
system = "atomic"
[particle]
mass = 1.0
[grid]
x = { from = 0.0, to = 60.0, points = 767, ends = ["walls", "absorbing"] }
[[potential]]
name = "whole"
shape = "formula"
expression = "7.5*x**2*exp(-x)"
[[potential]]
name = "dam"
shape = "formula"
expression = "where(x > 2, 7.5*4*exp(-2) - 7.5*x**2*exp(-x), 0)"
acts = "before"
[[packet]]
shape = "eigenstate"
[absorber]
width = 30.0
[propagator]
order = 4
step = 0.01
[time]
end = 160.0
[output]
frames = 2
record_every = 0.1
"""


def test_resonance_of_an_exponential_barrier() -> None:
    """Energy and width of the published complex-scaling resonance, from the survival."""
    outcome = propagate(EXPONENTIAL)
    times, overlap = outcome.series("time"), outcome.series("autocorrelation")
    keep = (times > 60.0) & (times < 160.0)
    turned = -np.unwrap(np.angle(overlap[keep]))
    energy = np.polyfit(times[keep], turned, 1)[0]
    width = rate(times, np.abs(overlap) ** 2, 60.0, 160.0)
    agree("P11 energy", energy, rows("P11", "exponential_resonance_energy")[0].value)
    agree("P11 width", width, rows("P11", "exponential_resonance_width")[0].value)

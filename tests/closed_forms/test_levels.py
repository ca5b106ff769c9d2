"""Bound levels: from eigenstates, and from the spectrum of a moving packet."""

import math

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import propagate
from tests.closed_forms.reference_values import Row, rows
from wavepack.arrays import ComplexArray, RealArray
from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario

HEAD = """
title = "bound state"
{units}
[particle]
mass = {mass}
[grid]
x = {{ from = {start}, to = {stop}, points = {points}, ends = "walls" }}
[[packet]]
shape = "eigenstate"
number = {number}
[propagator]
step = 1.0
[time]
end = 1.0
"""
ATOMIC = '[units]\nsystem = "atomic"'


def level(text: str) -> float:
    """Return the energy of a scenario's initial state."""
    return float(Setup(parse_scenario(text)).choices.reference)


@pytest.mark.parametrize("row", rows("P13", "morse_level"), ids=lambda row: row.id)
def test_morse_level(row: Row) -> None:
    """Vibrations of HF, the potential counted from the bottom of its well."""
    number = row.parameters["number"]
    high = number > 20  # the last level reaches far out
    text = HEAD.format(units=ATOMIC, mass=1744.59, start=0.6, stop=48.0 if high else 14.0,
                       points=900 if high else 400, number=number) + """
[[potential]]
shape = "morse"
depth = 0.2251
stiffness = 1.1741
at = 1.7329
"""  # fmt: skip
    agree("P13 level", level(text) + 0.2251, row.value)


@pytest.mark.parametrize("row", rows("P15", "soft_core_level"), ids=lambda row: row.id)
def test_soft_core_level(row: Row) -> None:
    """Levels of the soft-core atom."""
    text = HEAD.format(units=ATOMIC, mass=1.0, start=-120.0, stop=120.0, points=1199,
                       number=row.parameters["number"]) + f"""
[[potential]]
shape = "softcore"
charge = -1.0
softening = {math.sqrt(row.parameters["softening2"])!r}
"""  # fmt: skip
    agree("P15 level", level(text), row.value)


@pytest.mark.parametrize("row", rows("P20", "finite_well_level"), ids=lambda row: row.id)
def test_finite_square_well_level(row: Row) -> None:
    """Levels of a 10 nm well with walls of 0.3 eV."""
    text = HEAD.format(units="", mass=0.067, start=-30.03, stop=30.05, points=1500,
                       number=row.parameters["number"]) + """
[[potential]]
shape = "slab"
height = 0.3
x = { below = -5.0 }
[[potential]]
shape = "slab"
height = 0.3
x = { above = 5.0 }
"""  # fmt: skip
    agree("P20 square well", level(text), row.value)


@pytest.mark.parametrize("row", rows("P20", "triangular_well_level"), ids=lambda row: row.id)
def test_triangular_well_level(row: Row) -> None:
    """Levels in a uniform field before a hard wall."""
    text = HEAD.format(units="", mass=0.067, start=0.0, stop=60.0, points=600,
                       number=row.parameters["number"]) + """
[[potential]]
shape = "field"
strength = { x = "50 kV/cm" }
"""  # fmt: skip
    agree("P20 triangular well", level(text), row.value)


HENON = """
title = "Henon-Heiles"
[units]
system = "atomic"
[particle]
mass = 1.0
[parameters]
coupling = 0.111803
[grid]
x = { from = -8.2, to = 8.2, points = 51, ends = "walls" }
y = { from = -8.2, to = 8.2, points = 51, ends = "walls" }
[[potential]]
shape = "formula"
expression = "(x**2 + y**2)/2 + coupling*(x**2*y - y**3/3)"
[[packet]]
shape = "gaussian"
center = { x = 1.2, y = 0.9 }
sigma = { x = 0.7071067811865476, y = 0.7071067811865476 }
wavenumber = { x = 0.6, y = -0.5 }
[propagator]
order = 4
step = 0.1
[time]
end = 400.0
[output]
frames = 2
record_every = 0.5
"""

#: Levels that lie far enough from all others for a record of the length.
DISTINCT = {500.0: (0, 1, 3, 4), 2000.0: (0, 1, 3, 4, 6, 10, 11, 13)}


@pytest.mark.parametrize(
    ("end", "coupling"),
    [
        (500.0, 0.111803),
        pytest.param(2000.0, 0.111803, marks=pytest.mark.full),
        pytest.param(2000.0, 0.1118, marks=pytest.mark.full),
    ],
)
def test_henon_heiles_levels(end: float, coupling: float) -> None:
    """Peaks in the spectrum of the autocorrelation stand at the published levels."""
    outcome = propagate(HENON, f"time.end={end}", f"parameters.coupling={coupling}")
    overlap = outcome.series("autocorrelation")
    table = {r.parameters["number"]: r.value for r in rows("P14", "henon_heiles_level")
             if r.parameters["coupling"] == coupling}  # fmt: skip
    wanted = np.array([table[n] for n in DISTINCT[end] if n in table])
    fall = 5.0 if end < 1000 else 12.0
    found = [peak_near(outcome.series("time"), overlap, level, fall) for level in wanted]
    agree(f"P14 level, record of {end:g}", found, wanted)


def peak_near(times: RealArray, overlap: ComplexArray, guess: float, fall: float) -> float:
    """Return where the windowed spectrum of the autocorrelation peaks near a guess.

    C(-t) is the conjugate of C(t), so half the record gives a real spectrum. The
    window exp(-fall (t/T)^2) trades the width of a line, sqrt(2 fall)/T, for the
    side lobes of its end, exp(-fall) high.
    """
    window = np.exp(-fall * (times / times[-1]) ** 2)
    window[0] /= 2
    width = 4 / times[-1]
    energies = guess + width * np.linspace(-1, 1, 401)
    spectrum = (np.exp(1j * np.outer(energies, times)) @ (overlap * window)).real
    top = int(np.argmax(spectrum))
    assert 5 < top < 395, f"no peak near {guess}"
    near = slice(top - 5, top + 6)
    a, b, _ = np.polyfit(energies[near] - energies[top], spectrum[near], 2)
    return float(energies[top] - b / (2 * a))

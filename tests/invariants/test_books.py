"""The books: all probability accounted for, and in step with the flux."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.closed_forms.helpers import Outcome, propagate
from tests.invariants.scenes import METHODS
from tests.tolerances import BALANCE, FALL

LINE = """
title = "books on a line"
[particle]
mass = 0.067
[grid]
x = { from = -80.0, to = 80.0, points = 128, ends = "absorbing" }
[[potential]]
name = "hill"
shape = "gaussian"
height = 0.08
center = { x = 5.0 }
sigma = { x = 4.0 }
[[packet]]
shape = "gaussian"
center = { x = -15.0 }
sigma = { x = 6.0 }
wavenumber = { x = 0.4 }
[absorber]
width = 25.0
[propagator]
step = 0.25
[time]
end = 200.0
[[region]]
name = "out"
role = "transmitted"
x = { above = 30.3 }
[[region]]
name = "back"
role = "reflected"
x = { below = -41.0 }
[[region]]
name = "middle"
x = { from = -5.0, to = 15.0 }
[[detector]]
name = "gate"
x = 30.3
[[detector]]
name = "left"
x = -5.0
toward = "+x"
[[detector]]
name = "right"
x = 15.0
toward = "+x"
[output]
frames = 2
record_every = 1.0
"""

PLANE = """
title = "books in the plane"
[particle]
mass = 0.067
[grid]
x = { from = -60.0, to = 60.0, points = 60, ends = "absorbing" }
y = { from = -45.0, to = 45.0, points = 44, ends = ["walls", "absorbing"] }
[[potential]]
name = "hill"
shape = "gaussian"
height = 0.08
center = { x = 5.0, y = 2.0 }
sigma = { x = 5.0, y = 6.0 }
[[packet]]
shape = "gaussian"
center = { x = -12.0, y = -3.0 }
sigma = { x = 6.0, y = 6.0 }
wavenumber = { x = 0.35, y = 0.15 }
[absorber]
width = { x = 20.0, y = 15.0 }
[propagator]
step = 0.25
[time]
end = 120.0
[[region]]
name = "out"
role = "transmitted"
x = { above = 20.0 }
y = { below = 20.0 }
[[region]]
name = "back"
role = "reflected"
where = "x < -20 and x + y < 10"
[[region]]
name = "box"
x = { from = -5.0, to = 15.0 }
y = { from = -10.0, to = 12.0 }
[[detector]]
name = "left"
x = -5.0
y = { from = -10.0, to = 12.0 }
toward = "+x"
[[detector]]
name = "right"
x = 15.0
y = { from = -10.0, to = 12.0 }
toward = "+x"
[[detector]]
name = "below"
y = -10.0
x = { from = -5.0, to = 15.0 }
toward = "+y"
[[detector]]
name = "above"
y = 12.0
x = { from = -5.0, to = 15.0 }
toward = "+y"
[output]
frames = 2
record_every = 1.0
"""

few = settings(max_examples=5, deadline=None, derandomize=True)


def imbalance(outcome: Outcome) -> float:
    """Return the largest departure of the books from one, over all records."""
    parts = ("transmission", "reflection", "held", "lost")
    return float(np.abs(sum(outcome.series(part) for part in parts) - 1).max())


@pytest.mark.parametrize("form", ["transmission-free", "polynomial"])
@pytest.mark.parametrize("method", METHODS)
@given(speed=st.floats(0.1, 0.9), height=st.floats(-0.2, 0.3), width=st.floats(5.0, 38.0))
@few
def test_balance_on_a_line(
    method: str, form: str, speed: float, height: float, width: float
) -> None:
    """Transmission, reflection, held and lost add up to one at every record."""
    outcome = propagate(
        LINE, *METHODS[method], f"packet.wavenumber.x={speed}", f"potential.hill.height={height}",
        f"absorber.width={width}", f"absorber.form={form}",
    )  # fmt: skip
    assert outcome.series("time").size == 201
    assert imbalance(outcome) < BALANCE
    # Something must have been absorbed for the books to mean anything.
    assert outcome.series("norm")[-1] < 1 - 1e-6


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("drive", [(), ("potential.hill.drive.photon_energy=0.04",)])
def test_balance_in_the_plane(method: str, drive: tuple[str, ...]) -> None:
    """The same in two dimensions with layers on three sides, with and without a drive."""
    outcome = propagate(PLANE, *METHODS[method], *drive)
    assert imbalance(outcome) < BALANCE
    assert outcome.series("norm")[-1] < 0.9


def through(outcome: Outcome, name: str) -> np.ndarray:
    """Return what has crossed a plane by each of its readings."""
    time, flux = outcome.flux(name).T
    return np.concatenate(([0.0], np.cumsum((flux[1:] + flux[:-1]) / 2 * np.diff(time))))


def gap(outcome: Outcome, region: str, into: tuple[str, ...], out: tuple[str, ...]) -> float:
    """Return how far a region's books ever are from the flux through its borders."""
    change = outcome.region(region) - outcome.region(region)[0]
    flow = np.zeros(change.size)
    for name in into:
        flow += through(outcome, name)
    for name in out:
        flow -= through(outcome, name)
    assert np.abs(change).max() > 0.01
    return float(np.abs(change - flow).max())


def refined(text: str, level: int, *overrides: str) -> Outcome:
    """Return the outcome at a spacing and a step halved some times, read at every step."""
    step = 0.5**level
    points = [f"grid.x.points={(84 if text is PLANE else 128) * 2**level}"]
    if text is PLANE:
        points.append(f"grid.y.points={63 * 2**level - 1}")
    return propagate(
        text, *overrides, *points, f"propagator.step={step}", f"output.record_every={step}"
    )


@pytest.mark.parametrize("method", METHODS)
def test_line_books_agree_with_the_flux(method: str) -> None:
    """On and off the absorber; the gap falls with the square of spacing and step."""
    gaps = []
    for level in (1, 2):
        outcome = refined(LINE, level, *METHODS[method])
        gaps.append([
            gap(outcome, "out", ("gate",), ()), gap(outcome, "middle", ("left",), ("right",))
        ])  # fmt: skip
    coarse, fine = np.array(gaps)
    assert np.all(fine < 2e-3)
    assert np.all(coarse / fine > FALL)


@pytest.mark.parametrize("method", ["split-operator 2", "crank-nicolson"])
def test_plane_books_agree_with_the_flux(method: str) -> None:
    """Through the four sides of a box in the plane."""
    gaps = [
        gap(refined(PLANE, level, *METHODS[method]), "box", ("left", "below"), ("right", "above"))
        for level in (0, 1)
    ]
    assert gaps[1] < 1e-2
    assert gaps[0] / gaps[1] > FALL

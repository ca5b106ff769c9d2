"""The forecast finds wrong numerics, names the key to change, and estimates real errors."""

import math
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from wavepack.scenario.build import Setup
from wavepack.scenario.costs import disk, free_memory, memory
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.preflight import Forecast, Row, forecast
from wavepack.scenario.verdicts import duration_text, size_text

BARRIER = """
title = "one barrier"
[particle]
mass = 0.067
[grid]
x = { from = -150.0, to = 150.0, points = 1536, ends = "absorbing" }
[[potential]]
name = "barrier"
shape = "slab"
height = 0.3
x = { from = 0.0, to = 3.37 }
[[packet]]
shape = "gaussian"
center = { x = -55.0 }
sigma = { x = 8.0 }
energy = 0.15
[absorber]
width = 40.0
[propagator]
step = 0.02
[time]
end = 600.0
[[region]]
name = "drain"
role = "transmitted"
x = { above = 15.0 }
[[region]]
name = "source"
role = "reflected"
x = { below = -15.0 }
[[detector]]
name = "exit"
x = 30.0
[accuracy]
target = 1e-3
"""

SMOOTH = BARRIER.replace('shape = "slab"', 'shape = "gaussian"').replace(
    "x = { from = 0.0, to = 3.37 }", "center = { x = 0.0 }\nsigma = { x = 1.0 }"
)

CHANNEL = """
title = "a constriction"
[particle]
mass = 0.067
[grid]
x = { from = -120.0, to = 120.0, points = 128, ends = "absorbing" }
y = { from = -40.0, to = 40.0, points = 63, ends = "walls" }
[[potential]]
shape = "sech2"
height = 0.05
at = 0.0
width = 6.0
[[potential]]
shape = "harmonic"
quantum = { y = 0.02 }
[[packet]]
shape = "channel"
center = { x = -45.0 }
sigma = { x = 7.0 }
energy = 0.08
[absorber]
width = 35.0
[propagator]
step = 0.2
[time]
end = 600.0
[[region]]
name = "through"
role = "transmitted"
x = { above = 15.0 }
"""


def setup_of(text: str, *overrides: str) -> Setup:
    """Return a run that has been made ready."""
    return Setup(parse_scenario(text, overrides=overrides))


def look(text: str, *overrides: str) -> Forecast:
    """Return the forecast without timing."""
    return forecast(setup_of(text, *overrides), timing=False)


def row(found: Forecast, topic: str) -> Row:
    """Return the row of a topic."""
    return next(r for r in found.rows if r.topic == topic)


def test_good_numerics_are_good() -> None:
    """A run set up well has nothing to advise in any row."""
    found = look(BARRIER)
    assert found.verdict == "good", found.text()
    assert not any(r.advice for r in found.rows)
    assert not found.misses_target


def test_a_mass_in_the_wrong_unit_overwhelms_nothing() -> None:
    """Slices that let nothing through overflow nowhere; that the grid is too coarse is said."""
    found = look(BARRIER, 'particle.mass="0.4 kg"')
    assert row(found, "largest momentum, x").verdict == "bad"


@pytest.mark.parametrize(
    ("overrides", "topic", "key"),
    [
        # Spacing doubled, twice: the smoothed edges are off by more than the target.
        (("grid.x.points=384",), "error of the spacing", "grid.x.points = "),
        (("grid.x.points=80",), "largest momentum, x", "grid.x.points = "),
        (("grid.x.points=80",), "points per wave, x", "grid.x.points = "),
        # Four times too long a step, for steps that were just short enough.
        (("propagator.step=0.2",), "error of the step", "propagator.step = "),
        (("propagator.step=0.2",), "phase per step, grid", "propagator.step = "),
        (("propagator.step=4.0",), "phase per step, packet", "propagator.step = "),
        (("propagator.step=6.0",), "detector exit", "propagator.step = "),
        # A quarter of the width.
        (("absorber.width=10",), "absorber, x upper", "absorber.width = "),
        (("time.end=250",), "time to leave", "time.end = "),
        (("packet.center=-105",), "start clear of absorbers", "packet.center"),
        (("packet.center=-20",), "start clear of the potential", "packet.center"),
        (("region.drain.x.above=-60",), "start not yet transmitted", "region"),
        (("packet.center=-135",), "start inside the grid, x", "packet.center.x"),
        (("accuracy.target=1e-5",), "accuracy", ""),
    ],
)
def test_wrong_numerics_are_found(overrides: tuple[str, ...], topic: str, key: str) -> None:
    """Each fault put in on purpose shows in its own row, which names the key to change."""
    if topic == "start not yet transmitted":
        overrides = (*overrides, "region.source.x.below=-80")
    culprit = row(look(BARRIER, *overrides), topic)
    assert culprit.verdict != "good"
    assert key in culprit.advice
    assert culprit.advice


def advised(found: Forecast, topic: str, key: str) -> str:
    """Return the override that a row's advice asks for."""
    words = row(found, topic).advice.split(f"{key} = ")[1]
    return f"{key}={words.split()[0].rstrip(',')}"


@pytest.mark.parametrize(
    ("override", "topic", "key"),
    [
        ("grid.x.points=300", "error of the spacing", "grid.x.points"),
        ("grid.x.points=80", "largest momentum, x", "grid.x.points"),
        ("propagator.step=0.3", "error of the step", "propagator.step"),
        ("absorber.width=10", "absorber, x upper", "absorber.width"),
        ("time.end=250", "time to leave", "time.end"),
    ],
)
def test_advice_helps(override: str, topic: str, key: str) -> None:
    """Doing what a row advises makes that row good."""
    change = advised(look(BARRIER, override), topic, key)
    assert row(look(BARRIER, change), topic).verdict == "good"


def test_sharp_edges_forbid_steps_above_resonance() -> None:
    """The limit of the step is 2 pi hbar/E_max, and only where edges are sharp."""
    largest = 0.0380998211 / 0.067 * (math.pi * 1536 / 300) ** 2
    found = look(BARRIER, "propagator.step=0.05")
    expected = 0.05 * largest / 0.6582119569
    assert found.quantities["grid_phase"] == pytest.approx(expected, rel=1e-5)
    assert expected > 2 * math.pi
    assert found.quantities["resonance"] > 0
    smooth = look(SMOOTH, "propagator.step=0.05")
    assert smooth.quantities["resonance"] == 0
    assert row(smooth, "phase per step, grid").verdict == "good"


def transmitted(setup: Setup) -> float:
    """Return the probability transmitted at the end of a run."""
    stepper = setup.bind(1)
    stepper.psi[...] = setup.start[0]
    for first in range(0, setup.steps, 1000):
        stepper.advance(first, min(first + 1000, setup.steps))
    here = np.abs(stepper.psi) ** 2 * setup.grid.cell
    on_grid = setup.book.sums((slice(0, setup.grid.size),), here)[0]
    return float(on_grid + setup.book.of_patches(stepper.tally.patches())[0])


def test_step_error_agrees_with_two_runs() -> None:
    """Between two steps the transmission differs as the estimates say, to a third."""
    common = ("grid.x.points=384", "time.end=300")
    coarse = setup_of(SMOOTH, *common, "propagator.step=0.8")
    fine = setup_of(SMOOTH, *common, "propagator.step=0.4")
    measured = abs(transmitted(coarse) - transmitted(fine))
    estimated = Estimates(coarse).step_error - Estimates(fine).step_error
    assert estimated == pytest.approx(measured, rel=1 / 3)


def test_spacing_error_agrees_with_the_exact_transmission() -> None:
    """Smoothed edges change the transmission of a slab as the estimate says, to a third."""
    # Packet average of the closed form of this slab and packet.
    exact = 0.126182453
    coarse = setup_of(BARRIER, "grid.x.points=768", "propagator.step=0.08", "time.end=400")
    measured = abs(transmitted(coarse) - exact)
    assert Estimates(coarse).spacing_error == pytest.approx(measured, rel=1 / 3)


def test_order_4_at_sharp_edges_is_discouraged() -> None:
    """Where the edges set the error, order 4 is said to bring nothing."""
    culprit = row(look(BARRIER, "propagator.order=4"), "order at sharp edges")
    assert culprit.verdict == "watch"
    assert "propagator.order = 2" in culprit.advice


def test_potential_through_a_layer_is_noticed() -> None:
    """A potential that varies inside an absorber is said to."""
    tilted = BARRIER.replace(
        "[[packet]]",
        '[[potential]]\nshape = "ramp"\nx = { from = 50.0, to = 150.0 }\n'
        "heights = [0.0, -0.1]\n[[packet]]",
    )
    culprit = row(look(tilted), "V through it, x upper")
    assert culprit.verdict != "good"
    assert "grid.x.to" in culprit.advice
    assert row(look(tilted), "V through it, x lower").verdict == "good"


def test_driven_layer_is_noticed() -> None:
    """A driven piece that reaches into an absorber is said to."""
    culprit = row(
        look(
            BARRIER,
            "potential.0.x={from=0.0, to=130.0}",
            "potential.0.drive={photon_energy=0.01}",
        ),
        "V through it, x upper",
    )
    assert culprit.verdict != "good"


def test_a_well_adds_to_the_momentum() -> None:
    """The deepest well counts in the largest momentum, k^2 + depth/c."""
    flat = look(BARRIER).quantities["momentum"]["x"]
    deep = look(BARRIER, "potential.0.height=-1.0").quantities["momentum"]["x"]
    limit = math.pi * 1536 / 300
    added = (deep**2 - flat**2) * limit**2
    # The smoothed edge dips below the bottom by a tenth.
    assert added == pytest.approx(1.0 / (0.0380998211 / 0.067), rel=0.1)


def test_crank_nicolson_has_no_resonance_but_a_dispersion() -> None:
    """Implicit steps have no resonance row, and order 2 in space needs finer grids."""
    found = look(BARRIER, "propagator.method=crank-nicolson", "grid.x.points=600")
    assert "grid_phase" not in found.quantities
    assert row(found, "error of the spacing").verdict == "bad"
    finer = look(
        BARRIER,
        "propagator.method=crank-nicolson",
        "grid.x.points=600",
        "propagator.space_order=4",
    )
    assert finer.quantities["spacing_error"] < 0.6 * found.quantities["spacing_error"]


def test_two_axes() -> None:
    """A channel packet in a constriction gets its rows for both axes."""
    found = look(CHANNEL)
    topics = {r.topic for r in found.rows}
    assert {"largest momentum, x", "largest momentum, y", "absorber, x lower"} <= topics
    assert "absorber, y lower" not in topics
    assert row(found, "start clear of absorbers").verdict == "good"


def test_a_state_at_rest_is_not_timed() -> None:
    """How long a prepared state takes to leave cannot be told from its momenta."""
    found = look(BARRIER, "packet.energy=0.0")
    assert row(found, "time to leave").needed == "not known"


def test_table_is_aligned() -> None:
    """Verdicts stand in one column, advice below its row, lines within the width."""
    text = look(BARRIER, "grid.x.points=96").text(width=80)
    lines = [line for line in text.splitlines() if not line.startswith("    ")]
    column = {line.rstrip().rfind(" ") for line in lines}
    assert len(column) == 1
    advice = [line for line in text.splitlines() if line.startswith("    ") and "take" in line]
    assert advice
    assert all(len(line) <= 80 for line in advice)


def test_target_is_missed_only_where_one_is_given() -> None:
    """Without a target nothing is missed."""
    assert look(BARRIER, "accuracy.target=1e-7").misses_target
    without = BARRIER.split("[accuracy]", maxsplit=1)[0]
    assert not look(without, "grid.x.points=96").misses_target


def test_timing_is_quick_and_writes_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A few steps are timed within five seconds and no file appears."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("WAVEPACK_CACHE", str(tmp_path))
    setup = setup_of(BARRIER)
    began = time.perf_counter()
    found = forecast(setup, timing=True)
    assert time.perf_counter() - began < 5
    assert found.quantities["seconds"] > 0
    assert found.quantities["step_seconds"] < 1e-2
    assert list(tmp_path.iterdir()) == []


def test_disk_grows_with_frames() -> None:
    """Frames take 16 bytes a point; thinned, single or density alone less."""
    every = disk(setup_of(BARRIER, "output.frames=100")).frames
    assert every == 100 * 1536 * 16
    few = disk(
        setup_of(
            BARRIER,
            "output.frames=100",
            "output.thin=2",
            "output.store=density",
            "output.precision=single",
        )
    ).frames
    assert few == every / 8


def test_memory_grows_with_points() -> None:
    """Memory is at least four complex fields and less than what is free here."""
    small, large = (memory(setup_of(CHANNEL, f"grid.x.points={n}"))[0] for n in (128, 256))
    assert large - small > 4 * 16 * 128 * 63
    assert free_memory() > large


@pytest.mark.parametrize(
    ("write", "value", "text"),
    [
        (size_text, 999.0, "999 B"),
        (size_text, 2.5e9, "2.5 GB"),
        (size_text, math.inf, "unknown"),
        (duration_text, 2e-5, "20 us"),
        (duration_text, 90.0, "90 s"),
        (duration_text, 5400.0, "90 min"),
        (duration_text, 1e6, "11.6 d"),
    ],
)
def test_numbers_read_well(write: Callable[[float], str], value: float, text: str) -> None:
    """Bytes and seconds come in units that fit."""
    assert write(value) == text

"""Whole runs against the bare transforms of the same run, in turn, as ratios.

Not part of the tests: ``python -m pytest -m bench tests/bench -s``. Everything a run does
counts on its side: phases, tallies, detectors, series, frames, checkpoints. The
peer is the same number of planned in-place transform pairs of the same array on
the same number of threads and nothing else. Medians of alternated pairs.
"""

import statistics
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from threadpoolctl import threadpool_limits

from wavepack.grid import spectral
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.running.session import Session
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.schema import Scenario

PAIRS = 5

LINE = """
title = "line"
[particle]
mass = 0.067
[grid]
x = { from = -150.0, to = 150.0, points = 4096, ends = "absorbing" }
[[potential]]
shape = "slab"
height = 0.3
x = { from = 0.0, to = 3.37 }
[[packet]]
shape = "gaussian"
center = { x = -60.0 }
sigma = { x = 8.0 }
energy = 0.15
[absorber]
width = 40.0
[propagator]
step = 0.06
[time]
end = 1200.0
[[region]]
role = "transmitted"
x = { above = 20.0 }
[[region]]
role = "reflected"
x = { below = -20.0 }
[[detector]]
x = 30.0
energies = { from = 0.05, to = 0.30, points = 251 }
[output]
frames = 200
record_every = 1.2
"""

PLANE = """
title = "plane"
[particle]
mass = 0.067
[grid]
x = { from = -150.0, to = 150.0, points = 1024, ends = "absorbing" }
y = { from = -150.0, to = 150.0, points = 1024, ends = "absorbing" }
[[potential]]
shape = "gaussian"
height = 0.2
center = { x = 0.0, y = 0.0 }
sigma = { x = 5.0, y = 20.0 }
[[packet]]
shape = "gaussian"
center = { x = -60.0, y = 0.0 }
sigma = { x = 8.0, y = 10.0 }
energy = 0.15
[absorber]
width = 40.0
[propagator]
step = 0.25
[time]
end = 100.0
[[region]]
role = "transmitted"
x = { above = 20.0 }
[[region]]
role = "reflected"
x = { below = -20.0 }
[[detector]]
x = 30.0
energies = { from = 0.05, to = 0.30, points = 251 }
[output]
frames = 5
record_every = 5.0
"""


def run_seconds(scenario: Scenario, folder: Path, threads: int) -> float:
    """Propagate into a folder; planning and set-up are not counted, everything else is."""
    folder.mkdir()
    with Session.start(scenario, folder, threads=threads) as session:
        began = time.perf_counter()
        session.propagate()
        return time.perf_counter() - began


def transform_seconds(grid: Grid, pairs: int, threads: int) -> float:
    """Transform forward and back again."""
    field = spectral.empty_field(grid.shape)
    pair = spectral.TransformPair(grid, field, threads)
    field[...] = 0
    with threadpool_limits(1):
        began = time.perf_counter()
        for _ in range(pairs):
            pair.forward()
            pair.backward()
        return time.perf_counter() - began


def ratios(a: Callable[[int], float], b: Callable[[int], float]) -> list[float]:
    """Return A/B of alternated pairs, one more pair run first to warm up."""
    return [a(i) / b(i) for i in range(PAIRS + 1)][1:]


@pytest.mark.parametrize(
    ("name", "text", "threads", "limit"),
    [
        ("4,096 points, 20,000 steps", LINE, 1, 3.0),
        ("1,024 x 1,024 points, 400 steps, one thread", PLANE, 1, 1.5),
        ("1,024 x 1,024 points, 400 steps, two threads", PLANE, 2, 1.5),
    ],
)
def test_run_against_bare_transforms(
    tmp_path: Path, name: str, text: str, threads: int, limit: float
) -> None:
    """All that is recorded costs less than the stated multiple of the transforms."""
    scenario = parse_scenario(text)
    grid = Grid(
        tuple(
            Axis(n, a.start or 0.0, a.stop or 0.0, a.points or 1, ("absorbing",) * 2)
            for n, a in scenario.grid.items()
        )
    )
    steps = round((scenario.time.end or 0.0) / (scenario.propagator.step or 1.0))
    found = ratios(
        lambda i: run_seconds(scenario, tmp_path / str(i), threads),
        lambda _: transform_seconds(grid, steps, threads),
    )
    middle = statistics.median(found)
    print(f"\n{name}: {middle:.2f} times the transforms ({min(found):.2f} to {max(found):.2f})")  # noqa: T201 - a benchmark's result
    assert middle < limit

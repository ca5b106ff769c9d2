"""Time a step, by scheme and size; compare with `pytest -m bench --benchmark-compare`."""

from typing import Any

import pytest
from pytest_benchmark.fixture import BenchmarkFixture

from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario

SCENARIO = """
[particle]
mass = 0.067
[grid]
{axes}
[[potential]]
shape = "slab"
height = 0.3
x = {{ from = 0.0, to = 3.37 }}
[[packet]]
shape = "gaussian"
center = -40.0
sigma = 8.0
energy = 0.15
direction = "+x"
[absorber]
width = 20.0
[propagator]
method = "{method}"
step = 0.02
[time]
end = 100.0
"""
LINE = "x = {{ from = -100.0, to = 100.0, points = {n} }}"
PLANE = LINE + "\ny = {{ from = -100.0, to = 100.0, points = {n} }}"


@pytest.mark.parametrize("method", ["split-operator", "crank-nicolson"])
@pytest.mark.parametrize(
    ("axes", "n", "steps"),
    [(LINE, 2048, 100), (PLANE, 256, 10), (PLANE, 1024, 2)],
    ids=["100 steps of 2048", "10 steps of 256 x 256", "2 steps of 1024 x 1024"],
)
def test_time_of_some_steps(
    benchmark: BenchmarkFixture, axes: str, n: int, steps: int, method: str
) -> None:
    """Steps between two stops, absorbers' books included, on one thread."""
    setup = Setup(parse_scenario(SCENARIO.format(axes=axes.format(n=n), method=method)))
    stepper = setup.bind(1)
    stepper.psi[...] = setup.start[0]
    benchmark.extra_info["steps"] = steps
    measure: Any = benchmark.pedantic  # untyped by its authors
    measure(stepper.advance, args=(0, steps), rounds=5, warmup_rounds=1)

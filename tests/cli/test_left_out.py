"""A scenario of physics alone, as a user runs it."""

import json
import re
from pathlib import Path

import pytest

from tests.cli.conftest import SCENARIO, Call

#: Lines of numerics that the scenario of these tests gives, and without them.
GIVEN = (
    'x = { from = -150.0, to = 150.0, points = 256, ends = "absorbing" }',
    "[absorber]\nwidth = 40.0\n",
    "[propagator]\nstep = 0.5\n",
    "[time]\nend = 200.0\n",
)
KEYS = ("grid.x.from", "grid.x.to", "grid.x.points", "absorber.width.x", "propagator.step")


@pytest.fixture
def bare(tmp_path: Path) -> Path:
    """Return a folder with `wire.toml`: a smooth barrier, and no numerics."""
    text = SCENARIO.replace(GIVEN[0], "x = {}")
    for lines in GIVEN[1:]:
        text = text.replace(lines, "")
    text = text.replace('shape = "slab"', 'shape = "gaussian"')
    text = text.replace("x = { from = 0.0, to = 3.37 }", "sigma = 3.0")
    (tmp_path / "wire.toml").write_text(text)
    return tmp_path


def test_check_tells_what_it_chose(bare: Path, call: Call) -> None:
    """Choices and reasons stand above the table."""
    done = call("check", "wire.toml", "--no-timing", cwd=bare)
    assert done.status == 0, done.err
    above, _, table = done.out.partition("\n\n")
    for key in (*KEYS, "time.end"):
        assert re.search(rf"^{key} = \S.* {{2}}\S", above, re.MULTILINE)
    assert "found" in table.splitlines()[0]


def test_run_chooses_tells_and_keeps(bare: Path, call: Call) -> None:
    """Choices are told on stderr and kept; a second run knows the first as its own."""
    done = call("run", "wire.toml", cwd=bare)
    assert done.status == 0, done.err
    kept = (bare / "runs/wire/scenario.toml").read_text()
    for key in KEYS:
        assert f"wavepack: chosen: {key} = " in done.err
    points = re.search(r"chosen: grid\.x\.points = (\d+)", done.err)
    assert points is not None
    assert f"points = {points[1]}" in kept
    assert "width = { x = [" in kept
    assert json.loads((bare / "runs/wire/results.json").read_text())["status"] == "finished"
    again = call("run", "wire.toml", cwd=bare)
    assert again.status == 2
    assert "holds a run of this scenario already" in again.err


def test_a_target_out_of_reach_is_told_before(bare: Path, call: Call) -> None:
    """A step given too long for the target is foretold by how much, and by whom."""
    step = ("--set", "propagator.step=8", "--set", "accuracy.target=1e-4")
    checked = call("check", "wire.toml", "--no-timing", *step, cwd=bare)
    assert checked.status == 3
    done = call("run", "wire.toml", *step, cwd=bare)
    assert "propagator.step = 8 " not in done.err
    assert re.search(r"forecast: .* times the target 0\.0001", done.err)
    assert "error of the step" in done.err


def test_an_end_that_physics_does_not_tell(bare: Path, call: Call) -> None:
    """A fault names file, key and what to give; no folder is made."""
    done = call("run", "wire.toml", "--set", "packet.energy=0", cwd=bare)
    assert done.status == 2
    assert "time.end: left out" in done.err
    assert not (bare / "runs").exists()

"""`wavepack crosscheck` on small real runs: agreement, disagreement, and refusals."""

import csv
import json
import shutil
from pathlib import Path

import pytest

from tests.cli.conftest import SCENARIO, Call
from wavepack import workflow
from wavepack.archive.results import read_results, write_results
from wavepack.scenario.load import parse_scenario

#: The wire on 1024 points, edges smoothed over 0.29 nm (of order 2.7, 1e-4 at 0.2 nm), and
#: absorbers that give some of the slowest back.
METHOD = 2e-3

#: Fine and long enough for all to pass.
LONGER = ("grid.x.points=1024", "time.end=600", "propagator.step=0.25")

Y_AXIS = 'y = { from = -90.0, to = 90.0, points = 32, ends = "absorbing" }\n[[potential]]'
CENTER = "center = { x = -60.0, y = 0.0 }"


@pytest.fixture(scope="module")
def wire(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with a finished run, `fine`, of the wire; not to be changed."""
    folder = tmp_path_factory.mktemp("crosscheck")
    workflow.run(parse_scenario(SCENARIO, overrides=LONGER), folder / "fine")
    return folder


@pytest.fixture
def copied(wire: Path, tmp_path: Path) -> Path:
    """Return a copy of the same folder, which a test may change."""
    shutil.copytree(wire, tmp_path, dirs_exist_ok=True)
    return tmp_path


def test_agrees_and_writes(copied: Path, call: Call) -> None:
    """Run and stationary calculation agree to the method's error; table, files and figure come."""
    done = call("crosscheck", "fine", cwd=copied)
    assert done.status == 0, done.err
    assert "exact matrices of a stack of layers" in done.out
    assert "agree within" in done.out
    assert "no error was stated" in " ".join(done.out.split())
    found = json.loads((copied / "fine/crosscheck.json").read_text("utf-8"))
    for one in (found["transmission"], found["reflection"], found["detectors"]["exit"]["crossed"]):
        assert abs(one["difference"]) < METHOD
        assert one["agrees"] is None
    curve = found["detectors"]["exit"]
    assert curve["largest_difference"] < 5 * METHOD
    with (copied / "fine/crosscheck.csv").open(newline="") as file:
        lines = list(csv.DictReader(file))
    assert [float(line["stationary"]) for line in lines] == curve["stationary"]
    assert (copied / "fine/figures/crosscheck-exit.png").read_bytes().startswith(b"\x89PNG")


@pytest.mark.parametrize(
    ("error", "status", "said"),
    [(1e-1, 0, "agree within the stated errors"), (1e-9, 3, "more than the stated error")],
)
def test_stated_errors_decide(
    copied: Path, call: Call, error: float, status: int, said: str
) -> None:
    """A difference beyond the stated error ends with 3, one within it with 0."""
    results = read_results(copied / "fine")
    results["quantities"]["transmission"]["error"] = error
    write_results(copied / "fine", results)
    done = call("crosscheck", "fine", cwd=copied)
    assert done.status == status, done.err
    assert said in " ".join(done.out.split())


def test_a_wrong_run_is_seen(copied: Path, call: Call) -> None:
    """A transmission that is off by some hundredths is not said to agree."""
    results = read_results(copied / "fine")
    results["quantities"]["transmission"]["value"] += 0.05
    write_results(copied / "fine", results)
    done = call("crosscheck", "fine", cwd=copied)
    assert done.status == 0
    assert "differ by up to" in " ".join(done.out.split())


@pytest.mark.parametrize(
    ("found", "wanted", "said"),
    [
        ("height = 0.3", "height = 0.3\ndrive = { photon_energy = 0.01 }", "is driven (barrier)"),
        ("x = { from = 0.0, to = 3.37 }", "x = { above = 120.0 }", "not constant in the layer"),
    ],
)
def test_where_it_does_not_apply(
    copied: Path, call: Call, found: str, wanted: str, said: str
) -> None:
    """The reason is said, nothing is written, and the status is 2."""
    (copied / "other.toml").write_text(SCENARIO.replace(found, wanted))
    assert call("run", "other.toml", "--out", "other", cwd=copied).status == 0
    done = call("crosscheck", "other", cwd=copied)
    assert done.status == 2
    assert "other: no crosscheck: " in done.err
    assert said in done.err
    assert not (copied / "other/crosscheck.json").exists()


def test_both_directions_open(tmp_path: Path, call: Call) -> None:
    """A plane open all round is no scattering along one direction."""
    text = SCENARIO.replace("points = 256", "points = 128").replace("end = 200.0", "end = 2.0")
    text = text.replace("[[potential]]", Y_AXIS, 1).replace("center = { x = -60.0 }", CENTER)
    text = text.replace("sigma = { x = 8.0 }", "sigma = { x = 8.0, y = 8.0 }")
    (tmp_path / "plane.toml").write_text(text)
    done = call("run", "plane.toml", "--out", "plane", cwd=tmp_path)
    assert done.status == 0, done.err
    done = call("crosscheck", "plane", cwd=tmp_path)
    assert done.status == 2
    assert "both directions are open" in done.err


def test_not_a_run_folder(tmp_path: Path, call: Call) -> None:
    """A folder without a run is refused."""
    done = call("crosscheck", tmp_path, cwd=tmp_path)
    assert done.status == 2
    assert "is it a run folder?" in done.err

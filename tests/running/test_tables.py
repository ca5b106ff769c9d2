"""A run keeps the tables it was started with."""

import json
import shutil
from pathlib import Path

import numpy as np
import pytest

from tests.running.conftest import TEXT, contents
from wavepack import workflow
from wavepack.archive.reader import open_run
from wavepack.errors import ScenarioError, UsageError
from wavepack.physics.potentials import Table
from wavepack.running.session import Session
from wavepack.scenario.load import load_scenario
from wavepack.scenario.schema import Scenario

TABLED = """
[[potential]]
name = "bump"
shape = "table"
file = "bump.csv"
"""


def bump(height: float) -> str:
    """Return a smooth table of that height [energy]."""
    x = np.linspace(-20, 20, 81)
    rows = np.stack([x, height * np.exp(-(x**2) / 20)], axis=1).tolist()
    return "".join(f"{a!r}, {b!r}\n" for a, b in rows)


@pytest.fixture
def scenario(tmp_path: Path) -> Scenario:
    """Return a barrier and a bump from a table, 200 steps."""
    home = tmp_path / "home"
    home.mkdir()
    (home / "bump.csv").write_text(bump(0.05))
    (home / "bumpy.toml").write_text(TEXT.replace("end = 400.0", "end = 50.0") + TABLED)
    return load_scenario(home / "bumpy.toml")


def interrupted(scenario: Scenario, folder: Path) -> None:
    """Start a run and leave it at an early stop."""
    with Session.start(scenario, folder) as session:
        assert session.propagate(stop_asked=lambda: True)["status"] == "interrupted"


def test_a_changed_table_does_not_change_the_run(
    scenario: Scenario, folder: Path, tmp_path: Path
) -> None:
    """Resumed elsewhere, its table replaced by another, a run gives the bits it would have."""
    workflow.run(scenario, tmp_path / "whole")
    interrupted(scenario, folder)
    (tmp_path / "home" / "bump.csv").write_text(bump(0.2))
    moved = tmp_path / "moved"
    folder.rename(moved)
    workflow.resume(moved)
    assert contents(moved) == contents(tmp_path / "whole")


def test_the_scenario_of_a_folder_repeats_its_run(scenario: Scenario, tmp_path: Path) -> None:
    """Where the first table is gone, the folder's scenario gives the same text and bits again."""
    first, again = tmp_path / "first", tmp_path / "again"
    workflow.run(scenario, first)
    shutil.rmtree(tmp_path / "home")
    text = (first / "scenario.toml").read_text()
    assert 'file = "tables/potential.bump.csv"' in text
    workflow.run(load_scenario(first / "scenario.toml"), again)
    assert contents(again) == contents(first)
    assert (again / "scenario.toml").read_text() == text == open_run(again).scenario_text


def test_a_spoilt_copy_is_refused(scenario: Scenario, folder: Path) -> None:
    """A run does not go on with another table than it was started with."""
    interrupted(scenario, folder)
    copy = folder / "tables" / "potential.bump.csv"
    kept = copy.read_text()
    copy.write_text(bump(0.2))
    with pytest.raises(UsageError, match=r"potential\.bump\.csv: is not the table"):
        workflow.resume(folder)
    copy.unlink()
    with pytest.raises(ScenarioError, match="need a readable file"):
        workflow.resume(folder)
    copy.write_text(kept)
    assert workflow.resume(folder)["status"] == "finished"


def test_another_table_in_the_folders_scenario_is_refused(scenario: Scenario, folder: Path) -> None:
    """A scenario that was turned to a table outside is not gone on with."""
    interrupted(scenario, folder)
    path = folder / "scenario.toml"
    outside = next(piece.file for piece in scenario.potential if isinstance(piece, Table))
    path.write_text(path.read_text().replace("tables/potential.bump.csv", outside))
    with pytest.raises(UsageError, match=r"home/bump\.csv, which is not a table the run"):
        workflow.resume(folder)


def test_the_same_scenario_is_recognised(scenario: Scenario, folder: Path, tmp_path: Path) -> None:
    """With the same table it is the same scenario, with another one another."""
    workflow.run(scenario, folder)
    with pytest.raises(UsageError, match="a run of this scenario already"):
        workflow.run(scenario, folder)
    workflow.resume(folder, until=60)
    with pytest.raises(UsageError, match="a run of this scenario already"):
        workflow.run(scenario, folder)
    assert json.loads((folder / "results.json").read_text())["provenance"]["former_ends"] == [50.0]
    (tmp_path / "home" / "bump.csv").write_text(bump(0.2))
    with pytest.raises(UsageError, match="a run of another scenario"):
        workflow.run(scenario, folder)

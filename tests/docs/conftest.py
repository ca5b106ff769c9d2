"""The pages of the project, and a place where what they show can be tried out."""

import shutil
from pathlib import Path

import pytest

import wavepack
from wavepack.scenario.load import load_scenario
from wavepack.scenario.write import to_toml

ROOT = Path(__file__).parents[2]

#: Every page that a reader may open, by its path from the root.
PAGES = sorted(
    str(path.relative_to(ROOT))
    for path in (*ROOT.glob("*.md"), *(ROOT / "docs").rglob("*.md"))
    if path.name != "LICENSE.md"
)

#: `scenarios/barrier.toml` on fewer points and steps: a tenth of a second.
SHRUNK = (
    "grid.x.points=512",
    "propagator.step=0.25",
    "time.end=300",
    "detector.exit.energies.points=31",
    "output.frames=5",
)


@pytest.fixture(scope="session")
def prepared(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with the shrunk scenario and its finished run; not to be changed."""
    folder = tmp_path_factory.mktemp("pages")
    scenario = load_scenario(ROOT / "scenarios/barrier.toml", SHRUNK)
    (folder / "scenarios").mkdir()
    (folder / "scenarios/barrier.toml").write_text(to_toml(scenario), "utf-8")
    wavepack.run(scenario, out=folder / "runs/barrier")
    return folder


@pytest.fixture
def desk(prepared: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return a copy of the prepared folder, which is also where the test works."""
    shutil.copytree(prepared, tmp_path, dirs_exist_ok=True)
    monkeypatch.chdir(tmp_path)
    return tmp_path

"""Every scenario that is shipped loads, is forecast well, and runs when shrunk."""

from pathlib import Path
from typing import Final

import pytest

import wavepack
from wavepack.scenario.build import Setup
from wavepack.scenario.load import load_scenario
from wavepack.scenario.preflight import forecast

FOLDER: Final = Path(__file__).parents[2] / "scenarios"
GALLERY: Final = FOLDER.parent / "docs" / "gallery"

#: What makes a run of each take about a second: fewer points, longer steps, an earlier end.
SHRUNK: Final = {
    "barrier": ("grid.x.points=512", "propagator.step=0.2"),
    "resonant_pair": ("grid.x.points=750", "propagator.step=1.5", "time.end=1500"),
    "field_emission": ("grid.x.points=400", "propagator.step=0.02"),
    "driven_barrier": ("grid.x.points=864", "propagator.step=0.4"),
    "quasi_bound_decay": ("grid.x.points=400", "propagator.step=0.25", "time.end=450"),
    "constriction": ("grid.x.points=128", "grid.y.points=24", "propagator.step=6", "time.end=1800"),
    "two_apertures": ("grid.x.points=96", "grid.y.points=96", "propagator.step=4", "time.end=400"),
    "bowl": ("grid.x.points=63", "grid.y.points=47", "propagator.step=4"),
    "cut_in_half": ("grid.x.points=63", "grid.y.points=31", "propagator.step=4"),
    "box": ("grid.x.points=63", "propagator.step=10"),
}
#: What the full run gives, and how far from it the shrunk one may be: (quantity, value, margin).
EXPECTED: Final = {
    "barrier": ("transmission", 0.1262, 0.01),
    "resonant_pair": ("transmission", 0.0519, 0.01),
    "field_emission": ("transmission", 0.00137, 0.0003),
    "driven_barrier": ("transmission", 0.2407, 0.02),
    "quasi_bound_decay": ("transmission", 0.48, 0.02),
    "constriction": ("transmission", 0.5184, 0.01),
    "two_apertures": ("transmission", 0.341, 0.06),
    "bowl": ("held", 1.0, 1e-9),
    "cut_in_half": ("held", 1.0, 1e-9),
    "box": ("held", 1.0, 1e-9),
}
NAMES: Final = sorted(SHRUNK)


def test_no_file_is_left_out() -> None:
    """The table of this test holds every shipped file."""
    assert sorted(path.stem for path in FOLDER.glob("*.toml")) == NAMES


@pytest.mark.parametrize("name", NAMES)
def test_it_opens_with_its_question(name: str) -> None:
    """The heading asks a question and says what to expect."""
    lines = (FOLDER / f"{name}.toml").read_text("utf-8").splitlines()
    heading = [line for line in lines if line.startswith("#")]
    assert lines[0].startswith("# ")
    assert lines[0].endswith("?")
    assert "xpect" in " ".join(heading)


@pytest.mark.parametrize("name", NAMES)
def test_it_passes_the_forecast(name: str) -> None:
    """As shipped, no line of the forecast says that the numerics are bad."""
    found = forecast(Setup(load_scenario(FOLDER / f"{name}.toml")), timing=False)
    assert [row for row in found.rows if row.verdict == "bad"] == []


@pytest.mark.parametrize("name", NAMES)
def test_it_runs_shrunk(name: str, tmp_path: Path) -> None:
    """With fewer points and steps it finishes, its books close, and it gives about the same."""
    overrides = (*SHRUNK[name], "output.frames=3")
    results = wavepack.run(load_scenario(FOLDER / f"{name}.toml", overrides), out=tmp_path)
    quantities = results["quantities"]
    assert results["status"] == "finished"
    assert quantities["balance"]["value"] == pytest.approx(1.0, abs=1e-9)
    quantity, value, margin = EXPECTED[name]
    assert quantities[quantity]["value"] == pytest.approx(value, abs=margin)


@pytest.mark.parametrize("name", NAMES)
def test_the_gallery_shows_it(name: str) -> None:
    """The gallery has a picture of it, small enough to travel with the source."""
    assert 0 < (GALLERY / f"{name}.png").stat().st_size < 150_000
    assert f"scenarios/{name}.toml" in (GALLERY.parent / "gallery.md").read_text("utf-8")

"""docs/run_folder.md against the table that lays out every run folder."""

import re
from pathlib import Path

import h5py
import pytest

from tests.docs.conftest import ROOT
from wavepack.archive import layout
from wavepack.archive.layout import Column

PAGE = (ROOT / "docs/run_folder.md").read_text("utf-8")
UNITS = {"length": "length", "energy": "energy", "time": "time", "mass": "mass"}

#: The columns of each section of the page.
SECTIONS: dict[str, tuple[Column, ...]] = {
    "`/x`, `/y`, `/potential`": (*layout.POSITIONS.values(), layout.POTENTIAL),
    "`/frames`": (layout.TIME, *layout.POSITIONS.values(), *layout.FRAMES.values()),
    "`/series`": (layout.TIME, *layout.SERIES.values()),
    "`/regions/NAME`": (layout.TIME, layout.PROBABILITY),
    "`/detectors/NAME`": (
        layout.TIME,
        layout.FLUX,
        layout.ENERGY,
        *layout.SPECTRUM.values(),
    ),
    "`/momentum`": (layout.WAVENUMBERS["kx"], *layout.MOMENTUM.values()),
}


def rows(heading: str) -> list[str]:
    """Return the lines of the table under a heading."""
    rest = PAGE.partition(f"# {heading}\n")[2]
    section = re.split(r"^#+ ", rest, maxsplit=1, flags=re.MULTILINE)[0]
    return [line for line in section.splitlines() if line.startswith("| `")]


def row(column: Column) -> str:
    """Return the line that the page must hold for a column."""
    line, plane = (layout.unit(column.dimension, UNITS, axes) for axes in (1, 2))
    # Runs in a plane store no momentum distribution.
    alike = line == plane or column.dimension == "per_momentum"
    unit = line if alike else f"{line}; in 2D {plane}"
    kind = "complex" if column.complex else "real"
    return f"| `{column.name}` | {column.long_name} | {unit} | {kind} |"


@pytest.mark.parametrize("heading", SECTIONS)
def test_every_dataset_is_described(heading: str) -> None:
    """Each table of the page is the one the archive writes by."""
    assert rows(heading) == [row(column) for column in SECTIONS[heading]]


def test_files_are_described() -> None:
    """Every file of a run folder stands in the first table."""
    names = (
        layout.SCENARIO_FILE,
        layout.RUN_FILE,
        layout.RESULTS_FILE,
        layout.CHECKPOINT_FILE,
        layout.PREVIOUS_CHECKPOINT_FILE,
        layout.LOG_FILE,
    )
    listed = [line.split("`")[1] for line in rows("The files")]
    assert set(names) <= set(listed)


def test_a_run_holds_what_is_described(prepared: Path) -> None:
    """A real file has no dataset and no attribute that the page does not name."""
    found: list[str] = []
    with h5py.File(prepared / "runs/barrier/run.h5") as file:
        file.visititems(lambda name, item: found.append(name) if hasattr(item, "shape") else None)
        attributes = set(file.attrs)
    described = {
        f"{heading.strip('`').split('`')[0].strip('/')}/{column.name}"
        for heading, columns in SECTIONS.items()
        for column in columns
    }
    for name in found:
        general = re.sub(r"^(regions|detectors)/\w+/", r"\1/NAME/", name)
        top = general in {"scenario", "x", "y", "potential"}
        assert top or general in described, name
    assert all(f"`{name}`" in PAGE for name in attributes)


def test_files_of_a_run_are_described(prepared: Path) -> None:
    """A finished run leaves no file behind that the page does not name."""
    left = {path.name for path in (prepared / "runs/barrier").iterdir()}
    assert left <= {line.split("`")[1] for line in rows("The files")}

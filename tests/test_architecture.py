"""Rooms know only the rooms before them, and nothing heavy is imported for nothing."""

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "wavepack"

#: Later rooms may import earlier ones; those on one line do not know each other.
ORDER = (
    ("errors", "arrays", "fields"),
    ("grid",),
    ("physics",),
    ("stepping", "observing"),
    ("scenario", "archive"),
    ("analysis",),
    ("rendering", "reporting"),
    ("running",),
    ("workflow",),
    ("arguments",),
    ("cli",),
    ("__main__",),
)
RANK = {room: rank for rank, rooms in enumerate(ORDER) for room in rooms}

#: The root is the door for users: it may name any room, lazily, and no room but for its version.
DOOR = "__init__"


def room_of(path: Path) -> str:
    """Return the room that a module of the package belongs to."""
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported_rooms(source: str) -> Iterator[tuple[int, str]]:
    """Yield line and room of every import of the package, also inside functions."""
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            start = "." if node.level else node.module or ""
            names = [f"{start}.{alias.name}" for alias in node.names]
        else:
            continue
        for name in names:
            root, _, rest = name.partition(".")
            if root == "wavepack" and rest != "__version__":
                yield node.lineno, rest.partition(".")[0] or DOOR
            elif not root:
                yield node.lineno, DOOR


def wrong_arrows(room: str, source: str) -> list[str]:
    """Return every import of a module that its room must not make."""
    return [
        f"line {line}: {room} must not import {target}"
        for line, target in imported_rooms(source)
        if target != room and RANK.get(target, len(RANK)) >= RANK[room]
    ]


MODULES = sorted(path for path in PACKAGE.rglob("*.py") if room_of(path) != DOOR)


def test_all_rooms_have_a_rank() -> None:
    """A new room must be given its place in the order."""
    assert {room_of(path) for path in MODULES} <= set(RANK)


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_point_back(path: Path) -> None:
    """No module imports from a later room or a sibling, not even inside a function."""
    assert wrong_arrows(room_of(path), path.read_text("utf-8")) == []


@pytest.mark.parametrize(
    ("room", "source"),
    [
        ("grid", "from wavepack.physics.units import UnitSystem"),
        ("rendering", "def f():\n    import wavepack.reporting.tables"),
        ("archive", "if TYPE_CHECKING:\n    from wavepack.scenario.schema import Scenario"),
        ("physics", "from wavepack import workflow"),
        ("running", "import wavepack"),
        ("grid", "from ..physics import units"),
    ],
)
def test_wrong_arrows_are_seen(room: str, source: str) -> None:
    """The check itself notices a later room, a sibling, and imports in odd places."""
    assert len(wrong_arrows(room, source)) == 1


def test_right_arrows_pass() -> None:
    """Earlier rooms, the own room and the version are free to all."""
    source = "from wavepack import __version__\nfrom wavepack.grid.axis import Axis\nimport numpy"
    assert wrong_arrows("grid", source) == []
    assert wrong_arrows("physics", source) == []


def loaded_after(code: str) -> set[str]:
    """Return the top-level modules that a fresh interpreter holds after some code."""
    ending = "\nimport sys\nprint('LOADED', *sorted({m.split('.')[0] for m in sys.modules}))"
    done = subprocess.run(
        [sys.executable, "-c", code + ending], capture_output=True, text=True, check=True
    )
    return set(done.stdout.rpartition("LOADED")[2].split())


def test_help_needs_no_numbers() -> None:
    """The help texts, and `import wavepack`, load no numerical library."""
    loaded = loaded_after("from wavepack.cli import main\nmain(['run', '--help'])")
    assert loaded.isdisjoint({"numpy", "scipy", "h5py", "pyfftw", "matplotlib", "av", "xarray"})


def test_scenario_errors_are_quick(tmp_path: Path) -> None:
    """A faulty scenario is refused before files, transforms or pictures are thought of."""
    scenario = tmp_path / "faulty.toml"
    scenario.write_text("titel = 'x'\n")
    call = f"main(['run', {str(scenario)!r}])"
    loaded = loaded_after(f"from wavepack.cli import main\nassert {call} == 2")
    assert loaded.isdisjoint({"h5py", "pyfftw", "matplotlib", "av", "xarray"})

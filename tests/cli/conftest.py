"""The program as a user starts it, and a small run."""

import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TypeAlias

import pytest

from wavepack.cli import main


@dataclass(frozen=True)
class Done:
    """What a command left behind: its exit status and what it wrote."""

    status: int
    out: str
    err: str


#: Gives a command, with `cwd` by name, to a process of its own.
Program: TypeAlias = Callable[..., Done]
#: The same within this process, which saves most of a second.
Call: TypeAlias = Callable[..., Done]

#: One barrier on 256 points, 200 steps: a fraction of a second.
SCENARIO = """\
title = "One <barrier> & a wire"
[particle]
mass = 0.067
[grid]
x = { from = -150.0, to = 150.0, points = 256, ends = "absorbing" }
[[potential]]
name = "barrier"
shape = "slab"
height = 0.3
x = { from = 0.0, to = 3.37 }
[[packet]]
shape = "gaussian"
center = { x = -60.0 }
sigma = { x = 8.0 }
energy = 0.15
direction = "+x"
[absorber]
width = 40.0
[propagator]
step = 0.5
[time]
end = 200.0
[[region]]
name = "drain"
role = "transmitted"
x = { above = 20.0 }
[[region]]
name = "source"
role = "reflected"
x = { below = -20.0 }
[[detector]]
name = "exit"
x = 30.0
energies = { from = 0.05, to = 0.30, points = 51 }
[output]
frames = 5
"""


@pytest.fixture(scope="session")
def environment(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    """Keep what the transform planner learns out of the user's home."""
    plain = {name: text for name, text in os.environ.items() if name != "WAVEPACK_DEBUG"}
    return plain | {"WAVEPACK_CACHE": str(tmp_path_factory.mktemp("cache"))}


@pytest.fixture(scope="session")
def program(environment: dict[str, str]) -> Program:
    """Give tests the program: arguments in, status and both outputs back."""

    def start(*arguments: object, cwd: Path) -> Done:
        command = [sys.executable, "-m", "wavepack", *map(str, arguments)]
        done = subprocess.run(
            command, cwd=cwd, env=environment, capture_output=True, text=True, check=False
        )
        return Done(done.returncode, done.stdout, done.stderr)

    return start


@pytest.fixture
def call(
    environment: dict[str, str], monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> Call:
    """Give tests the command line without a new process."""
    monkeypatch.setenv("WAVEPACK_CACHE", environment["WAVEPACK_CACHE"])

    def start(*arguments: object, cwd: Path) -> Done:
        monkeypatch.chdir(cwd)
        status = main([str(argument) for argument in arguments])
        return Done(status, *capsys.readouterr())

    return start


@pytest.fixture(scope="session")
def finished(program: Program, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with `wire.toml` and its finished run in `runs/wire`; not to be changed."""
    folder = tmp_path_factory.mktemp("finished")
    (folder / "wire.toml").write_text(SCENARIO)
    done = program("run", "wire.toml", "--movie", "wire.gif", cwd=folder)
    assert done.status == 0, done.err
    (folder / "stdout.txt").write_text(done.out)
    (folder / "stderr.txt").write_text(done.err)
    return folder

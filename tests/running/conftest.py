"""Small runs, and how two run folders are compared."""

import hashlib
import json
from pathlib import Path

import h5py
import numpy as np
import pytest

from wavepack.scenario.load import parse_scenario
from wavepack.scenario.schema import Scenario

TEXT = """
title = "small"
[particle]
mass = 0.067
[grid]
x = { from = -100.0, to = 100.0, points = 256, ends = "absorbing" }
[[potential]]
name = "barrier"
shape = "slab"
height = 0.3
x = { from = 0.0, to = 2.0 }
[[packet]]
shape = "gaussian"
center = { x = -30.0 }
sigma = { x = 6.0 }
energy = 0.15
[absorber]
width = 30.0
[propagator]
step = 0.25
[time]
end = 400.0
[[region]]
name = "drain"
role = "transmitted"
x = { above = 10.0 }
[[region]]
name = "source"
role = "reflected"
x = { below = -10.0 }
[[detector]]
name = "exit"
x = 20.0
energies = { from = 0.08, to = 0.25, points = 20 }
[output]
frames = 9
"""


def small(*overrides: str) -> Scenario:
    """Return one barrier on 256 points, 1,600 steps."""
    return parse_scenario(TEXT, overrides=overrides)


def contents(folder: Path) -> dict[str, str]:
    """Return a checksum of every dataset of a run, and its results but for their provenance."""
    found: dict[str, str] = {}

    def add(name: str, item: object) -> None:
        if isinstance(item, h5py.Dataset):
            content = np.ascontiguousarray(item[()]).tobytes()
            found[name] = f"{item.shape} {hashlib.sha256(content).hexdigest()}"

    with h5py.File(folder / "run.h5", locking=False) as file:
        file.visititems(add)
    results = json.loads((folder / "results.json").read_text())
    del results["provenance"]["wall_seconds"]
    found["results"] = json.dumps(results, sort_keys=True)
    return found


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Return an empty folder for a run."""
    path = tmp_path / "run"
    path.mkdir()
    return path

"""From a run folder alone: what the archive holds becomes a picture."""

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import av
import numpy as np
import pytest

from wavepack.archive.layout import RunPlan
from wavepack.archive.reader import Run, open_run
from wavepack.archive.writer import RunWriter
from wavepack.errors import UsageError
from wavepack.rendering.figures import draw_overview, draw_spectrum
from wavepack.rendering.from_run import (
    curves_of,
    frames_of,
    region_curves_of,
    scene_of,
    spectrum_of,
)
from wavepack.rendering.movie import render_movie
from wavepack.rendering.scene import Curves, Detector, Frames, Layer, Scene

MakeCase = Callable[..., tuple[Scene, Frames, Curves]]

FACTS: dict[str, Any] = {
    "regions": [
        {"name": "source", "role": "reflected", "spans": {"x": [None, -20.0]}},
        {"name": "far", "role": "none", "spans": {}, "where": "x > edge"},
        {"name": "odd", "role": "none", "spans": {}, "where": "x > unheard_of"},
    ],
    "detectors": [
        {"name": "exit", "axis": "x", "at": 80.0, "toward": "+x"},
        {"name": "plain", "axis": "x", "at": 90.0, "toward": None},
    ],
    "absorbers": [{"axis": "x", "from": -150.0, "to": -120.0}],
    "parameters": {"edge": 100.0},
    "mean_energy": 0.153,
    "driven": True,
}
ENERGIES = np.linspace(0.05, 0.3, 26)


def write_run(folder: Path, scene: Scene, frames: Frames, count: int) -> Run:
    """Write a run of ``count`` frames as the propagation would, and open it."""
    names = ("x", "y")[: scene.ndim]
    plan = RunPlan(
        title=scene.title,
        scenario_text="title = 'x'\n",
        wavepack_version="0",
        units={"length": "nm", "energy": "eV", "time": "fs", "mass": "m_e"},
        axes=dict(zip(names, scene.coordinates, strict=True)),
        potential=scene.potential,
        series=("norm", "transmission", "reflection", "held", "lost"),
        regions=("source", "far"),
        detectors={"exit": ENERGIES, "plain": None},
        frames=count,
        facts=FACTS,
    )
    rows = np.linspace(0, 240, 50)
    folder.mkdir()
    with RunWriter.create(folder, plan) as writer:
        for i in range(count):
            writer.append_frame(float(frames.times[i]), frames.read(i))
        flat = dict.fromkeys(("norm", "transmission", "reflection", "held"), np.full(50, 0.25))
        writer.append_series({"time": rows, **flat, "lost": np.zeros(50)})
        writer.append_region("source", rows, np.full(50, 0.5))
        writer.append_region("far", rows, np.full(50, 0.1))
        writer.write_spectrum("exit", ENERGIES, np.ones(26), ENERGIES)
    return open_run(folder)


@pytest.fixture
def run(line: MakeCase, tmp_path: Path) -> Run:
    """Return an opened run of one axis."""
    scene, frames, _ = line(256, 4)
    return write_run(tmp_path / "run", scene, frames, 4)


def test_the_scene_is_what_was_stored(run: Run, line: MakeCase) -> None:
    """Axes, potential, units, regions, detectors and layers come back."""
    stored, scene = line(256, 4)[0], scene_of(run)
    assert np.array_equal(scene.coordinates[0], stored.coordinates[0])
    assert np.array_equal(scene.potential, stored.potential)
    assert (scene.units.length, scene.units.energy, scene.units.time) == ("nm", "eV", "fs")
    assert scene.title == stored.title
    assert scene.regions[0].spans == {"x": (-math.inf, -20.0)}
    assert [region.name for region in scene.regions] == ["source", "far"]
    assert scene.regions[1].mask is not None
    assert np.array_equal(scene.regions[1].mask, stored.coordinates[0] > 100)
    assert scene.detectors[0] == Detector("exit", "x", 80.0, "+x")
    assert scene.detectors[1].toward == ""
    assert scene.layers == (Layer("x", -150.0, -120.0),)
    assert scene.mean_energy == 0.153
    assert scene.driven


def test_frames_come_from_the_file(run: Run, line: MakeCase) -> None:
    """Each frame read equals the state written."""
    stored, frames = line(256, 4)[1], frames_of(run)
    assert len(frames) == 4
    assert np.array_equal(frames.times, stored.times)
    assert np.array_equal(frames.read(2), stored.read(2))


def test_only_curves_with_something_to_see_are_shown(run: Run) -> None:
    """A curve of losses that never leaves zero is left out."""
    curves, regions = curves_of(run), region_curves_of(run)
    assert curves is not None
    assert [curve.name for curve in curves.curves] == ["transmitted", "reflected", "held"]
    assert regions is not None
    assert [(c.name, c.role) for c in regions.curves] == [("source", "reflected"), ("far", "none")]


def test_movie_and_figures_of_a_run(run: Run, tmp_path: Path) -> None:
    """A run folder is all that a movie, an overview and a spectrum need."""
    out = render_movie(run, tmp_path / "m.mp4", size=(320, 180))
    with av.open(str(out)) as container:
        assert len(list(container.decode(video=0))) == 4
    assert draw_overview(run, tmp_path / "overview.png").is_file()
    assert draw_spectrum(run, "exit", tmp_path / "spectrum.png").is_file()


def test_movie_of_a_plane(plane: MakeCase, tmp_path: Path) -> None:
    """Frames of two axes are stored and painted alike."""
    scene, frames, _ = plane((32, 24), 2)
    run = write_run(tmp_path / "run", scene, frames, 2)
    assert render_movie(run, tmp_path / "m.gif", size=(320, 180), picture="phase").is_file()


def test_a_run_without_frames_has_nothing_to_draw(line: MakeCase, tmp_path: Path) -> None:
    """The message names the folder."""
    scene, frames, _ = line(64, 1)
    run = write_run(tmp_path / "run", scene, frames, 0)
    with pytest.raises(UsageError, match="no frame has been stored yet"):
        frames_of(run)


def test_unknown_detectors_are_named_with_the_known(run: Run) -> None:
    """Asking for a detector without energies lists those that have some."""
    assert spectrum_of(run, "exit").reason == "the run has no results yet"
    for name in ("plain", "none"):
        with pytest.raises(UsageError, match=f"no detector '{name}' with energies.*exit"):
            spectrum_of(run, name)

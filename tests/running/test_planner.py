"""What the transform planner has measured is kept, and a folder that refuses costs little."""

from pathlib import Path

import pytest

from wavepack.grid import spectral
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.running.planner import given_knowledge, knowledge_file, shared_knowledge


def plan(points: int) -> None:
    """Plan one transform."""
    spectral.TransformPair(Grid((Axis("x", 0, 1, points),)), spectral.empty_field((points,)))


def test_knowledge_is_shared_between_runs(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The first plan is written down; the next process learns it."""
    monkeypatch.setenv("WAVEPACK_CACHE", str(tmp_path))
    with shared_knowledge():
        plan(52)
    kept = knowledge_file().read_bytes()
    assert kept
    with given_knowledge(b""):
        pass
    assert len(spectral.remember().text) < len(kept)
    with shared_knowledge():
        plan(52)
    assert knowledge_file().read_bytes() == kept


def test_a_cache_that_cannot_be_written_is_no_fault(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """With a file in the way of the folder, transforms are planned all the same."""
    (tmp_path / "file").write_text("")
    monkeypatch.setenv("WAVEPACK_CACHE", str(tmp_path / "file"))
    with shared_knowledge():
        plan(36)

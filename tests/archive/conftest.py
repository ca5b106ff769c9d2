"""A small run to lay out, and a recorder of every write to a file."""

import io
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest

from wavepack.archive.layout import RunPlan

UNITS = {"length": "nm", "energy": "eV", "time": "fs", "mass": "m_e"}


def small_plan(**changes: Any) -> RunPlan:
    """Return the plan of a run on 6 by 4 points."""
    x, y = np.linspace(-1.0, 1.0, 6), np.linspace(0.0, 3.0, 4)
    settings: dict[str, Any] = {
        "title": "Small",
        "scenario_text": 'title = "Small"\n',
        "wavepack_version": "0.0",
        "units": UNITS,
        "axes": {"x": x, "y": y},
        "potential": np.outer(x, y),
        "series": ("norm", "x", "autocorrelation"),
        "regions": ("drain",),
        "detectors": {"exit": np.linspace(0.1, 0.3, 5), "plain": None},
        "momentum": {"x": np.linspace(-2, 2, 6), "y": np.linspace(-2, 2, 4)},
        "facts": {"drive": False, "absorber": [["x", -1.0, -0.5]]},
    }
    return RunPlan(**(settings | changes))


@pytest.fixture
def make_plan() -> Callable[..., RunPlan]:
    """Give tests the small plan, with changes."""
    return small_plan


def frame_of(row: int) -> np.ndarray[Any, np.dtype[np.complex128]]:
    """Return the state that belongs to a row."""
    return np.full((6, 4), row + 1) * np.exp(1j * np.arange(24).reshape(6, 4))


def append_row(writer: Any, row: int) -> None:
    """Append one frame and one row everywhere, with values that depend on the row alone."""
    writer.append_series(
        {"time": row, "norm": row + 0.5, "x": -row, "autocorrelation": row + 1 + 2j}
    )
    writer.append_region("drain", row, 1 / (row + 1))
    writer.append_detector("exit", [row, row + 0.5], [row + 1, row + 2])
    writer.append_detector("plain", row, row + 3)
    writer.append_frame(row, frame_of(row))


@dataclass
class Recorder:
    """Every write to a file, in order, as a process killed after it would leave them."""

    start: bytes = b""
    writes: list[tuple[int, bytes | None]] = field(default_factory=list)
    _open: list[io.FileIO] = field(default_factory=list)

    def open(self, path: Path, mode: str) -> h5py.File:
        """Open a file whose writes are recorded from now on."""
        if mode == "w":
            path.write_bytes(b"")
        self.start, self.writes = path.read_bytes(), []
        raw = _Recording(path, self.writes)
        self._open.append(raw)
        return h5py.File(raw, mode, libver=("earliest", "v110"))

    def close(self) -> None:
        """Close what was opened."""
        for raw in self._open:
            raw.close()

    def images(self, first: int = 0) -> Any:
        """Yield how many writes were done and what the file then held."""
        image = bytearray(self.start)
        for count, (place, content) in enumerate(self.writes, start=1):
            size = place if content is None else max(len(image), place + len(content))
            image = image[:size].ljust(size, b"\0")
            if content is not None:
                image[place : place + len(content)] = content
            if count >= first:
                yield count, bytes(image)


class _Recording(io.FileIO):
    def __init__(self, path: Path, writes: list[tuple[int, bytes | None]]) -> None:
        super().__init__(path, "r+")
        self._writes = writes

    def write(self, content: Any) -> int:
        """Note the write and do it."""
        self._writes.append((self.tell(), bytes(content)))
        return super().write(content)

    def truncate(self, size: int | None = None) -> int:
        """Note the new size and set it."""
        place = self.tell() if size is None else size
        self._writes.append((place, None))
        return super().truncate(size)


@pytest.fixture
def recorder() -> Iterator[Recorder]:
    """Give tests a recorder of writes."""
    recorder = Recorder()
    yield recorder
    recorder.close()


@pytest.fixture
def append() -> Callable[[Any, int], None]:
    """Give tests the appending of one row."""
    return append_row


@pytest.fixture
def frame() -> Callable[[int], Any]:
    """Give tests the state of a row."""
    return frame_of

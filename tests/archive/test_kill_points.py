"""A process may be killed between any two writes to run.h5."""

import io
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

import h5py
import numpy as np
import pytest

from wavepack.archive import hdf5 as hdf5_module
from wavepack.archive import writer as writer_module
from wavepack.archive.hdf5 import open_to_read
from wavepack.archive.layout import RUN_FILE, RunPlan
from wavepack.archive.reader import open_run
from wavepack.archive.stream import committed_rows, stream_names
from wavepack.archive.writer import RunWriter
from wavepack.arrays import ComplexArray

if TYPE_CHECKING:
    from _typeshed import ReadableBuffer

Append = Callable[[RunWriter, int], None]
Frame = Callable[[int], ComplexArray]


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

    def images(self) -> Iterator[tuple[int, bytes]]:
        """Yield how many writes were done and what the file then held."""
        image = bytearray(self.start)
        for count, (place, content) in enumerate(self.writes, start=1):
            size = place if content is None else max(len(image), place + len(content))
            image = image[:size].ljust(size, b"\0")
            if content is not None:
                image[place : place + len(content)] = content
            yield count, bytes(image)


class _Recording(io.FileIO):
    def __init__(self, path: Path, writes: list[tuple[int, bytes | None]]) -> None:
        super().__init__(path, "r+")
        self._writes = writes

    def write(self, content: "ReadableBuffer") -> int:
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


def check_rows(file: h5py.File, floor: dict[str, int], frame: Frame) -> None:
    """All rows promised are there, and every row that counts is right."""
    counts = {name: committed_rows(file[name]) for name in stream_names(file)}
    assert all(counts[name] >= count for name, count in floor.items())
    assert len(file.attrs["scenario_sha256"]) == 64
    assert file["scenario"][()].startswith(b"title = ")
    rows = np.arange(counts["series"])
    series = file["series"]
    assert np.array_equal(series["time"][: len(rows)], rows)
    assert np.array_equal(series["norm"][: len(rows)], rows + 0.5)
    assert np.array_equal(series["autocorrelation"][: len(rows)], rows + 1 + 2j)
    drain = np.arange(counts["regions/drain"])
    assert np.array_equal(file["regions/drain/probability"][: len(drain)], 1 / (drain + 1))
    flux = file["detectors/exit/flux"][: counts["detectors/exit"]]
    assert np.array_equal(flux[::2], np.arange(len(flux) // 2) + 1)
    psi = file["frames/psi"][: counts["frames"]]
    assert all(np.array_equal(state, frame(row)) for row, state in enumerate(psi))


def replay(
    folder: Path,
    recorder: Recorder,
    floors: dict[int, dict[str, int]],
    frame: Frame,
    *,
    first: int = 0,
) -> int:
    """Leave each killed state in a folder; read it, resume it, read it again."""
    floor: dict[str, int] = {}
    points = 0
    path = folder / RUN_FILE
    for points, image in recorder.images():
        floor = floors.get(points, floor)
        if points < first:
            continue
        path.write_bytes(image)
        with open_to_read(path) as file:
            check_rows(file, floor, frame)
        with RunWriter.reopen(folder) as writer:
            assert all(writer.counts()[name] >= count for name, count in floor.items())
        with open_to_read(path) as file:
            check_rows(file, floor, frame)
    assert points > first
    return points


@pytest.fixture
def recorded(
    tmp_path: Path,
    recorder: Recorder,
    make_plan: Callable[..., RunPlan],
    monkeypatch: pytest.MonkeyPatch,
) -> Iterator[tuple[RunWriter, Path]]:
    """Give a writer whose writes are recorded, and a folder to replay them in."""
    source, target = tmp_path / "source", tmp_path / "target"
    source.mkdir()
    target.mkdir()
    monkeypatch.setattr(writer_module, "BUFFERED_SECONDS", 1e9)
    for module in (writer_module, hdf5_module):
        # No power is cut here: thousands of waits for the disk would only take time.
        monkeypatch.setattr(module, "sync_file", lambda _: None)
    RunWriter.create(source, make_plan(frames=40, records=40, samples=80)).close()
    with monkeypatch.context() as patch:
        patch.setattr(writer_module, "open_file", recorder.open)
        writer = RunWriter.reopen(source)
    yield writer, target
    writer.close()


def test_appending_survives_a_kill_at_every_write(
    recorded: tuple[RunWriter, Path], recorder: Recorder, append: Append, frame: Frame
) -> None:
    """Killed after any write of a growing run, the file keeps all rows flushed before."""
    writer, target = recorded
    floors = {}
    for row in range(3):
        append(writer, row)
        floors[len(recorder.writes)] = writer.counts()
    assert replay(target, recorder, floors, frame) > 50


def test_many_frames_survive_a_kill_at_every_write(
    recorded: tuple[RunWriter, Path], recorder: Recorder, append: Append, frame: Frame
) -> None:
    """Past 64 frames, where an index of one chunk a frame would split, none is lost."""
    writer, target = recorded
    floors, first = {}, 0
    for row in range(67):
        append(writer, row)
        floors[len(recorder.writes)] = writer.counts()
        first = len(recorder.writes) if row == 63 else first
    replay(target, recorder, floors, frame, first=first)


def test_truncating_survives_a_kill_at_every_write(
    recorded: tuple[RunWriter, Path], recorder: Recorder, append: Append, frame: Frame
) -> None:
    """Killed while rows are dropped and appended again, the file keeps those before them."""
    writer, target = recorded
    for row in range(8):
        append(writer, row)
        if row == 4:
            kept = writer.counts()
    recorder.start = writer.path.read_bytes()
    recorder.writes.clear()
    writer.truncate(kept)
    floors = {1: kept}
    for row in range(5, 7):
        append(writer, row)
        floors[len(recorder.writes)] = writer.counts()
    replay(target, recorder, floors, frame)


def test_last_words_survive_a_kill_at_every_write(
    recorded: tuple[RunWriter, Path], recorder: Recorder, append: Append, frame: Frame
) -> None:
    """Killed while spectra or another scenario are written, the file keeps all rows."""
    writer, target = recorded
    for row in range(3):
        append(writer, row)
    recorder.start = writer.path.read_bytes()
    recorder.writes.clear()
    writer.write_spectrum("exit", np.ones(5), np.ones(5), np.ones(5))
    writer.write_momentum(np.ones((6, 4)), np.ones((6, 4)))
    writer.replace_scenario('title = "Longer"\n')
    replay(target, recorder, {1: writer.counts()}, frame)
    assert open_run(target).scenario_text == 'title = "Longer"\n'

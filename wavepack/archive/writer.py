"""The one that writes ``run.h5``.

A file of HDF5's oldest format survives a kill at any write if nothing but the
following ever happens to it: rows are appended to datasets laid out before the
start, uncompressed, in few chunks, flushed twice, values first and their times
second. That is all this module does to a live file.
"""

import os
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from time import monotonic as time_now
from types import TracebackType
from typing import Any, Final, Self

import h5py
import numpy as np
import numpy.typing as npt

from wavepack.archive.disk import (
    RESERVE,
    machine_errors,
    require_folder,
    require_space,
    sync_file,
)
from wavepack.archive.hdf5 import check_schema, mend_length, open_file, redirect
from wavepack.archive.layout import RUN_FILE, SPECTRUM, RunPlan, text_sha256
from wavepack.archive.stream import Stream, stream_names
from wavepack.archive.structure import lay_out
from wavepack.errors import MachineError, UsageError

#: Rows are kept back until there are that many, or until the oldest is that old.
BUFFERED_ROWS: Final = 1000
BUFFERED_SECONDS: Final = 1.0
BUFFERED_FRAME_BYTES: Final = 2**22


class RunWriter:
    """Appends frames and rows to ``run.h5``.

    Start a file with `create`, go on with `reopen`. Rows are buffered: what
    has been appended is on disk after `flush`, and outlives a power cut after
    `sync`, which belongs before each checkpoint together with `counts`. After
    an error the file is abandoned: nothing more is written to it, closing it
    does nothing, and the run can be resumed.
    """

    def __init__(self, path: Path, file: h5py.File, notes: tuple[str, ...] = ()) -> None:
        self.path = path
        self.notes = notes
        self._file: h5py.File | None = file
        self._reserve = RESERVE
        self._flushed = self._framed = time_now()
        self._streams: dict[str, Stream] = {name: Stream(file[name]) for name in stream_names(file)}
        if "frames" in self._streams:
            self._reserve = max(RESERVE, self._streams["frames"].row_bytes)

    @classmethod
    def create(cls, folder: Path | str, plan: RunPlan) -> Self:
        """Lay out a new file in an existing folder and return its writer.

        Raises
        ------
        MachineError
            If the folder is missing or not writable, or the disk is full.
        UsageError
            If the folder holds a run already.
        """
        folder = Path(folder)
        require_folder(folder)
        path = folder / RUN_FILE
        if path.exists():
            raise UsageError(f"{folder}: holds a {RUN_FILE} already")
        require_space(folder, plan.frame_bytes + 1_000_000, max(RESERVE, plan.frame_bytes))
        temporary = path.with_name(f".{RUN_FILE}.{os.getpid()}.partial")
        with machine_errors(path, folder):
            try:
                with open_file(temporary, "w") as file:
                    lay_out(file, plan)
                sync_file(temporary)
                temporary.replace(path)
                sync_file(folder)
            finally:
                temporary.unlink(missing_ok=True)
            return cls(path, open_file(path, "r+"))

    @classmethod
    def reopen(cls, folder: Path | str, counts: Mapping[str, int] | None = None) -> Self:
        """Open the file of an earlier process to append to it.

        A file cut short by a power failure is mended first; ``notes`` of the
        writer says so. With ``counts`` all that came after them is dropped.

        Raises
        ------
        UsageError
            If there is no such file, or it was written by a newer version.
        MachineError
            If the file is damaged, or holds less than ``counts``.
        """
        folder = Path(folder)
        path = folder / RUN_FILE
        if not path.is_file():
            raise UsageError(f"{folder}: no {RUN_FILE} in it; is it a run folder?")
        require_folder(folder)
        with machine_errors(path, folder):
            notes = mend_length(path)
            file = open_file(path, "r+")
        check_schema(file, path)
        with machine_errors(path, folder):
            writer = cls(path, file, notes)
        writer.truncate(writer.counts() if counts is None else counts)
        return writer

    def append_frame(self, time: float, values: npt.NDArray[Any]) -> None:
        """Append one state of the stored points; large ones are on disk on return.

        Raises
        ------
        ValueError
            If the shape is not that of a frame.
        MachineError
            If the disk is full or the file cannot be written.
        """
        stream = self._stream("frames")
        require_space(self.path.parent, (stream.kept + 1) * stream.row_bytes, self._reserve)
        stream.keep({"time": [time], stream.columns[0]: np.asarray(values)[np.newaxis]})
        late = time_now() - self._framed > BUFFERED_SECONDS
        if late or stream.kept * stream.row_bytes >= BUFFERED_FRAME_BYTES:
            self._write([stream])
            self._framed = time_now()

    def append_series(self, rows: Mapping[str, npt.ArrayLike]) -> None:
        """Append rows of every column of the series: numbers, or arrays of equal length.

        Raises
        ------
        ValueError
            If a column is missing, unknown, or of another length.
        MachineError
            If the disk is full or the file cannot be written.
        """
        self._keep("series", rows)

    def append_region(self, name: str, time: npt.ArrayLike, probability: npt.ArrayLike) -> None:
        """Append the probability of a region at one time, or at several; see `append_series`."""
        self._keep(f"regions/{name}", {"time": time, "probability": probability})

    def append_detector(self, name: str, time: npt.ArrayLike, flux: npt.ArrayLike) -> None:
        """Append the flux [1/time] through a detector, likewise; see `append_series`."""
        self._keep(f"detectors/{name}", {"time": time, "flux": flux})

    def write_spectrum(
        self,
        name: str,
        flux_by_energy: npt.ArrayLike,
        incident: npt.ArrayLike | None = None,
        transmission: npt.ArrayLike | None = None,
    ) -> None:
        """Write what went through a detector by energy; what is None becomes NaN.

        Raises
        ------
        ValueError
            If the detector has no spectrum, or a length is not that of its energies.
        MachineError
            If the file cannot be written.
        """
        values = (flux_by_energy, incident, transmission)
        self._write_fixed(f"detectors/{name}", dict(zip(SPECTRUM, values, strict=True)))

    def write_momentum(self, before: npt.ArrayLike | None, after: npt.ArrayLike | None) -> None:
        """Write the momentum distributions [length, or length^2]; see `write_spectrum`."""
        self._write_fixed("momentum", {"before": before, "after": after})

    def replace_scenario(self, text: str) -> None:
        """Write another text in place of the scenario's, as when its end was moved.

        Raises
        ------
        ValueError
            If the text does not fit into the room kept for it.
        MachineError
            If the file cannot be written.
        """
        with self._guard() as file:
            content, room = text.encode(), file["scenario"].dtype.itemsize
            if len(content) > room:
                raise ValueError(f"scenario: {len(content)} bytes, there is room for {room}")
            file["scenario"][()] = content
            # Changed in place: deleting and creating it anew could cost the file.
            file.attrs.modify("scenario_sha256", np.bytes_(text_sha256(text)))
            file.flush()

    def column(self, name: str) -> npt.NDArray[Any]:
        """Return all whole rows of a growing dataset such as ``series/held``; see `flush`.

        Raises
        ------
        ValueError
            If the run has no such dataset.
        MachineError
            If the disk is full or the file cannot be read.
        """
        self.flush()
        group, _, column = name.rpartition("/")
        if column not in {"time", *self._stream(group).columns}:
            raise ValueError(f"{name}: not part of this run")
        with self._guard() as file:
            return np.asarray(file[name][: self._stream(group).count])

    def counts(self) -> dict[str, int]:
        """Return how many rows each growing group has, buffered ones included."""
        return {name: stream.count for name, stream in self._streams.items()}

    def truncate(self, counts: Mapping[str, int]) -> None:
        """Drop all rows after the given counts, as `counts` returned them.

        Raises
        ------
        MachineError
            If the file holds fewer rows, or other groups.
        """
        if set(counts) != set(self._streams):
            raise MachineError(f"{self.path}: its groups are not those of the checkpoint")
        for name, stream in self._streams.items():
            if stream.on_disk < counts[name]:
                raise MachineError(
                    f"{self.path}: {name} holds {stream.on_disk} rows, "
                    f"the checkpoint knows of {counts[name]}: the file is damaged"
                )
        with self._guard() as file:
            for name, stream in self._streams.items():
                stream.shrink(counts[name])
            file.flush()
            sync_file(self.path)

    def flush(self) -> None:
        """Write all that is buffered, values first: a row counts once its time is there.

        Raises
        ------
        MachineError
            If the disk is full or the file cannot be written.
        """
        self._write([stream for stream in self._streams.values() if stream.kept])
        self._flushed = time_now()

    def _write(self, streams: list[Stream]) -> None:
        if not streams:
            return
        needed = sum(stream.kept * stream.row_bytes for stream in streams)
        with self._guard() as file:
            require_space(self.path.parent, needed, self._reserve)
            for stream in streams:
                stream.write_values()
            file.flush()
            for stream in streams:
                stream.write_times()
            file.flush()

    def sync(self) -> None:
        """Write all that is buffered and ask the disk to keep it; see `flush`."""
        self.flush()
        with self._guard():
            sync_file(self.path)

    def close(self) -> None:
        """Write all that is buffered and close the file; see `flush`."""
        if self._file is None:
            return
        self.flush()
        with self._guard() as file:
            file.close()
        self._file = None

    def abandon(self) -> None:
        """Close the file without writing to it; what is on disk stays as it is.

        HDF5 holds on to what it could not write, tries again when the file is
        closed and at the very end of the process, and may crash there. Its
        descriptor is therefore turned towards the null device before the file
        is closed: all it still writes goes nowhere.
        """
        file, self._file = self._file, None
        if file is None:
            return
        try:
            redirect(file)
            file.close()
        except (OSError, RuntimeError, ValueError):
            # Nowhere to redirect to: let nothing touch the file again before the end.
            _ABANDONED.append(file)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _live(self) -> h5py.File:
        if self._file is None:
            raise MachineError(f"{self.path}: closed, or abandoned after an error")
        return self._file

    def _stream(self, name: str) -> Stream:
        self._live()
        if name not in self._streams:
            raise ValueError(f"{name}: not part of this run")
        return self._streams[name]

    def _keep(self, name: str, rows: Mapping[str, npt.ArrayLike]) -> None:
        stream = self._stream(name)
        stream.keep(rows)
        full = stream.kept >= BUFFERED_ROWS
        if full or time_now() - self._flushed > BUFFERED_SECONDS:
            self.flush()

    def _write_fixed(self, group: str, values: Mapping[str, npt.ArrayLike | None]) -> None:
        with self._guard() as file:
            for name, array in values.items():
                if f"{group}/{name}" not in file:
                    raise ValueError(f"{group}/{name}: not part of this run")
                dataset = file[group][name]
                if array is not None and np.shape(array) != dataset.shape:
                    raise ValueError(
                        f"{group}/{name}: shape {np.shape(array)}, need {dataset.shape}"
                    )
                dataset[...] = np.nan if array is None else array
            file.flush()

    @contextmanager
    def _guard(self) -> Iterator[h5py.File]:
        """Hand out the file; abandon it when the machine refuses."""
        file = self._live()
        try:
            with machine_errors(self.path, self.path.parent):
                yield file
        except MachineError:
            self.abandon()
            raise


_ABANDONED: list[h5py.File] = []

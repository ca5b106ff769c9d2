"""Reads a run folder, also while another process writes into it."""

import json
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import ModuleType
from typing import TYPE_CHECKING, Any, Final, TypeVar

import h5py
import numpy as np
import numpy.typing as npt

from wavepack.archive.hdf5 import check_schema, open_to_read
from wavepack.archive.layout import MOMENTUM, POSITIONS, RUN_FILE, SPECTRUM, FrameKind
from wavepack.archive.results import read_results
from wavepack.archive.stream import committed_rows, stream_names
from wavepack.arrays import RealArray
from wavepack.errors import MachineError, UsageError

if TYPE_CHECKING:
    import xarray

T = TypeVar("T")

#: A writer's flush takes milliseconds; what reads badly is read again after that long.
PAUSES: Final = (0.02, 0.05, 0.1, 0.2)


@dataclass(frozen=True, eq=False)
class Run:
    """A run folder as it was when it was opened; open it again to see what came since.

    Arrays are read from the file when they are asked for.
    """

    folder: Path
    title: str
    units: Mapping[str, str]
    facts: Mapping[str, Any]
    scenario_text: str
    scenario_sha256: str
    wavepack_version: str
    frame_kind: FrameKind
    axes: Mapping[str, RealArray]
    counts: Mapping[str, int]
    detector_names: tuple[str, ...]
    region_names: tuple[str, ...]
    frame_times: RealArray = field(repr=False)
    potential: RealArray | None = field(repr=False)

    @property
    def path(self) -> Path:
        """The run's ``run.h5``."""
        return self.folder / RUN_FILE

    def __len__(self) -> int:
        return self.counts["frames"]

    @property
    def results(self) -> dict[str, Any]:
        """What ``results.json`` holds.

        Raises
        ------
        UsageError
            If there are no results in the folder.
        """
        return read_results(self.folder)

    def frame(self, index: int) -> npt.NDArray[Any]:
        """Return one stored state, shape of the stored points; -1 is the last.

        Raises
        ------
        IndexError
            If there is no such frame.
        MachineError
            If the file cannot be read.
        """
        place = index + len(self) if index < 0 else index
        if not 0 <= place < len(self):
            raise IndexError(f"frame {index}: the run holds {len(self)} frames")
        return self.read(f"frames/{self.frame_kind}", place)

    def density(self, index: int) -> RealArray:
        r"""Return :math:`|\psi|^2` [1/length, or 1/length^2] of one stored state; see `frame`."""
        frame = self.frame(index)
        if self.frame_kind == "density":
            return frame.astype(np.float64)
        wave = frame.astype(np.complex128)
        return wave.real**2 + wave.imag**2

    def read(self, name: str, rows: int | slice | None = None) -> npt.NDArray[Any]:
        """Return a dataset such as ``series/norm``; all its whole rows by default.

        Raises
        ------
        KeyError
            If the run has no such dataset.
        MachineError
            If the file cannot be read.
        """
        group = name.rpartition("/")[0]
        with_time = group in self.counts

        def read(file: h5py.File) -> npt.NDArray[Any]:
            dataset = file[name]
            growing = with_time and dataset.maxshape[0] is None
            key = slice(self.counts[group]) if growing and rows is None else rows
            return np.asarray(dataset[() if key is None else key])

        return _patiently(self.path, read)

    @property
    def series(self) -> "xarray.Dataset":
        """Time series of the whole state."""
        dataset: xarray.Dataset = _xarray_side().growing(self, "series")
        return dataset

    @property
    def frames(self) -> "xarray.Dataset":
        """Stored states over ``time``, ``x`` and ``y``; values are read on use."""
        dataset: xarray.Dataset = _xarray_side().frames(self)
        return dataset

    @property
    def regions(self) -> "dict[str, xarray.Dataset]":
        """Probability over time of each region."""
        side = _xarray_side()
        return {name: side.growing(self, f"regions/{name}") for name in self.region_names}

    @property
    def detectors(self) -> "dict[str, xarray.Dataset]":
        """Flux over time of each detector."""
        side = _xarray_side()
        return {name: side.growing(self, f"detectors/{name}") for name in self.detector_names}

    @property
    def spectra(self) -> "dict[str, xarray.Dataset]":
        """Flux, incident probability and transmission by energy of each detector that has them."""
        side = _xarray_side()
        names = [name for name in self.detector_names if self.has(f"detectors/{name}/energy")]
        return {
            name: side.fixed(self, f"detectors/{name}", ("energy",), tuple(SPECTRUM))
            for name in names
        }

    @property
    def momentum(self) -> "xarray.Dataset | None":
        """Momentum distributions before and after, if the run recorded them."""
        if not self.has("momentum"):
            return None
        axes = tuple(f"k{axis}" for axis in self.axes if self.has(f"momentum/k{axis}"))
        dataset: xarray.Dataset = _xarray_side().fixed(self, "momentum", axes, tuple(MOMENTUM))
        return dataset

    def has(self, name: str) -> bool:
        """Tell whether ``run.h5`` holds a group or dataset."""
        return _patiently(self.path, lambda file: name in file)

    def labels(self, name: str) -> dict[str, str]:
        """Return the units and the long name of a dataset."""

        def read(file: h5py.File) -> dict[str, str]:
            attributes = file[name].attrs
            return {key: str(attributes[key]) for key in ("units", "long_name")}

        return _patiently(self.path, read)

    def columns(self, group: str) -> tuple[str, ...]:
        """Return the names of the datasets of a group that grow along time, time apart."""

        def read(file: h5py.File) -> tuple[str, ...]:
            items = file[group].items()
            return tuple(n for n, item in items if item.maxshape[0] is None and n != "time")

        return _patiently(self.path, read)


def open_run(folder: Path | str) -> Run:
    """Open a run folder to read what it holds.

    Raises
    ------
    UsageError
        If it is not a run folder, or was written by a newer version.
    MachineError
        If its files cannot be read.
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise UsageError(f"{folder}: no such folder")
    path = folder / RUN_FILE
    if not path.is_file():
        raise UsageError(f"{folder}: not a run folder: there is no {RUN_FILE} in it")
    if not h5py.is_hdf5(path):
        raise UsageError(f"{path}: not an HDF5 file")
    return _patiently(path, lambda file: _run(folder, file))


def _run(folder: Path, file: h5py.File) -> Run:
    counts = {name: committed_rows(file[name]) for name in stream_names(file)}
    attributes = file.attrs
    quantities = ("length", "energy", "time", "mass")
    return Run(
        folder=folder,
        title=str(attributes["title"]),
        units={name: str(attributes[f"{name}_unit"]) for name in quantities},
        facts=json.loads(attributes["facts"]),
        scenario_text=file["scenario"][()].decode(),
        scenario_sha256=attributes["scenario_sha256"].decode(),
        wavepack_version=str(attributes["wavepack_version"]),
        frame_kind="psi" if "psi" in file["frames"] else "density",
        axes={name: file[name][()] for name in POSITIONS if name in file},
        counts=counts,
        detector_names=tuple(file["detectors"]),
        region_names=tuple(file["regions"]),
        frame_times=file["frames/time"][: counts["frames"]],
        potential=file["potential"][()] if "potential" in file else None,
    )


def _patiently(path: Path, read: Callable[[h5py.File], T]) -> T:
    """Read once more where a writer at work may have been caught in the middle."""
    for pause in (*PAUSES, None):
        try:
            with open_to_read(path) as file:
                check_schema(file, path)
                return read(file)
        except (OSError, RuntimeError, ValueError) as error:
            if pause is None:
                reason = " ".join(str(error).split())
                raise MachineError(f"{path}: cannot be read: {reason}") from error
            time.sleep(pause)
    raise AssertionError


def _xarray_side() -> ModuleType:
    # xarray takes 0.6 s to import: only who asks for its objects pays for it.
    from wavepack.archive import datasets  # noqa: PLC0415

    return datasets

"""Datasets that grow together along time, and their buffer."""

import math
from collections.abc import Mapping
from typing import Any

import h5py
import numpy as np
import numpy.typing as npt


class Stream:
    """Datasets of one group that grow together along ``time``."""

    def __init__(self, group: h5py.Group) -> None:
        self._time: h5py.Dataset = group["time"]
        self._values: dict[str, h5py.Dataset] = {
            name: dataset
            for name, dataset in group.items()
            if name != "time" and dataset.maxshape[0] is None
        }
        # Asked of HDF5 once: every row is checked against them.
        datasets = {"time": self._time, **self._values}
        self._forms = {name: (item.dtype, item.shape[1:]) for name, item in datasets.items()}
        self._rows: dict[str, list[npt.NDArray[Any]]] = {}
        self.columns = tuple(self._values)
        self.row_bytes = sum(
            dtype.itemsize * math.prod(shape) for dtype, shape in self._forms.values()
        )
        self.on_disk = committed_rows(group)
        self.kept = 0

    @property
    def count(self) -> int:
        """Rows written and rows kept back."""
        return self.on_disk + self.kept

    def keep(self, rows: Mapping[str, npt.ArrayLike]) -> None:
        """Keep rows of all columns and their times for the next writing."""
        if rows.keys() != self._forms.keys():
            raise ValueError(f"columns {sorted(rows)}, need {sorted(self._forms)}")
        arrays = {name: self._fitting(name, value) for name, value in rows.items()}
        lengths = {len(array) for array in arrays.values()}
        if len(lengths) > 1:
            raise ValueError(f"columns of unequal length: {sorted(lengths)}")
        if not np.isfinite(arrays["time"]).all():
            raise ValueError("time: need finite values")
        for name, array in arrays.items():
            self._rows.setdefault(name, []).append(array)
        self.kept += lengths.pop()

    def write_values(self) -> None:
        """Write the kept values; their times stay unknown, so no row counts yet."""
        stop = self.on_disk + self.kept
        for name, dataset in self._values.items():
            dataset.resize(stop, axis=0)
            dataset[self.on_disk : stop] = _joined(self._rows[name])
        self._time.resize(stop, axis=0)

    def write_times(self) -> None:
        """Write the times of the kept rows, which makes them count."""
        self._time[self.on_disk :] = np.concatenate(self._rows["time"])
        self.on_disk += self.kept
        self.kept, self._rows = 0, {}

    def shrink(self, count: int) -> None:
        """Drop all rows after the first ``count``, and what was kept."""
        for dataset in (self._time, *self._values.values()):
            if dataset.shape[0] != count:
                dataset.resize(count, axis=0)
        self.on_disk, self.kept, self._rows = count, 0, {}

    def _fitting(self, name: str, value: npt.ArrayLike) -> npt.NDArray[Any]:
        dtype, shape = self._forms[name]
        array = np.asarray(value)
        if array.shape == shape:
            array = array[np.newaxis]
        if array.ndim != len(shape) + 1 or array.shape[1:] != shape:
            raise ValueError(f"{name}: shape {array.shape}, need (rows, *{shape})")
        if not np.can_cast(array.dtype, dtype, "same_kind"):
            raise ValueError(f"{name}: {array.dtype} does not fit into {dtype}")
        # A copy: the caller may go on with its array while the row is kept.
        return array.astype(dtype)


def _joined(blocks: list[npt.NDArray[Any]]) -> npt.NDArray[Any]:
    return blocks[0] if len(blocks) == 1 else np.concatenate(blocks)


def committed_rows(group: h5py.Group) -> int:
    """Return how many rows of a group are whole: as far as times are numbers."""
    growing = [item for item in group.values() if item.maxshape and item.maxshape[0] is None]
    shortest = min(dataset.shape[0] for dataset in growing)
    missing = np.flatnonzero(~np.isfinite(group["time"][:shortest]))
    return int(missing[0]) if missing.size else shortest


def stream_names(file: h5py.File) -> list[str]:
    """Return the paths of all groups that grow."""
    names = [name for name in ("frames", "series") if name in file]
    for parent in ("regions", "detectors"):
        names += [f"{parent}/{name}" for name in file[parent]]
    return names

"""What a run holds as xarray objects; imported on use only."""

from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt
import xarray
from xarray.backends import BackendArray
from xarray.core import indexing

if TYPE_CHECKING:
    from wavepack.archive.reader import Run


def growing(run: "Run", group: str) -> xarray.Dataset:
    """Return all columns of a group over ``time``."""
    times = _variable(run, f"{group}/time", ("time",))
    columns = {name: _variable(run, f"{group}/{name}", ("time",)) for name in run.columns(group)}
    return xarray.Dataset(columns, {"time": times})


def fixed(
    run: "Run", group: str, axes: tuple[str, ...], columns: tuple[str, ...]
) -> xarray.Dataset:
    """Return columns of a group over axes that stand in it too."""
    coordinates = {axis: _variable(run, f"{group}/{axis}", (axis,)) for axis in axes}
    variables = {name: _variable(run, f"{group}/{name}", axes) for name in columns}
    return xarray.Dataset(variables, coordinates)


def frames(run: "Run") -> xarray.Dataset:
    """Return the stored states; their values are read when used."""
    name = f"frames/{run.frame_kind}"
    lazy = indexing.LazilyIndexedArray(StoredFrames(run))
    states = xarray.Variable(("time", *run.axes), lazy, run.labels(name))
    coordinates = {axis: _variable(run, f"frames/{axis}", (axis,)) for axis in ("time", *run.axes)}
    return xarray.Dataset({run.frame_kind: states}, coordinates)


class StoredFrames(BackendArray):
    """The frames of a run as an array that stays on disk; no file is kept open."""

    def __init__(self, run: "Run") -> None:
        self._run = run
        self.shape = (len(run), *(len(points) for points in run.axes.values()))
        self.dtype = run.read(f"frames/{run.frame_kind}", slice(0)).dtype

    def __getitem__(self, key: indexing.ExplicitIndexer) -> npt.NDArray[Any]:
        """Return a part of the frames, as xarray asks for it."""
        support = indexing.IndexingSupport.BASIC
        part: npt.NDArray[Any] = indexing.explicit_indexing_adapter(
            key, self.shape, support, self._part
        )
        return part

    def _part(self, key: tuple[int | slice, ...]) -> npt.NDArray[Any]:
        """Read the frames wanted, then take the points wanted of them."""
        times, points = key[0], key[1:]
        if isinstance(times, slice):
            wanted = range(*times.indices(self.shape[0]))
            stack = [self._frame(index)[points] for index in wanted]
            empty = np.empty((0, *self.shape[1:]), self.dtype)[(slice(None), *points)]
            return np.stack(stack) if stack else empty
        return np.asarray(self._frame(int(times))[points])

    def _frame(self, index: int) -> npt.NDArray[Any]:
        return self._run.frame(index)


def _variable(run: "Run", name: str, axes: tuple[str, ...]) -> xarray.Variable:
    return xarray.Variable(axes, run.read(name), run.labels(name))

"""All that a resumed run needs, in one file that is whole or not there.

HDF5 may swallow an error of the operating system. So the file is written aside,
read back and compared, array by array, and sealed with a checksum before it
takes the place of the one before, which is kept beside it. Large arrays go
straight from the field to the file: no second copy of them is made.
"""

import hashlib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from io import SEEK_END
from pathlib import Path
from typing import Any, BinaryIO, Final, TypeAlias

import h5py
import numpy as np
import numpy.typing as npt

from wavepack.archive.disk import machine_errors, replace_atomically
from wavepack.archive.layout import PREVIOUS_CHECKPOINT_FILE, SCHEMA_VERSION
from wavepack.errors import MachineError, UsageError

Value: TypeAlias = npt.NDArray[Any] | np.generic | bytes | str | bool | int | float

#: Bytes compared, or put under the seal, at once.
PIECE: Final = 2**20
SEAL: Final = b"\nsha256:"
SEAL_BYTES: Final = len(SEAL) + 64


@dataclass(frozen=True)
class Checkpoint:
    """What `load` found: the state, the file it came from, and a note if not the newest."""

    state: Mapping[str, Any]
    path: Path
    note: str | None = None

    def section(self, prefix: str) -> dict[str, Any]:
        """Return the values whose keys start with ``prefix/``, without it."""
        start = f"{prefix}/"
        found = self.state.items()
        return {key.removeprefix(start): value for key, value in found if key.startswith(start)}


Stored: TypeAlias = Mapping[str, tuple[str, npt.NDArray[Any]]]


class _Damaged(Exception):  # noqa: N818 - never leaves this module
    """The file is not what was written."""


def save(path: Path, state: Mapping[str, Value]) -> None:
    """Write the state, replacing the former checkpoint at once and keeping it beside.

    Parameters
    ----------
    path : Path
        ``checkpoint.h5`` in the run folder.
    state : mapping
        Arrays of numbers or truth values, bytes, text, truth values, whole
        numbers of any size, floats. Keys may be paths such as ``flux/exit``.
        All come back exactly.

    Raises
    ------
    TypeError, ValueError
        For a value of another type, or a key that is also the path of another.
    MachineError
        If the disk is full, not writable, or did not keep what was written.
    """
    path = Path(path)
    stored = {key: _stored(key, value) for key, value in state.items()}
    size = sum(array.nbytes for _, array in stored.values())

    def write(file: BinaryIO) -> None:
        _write_image(file, stored)
        file.seek(0)
        seal = _seal(file)
        file.seek(0, SEEK_END)
        file.write(seal)

    previous = path.with_name(PREVIOUS_CHECKPOINT_FILE)
    replace_atomically(path, size, write, lambda copy: _holds(copy, stored), previous)


def load(path: Path) -> Checkpoint:
    """Return the newest checkpoint that is whole.

    Raises
    ------
    UsageError
        If there is none, or it was written by a newer version.
    MachineError
        If all that there are are damaged.
    """
    path = Path(path)
    faults: list[str] = []
    candidates = [path, path.with_name(PREVIOUS_CHECKPOINT_FILE)]
    existing = [candidate for candidate in candidates if candidate.is_file()]
    if not existing:
        raise UsageError(f"{path.parent}: no {path.name} in it, nothing to resume from")
    for candidate in existing:
        try:
            state = _read(candidate)
        except _Damaged as fault:
            faults.append(f"{candidate.name} is damaged ({fault})")
            continue
        if candidate != path and not faults:
            faults.append(f"{path.name} is missing")
        note = f"{'; '.join(faults)}; using {candidate.name}" if faults else None
        return Checkpoint(state, candidate, note)
    raise MachineError(f"{path.parent}: {'; '.join(faults)}: no checkpoint to resume from")


def _write_image(file: BinaryIO, stored: Stored) -> None:
    """Write an HDF5 file that holds the state."""
    with h5py.File(file, "w", libver="earliest") as image:
        image.attrs["schema_version"] = SCHEMA_VERSION
        for key, (kind, array) in stored.items():
            try:
                dataset = image.create_dataset(key, data=array)
            except (ValueError, TypeError) as error:
                raise ValueError(f"checkpoint: key {key!r} cannot be used: {error}") from error
            dataset.attrs["kind"] = kind


def _holds(path: Path, stored: Stored) -> bool:
    """Whether a file returns every array, bit for bit, compared in pieces."""
    try:
        with h5py.File(path, "r", locking=False) as file:
            return all(
                np.array_equal(_bits(np.asarray(file[key][rows])), _bits(array[rows]))
                for key, (_, array) in stored.items()
                for rows in _pieces(array)
            )
    except (KeyError, RuntimeError):
        return False


def _bits(array: npt.NDArray[Any]) -> npt.NDArray[np.uint8]:
    return np.ascontiguousarray(array).reshape(-1).view(np.uint8)


def _pieces(array: npt.NDArray[Any]) -> Iterator[tuple[slice, ...]]:
    """Cut an array into runs of rows of bounded size."""
    if array.ndim == 0:
        yield ()
        return
    rows = max(1, PIECE // max(1, array[:1].nbytes))
    for first in range(0, max(1, array.shape[0]), rows):
        yield (slice(first, first + rows),)


def _seal(file: BinaryIO, size: int | None = None) -> bytes:
    """Return the checksum that follows an image; HDF5 does not look past its own end.

    It covers every byte, so that damage is found before HDF5, which may not
    survive it, reads any. With a size only so many bytes are covered.
    """
    checksum = hashlib.sha256()
    left = size if size is not None else 2**63
    while left > 0 and (piece := file.read(min(PIECE, left))):
        checksum.update(piece)
        left -= len(piece)
    return SEAL + checksum.hexdigest().encode()


def _read(path: Path) -> dict[str, Any]:
    with machine_errors(path, path.parent), path.open("rb") as file:
        size = max(0, path.stat().st_size - SEAL_BYTES)
        expected = _seal(file, size)
        if file.read() != expected:
            raise _Damaged("its checksum does not fit")
    with h5py.File(path, "r", locking=False) as file:
        _check_version(file, path)
        return {key: _restored(kind, array) for key, (kind, array) in _datasets(file)}


def _check_version(file: h5py.File, path: Path) -> None:
    version = int(file.attrs["schema_version"])
    if version > SCHEMA_VERSION:
        raise UsageError(
            f"{path}: written by a newer wavepack: layout {version}, "
            f"this version knows up to {SCHEMA_VERSION}"
        )


def _datasets(group: h5py.Group) -> Iterator[tuple[str, tuple[str, npt.NDArray[Any]]]]:
    for item in group.values():
        if isinstance(item, h5py.Dataset):
            yield item.name.lstrip("/"), (str(item.attrs["kind"]), np.asarray(item[...]))
        else:
            yield from _datasets(item)


def _stored(key: str, value: Value) -> tuple[str, npt.NDArray[Any]]:
    """Return how a value is kept: its kind and an array."""
    if any(part in {"", ".", ".."} or "\0" in part for part in key.split("/")):
        raise ValueError(f"checkpoint: key {key!r} cannot be used")
    match value:
        case np.ndarray() | np.generic():
            array = np.asarray(value)
            if array.dtype.kind not in "biufc":
                raise TypeError(f"checkpoint: {key}: no form for arrays of {array.dtype}")
            return "array", array
        case bytes():
            return "bytes", np.frombuffer(value, dtype=np.uint8)
        case str():
            return "text", np.frombuffer(value.encode(), dtype=np.uint8)
        case bool():
            return "bool", np.asarray(value)
        case int():
            # As digits: whole numbers may be larger than any type of HDF5.
            return "int", np.frombuffer(str(value).encode(), dtype=np.uint8)
        case float():
            return "float", np.asarray(value)
    raise TypeError(f"checkpoint: {key}: no form for {type(value).__name__}")


def _restored(kind: str, array: npt.NDArray[Any]) -> Value:
    match kind:
        case "bytes":
            return array.tobytes()
        case "text":
            return array.tobytes().decode()
        case "int":
            return int(array.tobytes())
        case "bool":
            return bool(array)
        case "float":
            return float(array)
    return array

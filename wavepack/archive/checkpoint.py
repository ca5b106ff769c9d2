"""All that a resumed run needs, in one file that is whole or not there.

The file is built in memory and written by the plain calls of the operating
system, whose errors cannot get lost inside HDF5; it is read back and compared
before it takes the place of the one before, which is kept beside it.
"""

import hashlib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from io import BytesIO
from pathlib import Path
from typing import Any, Final, TypeAlias

import h5py
import numpy as np
import numpy.typing as npt

from wavepack.archive.disk import machine_errors, write_atomically
from wavepack.archive.layout import PREVIOUS_CHECKPOINT_FILE, SCHEMA_VERSION
from wavepack.errors import MachineError, UsageError

Value: TypeAlias = npt.NDArray[Any] | np.generic | bytes | str | bool | int | float

#: Growing the image in memory in small blocks would copy it again and again.
IMAGE_BLOCK: Final = 2**22
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
    image = _image(state)
    content = image + _seal(image)
    write_atomically(path, content, previous=path.with_name(PREVIOUS_CHECKPOINT_FILE))


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


def _image(state: Mapping[str, Value]) -> bytes:
    """Return the bytes of an HDF5 file that holds the state."""
    stored = {key: _stored(key, value) for key, value in state.items()}
    options = {"driver": "core", "backing_store": False, "block_size": IMAGE_BLOCK}
    with h5py.File("image", "w", libver="earliest", **options) as file:
        file.attrs["schema_version"] = SCHEMA_VERSION
        for key, (kind, array) in stored.items():
            try:
                dataset = file.create_dataset(key, data=array)
            except (ValueError, OSError, TypeError) as error:
                raise ValueError(f"checkpoint: key {key!r} cannot be used: {error}") from error
            dataset.attrs["kind"] = kind
        file.flush()
        image: bytes = file.id.get_file_image()
    return image


def _seal(image: bytes) -> bytes:
    """Return the checksum that follows an image; HDF5 does not look past its own end.

    It covers every byte, so that damage is found before HDF5, which may not
    survive it, reads any.
    """
    return SEAL + hashlib.sha256(image).hexdigest().encode()


def _read(path: Path) -> dict[str, Any]:
    with machine_errors(path, path.parent):
        content = path.read_bytes()
    image, seal = content[:-SEAL_BYTES], content[-SEAL_BYTES:]
    if seal != _seal(image):
        raise _Damaged("its checksum does not fit")
    with h5py.File(BytesIO(image), "r") as file:
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

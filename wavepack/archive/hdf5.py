"""How the archive opens, checks, mends and gives up HDF5 files."""

import io
import math
import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Final

import h5py

from wavepack.archive.disk import sync_file
from wavepack.archive.layout import SCHEMA_VERSION
from wavepack.errors import UsageError

#: Bytes 40 to 48 of a superblock of version 0: where the file should end.
STORED_END: Final = slice(40, 48)
SIGNATURE: Final = b"\x89HDF\r\n\x1a\n\x00"
FAR_END: Final = 2**50

#: What a file's locking may be; off is the archive's own.
LOCKINGS: Final = (False, True, "best-effort")


def open_file(path: Path, mode: str) -> h5py.File:
    """Open the file as every part of the archive does.

    The oldest format is open to every reader. `RunLock` keeps a second writer
    out; HDF5's own lock would only shut out those who want to look at a live
    run, and would let a forgotten notebook block a resume. Where this process
    has the file open already, HDF5 wants the locking of that first time.
    """
    for locking in LOCKINGS:
        try:
            return h5py.File(path, mode, libver=("earliest", "v110"), locking=locking)
        except OSError as error:
            if "file locking" not in str(error) or "values don't match" not in str(error):
                raise
            refusal = error
    raise refusal


def check_schema(file: h5py.File, path: Path) -> None:
    """Refuse a file of another kind, or of a newer layout than this version knows.

    Raises
    ------
    UsageError
        Naming the version found and the newest one known.
    """
    version = file.attrs.get("schema_version")
    if version is None:
        file.close()
        raise UsageError(f"{path}: not the file of a run: it has no schema_version")
    if int(version) > SCHEMA_VERSION:
        file.close()
        raise UsageError(
            f"{path}: written by a newer wavepack: layout {int(version)}, "
            f"this version knows up to {SCHEMA_VERSION}"
        )


def mend_length(path: Path) -> tuple[str, ...]:
    """Make the end of a file fit the end it has noted; return a note on what was done.

    After a power cut a file may end too early: it is padded. A process killed
    in the middle of a flush may have used room beyond the noted end, one chunk
    a dataset at most: the note is moved behind it.
    """
    found, stored = path.stat().st_size, _stored_end(path)
    if stored in {found, 0}:
        return ()
    end = stored if found < stored else found + _room_of_chunks(path)
    with path.open("r+b") as file:
        file.seek(STORED_END.start)
        file.write(end.to_bytes(8, "little"))
        file.truncate(end)
    sync_file(path)
    if found < stored:
        return (f"{path.name}: {stored - found} bytes were missing at its end; filled with zeros",)
    return (f"{path.name}: was left in the middle of a write; what was whole is kept",)


@contextmanager
def open_to_read(path: Path) -> Iterator[h5py.File]:
    """Open a file that another process may be writing, or that was cut short.

    Raises
    ------
    OSError
        If HDF5 cannot make sense of the file.
    """
    if path.stat().st_size == _stored_end(path):
        with open_file(path, "r") as file:
            yield file
    else:
        with _Padded(path) as padded, h5py.File(padded, "r") as file:
            yield file


class _Padded(io.RawIOBase):
    """A file that seems to go on with zeros far beyond its end, and to know it."""

    def __init__(self, path: Path) -> None:
        self._file = path.open("rb")
        self._place = 0

    def seek(self, offset: int, whence: int = os.SEEK_SET) -> int:
        start = {os.SEEK_SET: 0, os.SEEK_CUR: self._place, os.SEEK_END: FAR_END}[whence]
        self._place = start + offset
        return self._place

    def tell(self) -> int:
        return self._place

    def readinto(self, buffer: Any) -> int:  # noqa: ANN401 - whatever holds bytes
        size, place = len(buffer), self._place
        content = bytearray(os.pread(self._file.fileno(), size, place).ljust(size, b"\0"))
        for offset, byte in enumerate(FAR_END.to_bytes(8, "little"), STORED_END.start - place):
            if 0 <= offset < size:
                content[offset] = byte
        buffer[:] = content
        self._place += size
        return size

    def close(self) -> None:
        self._file.close()
        super().close()


def _room_of_chunks(path: Path) -> int:
    """Return the size of one chunk of every dataset that grows."""
    sizes: list[int] = []

    def add(_: str, item: h5py.Group | h5py.Dataset) -> None:
        if isinstance(item, h5py.Dataset) and item.chunks:
            sizes.append(math.prod(item.chunks) * item.dtype.itemsize)

    with open_to_read(path) as file:
        file.visititems(add)
    return sum(sizes)


def _stored_end(path: Path) -> int:
    """Return where the file should end; 0 if it is none of ours."""
    with path.open("rb") as file:
        head = file.read(STORED_END.stop)
    return int.from_bytes(head[STORED_END], "little") if head.startswith(SIGNATURE) else 0


def redirect(file: h5py.File) -> None:
    """Turn the descriptor of an open file towards the null device, which takes any write."""
    null = os.open(os.devnull, os.O_RDWR)
    try:
        os.dup2(null, file.id.get_vfd_handle())
    finally:
        os.close(null)

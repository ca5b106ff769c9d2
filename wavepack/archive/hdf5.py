"""How the archive opens, checks, mends and gives up HDF5 files."""

import io
import os
from pathlib import Path
from typing import Any, Final

import h5py

from wavepack.archive.disk import sync_file
from wavepack.archive.layout import SCHEMA_VERSION
from wavepack.errors import UsageError

#: Bytes 40 to 48 of a superblock of version 0: where the file should end.
STORED_END: Final = slice(40, 48)
SIGNATURE: Final = b"\x89HDF\r\n\x1a\n\x00"


def open_file(path: Path, mode: str) -> h5py.File:
    """Open the file as every part of the archive does.

    The oldest format is open to every reader. `RunLock` keeps a second writer
    out; HDF5's own lock would only shut out those who want to look at a live
    run, and would let a forgotten notebook block a resume.
    """
    return h5py.File(path, mode, libver=("earliest", "v110"), locking=False)


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
    """Pad a file that ends before the end it has noted, as a power cut may leave it.

    Returns one note that says so, or none.
    """
    found, stored = path.stat().st_size, _stored_end(path)
    if found >= stored:
        return ()
    os.truncate(path, stored)
    sync_file(path)
    return (f"{path.name}: {stored - found} bytes were missing at its end; filled with zeros",)


def open_to_read(path: Path) -> h5py.File:
    """Open a file that another process may be writing, or that was cut short.

    Raises
    ------
    OSError
        If HDF5 cannot make sense of the file.
    """
    try:
        return open_file(path, "r")
    except OSError:
        if path.stat().st_size >= _stored_end(path):
            raise
        return h5py.File(_Padded(path, _stored_end(path)), "r")


class _Padded(io.RawIOBase):
    """A file that reads as zeros from where it breaks off to where it should end."""

    def __init__(self, path: Path, end: int) -> None:
        self._file = path.open("rb")
        self._place, self._end = 0, end

    def seek(self, offset: int, whence: int = os.SEEK_SET) -> int:
        start = {os.SEEK_SET: 0, os.SEEK_CUR: self._place, os.SEEK_END: self._end}[whence]
        self._place = start + offset
        return self._place

    def tell(self) -> int:
        return self._place

    def readinto(self, buffer: Any) -> int:  # noqa: ANN401 - whatever holds bytes
        size = len(buffer)
        content = os.pread(self._file.fileno(), size, self._place)
        buffer[:] = content.ljust(size, b"\0")
        self._place += size
        return size

    def close(self) -> None:
        self._file.close()
        super().close()


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

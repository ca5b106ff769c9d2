"""How the archive opens, checks, mends and gives up HDF5 files."""

import os
from pathlib import Path
from typing import Final

import h5py

from wavepack.archive.disk import sync_file
from wavepack.archive.layout import SCHEMA_VERSION
from wavepack.errors import UsageError

#: Bytes 40 to 48 of a superblock of version 0: where the file should end.
STORED_END: Final = slice(40, 48)


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
    """Pad a file that ends before the end it has noted, as a power cut may leave it."""
    with path.open("rb") as file:
        head = file.read(48)
    stored, found = int.from_bytes(head[STORED_END], "little"), path.stat().st_size
    if not 0 < found < stored < 2**63:
        return ()
    os.truncate(path, stored)
    sync_file(path)
    return (f"{path.name}: {stored - found} bytes were missing at its end; filled with zeros",)


def redirect(file: h5py.File) -> None:
    """Turn the descriptor of an open file towards the null device, which takes any write."""
    null = os.open(os.devnull, os.O_RDWR)
    try:
        os.dup2(null, file.id.get_vfd_handle())
    finally:
        os.close(null)

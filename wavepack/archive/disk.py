"""Room on the disk, atomic replacement, and what the machine refuses."""

import os
import re
import shlex
import shutil
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO, Final

from wavepack.archive.layout import CHECKPOINT_FILE
from wavepack.errors import MachineError

RESERVE: Final = 64 * 2**20


def require_space(folder: Path, needed: int, reserve: int = RESERVE) -> None:
    """Refuse a write of ``needed`` bytes that would eat into the reserve.

    Raises
    ------
    MachineError
        If the disk has less than ``needed + reserve`` bytes free.
    """
    with machine_errors(folder, folder):
        free = shutil.disk_usage(folder).free
    if free < needed + reserve:
        raise MachineError(
            f"{folder}: disk full: {_size(needed)} to write and {_size(reserve)} of reserve, "
            f"found {_size(free)} free. Free some space, {_then(folder)}"
        )


@contextmanager
def machine_errors(path: Path, folder: Path) -> Iterator[None]:
    """Turn what the operating system or HDF5 reports into a `MachineError`."""
    try:
        yield
    except (OSError, RuntimeError) as error:
        reason = getattr(error, "strerror", None) or _reason(str(error))
        raise MachineError(
            f"{path}: the machine refused: {reason}. Check space and permissions, {_then(folder)}"
        ) from error


def require_folder(folder: Path) -> None:
    """Refuse a folder that is missing or cannot be written.

    Raises
    ------
    MachineError
        Naming what is wrong with the folder.
    """
    if not folder.is_dir():
        raise MachineError(f"{folder}: the folder does not exist")
    if not os.access(folder, os.W_OK | os.X_OK):
        raise MachineError(f"{folder}: no permission to write into the folder")


def sync_file(path: Path) -> None:
    """Ask the disk to keep what was written to a file or a folder."""
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def write_atomically(path: Path, content: bytes, previous: Path | None = None) -> None:
    """Replace a file so that it holds the old or the new content, never a part.

    What was written is read back and compared before it takes the place of the
    old content, which is kept as ``previous`` if that is given.

    Raises
    ------
    MachineError
        If the disk is full, the folder cannot be written, or the disk does
        not return what was written.
    """

    def write(file: BinaryIO) -> None:
        left = memoryview(content)
        while left:
            left = left[file.write(left) :]

    def proven(temporary: Path) -> bool:
        return temporary.read_bytes() == content

    replace_atomically(path, len(content), write, proven, previous)


def replace_atomically(
    path: Path,
    size: int,
    write: Callable[[BinaryIO], None],
    proven: Callable[[Path], bool],
    previous: Path | None = None,
) -> None:
    """Replace a file by what ``write`` puts into a new one, once that is ``proven``.

    ``size`` is about how many bytes there will be. See `write_atomically`.

    Raises
    ------
    MachineError
        If the disk is full, the folder cannot be written, or the file is not
        proven to hold what was written.
    """
    require_folder(path.parent)
    require_space(path.parent, size, reserve=0)
    temporary = path.with_name(f".{path.name}.{os.getpid()}.partial")
    with machine_errors(path, path.parent):
        try:
            with temporary.open("w+b", buffering=0) as file:
                write(file)
                os.fsync(file.fileno())
            if not proven(temporary):
                raise MachineError(f"{path}: the disk did not return what was written to it")
            if previous is not None and path.exists():
                _keep_as(path, previous)
            temporary.replace(path)
            sync_file(path.parent)
        finally:
            temporary.unlink(missing_ok=True)


def _keep_as(path: Path, previous: Path) -> None:
    """Give the file a second name, so that it is never without the first."""
    link = previous.with_name(f".{previous.name}.{os.getpid()}.partial")
    link.unlink(missing_ok=True)
    try:
        os.link(path, link)
    except OSError:
        # Some file systems have no hard links.
        path.replace(previous)
    else:
        link.replace(previous)


def _then(folder: Path) -> str:
    if (folder / CHECKPOINT_FILE).exists():
        return f"then: wavepack resume {shlex.quote(str(folder))}"
    return "then run it again"


def _reason(text: str) -> str:
    """Return what the system said; HDF5 reports a full disk with errno in the text only."""
    quoted = re.search(r"error message = '([^']+)'", text)
    return quoted[1] if quoted else " ".join(text.split()) or "no reason given"


def _size(count: float) -> str:
    for symbol in ("B", "kB", "MB", "GB"):
        if count < 1000:
            return f"{count:.3g} {symbol}"
        count /= 1000
    return f"{count:.3g} TB"

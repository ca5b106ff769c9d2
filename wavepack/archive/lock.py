"""One process a run folder."""

import fcntl
import json
import os
import socket
from pathlib import Path
from types import TracebackType
from typing import Any, Final, Self

from wavepack.archive.disk import machine_errors, require_folder
from wavepack.errors import UsageError

LOCK_FILE: Final = ".lock"


class RunLock:
    """Keeps a second process out of a run folder while the first is at work.

    The operating system holds the lock and lets go of it when the process
    ends, however it ends. The file names the holder; if its process died
    before it could tidy up, ``stale`` says so.

    Raises
    ------
    UsageError
        On entering, if another process is at work in the folder.
    MachineError
        On entering, if the folder cannot be written.
    """

    def __init__(self, folder: Path | str) -> None:
        self.folder = Path(folder)
        self.stale: str | None = None
        self._descriptor: int | None = None

    def acquire(self) -> Self:
        """Take the lock; see the class for errors."""
        require_folder(self.folder)
        path = self.folder / LOCK_FILE
        with machine_errors(path, self.folder):
            descriptor = _open_locked(path)
            if descriptor is None:
                raise UsageError(f"{self.folder}: {_holder(path)} is at work in this run folder")
            self._descriptor = descriptor
            left = os.pread(descriptor, 1000, 0)
            self.stale = f"{_named(left)} ended without tidying up" if left else None
            holder = json.dumps({"pid": os.getpid(), "host": socket.gethostname()}).encode()
            os.ftruncate(descriptor, 0)
            os.pwrite(descriptor, holder, 0)
        return self

    def release(self) -> None:
        """Let go of the lock and remove its file."""
        descriptor, self._descriptor = self._descriptor, None
        if descriptor is not None:
            (self.folder / LOCK_FILE).unlink(missing_ok=True)
            os.close(descriptor)

    def __enter__(self) -> Self:
        return self.acquire()

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.release()


def _open_locked(path: Path) -> int | None:
    """Return a descriptor that holds the lock, or None if another process does."""
    while True:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o644)
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            os.close(descriptor)
            return None
        except OSError:
            os.close(descriptor)
            raise
        if _still_named(path, descriptor):
            return descriptor
        # The holder before removed the file between our opening and locking it.
        os.close(descriptor)


def _still_named(path: Path, descriptor: int) -> bool:
    try:
        return os.path.samestat(path.stat(), os.fstat(descriptor))
    except FileNotFoundError:
        return False


def _holder(path: Path) -> str:
    try:
        return _named(path.read_bytes())
    except OSError:
        return "another process"


def _named(content: bytes) -> str:
    try:
        holder: Any = json.loads(content)
        return f"process {holder['pid']} on {holder['host']}"
    except (ValueError, KeyError, TypeError):
        return "another process"

"""What the transform planner has measured on this machine, kept between runs.

Plans measured afresh differ in the last bit from process to process; planned
from the same knowledge they do not. So the first run on a machine measures,
under a lock, and every later one reads.
"""

import fcntl
import hashlib
import os
import platform
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from wavepack.grid import spectral

#: The environment variable that moves the folder.
FOLDER_VARIABLE = "WAVEPACK_CACHE"


def knowledge_file() -> Path:
    """Return where knowledge is kept, by transform library, processor and machine."""
    base = os.environ.get(FOLDER_VARIABLE) or os.environ.get("XDG_CACHE_HOME")
    folder = Path(base) if base else Path.home() / ".cache"
    key = f"{spectral.planner_version()} {platform.machine()} {_processor()}"
    return folder / "wavepack" / f"plans-{hashlib.sha256(key.encode()).hexdigest()[:16]}"


@contextmanager
def shared_knowledge() -> Iterator[None]:
    """Plan inside: what is known is learnt first, what was measured is kept after.

    A folder that cannot be used costs only the measuring.
    """
    path = knowledge_file()
    lock = None
    known = b""
    with suppress(OSError):
        path.parent.mkdir(parents=True, exist_ok=True)
        lock = os.open(path.with_suffix(".lock"), os.O_RDWR | os.O_CREAT, 0o644)
        fcntl.flock(lock, fcntl.LOCK_EX)
        known = path.read_bytes() if path.is_file() else b""
    try:
        spectral.learn(spectral.Knowledge(known), forget=True)
        yield
        measured = spectral.remember().text
        if sorted(measured.splitlines()) != sorted(known.splitlines()):
            with suppress(OSError):
                temporary = path.with_suffix(f".{os.getpid()}.partial")
                temporary.write_bytes(measured)
                temporary.replace(path)
    finally:
        if lock is not None:
            os.close(lock)


@contextmanager
def given_knowledge(text: bytes) -> Iterator[None]:
    """Plan inside from given knowledge alone, as an earlier process did."""
    spectral.learn(spectral.Knowledge(text), forget=True)
    yield


def _processor() -> str:
    with suppress(OSError):
        for line in Path("/proc/cpuinfo").read_text().splitlines():
            if line.startswith(("model name", "flags")):
                return hashlib.sha256(line.encode()).hexdigest()
    return platform.processor()

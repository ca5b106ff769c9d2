"""One process a run folder."""

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from wavepack.archive.lock import LOCK_FILE, RunLock
from wavepack.errors import MachineError, UsageError

HOLD = """
import sys, time
from wavepack.archive.lock import RunLock
with RunLock(sys.argv[1]):
    print("held", flush=True)
    time.sleep(60)
"""


def test_second_process_is_refused_until_the_first_dies(tmp_path: Path) -> None:
    """The holder is named while it lives; after a kill the lock is taken and called stale."""
    with subprocess.Popen(
        [sys.executable, "-c", HOLD, tmp_path], stdout=subprocess.PIPE, text=True
    ) as holder:
        assert holder.stdout is not None
        assert holder.stdout.readline() == "held\n"
        with pytest.raises(UsageError, match=f"process {holder.pid} on .* is at work"):
            RunLock(tmp_path).acquire()
        holder.send_signal(signal.SIGKILL)
        holder.wait()
    with RunLock(tmp_path) as lock:
        assert lock.stale is not None
        assert f"process {holder.pid} on" in lock.stale
    with RunLock(tmp_path) as lock:
        assert lock.stale is None
    assert list(tmp_path.iterdir()) == []


def test_same_process_is_refused_too(tmp_path: Path) -> None:
    """A second lock in one process is refused; after release the folder is free."""
    first = RunLock(tmp_path).acquire()
    with pytest.raises(UsageError, match=f"process {os.getpid()} "):
        RunLock(tmp_path).acquire()
    first.release()
    first.release()
    RunLock(tmp_path).acquire().release()


def test_content_of_the_lock_does_not_matter(tmp_path: Path) -> None:
    """A lock file of any content is stale when nobody holds it."""
    (tmp_path / LOCK_FILE).write_text("garbage")
    with RunLock(tmp_path) as lock:
        assert lock.stale == "another process ended without tidying up"


def test_missing_folder(tmp_path: Path) -> None:
    """A folder that does not exist is named."""
    with pytest.raises(MachineError, match="does not exist"):
        RunLock(tmp_path / "nowhere").acquire()

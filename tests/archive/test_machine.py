"""Kills and full disks, in processes of their own."""

import random
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from wavepack.archive import writer as writer_module
from wavepack.archive.checkpoint import save
from wavepack.archive.layout import CHECKPOINT_FILE, RUN_FILE, RunPlan
from wavepack.archive.reader import open_run
from wavepack.archive.results import write_results
from wavepack.archive.writer import RunWriter
from wavepack.errors import MachineError

Plan = Callable[..., RunPlan]

#: Appends rows for ever, with a checkpoint every 20; goes on where one was left.
RUNNING = """
import sys
from pathlib import Path
import numpy as np
from wavepack.archive.checkpoint import load, save
from wavepack.archive.writer import RunWriter
folder = Path(sys.argv[1])
state = folder / "checkpoint.h5"
step, counts = 0, None
if state.exists():
    found = load(state)
    step, counts = found.state["step"], found.section("counts")
else:
    counts = {"frames": 0, "series": 0}
writer = RunWriter.reopen(folder, counts)
print("running", flush=True)
while step < int(sys.argv[2]):
    writer.append_series({"time": step, "norm": step / 3})
    if step % 5 == 0:
        writer.append_frame(step, np.full(64, step + 1j))
    step += 1
    if step % 20 == 0:
        writer.sync()
        counts = {f"counts/{name}": count for name, count in writer.counts().items()}
        save(state, {"step": step, **counts})
writer.close()
"""


def start(folder: Path, steps: int) -> subprocess.Popen[str]:
    """Start a process that appends until it is killed, and wait until it does."""
    command = [sys.executable, "-c", RUNNING, str(folder), str(steps)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "running\n"
    return process


def test_killed_ten_times_equals_unbroken(tmp_path: Path, make_plan: Plan) -> None:
    """A run killed at ten random moments and resumed each time holds what it should."""
    plan = make_plan(
        axes={"x": np.arange(64.0)}, potential=None, series=("norm",), regions=(), detectors={}
    )
    RunWriter.create(tmp_path, plan).close()
    moments = random.Random(7)  # noqa: S311 - moments of a test, no secrets
    for _ in range(10):
        with start(tmp_path, 10**9) as process:
            time.sleep(moments.uniform(0.0, 0.15))
            process.send_signal(signal.SIGKILL)
            process.wait()
        run = open_run(tmp_path)
        assert np.array_equal(run.read("series/norm"), np.arange(run.counts["series"]) / 3)
    end = max(200, 20 * (run.counts["series"] // 20 + 2))
    with start(tmp_path, end) as process:
        assert process.wait() == 0
    run = open_run(tmp_path)
    assert np.array_equal(run.read("series/time"), np.arange(end))
    assert np.array_equal(run.read("series/norm"), np.arange(end) / 3)
    assert np.array_equal(run.frame_times, np.arange(0, end, 5))
    assert np.array_equal(run.read("frames/psi")[:, 0], np.arange(0, end, 5) + 1j)


#: Writes frames until the system refuses to let run.h5 grow past 1.5 MB.
FILLING = """
import resource, signal, sys
import numpy as np
from wavepack.archive.writer import RunWriter
from wavepack.errors import MachineError
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
writer = RunWriter.reopen(sys.argv[1])
resource.setrlimit(resource.RLIMIT_FSIZE, (1_500_000, 1_500_000))
try:
    for row in range(1000):
        writer.append_frame(row, np.full(2048, row + 1j))
        writer.flush()
except MachineError as error:
    print(row, error, flush=True)
try:
    writer.append_series({"time": 0, "norm": 1.0})
    writer.flush()
except MachineError as error:
    print(error, flush=True)
writer.close()
sys.exit(4)
"""


def test_full_disk_costs_nothing_written_before(tmp_path: Path, make_plan: Plan) -> None:
    """Where the system refuses a write, the process ends cleanly and the run goes on later."""
    plan = make_plan(
        axes={"x": np.arange(2048.0)}, potential=None, series=("norm",), regions=(), detectors={}
    )
    RunWriter.create(tmp_path, plan).close()
    command = [sys.executable, "-c", FILLING, str(tmp_path)]
    ended = subprocess.run(command, capture_output=True, text=True, check=False)
    assert ended.stderr == ""
    assert ended.returncode == 4
    refused, closed = ended.stdout.splitlines()
    assert "the machine refused: File too large" in refused
    assert "closed, or abandoned after an error" in closed
    written = int(refused.split()[0])
    assert written >= 5
    assert np.array_equal(open_run(tmp_path).read("frames/psi")[:, 7], np.arange(written) + 1j)
    with RunWriter.reopen(tmp_path) as writer:
        writer.append_frame(written, np.zeros(2048))
    assert len(open_run(tmp_path)) == written + 1


def test_reserve_is_kept(tmp_path: Path, make_plan: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    """Frames stop before the disk is full, so that a last checkpoint still fits."""
    writer = RunWriter.create(tmp_path, make_plan())
    usage = shutil.disk_usage(tmp_path)
    monkeypatch.setattr(shutil, "disk_usage", lambda _: usage._replace(free=64 * 2**20))
    save(tmp_path / CHECKPOINT_FILE, {"step": 1})
    with pytest.raises(
        MachineError, match=r"disk full: .* of reserve, found 67.1 MB free"
    ) as caught:
        writer.append_frame(0.0, np.zeros((6, 4)))
    assert f"then: wavepack resume {tmp_path}" in str(caught.value)
    with pytest.raises(MachineError, match="disk full"):
        RunWriter.create(tmp_path.parent, make_plan())
    monkeypatch.undo()
    with RunWriter.reopen(tmp_path) as writer:
        writer.append_frame(0.0, np.zeros((6, 4)))


def test_errors_of_hdf5_become_machine_errors(
    tmp_path: Path, make_plan: Plan, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What HDF5 reports as RuntimeError names the file, the reason and what to do."""
    writer = RunWriter.create(tmp_path, make_plan())

    def refuse(_: Path) -> None:
        raise RuntimeError("flush failed (errno = 28, error message = 'No space left on device')")

    monkeypatch.setattr(writer_module, "sync_file", refuse)
    with pytest.raises(MachineError, match=rf"{RUN_FILE}: the machine refused: No space left on"):
        writer.sync()
    writer.close()


def test_disk_that_forgets_is_noticed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A file that reads back otherwise than written never takes the place of the old one."""
    write_results(tmp_path, {"status": "running"})
    kept = (tmp_path / "results.json").read_bytes()
    with monkeypatch.context() as patch:
        patch.setattr(Path, "read_bytes", lambda _: b"something else")
        with pytest.raises(MachineError, match="did not return what was written"):
            write_results(tmp_path, {"status": "finished"})
    assert (tmp_path / "results.json").read_bytes() == kept
    assert [p.name for p in tmp_path.iterdir()] == ["results.json"]

"""SIGKILL at any moment, then resume: the same bits, and little computed twice."""

import random
import signal
import subprocess
import sys
import time
from datetime import datetime
from pathlib import Path

import pytest

from tests.running.conftest import TEXT, contents
from wavepack.archive.runlog import read_log

SEED = 20


def started(*arguments: str | Path) -> subprocess.Popen[bytes]:
    """Start the program in a process of its own."""
    command = [sys.executable, "-m", "wavepack", *map(str, arguments)]
    return subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)


def finished(*arguments: str | Path) -> float:
    """Run the program to its end and return how long that took."""
    began = time.monotonic()
    assert started(*arguments).wait(timeout=300) == 0
    return time.monotonic() - began


def until_checkpoint(folder: Path, process: subprocess.Popen[bytes]) -> None:
    """Wait for the first checkpoint of a run."""
    while not (folder / "checkpoint.h5").exists():
        assert process.poll() is None
        time.sleep(0.02)


def unsaved_seconds(folder: Path, killed: float) -> float:
    """Return how much work, in seconds, was not in a checkpoint when the process died."""
    saved = [e["time"] for e in read_log(folder) if e["event"] == "checkpoint"]
    return killed - datetime.fromisoformat(saved[-1]).timestamp()


@pytest.mark.parametrize(
    ("kills", "end", "interval"),
    [
        pytest.param(2, 8000.0, 0.2, id="small"),
        pytest.param(20, 200_000.0, 1.0, id="full", marks=pytest.mark.full),
    ],
)
def test_killed_and_resumed(tmp_path: Path, kills: int, end: float, interval: float) -> None:
    """Killed at random moments and resumed, every dataset and result has the unbroken bits.

    What was lost is at most the checkpoint interval, the distance of two stops
    (a third of a second by design, here less) and the time to write one.
    """
    scenario = tmp_path / "scenario.toml"
    scenario.write_text(TEXT)
    numbers = ("--set", f"time.end={end}", "--set", f'output.checkpoint_every="{interval} s"')
    whole = tmp_path / "whole"
    duration = finished("run", scenario, "--out", whole, *numbers)
    unbroken = contents(whole)
    moments = random.Random(SEED)  # noqa: S311 - moments to kill at, no secrets
    for number in range(kills):
        folder = tmp_path / f"killed-{number}"
        process = started("run", scenario, "--out", folder, *numbers)
        until_checkpoint(folder, process)
        time.sleep(moments.uniform(0.0, 0.8 * duration))
        process.send_signal(signal.SIGKILL)
        process.wait()
        killed = time.time()
        assert unsaved_seconds(folder, killed) < interval + 2.0
        assert started("resume", folder).wait(timeout=300) == 0
        assert contents(folder) == unbroken, f"seed {SEED}, kill {number}"

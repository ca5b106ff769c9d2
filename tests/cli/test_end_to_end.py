"""Whole commands, as a user types them."""

import csv
import io
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.cli.conftest import SCENARIO, Call, Program

RUN = Path("runs/wire")


@pytest.fixture
def copied(finished: Path, tmp_path: Path) -> Path:
    """Return a copy of the finished run that may be changed."""
    shutil.copytree(finished, tmp_path, dirs_exist_ok=True)
    return tmp_path


def test_run_fills_its_folder(finished: Path) -> None:
    """The run folder holds what it should; the table is on stdout, messages on stderr."""
    assert {path.name for path in (finished / RUN).iterdir()} >= {
        "scenario.toml",
        "run.h5",
        "checkpoint.h5",
        "results.json",
        "run.log",
    }
    table = (finished / "stdout.txt").read_text()
    assert table.startswith("One <barrier> & a wire\nfinished at t = 200 fs, 400 steps")
    assert "transmission" in table
    assert "\033" not in table
    said = (finished / "stderr.txt").read_text()
    assert "the run is in runs/wire" in said
    assert "wire.gif: written" in said
    assert (finished / "wire.gif").stat().st_size > 1000


def test_results_in_three_forms(finished: Path, call: Call) -> None:
    """Table, JSON and CSV tell the same results as the file and the run itself."""
    stored = json.loads((finished / RUN / "results.json").read_text())
    table = call("results", RUN, cwd=finished)
    assert (table.status, table.err) == (0, "")
    assert table.out == (finished / "stdout.txt").read_text()
    assert json.loads(call("results", RUN, "--json", cwd=finished).out) == stored
    rows = csv.DictReader(io.StringIO(call("results", RUN, "--csv", cwd=finished).out))
    values = {row["name"]: row["value"] for row in rows}
    wanted = stored["quantities"]["transmission"]["value"]
    assert float(values["quantities.transmission"]) == wanted


def test_second_run_is_refused(finished: Path, call: Call) -> None:
    """A folder with a run is not written over, whichever scenario it is of."""
    same = call("run", "wire.toml", cwd=finished)
    assert same.status == 2
    assert "holds a run of this scenario already" in same.err
    assert "wavepack resume runs/wire" in same.err
    other = call("run", "wire.toml", "--set", "packet.energy=80 meV", cwd=finished)
    assert other.status == 2
    assert "holds a run of another scenario" in other.err


def test_fresh_moves_aside(copied: Path, call: Call) -> None:
    """--fresh keeps the former run under another name; a target without errors gives 3."""
    former = (copied / RUN / "run.h5").read_bytes()
    done = call("run", "wire.toml", "--fresh", "--set", "accuracy.target=1e-4", cwd=copied)
    assert done.status == 3
    assert "transmission: no numerical error is established" in done.err
    assert "former run is now in runs/wire.before-1" in done.err
    assert (copied / "runs/wire.before-1/run.h5").read_bytes() == former
    assert (copied / RUN / "results.json").is_file()


def test_fresh_leaves_other_folders_alone(call: Call, tmp_path: Path) -> None:
    """--fresh moves runs only; a file in the way is named."""
    (tmp_path / "wire.toml").write_text(SCENARIO)
    (tmp_path / "notes").write_text("mine")
    done = call("run", "wire.toml", "--out", "notes", "--fresh", cwd=tmp_path)
    assert done.status == 2
    assert "notes: is a file" in done.err
    assert (tmp_path / "notes").read_text() == "mine"


def test_finished_run_is_shown(finished: Path, call: Call) -> None:
    """Resuming a finished run says so, prints its results and changes nothing."""
    before = (finished / RUN / "run.h5").read_bytes()
    done = call("resume", RUN, cwd=finished)
    assert done.status == 0
    assert "this run has come to its end (finished)" in done.err
    assert done.out == (finished / "stdout.txt").read_text()
    assert (finished / RUN / "run.h5").read_bytes() == before


def test_resume_beyond_the_end(copied: Path, call: Call) -> None:
    """--until takes a time with its own unit and moves the end; an earlier one is refused."""
    done = call("resume", RUN, "--until", "0.25 ps", cwd=copied)
    assert done.status == 0, done.err
    assert "finished at t = 250 fs" in done.out
    early = call("resume", RUN, "--until", "100", cwd=copied)
    assert early.status == 2
    assert "already reached 250 fs" in early.err
    nonsense = call("resume", RUN, "--until", "3 nm", cwd=copied)
    assert nonsense.status == 2
    assert "--until: need a time" in nonsense.err


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM], ids=lambda n: n.name)
def test_interrupt_and_resume(
    number: signal.Signals, program: Program, environment: dict[str, str], tmp_path: Path
) -> None:
    """An interrupted run ends with 130 and a checkpoint, from which it goes on to its end."""
    (tmp_path / "wire.toml").write_text(SCENARIO)
    command = [sys.executable, "-m", "wavepack", "run", "wire.toml", "--set", "time.end=1e6"]
    with subprocess.Popen(
        command,
        cwd=tmp_path,
        env=environment,
        text=True,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    ) as process:
        log = tmp_path / RUN / "run.log"
        wait_for(lambda: log.is_file() and '"checkpoint"' in log.read_text())
        process.send_signal(number)
        out, err = process.communicate(timeout=30)
    assert process.returncode == 130, err
    assert "interrupted at t =" in out
    assert "runs/wire: interrupted, a checkpoint is saved; `wavepack resume runs/wire`" in err
    reached = json.loads((tmp_path / RUN / "results.json").read_text())["time"]["value"]
    done = program("resume", RUN, "--until", reached + 100, cwd=tmp_path)
    assert done.status == 0, done.err
    assert "\nfinished at t =" in done.out


def wait_for(happened: Callable[[], bool]) -> None:
    """Wait until something has happened, half a minute at most."""
    end = time.monotonic() + 30
    while not happened():
        assert time.monotonic() < end
        time.sleep(0.02)


def test_results_of_a_run_at_work(copied: Path, call: Call) -> None:
    """A run without an end has its status told, and how to go on."""
    path = copied / RUN / "results.json"
    path.write_text(path.read_text().replace('"finished"', '"running"', 1))
    done = call("results", RUN, cwd=copied)
    assert done.status == 0
    assert "running at t =" in done.out
    assert "not finished; if nothing works on it, `wavepack resume runs/wire`" in done.err


def test_check_forecasts(finished: Path, call: Call) -> None:
    """A forecast goes to stdout; only a missed target makes its status 3; no run is made."""
    done = call("check", "wire.toml", "--no-timing", cwd=finished)
    assert done.status == 0, done.err
    assert "memory" in done.out
    assert "duration" not in done.out
    hard = call("check", "wire.toml", "--no-timing", "--set", "accuracy.target=1e-9", cwd=finished)
    assert hard.status == 3
    faulty = call("check", "wire.toml", "--set", "grid.x.pionts=9", cwd=finished)
    assert faulty.status == 2
    assert "did you mean points?" in faulty.err


def test_report_and_figures(copied: Path, call: Call) -> None:
    """The report embeds the figures, which also stand in figures/, and names its path."""
    done = call("report", RUN, cwd=copied)
    assert (done.status, done.out) == (0, "runs/wire/report.html\n"), done.err
    html = (copied / RUN / "report.html").read_text("utf-8")
    assert html.count("data:image/png;base64,") == 2
    assert "One &lt;barrier&gt; &amp; a wire" in html
    drawn = {path.name for path in (copied / RUN / "figures").iterdir()}
    assert drawn == {"overview.png", "spectrum-exit.png"}


def test_movie(copied: Path, call: Call) -> None:
    """A movie goes into the run folder unless told otherwise; a wrong ending is refused."""
    done = call("movie", RUN, "--size", "320x180", "--fps", "5", cwd=copied)
    assert done.status == 0, done.err
    assert (copied / RUN / "movie.mp4").stat().st_size > 1000
    wrong = call("movie", RUN, "--out", "movie.txt", cwd=copied)
    assert wrong.status == 2
    assert "need a file ending in .mp4, .webm or .gif" in wrong.err


def test_movie_of_another_picture(copied: Path, call: Call) -> None:
    """Picture and power of the scale reach the movie."""
    asked = ("movie", RUN, "--size", "320x180", "--power", "1")
    done = call(*asked, "--out", "plain.mp4", cwd=copied)
    assert done.status == 0, done.err
    real = call(*asked, "--picture", "real", "--out", "real.mp4", cwd=copied)
    assert real.status == 0, real.err
    default = call("movie", RUN, "--size", "320x180", "--out", "default.mp4", cwd=copied)
    assert default.status == 0, default.err
    movies = {(copied / f"{name}.mp4").read_bytes() for name in ("plain", "real", "default")}
    assert len(movies) == 3


def test_faulty_scenario(call: Call, tmp_path: Path) -> None:
    """Every fault has its line; nothing is made of a run that cannot be."""
    faulty = SCENARIO.replace("height", "heigth").replace("sigma", "sigmma")
    (tmp_path / "faulty.toml").write_text(faulty)
    done = call("run", "faulty.toml", cwd=tmp_path)
    assert done.status == 2
    assert "faulty.toml:9: potential.0.heigth: unknown key; did you mean height?" in done.err
    assert "did you mean sigma?" in done.err
    assert not (tmp_path / "runs").exists()


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("results", "."), "is it a run folder?"),
        (("results", "nowhere"), "nowhere: no such folder"),
        (("resume", "."), "is it a run folder?"),
        (("movie", "."), "not a run folder"),
        (("report", "nowhere"), "nowhere: no such folder"),
        (("run", "nowhere.toml"), "nowhere.toml: cannot be read: No such file"),
        (("run", "wire.toml", "--movie", "m.avi"), "need a file ending in .mp4, .webm or .gif"),
    ],
    ids=str,
)
def test_no_run_folder(arguments: tuple[str, ...], said: str, call: Call, tmp_path: Path) -> None:
    """What is no run folder, no scenario or no movie is bad input, before any work."""
    (tmp_path / "wire.toml").write_text(SCENARIO)
    done = call(*arguments, cwd=tmp_path)
    assert done.status == 2
    assert said in done.err
    assert done.out == ""
    assert not (tmp_path / "runs").exists()


def test_machine_refuses(program: Program, tmp_path: Path) -> None:
    """A folder that cannot be made ends with status 4."""
    (tmp_path / "wire.toml").write_text(SCENARIO)
    done = program("run", "wire.toml", "--out", "wire.toml/run", cwd=tmp_path)
    assert done.status == 4
    assert "cannot be made" in done.err


def test_reader_who_has_seen_enough(finished: Path, environment: dict[str, str]) -> None:
    """A pipe that is closed early is no fault and makes no noise."""
    reading, writing = os.pipe()
    os.close(reading)
    command = [sys.executable, "-m", "wavepack", "results", str(RUN)]
    done = subprocess.run(
        command, cwd=finished, env=environment, stdout=writing, stderr=subprocess.PIPE, check=False
    )
    os.close(writing)
    assert (done.returncode, done.stderr) == (0, b"")

"""A run from start to end, over interruptions, and beyond its end."""

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from tests.running.conftest import contents, small
from tests.tolerances import books
from wavepack import workflow
from wavepack.archive.reader import open_run
from wavepack.archive.runlog import read_log
from wavepack.errors import MachineError, NumericalFault, UsageError
from wavepack.running.session import Session


def after(calls: int) -> Callable[[], bool]:
    """Return a question that is answered yes from a number of calls on."""
    count = iter(range(10**9))
    return lambda: next(count) >= calls


def interrupted(folder: Path, calls: int, *overrides: str) -> None:
    """Start a run and leave it at a stop."""
    with Session.start(small(*overrides), folder) as session:
        results = session.propagate(stop_asked=after(calls))
    assert results["status"] == "interrupted"


def test_books_balance_at_every_record(folder: Path) -> None:
    """Transmission, reflection, held and lost, each summed on its own, add up to one."""
    workflow.run(small(), folder)
    run = open_run(folder)
    parts = ("transmission", "reflection", "held", "lost")
    total = sum(run.read(f"series/{part}") for part in parts)
    assert np.abs(total - 1).max() < books(1600)
    assert run.results["quantities"]["unfinished"]["value"] < 1e-4
    assert run.results["status"] == "finished"


@pytest.mark.parametrize(
    "overrides",
    [
        (),
        ("propagator.order=4", "propagator.step=0.5"),
        ("propagator.method=crank-nicolson", "propagator.step=1.0"),
        ("output.store=density", "output.precision=single", "output.thin=2"),
    ],
)
def test_a_resumed_run_repeats_the_unbroken_one(tmp_path: Path, overrides: tuple[str, ...]) -> None:
    """Interrupted twice and resumed, every dataset and result has the same bits."""
    whole, broken = tmp_path / "whole", tmp_path / "broken"
    whole.mkdir()
    broken.mkdir()
    with Session.start(small(*overrides), whole) as session:
        session.propagate()
    interrupted(broken, 40, *overrides)
    with Session.resume(broken) as session:
        session.propagate(stop_asked=after(300))
    results = workflow.resume(broken)
    assert results["status"] == "finished"
    assert contents(broken) == contents(whole)
    events = [event["event"] for event in read_log(broken)]
    assert events.count("resumed") == 2


def test_a_run_without_a_checkpoint_starts_again(tmp_path: Path) -> None:
    """Killed before its first checkpoint, a run begins anew and gives the same bits."""
    whole, broken = tmp_path / "whole", tmp_path / "broken"
    whole.mkdir()
    broken.mkdir()
    with Session.start(small(), whole) as session:
        session.propagate()
    with Session.start(small(), broken):
        pass
    (broken / "checkpoint.h5").unlink(missing_ok=True)
    workflow.resume(broken)
    assert contents(broken) == contents(whole)


def test_a_finished_run_goes_on_beyond_its_end(folder: Path) -> None:
    """Same step, same spacing of records and frames; datasets grown; the end moved."""
    first = workflow.run(small(), folder)
    before = open_run(folder)
    times, frames = before.read("series/time"), before.frame_times
    results = workflow.resume(folder, until=600.0)
    run = open_run(folder)
    assert results["time"]["value"] == pytest.approx(600.0)
    assert results["numerics"]["step"] == first["numerics"]["step"]
    assert results["provenance"]["former_ends"] == [400.0]
    assert np.array_equal(run.read("series/time")[: times.size], times)
    spacing = np.diff(run.read("series/time"))
    assert spacing == pytest.approx(np.full(spacing.size, spacing[0]))
    assert np.array_equal(run.frame_times[: frames.size], frames)
    assert np.diff(run.frame_times) == pytest.approx(np.diff(frames)[0])
    assert "end = 600.0" in (folder / "scenario.toml").read_text()
    assert run.scenario_text == (folder / "scenario.toml").read_text()
    assert len(run.read("detectors/exit/time")) > len(times)


def test_an_end_already_passed_is_refused(folder: Path) -> None:
    """Going on to an earlier time is bad input, and changes nothing."""
    workflow.run(small(), folder)
    kept = contents(folder)
    with pytest.raises(UsageError, match="already reached 400 fs"):
        workflow.resume(folder, until=300.0)
    assert contents(folder) == kept


def test_a_killed_extension_can_be_resumed(folder: Path) -> None:
    """Moved and then killed, an end is kept, and so is the one before it."""
    workflow.run(small(), folder)
    with Session.resume(folder, until=600.0) as session:
        session.propagate(stop_asked=after(20))
    assert json.loads((folder / "results.json").read_text())["status"] == "interrupted"
    with Session.resume(folder):
        # Killed here: nothing more is written.
        status = json.loads((folder / "results.json").read_text())["status"]
    assert status == "running"
    results = workflow.resume(folder)
    assert results["time"]["value"] == pytest.approx(600.0)
    assert results["provenance"]["former_ends"] == [400.0]


def test_an_end_that_cannot_be_meant_is_refused(folder: Path) -> None:
    """A slip of the unit costs neither memory nor the run's own end."""
    workflow.run(small(), folder)
    kept = contents(folder), (folder / "scenario.toml").read_text()
    with pytest.raises(UsageError, match="give an earlier time"):
        workflow.resume(folder, until=1e12)
    assert (contents(folder), (folder / "scenario.toml").read_text()) == kept


def test_a_killed_run_shows_how_far_it_came(folder: Path) -> None:
    """Results are written with every checkpoint, as those of a run at work."""
    seen: list[dict[str, object]] = []

    def look(news: object) -> None:
        del news
        seen.append(json.loads((folder / "results.json").read_text()))

    scenario = small('output.checkpoint_every="0.05 s"', "time.end=20000")
    with Session.start(scenario, folder) as session:
        session.propagate(tell=look)
    assert {found["status"] for found in seen} == {"running"}
    assert seen[-1]["time"]["value"] > 0  # type: ignore[index]  # plain JSON


def test_what_a_forecast_finds_bad_is_said_before_the_run(folder: Path) -> None:
    """A packet too fast for the grid is not run without a word."""
    notes: list[str] = []
    workflow.run(small("packet.energy=10.0", "time.end=5"), folder, note=notes.append)
    assert any(text.startswith("forecast: ") and "momentum" in text for text in notes)
    notes.clear()
    workflow.run(small("time.end=5"), folder.parent / "good", note=notes.append)
    assert not any("momentum" in text for text in notes)


def test_an_end_moved_without_a_checkpoint_counts(folder: Path) -> None:
    """The scenario's end is believed where a process died between the two writings."""
    workflow.run(small(), folder)
    path = folder / "scenario.toml"
    path.write_text(path.read_text().replace("end = 400.0", "end = 500.0"))
    results = workflow.resume(folder)
    assert results["time"]["value"] == pytest.approx(500.0)
    assert results["provenance"]["former_ends"] == [400.0]


def test_an_extended_run_is_still_that_of_its_scenario(folder: Path) -> None:
    """Its own scenario is recognised; the folder's scenario keeps the spacing of frames."""
    workflow.run(small(), folder)
    workflow.resume(folder, until=600.0)
    with pytest.raises(UsageError, match="this scenario already"):
        workflow.run(small(), folder)
    assert "frames = 13" in (folder / "scenario.toml").read_text()


def test_a_run_that_stopped_early_can_be_taken_further(folder: Path) -> None:
    """An explicit time overrules the threshold at which the run stopped."""
    workflow.run(small("time.stop_when_left_below=0.1"), folder)
    results = workflow.resume(folder, until=450.0)
    assert results["status"] == "finished"
    assert results["time"]["value"] == pytest.approx(450.0)


def test_an_unsound_state_takes_no_checkpoints_place(folder: Path) -> None:
    """Between records too, what is saved has been looked at first."""
    with Session.start(small('output.checkpoint_every="1e-9 s"'), folder) as session:
        session.propagate(stop_asked=after(40))
    saved = (folder / "checkpoint.h5").read_bytes()
    with Session.resume(folder) as session:
        session._stepper.psi[100] = np.nan  # noqa: SLF001 - the fault has to come from somewhere
        with pytest.raises(NumericalFault, match="not finite"):
            session.propagate()
    assert (folder / "checkpoint.h5").read_bytes() == saved
    results = json.loads((folder / "results.json").read_text())
    assert results["status"] == "failed"
    assert results["time"]["value"] > 0
    assert workflow.resume(folder)["status"] == "finished"


def test_results_have_their_whole_form_from_the_start(folder: Path) -> None:
    """Before anything is known every quantity stands there as null."""
    with Session.start(small(), folder):
        results = json.loads((folder / "results.json").read_text())
    assert results["status"] == "running"
    assert results["quantities"]["transmission"]["value"] is None
    assert results["expectations"]["sigma_px"]["value"] is None
    assert results["regions"]["drain"]["probability"]["value"] is None
    assert "exit" in results["detectors"]


def test_a_run_stops_once_little_is_left(folder: Path) -> None:
    """With stop_when_left_below the run ends at a record, early."""
    results = workflow.run(small("time.stop_when_left_below=0.1"), folder)
    assert results["status"] == "stopped_early"
    assert results["quantities"]["unfinished"]["value"] < 0.1
    assert results["time"]["value"] < 400.0


def test_a_second_run_in_the_folder_is_refused(folder: Path) -> None:
    """The message names what to do for the same scenario, and for another."""
    workflow.run(small(), folder)
    with pytest.raises(UsageError, match="wavepack resume"):
        workflow.run(small(), folder)
    with pytest.raises(UsageError, match="another scenario"):
        workflow.run(small("packet.energy=0.2"), folder)
    workflow.run(small("packet.energy=0.2"), folder, fresh=True)
    assert (folder.parent / "run.before-1" / "results.json").is_file()


def test_two_processes_keep_out_of_each_other(folder: Path) -> None:
    """While a session is open its folder is refused to another."""
    with Session.start(small(), folder), pytest.raises(UsageError, match="at work"):
        Session.resume(folder)


def test_no_run_folder(tmp_path: Path) -> None:
    """Resuming what is no run folder says so."""
    with pytest.raises(UsageError, match=r"no scenario\.toml"):
        workflow.resume(tmp_path)


def test_a_folder_that_cannot_be_made(tmp_path: Path) -> None:
    """A file in the way is the machine's refusal, with a hint."""
    (tmp_path / "file").write_text("")
    with pytest.raises(MachineError, match="--out"):
        workflow.run(small(), tmp_path / "file" / "run")


def test_a_state_that_is_not_finite_stops_the_run(folder: Path) -> None:
    """The fault names step, time and place."""
    with Session.start(small(), folder) as session:
        session._stepper.psi[100] = np.nan  # noqa: SLF001 - the fault has to come from somewhere
        with pytest.raises(NumericalFault, match=r"step 0, t = 0: the state is not finite at x"):
            session.propagate()
    results = json.loads((folder / "results.json").read_text())
    assert results["status"] == "failed"
    assert "not finite" in results["fault"]


def test_a_norm_that_grows_stops_the_run(folder: Path) -> None:
    """More probability than there was at the start is a fault."""
    with Session.start(small(), folder) as session:
        session._stepper.psi[:] *= 1.1  # noqa: SLF001 - the fault has to come from somewhere
        with pytest.raises(NumericalFault, match=r"norm has grown to 1\.21"):
            session.propagate()


def test_open_books_stop_the_run(folder: Path) -> None:
    """Probability that has gone nowhere is a fault."""
    with Session.start(small(), folder) as session:
        session._stepper.psi[:] *= 0.9  # noqa: SLF001 - the fault has to come from somewhere
        with pytest.raises(NumericalFault, match="books do not balance"):
            session.propagate()


def test_flux_agrees_with_the_books(folder: Path) -> None:
    """What has crossed the plane is what is beyond it, to the reading's accuracy.

    The plane stands between barrier and region edge; the readings keep the
    part of the state below their band, here all but 2e-5 of it.
    """
    results = workflow.run(small("region.drain.x.above=20.0"), folder)
    crossed = results["detectors"]["exit"]["crossed"]["value"]
    assert crossed == pytest.approx(results["quantities"]["transmission"]["value"], abs=5e-5)

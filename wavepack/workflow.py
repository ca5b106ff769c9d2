"""The commands, one short function each; the only place where all rooms meet."""

import shlex
import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from types import FrameType
from typing import TYPE_CHECKING, Any, Final

from threadpoolctl import threadpool_limits

from wavepack.archive.disk import machine_errors, write_atomically
from wavepack.archive.layout import RESULTS_FILE, RUN_FILE, SCENARIO_FILE
from wavepack.archive.lock import RunLock
from wavepack.archive.reader import open_run
from wavepack.archive.results import jsonable, read_results, write_results
from wavepack.errors import MachineError, UsageError
from wavepack.running.session import News, Session, as_run
from wavepack.running.tables import as_kept
from wavepack.scenario.build import Setup
from wavepack.scenario.choose import choose
from wavepack.scenario.choose_terms import target_of
from wavepack.scenario.load import load_scenario
from wavepack.scenario.preflight import Forecast, forecast
from wavepack.scenario.schema import Scenario
from wavepack.scenario.tables import relative_to
from wavepack.scenario.write import to_toml

if TYPE_CHECKING:
    from wavepack.archive.reader import Run
    from wavepack.reporting.report import Picture

# Rendering needs matplotlib and a video library, 0.5 s to import: only what
# draws imports it.

#: Fields up to this many points are forecast before they are run.
WARNED_POINTS = 1 << 18

Tell = Callable[[News], None]
Note = Callable[[str], None]

#: Runs go here, each into a folder named after its scenario's file.
RUNS: Final = Path("runs")
MOVIE_FILE: Final = "movie.mp4"
FIGURES: Final = "figures"
CROSSCHECK_FILE: Final = "crosscheck.json"
CROSSCHECK_TABLE: Final = "crosscheck.csv"


def check(scenario: Scenario, *, timing: bool = True) -> Forecast:
    """Forecast whether a scenario's numbers suit it and what the run will cost.

    What the scenario leaves out is chosen first (`wavepack.scenario.choose`).

    Raises
    ------
    ScenarioError
        If the scenario cannot be made ready, or does not tell what it leaves out.
    """
    chosen, choices = choose(scenario)
    found = forecast(Setup(chosen), timing=timing, folder=default_folder(scenario))
    return replace(found, choices=choices)


def run(
    scenario: Scenario,
    out: Path | str | None = None,
    *,
    threads: int | None = None,
    fresh: bool = False,
    tell: Tell = lambda _: None,
    note: Note = lambda _: None,
) -> dict[str, Any]:
    """Propagate a scenario into a run folder and return its results.

    The folder is ``runs/`` and the stem of the scenario's file by default.
    What the scenario leaves out is chosen first, noted, and written to the
    folder's scenario.toml. SIGINT and SIGTERM end the run at the next stop, with
    a checkpoint saved and the status ``interrupted``.

    Raises
    ------
    UsageError
        If the folder holds a run already.
    ScenarioError, MachineError, NumericalFault
        See `wavepack.errors`.
    """
    folder = default_folder(scenario) if out is None else Path(out)
    scenario, choices = choose(scenario)
    for choice in choices:
        note(f"chosen: {choice.text}: {choice.reason}")
    if not fresh:
        refuse_existing(folder, scenario)
    with asked_to_stop() as asked:
        # A scenario that is refused leaves everything as it is.
        with threadpool_limits(1):
            setup = Setup(scenario)
            warn(setup, folder, note, asked=bool(choices) or scenario.accuracy is not None)
        if fresh and (former := move_aside(folder)) is not None:
            note(f"{folder}: the former run is now in {former}")
        refuse_existing(folder, scenario)
        make_folder(folder)
        with Session.start(scenario, folder, threads=threads, setup=setup) as session:
            return plain(session.propagate(stop_asked=asked, tell=tell))


def warn(setup: Setup, folder: Path, note: Note, *, asked: bool) -> None:
    """Say what a forecast finds bad, before it costs time.

    With ``asked``, also by how much an accuracy is missed that was asked for or
    chosen for; without, large planes are not forecast.
    """
    if setup.grid.size > WARNED_POINTS and not asked:
        return
    target = target_of(setup.scenario) if asked else None
    for text in forecast(setup, timing=False, folder=folder).shortfalls(target):
        note(f"forecast: {text}")


def resume(
    folder: Path | str,
    *,
    until: float | str | None = None,
    threads: int | None = None,
    tell: Tell = lambda _: None,
    note: Note = lambda _: None,
) -> dict[str, Any]:
    """Go on from the newest checkpoint of a run folder and return the results.

    ``until`` is a time in the scenario's unit or with its own; it may lie
    beyond the scenario's end. Without it a run that has come to its end is left
    as it is.

    Raises
    ------
    UsageError
        If the folder holds no run, or ``until`` has been passed already.
    ScenarioError, MachineError, NumericalFault
        See `wavepack.errors`.
    """
    folder = Path(folder)
    end = None if until is None else time_of(folder, until)
    if end is None and (found := ended(folder)) is not None:
        status = found["status"].replace("_", " ")
        note(f"{folder}: this run has come to its end ({status}); --until takes it beyond")
        return found
    with asked_to_stop() as asked, Session.resume(folder, until=end, threads=threads) as session:
        for text in session.notes:
            note(text)
        return plain(session.propagate(stop_asked=asked, tell=tell))


def results(folder: Path | str) -> dict[str, Any]:
    """Return what `results.json` of a run folder holds.

    Raises
    ------
    UsageError
        If the folder holds no results.
    MachineError
        If they cannot be read.
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise UsageError(f"{folder}: no such folder")
    return read_results(folder)


def movie(
    folder: Path | str,
    out: Path | str | None = None,
    *,
    size: tuple[int, int] = (1280, 720),
    fps: float = 25,
    picture: str = "density",
    power: float = 0.5,
    progress: Callable[[int, int], None] | None = None,
) -> Path:
    """Render the stored frames of a run, by default to ``movie.mp4`` in its folder.

    ``picture`` is ``"density"``, ``"real"`` or ``"phase"``; ``power`` that of the
    density's scale.

    Raises
    ------
    UsageError
        If it is no run folder, or ending, size, rate, picture or power cannot be met.
    MachineError
        If the file cannot be written.
    """
    from wavepack.rendering.movie import render_movie  # noqa: PLC0415 - see above

    opened = open_run(folder)
    path = opened.folder / MOVIE_FILE if out is None else Path(out)
    return render_movie(
        opened, path, size=size, fps=fps, picture=picture, power=power, progress=progress
    )


def require_movie_format(out: Path | str) -> None:
    """Raise `UsageError` if a file's ending names no kind of movie."""
    from wavepack.rendering.movie import format_of  # noqa: PLC0415 - see above

    format_of(Path(out))


def report(folder: Path | str) -> Path:
    """Write ``report.html`` and the figures of a run into its folder.

    Raises
    ------
    UsageError
        If it is no run folder or has no results.
    MachineError
        If the files cannot be written.
    """
    from wavepack.reporting.report import write_report  # noqa: PLC0415 - see above

    opened = open_run(folder)
    found = opened.results
    pictures, remarks = draw_figures(opened)
    return write_report(opened.folder, found, opened.scenario_text, pictures, remarks)


def draw_figures(opened: "Run") -> "tuple[list[Picture], list[str]]":
    """Draw all figures of a run into ``figures/``; also return why some are missing."""
    from wavepack.rendering.figures import draw_overview, draw_spectrum  # noqa: PLC0415 - see above
    from wavepack.reporting.report import Picture  # noqa: PLC0415 - see above

    folder = opened.folder / FIGURES
    with machine_errors(folder, opened.folder):
        folder.mkdir(exist_ok=True)
    pictures, remarks = [], []
    if len(opened):
        drawn = draw_overview(opened, folder / "overview.png")
        pictures.append(Picture(drawn, "Probability density and probabilities over time"))
    else:
        remarks.append("No frame has been stored yet, so there is no overview.")
    for name in opened.detector_names:
        if opened.has(f"detectors/{name}/energy"):
            drawn = draw_spectrum(opened, name, folder / f"spectrum-{name}.png")
            pictures.append(Picture(drawn, f"Transmission by energy at detector {name}"))
    return pictures, remarks


def crosscheck(folder: Path | str) -> dict[str, Any]:
    """Compare a run with a stationary calculation and return what was found.

    Writes ``crosscheck.json``, ``crosscheck.csv`` and a figure for each detector
    whose curves could be compared into the folder.

    Raises
    ------
    UsageError
        If it is no run folder, or the stationary calculation does not apply.
    MachineError
        If the files cannot be written.
    """
    from wavepack.analysis.crosscheck import crosscheck as compare  # noqa: PLC0415 - see above
    from wavepack.rendering.crosscheck_figure import draw_crosscheck  # noqa: PLC0415 - see above
    from wavepack.reporting.crosscheck import as_csv  # noqa: PLC0415 - see above

    folder = Path(folder)
    seen = results(folder)
    try:
        found = plain(compare(scenario_of(folder), seen))
    except UsageError as error:
        raise UsageError(f"{folder}: no crosscheck: {error}") from error
    write_results(folder, found, CROSSCHECK_FILE)
    write_atomically(folder / CROSSCHECK_TABLE, as_csv(found).encode())
    drawn = {name: one for name, one in found["detectors"].items() if "kind" in one}
    with machine_errors(folder / FIGURES, folder):
        (folder / FIGURES).mkdir(exist_ok=True)
    for name, one in drawn.items():
        draw_crosscheck(name, one, found["title"], folder / FIGURES / f"crosscheck-{name}.png")
    return found


def misses(found: dict[str, Any], scenario: Scenario) -> list[str]:
    """Return in what a run's stated errors miss the scenario's target, if it has one."""
    if scenario.accuracy is None:
        return []
    target = scenario.accuracy.target
    missed = []
    for name in ("transmission", "reflection"):
        error = found["quantities"][name]["error"]
        if error is None:
            missed.append(f"{name}: no numerical error is established, the target is {target:g}")
        elif not error <= target:
            missed.append(f"{name}: the numerical error {error:.2g} exceeds the target {target:g}")
    return missed


def default_folder(scenario: Scenario) -> Path:
    """Return where a scenario's run goes if nothing else is said."""
    return RUNS / Path(scenario.name).stem


def scenario_of(folder: Path | str) -> Scenario:
    """Return the scenario of a run folder.

    Raises
    ------
    UsageError
        If the folder holds no run.
    ScenarioError
        If the scenario in it has been spoilt.
    """
    path = Path(folder) / SCENARIO_FILE
    if not path.is_file():
        raise UsageError(f"{folder}: no {SCENARIO_FILE} in it; is it a run folder?")
    return load_scenario(path)


def time_of(folder: Path, text: float | str) -> float:
    """Return a time, which may have its own unit, in the unit of a run folder's scenario."""
    try:
        return scenario_of(folder).units.convert(_number_or_text(text), "time")
    except ValueError as error:
        raise UsageError(f"--until: {error}") from error


def _number_or_text(text: float | str) -> float | str:
    try:
        return float(text)
    except ValueError:
        return text


def ended(folder: Path) -> dict[str, Any] | None:
    """Return the results of a run that has come to its end, else None."""
    if not (folder / RESULTS_FILE).is_file():
        return None
    found = read_results(folder)
    if found.get("status") not in {"finished", "stopped_early"}:
        return None
    # The end may have been moved since by a process that was killed.
    end, reached = scenario_of(folder).time.end, found["time"]["value"]
    early = found["status"] == "stopped_early"
    return found if early or end is None or reached >= end * (1 - 1e-9) else None


def plain(found: dict[str, Any]) -> dict[str, Any]:
    """Return results as `results.json` holds them, so that both ways to them give the same."""
    return {name: jsonable(value) for name, value in found.items()}


def is_run_of(folder: Path, scenario: Scenario) -> bool:
    """Whether a folder's run is of a scenario, moved ends apart."""
    ours = to_toml(as_kept(as_run(scenario), folder))
    if (folder / SCENARIO_FILE).read_text(encoding="utf-8") == ours:
        return True
    found = read_results(folder) if (folder / RESULTS_FILE).is_file() else {}
    moved = found.get("provenance", {}).get("former_ends", [])
    if scenario.time.end not in moved:
        return False
    theirs = relative_to(scenario_of(folder), folder)
    output = replace(theirs.output, frames=scenario.output.frames)
    return to_toml(replace(theirs, time=scenario.time, output=output)) == ours


def refuse_existing(folder: Path, scenario: Scenario) -> None:
    """Raise `UsageError` if a folder holds a run, and say which and what to do."""
    if folder.exists() and not folder.is_dir():
        raise UsageError(f"{folder}: is a file; give the name of a folder with --out")
    if not holds_run(folder):
        return
    path = folder / SCENARIO_FILE
    same = path.is_file() and is_run_of(folder, scenario)
    if same:
        typed = shlex.quote(str(folder))
        raise UsageError(
            f"{folder}: holds a run of this scenario already: `wavepack results {typed}` shows "
            f"it, `wavepack resume {typed}` goes on with it, --fresh starts anew"
        )
    raise UsageError(
        f"{folder}: holds a run of another scenario: give another folder with --out, "
        "or --fresh to move that one aside"
    )


def holds_run(folder: Path) -> bool:
    """Tell whether a folder holds a run."""
    return (folder / SCENARIO_FILE).is_file() or (folder / RUN_FILE).exists()


def move_aside(folder: Path) -> Path | None:
    """Rename a folder that holds a run to the first free name with a number, and return it.

    Raises
    ------
    UsageError
        If another process is at work in it.
    MachineError
        If it cannot be renamed.
    """
    if not holds_run(folder):
        return None
    RunLock(folder).acquire().release()
    folder = folder if folder.name not in {"", ".."} else folder.resolve()
    number = 1
    while (target := folder.with_name(f"{folder.name}.before-{number}")).exists():
        number += 1
    try:
        folder.rename(target)
    except OSError as error:
        raise MachineError(f"{folder}: cannot be moved aside: {error.strerror}") from error
    return target


def make_folder(folder: Path) -> None:
    """Make a run folder and those around it; `MachineError` if that cannot be done."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise MachineError(
            f"{folder}: cannot be made: {error.strerror}; give another folder with --out"
        ) from error


@contextmanager
def asked_to_stop() -> Iterator[Callable[[], bool]]:
    """Turn SIGINT and SIGTERM into a question to be asked at every stop."""
    asked = False

    def take_note(number: int, frame: FrameType | None) -> None:
        del number, frame
        nonlocal asked
        asked = True

    former = {}
    try:
        for number in (signal.SIGINT, signal.SIGTERM):
            former[number] = signal.signal(number, take_note)
    except ValueError:
        # Not the main thread: signals are somebody else's business.
        pass
    try:
        yield lambda: asked
    finally:
        for number, handler in former.items():
            signal.signal(number, handler)

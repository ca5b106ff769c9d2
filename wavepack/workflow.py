"""The commands, one short function each; the only place where all rooms meet."""

import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType
from typing import Any

from wavepack.archive.layout import RUN_FILE, SCENARIO_FILE
from wavepack.errors import MachineError, UsageError
from wavepack.running.session import News, Session, as_run
from wavepack.scenario.schema import Scenario
from wavepack.scenario.write import to_toml

Tell = Callable[[News], None]


def run(
    scenario: Scenario,
    out: Path | str,
    *,
    threads: int | None = None,
    fresh: bool = False,
    tell: Tell = lambda _: None,
) -> dict[str, Any]:
    """Propagate a scenario into a run folder and return its results.

    SIGINT and SIGTERM end it at the next stop, with a checkpoint saved and the
    status ``interrupted``.

    Raises
    ------
    UsageError
        If the folder holds a run already.
    ScenarioError, MachineError, NumericalFault
        See `wavepack.errors`.
    """
    folder = Path(out)
    if fresh:
        move_aside(folder)
    refuse_existing(folder, scenario)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise MachineError(
            f"{folder}: cannot be made: {error.strerror}; give another folder with --out"
        ) from error
    with asked_to_stop() as asked, Session.start(scenario, folder, threads=threads) as session:
        return session.propagate(stop_asked=asked, tell=tell)


def resume(
    folder: Path | str,
    *,
    until: float | str | None = None,
    threads: int | None = None,
    tell: Tell = lambda _: None,
    note: Callable[[str], None] = lambda _: None,
) -> dict[str, Any]:
    """Go on from the newest checkpoint of a run folder and return the results.

    ``until`` is a time in the scenario's unit or with its own; it may lie
    beyond the scenario's end.

    Raises
    ------
    UsageError
        If the folder holds no run, or ``until`` has been passed already.
    ScenarioError, MachineError, NumericalFault
        See `wavepack.errors`.
    """
    with asked_to_stop() as asked, Session.resume(
        Path(folder), until=until, threads=threads
    ) as session:
        for text in session.notes:
            note(text)
        return session.propagate(stop_asked=asked, tell=tell)


def refuse_existing(folder: Path, scenario: Scenario) -> None:
    """Raise `UsageError` if a folder holds a run, and say which and what to do."""
    path = folder / SCENARIO_FILE
    if not path.is_file() and not (folder / RUN_FILE).exists():
        return
    same = path.is_file() and path.read_text(encoding="utf-8") == to_toml(as_run(scenario))
    if same:
        raise UsageError(
            f"{folder}: holds a run of this scenario already: `wavepack results {folder}` shows "
            f"it, `wavepack resume {folder}` goes on with it, --fresh starts anew"
        )
    raise UsageError(
        f"{folder}: holds a run of another scenario: give another folder with --out, "
        "or --fresh to move that one aside"
    )


def move_aside(folder: Path) -> Path | None:
    """Rename an existing folder to the first free name with a number, and return it."""
    if not folder.exists():
        return None
    number = 1
    while (target := folder.with_name(f"{folder.name}.before-{number}")).exists():
        number += 1
    try:
        folder.rename(target)
    except OSError as error:
        raise MachineError(f"{folder}: cannot be moved aside: {error.strerror}") from error
    return target


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

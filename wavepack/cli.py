"""The command line; the only place that prints.

Results go to stdout, progress and messages to stderr.
"""

import json
import os
import shlex
import shutil
import signal
import sys
import traceback
from argparse import Namespace
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager, suppress
from types import FrameType
from typing import Any, Final

from wavepack.arguments import PROGRAM, parse
from wavepack.errors import MachineError, ScenarioError, WavepackError
from wavepack.reporting import tables
from wavepack.reporting.terminal import Line, decorated, progress_text

# The matrix products of a run are small: a threaded BLAS makes them ten times
# slower. The transforms have threads of their own. Must be set before NumPy is imported.
for _variable in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(_variable, "1")

DONE: Final = 0
DEFECT: Final = 1
MISSED: Final = 3
REFUSED: Final = MachineError.exit_status
INTERRUPTED: Final = 130

DEBUG_VARIABLE: Final = "WAVEPACK_DEBUG"


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return the exit status.

    ``arguments`` are those of the process by default.
    """
    for stream in (sys.stdout, sys.stderr):
        # A terminal without Unicode must not cost anybody their results.
        getattr(stream, "reconfigure", lambda **_: None)(errors="replace")
    with _sigterm_like_sigint():
        status = _guarded(sys.argv[1:] if arguments is None else arguments)
    if status == REFUSED and arguments is None:
        # After a refused write HDF5 may crash while it tidies up at exit.
        with suppress(OSError, ValueError):
            sys.stderr.flush()
        os._exit(status)
    return status


def _guarded(arguments: Sequence[str]) -> int:
    """Return the exit status of a command, whatever happens to it."""
    try:
        asked = parse(arguments)
        return COMMANDS[asked.command](asked)
    except SystemExit as stopped:
        return int(stopped.code or 0)
    except KeyboardInterrupt:
        _say("interrupted")
        return INTERRUPTED
    except Exception as error:  # noqa: BLE001 - the last resort, so that no user meets a traceback
        return _explained(error)


def _explained(error: Exception) -> int:
    """Say what went wrong and return the exit status."""
    match error:
        case ScenarioError():
            # FILE:LINE at the start of a line is where an editor looks for it.
            _say(str(error), prefix="")
        case WavepackError():
            _say(str(error))
        case MemoryError():
            _say(f"out of memory: {str(error) or 'no more to be had'}; a smaller grid needs less")
            return REFUSED
        case OSError():
            where = f"{error.filename}: " if error.filename else ""
            _say(f"{where}the machine refused: {error.strerror or error}")
            return REFUSED
        case _:
            return _defect(error)
    return error.exit_status


def _check(asked: Namespace) -> int:
    from wavepack.scenario.load import load_scenario

    scenario = load_scenario(asked.scenario, asked.overrides)
    from wavepack import workflow

    found = workflow.check(scenario, timing=not asked.no_timing)
    _print(found.text(width=shutil.get_terminal_size((100, 24)).columns) + "\n")
    return MISSED if found.misses_target else DONE


def _run(asked: Namespace) -> int:
    from wavepack.scenario.load import load_scenario

    scenario = load_scenario(asked.scenario, asked.overrides)
    from wavepack import workflow

    if asked.movie is not None:
        workflow.require_movie_format(asked.movie)
    out = asked.out or workflow.default_folder(scenario)
    with _line() as line:
        found = workflow.run(
            scenario,
            out,
            threads=asked.threads,
            fresh=asked.fresh,
            note=_say,
            tell=lambda news: line.draw(progress_text(news, scenario.units.time)),
        )
    status = _conclude(found, str(out), workflow.misses(found, scenario))
    if asked.movie is not None and status != INTERRUPTED:
        _render(lambda progress: workflow.movie(out, asked.movie, progress=progress))
    return status


def _resume(asked: Namespace) -> int:
    from wavepack import workflow

    unit = workflow.scenario_of(asked.folder).units.time
    with _line() as line:
        found = workflow.resume(
            asked.folder,
            until=asked.until,
            threads=asked.threads,
            note=_say,
            tell=lambda news: line.draw(progress_text(news, unit)),
        )
    missed = workflow.misses(found, workflow.scenario_of(asked.folder))
    return _conclude(found, str(asked.folder), missed)


def _results(asked: Namespace) -> int:
    from wavepack import workflow

    found = workflow.results(asked.folder)
    if asked.json:
        # Escapes keep JSON whole on any terminal.
        _print(json.dumps(found, indent=2, ensure_ascii=True) + "\n")
    elif asked.csv:
        _print(tables.as_csv(found))
    else:
        _print(tables.as_text(found, bold=decorated(sys.stdout)))
    if found.get("status") in {"running", "interrupted"}:
        _say(f"not finished; if nothing works on it, {_resuming(asked.folder)} goes on")
    return DONE


def _movie(asked: Namespace) -> int:
    from wavepack import workflow

    _render(
        lambda progress: workflow.movie(
            asked.folder,
            asked.out,
            size=asked.size,
            fps=asked.fps,
            picture=asked.picture,
            power=asked.power,
            progress=progress,
        )
    )
    return DONE


def _report(asked: Namespace) -> int:
    from wavepack import workflow

    _print(f"{workflow.report(asked.folder)}\n")
    return DONE


def _crosscheck(asked: Namespace) -> int:
    from wavepack import workflow
    from wavepack.reporting import crosscheck

    found = workflow.crosscheck(asked.folder)
    _print(crosscheck.as_text(found))
    _say(f"{asked.folder}: {workflow.CROSSCHECK_FILE} and {workflow.CROSSCHECK_TABLE} written")
    return MISSED if found["agrees"] is False else DONE


COMMANDS: Final[dict[str, Callable[[Namespace], int]]] = {
    "check": _check,
    "run": _run,
    "resume": _resume,
    "results": _results,
    "movie": _movie,
    "report": _report,
    "crosscheck": _crosscheck,
}


def _conclude(found: dict[str, Any], folder: str, missed: Sequence[str]) -> int:
    """Print what a run gave and return its exit status."""
    _print(tables.as_text(found, bold=decorated(sys.stdout)))
    if found["status"] == "interrupted":
        _say(f"{folder}: interrupted, a checkpoint is saved; {_resuming(folder)} goes on")
        return INTERRUPTED
    for text in missed:
        _say(text)
    _say(f"the run is in {folder}")
    return MISSED if missed else DONE


def _resuming(folder: object) -> str:
    """Return the command that goes on with a run, as it is typed in a shell."""
    return f"`{PROGRAM} resume {shlex.quote(str(folder))}`"


def _render(movie: Callable[[Callable[[int, int], None]], object]) -> None:
    with _line() as line:
        path = movie(lambda done, total: line.draw(f"frame {done} of {total}"))
    _say(f"{path}: written")


@contextmanager
def _line() -> Iterator[Line]:
    line = Line(sys.stderr)
    try:
        yield line
    finally:
        line.close()


def _print(text: str) -> None:
    """Write to stdout; a reader who has seen enough is no fault."""
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except BrokenPipeError:
        # Otherwise Python tries once more at its exit, and complains.
        nothing = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nothing, sys.stdout.fileno())
        os.close(nothing)


def _say(text: str, prefix: str = f"{PROGRAM}: ") -> None:
    with suppress(OSError):
        print(f"{prefix}{text}", file=sys.stderr, flush=True)


def _defect(error: Exception) -> int:
    words = " ".join(str(error).split())
    _say(
        f"a defect of the program, not of your input: {type(error).__name__}: {words} "
        f"({DEBUG_VARIABLE}=1 shows where)"
    )
    if os.environ.get(DEBUG_VARIABLE) == "1":
        with suppress(OSError):
            traceback.print_exception(error)
    return DEFECT


@contextmanager
def _sigterm_like_sigint() -> Iterator[None]:
    def interrupt(_number: int, _frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    try:
        former = signal.signal(signal.SIGTERM, interrupt)
    except ValueError:
        # Not the main thread: signals are somebody else's business.
        yield
        return
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, former)

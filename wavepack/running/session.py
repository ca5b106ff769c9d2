"""One process at work on a run: it starts or goes on, propagates, and finishes."""

import json
import math
import time
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import dataclass, replace
from pathlib import Path
from types import TracebackType
from typing import Any, Final, Self

import numpy as np
from threadpoolctl import threadpool_limits

from wavepack import __version__
from wavepack.archive import checkpoint
from wavepack.archive.disk import write_atomically
from wavepack.archive.layout import CHECKPOINT_FILE, RUN_FILE, SCENARIO_FILE
from wavepack.archive.lock import RunLock
from wavepack.archive.results import read_results, write_results
from wavepack.archive.runlog import RunLog
from wavepack.archive.writer import RunWriter
from wavepack.errors import NumericalFault, UsageError, WavepackError
from wavepack.grid import spectral
from wavepack.observing.flux import Overlap
from wavepack.observing.moments import momentum_density
from wavepack.running.journal import Journal, Standing
from wavepack.running.plan import run_plan
from wavepack.running.planner import given_knowledge, shared_knowledge
from wavepack.running.state import Record
from wavepack.running.summary import summarise
from wavepack.running.tables import check_tables, copy_tables
from wavepack.scenario.build import Setup, given
from wavepack.scenario.load import load_scenario
from wavepack.scenario.schema import Scenario, TimeSpec
from wavepack.scenario.tables import relative_to, with_copies
from wavepack.scenario.write import to_toml
from wavepack.stepping.march import Snapshot, march

#: The longest that a run may be made.
MOST_FRAMES: Final = 100_000
MOST_ROWS: Final = 10_000_000

#: How many seconds at most pass between two lines of news.
NEWS_EVERY: Final = 0.2


@dataclass(frozen=True)
class News:
    """How far a run has come."""

    step: int
    steps: int
    first: int
    seconds: float
    standing: Standing


class Session:
    """A run in the hands of this process; use as a context manager.

    `start` or `resume` makes one; `propagate` takes it to its end.
    """

    def __init__(self, folder: Path, scenario: Scenario, resources: ExitStack) -> None:
        self.folder = folder
        self.scenario = scenario
        self.notes: list[str] = []
        self._resources = resources
        self._log = resources.enter_context(RunLog(folder))
        self._began = time.monotonic()
        self._setup: Setup
        self._record: Record
        self._writer: RunWriter
        self._journal: Journal

    @classmethod
    def start(
        cls,
        scenario: Scenario,
        folder: Path,
        *,
        threads: int | None = None,
        setup: Setup | None = None,
    ) -> Self:
        """Lay out a new run in a folder that exists and holds none.

        ``setup`` is the scenario made ready, if it is already.

        Raises
        ------
        WavepackError
            If the scenario cannot be made ready or the folder not be written.
        """
        with ExitStack() as resources:
            resources.enter_context(threadpool_limits(1))
            # A scenario that is refused leaves nothing in the folder.
            setup = setup or Setup(scenario)
            resources.enter_context(RunLock(folder))
            session = cls(folder, scenario, resources)
            session._log.write("starting", wavepack=__version__, title=scenario.title)
            session.scenario = as_run(scenario)
            session._begin(setup, threads or setup.default_threads())
            session._resources = resources.pop_all()
        return session

    @classmethod
    def resume(
        cls, folder: Path, *, until: float | None = None, threads: int | None = None
    ) -> Self:
        """Go on from the newest checkpoint of a run folder.

        Raises
        ------
        UsageError
            If the folder holds no run, or ``until`` has been passed already.
        MachineError
            If no checkpoint can be read or the folder not be written.
        """
        path = folder / SCENARIO_FILE
        if not path.is_file():
            raise UsageError(f"{folder}: no {SCENARIO_FILE} in it; is it a run folder?")
        with ExitStack() as resources:
            resources.enter_context(threadpool_limits(1))
            resources.enter_context(RunLock(folder))
            scenario = load_scenario(path)
            session = cls(folder, scenario, resources)
            if (folder / CHECKPOINT_FILE).exists():
                session._take_up(checkpoint.load(folder / CHECKPOINT_FILE), until, threads)
            else:
                # Killed before its first checkpoint: nothing worth keeping was computed.
                (folder / RUN_FILE).unlink(missing_ok=True)
                setup = Setup(scenario)
                session._log.write("starting again", reason="no checkpoint yet")
                session._begin(setup, threads or setup.default_threads())
            session._resources = resources.pop_all()
        return session

    def propagate(
        self,
        *,
        stop_asked: Callable[[], bool] = lambda: False,
        tell: Callable[[News], None] = lambda _: None,
    ) -> dict[str, Any]:
        """Take the run to its end, or to the next stop after ``stop_asked``.

        Returns the results, which are also in ``results.json``.

        Raises
        ------
        NumericalFault
            If the numbers cannot be trusted any more; the last checkpoint is kept.
        MachineError
            If the disk is full or not writable; the run can be resumed.
        """
        try:
            status, snapshot = self._march(stop_asked, tell)
            return self._conclude(status, snapshot)
        except NumericalFault as fault:
            self._log.write("failed", reason=str(fault))
            self._fail(fault)
            raise
        except WavepackError as error:
            self._log.write("stopped by an error", reason=str(error))
            raise

    @property
    def finished(self) -> bool:
        """Whether there is nothing left to propagate."""
        return self._record.step >= self._setup.steps

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        del kind, trace
        if error is not None:
            self._writer.abandon()
        self._resources.close()

    def _begin(self, setup: Setup, threads: int) -> None:
        psi, found = setup.start
        before = tuple(momentum_density(psi, setup.grid, i)[1] for i in range(setup.grid.ndim))
        incidents, central = setup.incidents(), setup.central_energy()
        overlap = Overlap.of(psi, setup.grid.cell)
        read, self.scenario = self.scenario, with_copies(self.scenario)
        text = self._text()
        plan = run_plan(setup, text)
        del psi
        with shared_knowledge():
            stepper = setup.bind(threads, setup.hand_over)
            knowledge = spectral.remember().text if setup.spectral else b""
        self._record = Record(
            setup.choices,
            incidents,
            central,
            found,
            before,
            threads,
            knowledge,
            spectral.planner_version(),
            setup.end,
            tables=setup.tables,
        )
        copy_tables(read, self.folder, setup.tables)
        write_atomically(self.folder / SCENARIO_FILE, text.encode())
        writer = RunWriter.create(self.folder, plan)
        self._assemble(setup, stepper, overlap, writer)
        write_results(self.folder, self._summary("running", None))

    def _take_up(
        self, found: checkpoint.Checkpoint, until: float | None, threads: int | None
    ) -> None:
        state = found.state
        if found.note:
            self.notes.append(found.note)
        record = Record.restored(state)
        check_tables(self.scenario, self.folder, record.tables)
        if until is not None:
            self._extend(record, until)
        record = record.until(given(self.scenario.time.end, "time.end"))
        setup = Setup(self.scenario, record.choices)
        threads = threads or record.threads
        with given_knowledge(record.knowledge):
            stepper = setup.bind(threads, lambda psi: np.copyto(psi, state["psi"]))
        if not record.plans_alike or threads != record.threads:
            self.notes.append(
                "transforms are planned anew (other library or threads): the last bits may differ "
                "from those of an unbroken run"
            )
        stepper.tally.restore(found.section("tally"))
        writer = RunWriter.reopen(self.folder, json.loads(state["counts"]))
        self.notes += writer.notes
        self._record = replace(record, threads=threads)
        self._assemble(setup, stepper, Overlap.restored(found.section("journal/overlap")), writer)
        self._journal.restore(found.section("journal"))
        snapshot = Snapshot(record.step, record.step * setup.dt, stepper.psi)
        write_results(self.folder, self._summary("running", self._journal.standing(snapshot)))
        if until is not None:
            writer.replace_scenario(self._text())
        for note in self.notes:
            self._log.write("note", text=note)
        self._log.write("resumed", step=record.step, reached=record.step * setup.dt)

    def _extend(self, record: Record, until: float) -> None:
        """Move the scenario's end, here and in the folder."""
        dt = record.choices.dt
        reached = record.step * dt
        if until < reached * (1 - 1e-12):
            unit = self.scenario.units.symbol("time")
            raise UsageError(
                f"--until {until:g} {unit}: the run has already reached {reached:g} {unit}; "
                "give a later time"
            )
        steps = max(record.step, math.ceil(until / dt * (1 - 1e-12)))
        former = given(self.scenario.time.end, "time.end")
        rows = steps // record.choices.record_every
        frames_needed = round(steps * dt / record.choices.span * (record.choices.frames - 1)) + 1
        if frames_needed > MOST_FRAMES or rows > MOST_ROWS:
            raise UsageError(
                f"--until {until:g}: that would take {steps:,} steps, {rows:,} rows and "
                f"{frames_needed:,} frames at the run's spacing; need at most {MOST_ROWS:,} rows "
                f"and {MOST_FRAMES:,} frames: give an earlier time"
            )
        if steps * dt < former * (1 - 1e-12):
            self.notes.append(f"the end was {former:g}, it is {steps * dt:g} now")
        # Whoever asks for more than a run that stopped early wants it to go on.
        least = self.scenario.time.stop_when_left_below
        stopped = read_results(self.folder)["status"] == "stopped_early"
        end = TimeSpec(end=steps * dt, stop_when_left_below=None if stopped else least)
        frames = max(self.scenario.output.frames, frames_needed)
        output = replace(self.scenario.output, frames=frames)
        self.scenario = replace(self.scenario, time=end, output=output)
        write_atomically(self.folder / SCENARIO_FILE, self._text().encode())
        self._log.write("end moved", former=former, end=steps * dt)

    def _assemble(self, setup: Setup, stepper: Any, overlap: Overlap, writer: RunWriter) -> None:  # noqa: ANN401 - a Stepper
        self._setup = setup
        self._stepper = stepper
        self._writer = writer
        self._resources.callback(writer.close)
        self._journal = Journal(setup, stepper, overlap, writer)

    def _march(
        self, stop_asked: Callable[[], bool], tell: Callable[[News], None]
    ) -> tuple[str, Snapshot]:
        schedule = self._setup.schedule()
        start = self._record.step
        fresh = not self._writer.counts()["series"]
        least = self.scenario.time.stop_when_left_below
        saved = told = time.monotonic()
        for snapshot in march(self._stepper, schedule, start):
            if snapshot.step == start and not fresh:
                continue
            standing = self._journal.observe(snapshot, schedule)
            now = time.monotonic()
            if standing is not None and now - told > NEWS_EVERY:
                tell(self._news(standing, start))
                told = now
            if snapshot.step < schedule.steps:
                if least is not None and standing and standing.moments.norm < least:
                    return "stopped_early", snapshot
                if stop_asked():
                    return "interrupted", snapshot
            every = self.scenario.output.checkpoint_every
            if snapshot.step == start or now - saved > every:
                # Nothing unsound may take the place of a good checkpoint.
                standing = standing or self._journal.standing(snapshot)
                self._save(snapshot)
                write_results(self.folder, self._summary("running", standing))
                saved = time.monotonic()
        if start == schedule.steps:
            snapshot = Snapshot(start, start * schedule.dt, self._stepper.psi)
        return "finished", snapshot

    def _news(self, standing: Standing, first: int) -> News:
        seconds = time.monotonic() - self._began
        return News(standing.step, self._setup.steps, first, seconds, standing)

    def _save(self, snapshot: Snapshot) -> None:
        journal = self._journal.save()
        self._writer.sync()
        seconds = self._record.wall_seconds + time.monotonic() - self._began
        state: dict[str, Any] = self._record.at(snapshot.step, seconds).save()
        state["psi"] = snapshot.psi
        state["counts"] = json.dumps(self._writer.counts())
        state |= {f"tally/{key}": value for key, value in self._stepper.tally.save().items()}
        state |= {f"journal/{key}": value for key, value in journal.items()}
        checkpoint.save(self.folder / CHECKPOINT_FILE, state)
        self._log.write("checkpoint", step=snapshot.step, reached=snapshot.time)

    def _conclude(self, status: str, snapshot: Snapshot) -> dict[str, Any]:
        standing = self._journal.standing(snapshot)
        self._journal.drain()
        now = time.monotonic()
        self._record = self._record.at(snapshot.step, self._record.wall_seconds + now - self._began)
        self._began = now
        results = self._summary(status, standing)
        if status != "interrupted":
            for name, found in results["detectors"].items():
                self._writer.write_spectrum(
                    name, found["flux"], found["incident"], found["transmission"]
                )
            self._write_momentum(snapshot)
        self._save(snapshot)
        write_results(self.folder, results)
        self._log.write(status, step=snapshot.step, reached=snapshot.time)
        return results

    def _write_momentum(self, snapshot: Snapshot) -> None:
        if self._setup.grid.ndim == 1:
            _, after = momentum_density(snapshot.psi, self._setup.grid, 0)
            self._writer.write_momentum(self._record.before[0], after)

    def _fail(self, fault: NumericalFault) -> None:
        results = self._summary("failed", self._journal.latest) | {"fault": str(fault)}
        write_results(self.folder, results)

    def _text(self) -> str:
        """Return the scenario as the folder holds it."""
        return to_toml(relative_to(self.scenario, self.folder))

    def _summary(self, status: str, standing: Standing | None) -> dict[str, Any]:
        return summarise(
            status,
            self._setup,
            self._record,
            self._journal,
            standing,
            relative_to(self.scenario, self.folder),
            self._writer.column,
        )


def as_run(scenario: Scenario) -> Scenario:
    """Return the scenario with its orders, and the step that reaches its end in whole steps."""
    end = given(scenario.time.end, "time.end")
    spec = scenario.propagator
    implicit = spec.method == "crank-nicolson"
    propagator = replace(
        spec,
        step=end / Setup.whole_steps(scenario),
        order=spec.order or 2,
        space_order=spec.space_order or 2 if implicit else None,
    )
    return replace(scenario, propagator=propagator)

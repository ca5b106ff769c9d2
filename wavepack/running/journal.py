"""What a run writes as it goes: series, regions, detectors, frames."""

from collections.abc import Mapping
from dataclasses import dataclass
from time import monotonic
from typing import Any

import numpy as np

from wavepack.archive.writer import RunWriter
from wavepack.arrays import ComplexArray
from wavepack.errors import NumericalFault
from wavepack.observing.dwell import Dwell
from wavepack.observing.flux import FluxDetector, Overlap
from wavepack.observing.moments import Moments, moments
from wavepack.observing.regions import PARTS
from wavepack.scenario.build import Setup
from wavepack.stepping.march import Snapshot
from wavepack.stepping.schedule import Schedule
from wavepack.stepping.scheme import Stepper

#: Rows handed to the archive at once, at most so many or so old: their arrays
#: cost less together. When they are handed over changes no value.
KEPT_ROWS = 100
KEPT_SECONDS = 0.5

#: Books that are open by more than this, or a norm that has grown by it, stop the run.
OPEN_BOOKS = 1e-6


@dataclass(frozen=True)
class Standing:
    """Where the probability is at one time: on the grid and absorbed, part by part."""

    step: int
    time: float
    moments: Moments
    absorbed: np.ndarray

    @property
    def transmission(self) -> float:
        """In transmitted regions, on the grid or absorbed there."""
        return float(self.moments.parts[0] + self.absorbed[0])

    @property
    def reflection(self) -> float:
        """In reflected regions, on the grid or absorbed there."""
        return float(self.moments.parts[1] + self.absorbed[1])

    @property
    def held(self) -> float:
        """On the grid in no region with a role."""
        return float(self.moments.parts[2])

    @property
    def lost(self) -> float:
        """Absorbed in no region with a role."""
        return float(self.absorbed[2])

    @property
    def balance(self) -> float:
        """The sum of the four, each added up on its own."""
        return self.transmission + self.reflection + self.held + self.lost

    def region(self, index: int) -> float:
        """Probability of a region by its number, absorbed part included."""
        return float(self.moments.regions[index] + self.absorbed[len(PARTS) + index])


class Journal:
    """Observes snapshots as a schedule says and hands rows to the archive.

    Parameters
    ----------
    setup : Setup
        The run.
    stepper : Stepper
        Whose tally is read.
    overlap : Overlap
        The autocorrelation.
    writer : RunWriter
        Where rows go.
    """

    def __init__(self, setup: Setup, stepper: Stepper, overlap: Overlap, writer: RunWriter) -> None:
        self.detectors: tuple[FluxDetector, ...] = setup.detectors(stepper.clock)
        self.beyond_band = 0.0
        self.latest: Standing | None = None
        self.dwell = Dwell(len(setup.book.names))
        self._setup = setup
        self._stepper = stepper
        self._overlap = overlap
        self._writer = writer
        output = setup.scenario.output
        self._rows: list[dict[str, Any]] = []
        self._region_rows: list[list[float]] = []
        self._drained = monotonic()
        self._thin = (slice(None, None, output.thin),) * setup.grid.ndim
        self._density = output.store == "density"

    def observe(self, snapshot: Snapshot, schedule: Schedule) -> Standing | None:
        """Do all that is due at a stop; return the standing if a record was due.

        Raises
        ------
        NumericalFault
            If the state is not finite or the books do not balance.
        """
        step = snapshot.step
        if schedule.reads(step) or step == schedule.steps:
            for detector in self.detectors:
                detector.add(step, snapshot.psi)
        if schedule.frames(step):
            self._writer.append_frame(snapshot.time, self._frame(snapshot.psi))
        if not schedule.records(step):
            return None
        standing = self.standing(snapshot)
        self._record(standing, snapshot.psi)
        return standing

    def standing(self, snapshot: Snapshot) -> Standing:
        """Return where the probability is; raises `NumericalFault` if it cannot be."""
        with np.errstate(invalid="ignore", over="ignore"):
            seen = moments(
                snapshot.psi,
                snapshot.time,
                self._setup.hamiltonian,
                self._setup.book,
                band=self._setup.band,
            )
            absorbed = self._setup.book.of_patches(self._stepper.tally.patches())
        standing = Standing(snapshot.step, snapshot.time, seen, absorbed)
        self.beyond_band = max(self.beyond_band, seen.beyond)
        self._check(standing, snapshot.psi)
        self.latest = standing
        return standing

    def drain(self) -> None:
        """Hand rows and what the detectors have read to the archive."""
        self._drained = monotonic()
        if self._rows:
            columns = {name: [row[name] for row in self._rows] for name in self._rows[0]}
            self._writer.append_series(columns)
            for name, values in zip(
                self._setup.book.names, zip(*self._region_rows, strict=True), strict=False
            ):
                self._writer.append_region(name, columns["time"], values)
            self._rows.clear()
            self._region_rows.clear()
        for detector in self.detectors:
            times, fluxes = detector.drain()
            if times.size:
                self._writer.append_detector(detector.name, times, fluxes)

    def save(self) -> dict[str, Any]:
        """Return what a resumed run needs."""
        self.drain()
        state: dict[str, Any] = {"beyond_band": self.beyond_band}
        for detector in self.detectors:
            for key, value in detector.save().items():
                state[f"detectors/{detector.name}/{key}"] = value
        for key, value in self.dwell.save().items():
            state[f"dwell/{key}"] = value
        for key, value in self._overlap.save().items():
            state[f"overlap/{key}"] = value
        return state

    def restore(self, state: Mapping[str, Any]) -> None:
        """Take up what was saved; the overlap is restored by its own constructor."""
        self.beyond_band = float(state["beyond_band"])
        self.dwell.restore(_section(state, "dwell/"))
        for detector in self.detectors:
            detector.restore(_section(state, f"detectors/{detector.name}/"))

    def _frame(self, psi: ComplexArray) -> np.ndarray:
        thinned = psi[self._thin]
        return np.abs(thinned) ** 2 if self._density else thinned

    def _record(self, standing: Standing, psi: ComplexArray) -> None:
        seen = standing.moments
        row: dict[str, Any] = {
            "time": standing.time,
            "norm": seen.norm,
            "energy": seen.energy,
            "kinetic": seen.kinetic,
            "potential": seen.potential,
            "transmission": standing.transmission,
            "reflection": standing.reflection,
            "held": standing.held,
            "lost": standing.lost,
            "autocorrelation": self._overlap(psi),
        }
        for i, name in enumerate(self._setup.grid.names):
            row[name] = seen.position[i]
            row[f"p{name}"] = seen.momentum[i]
            row[f"sigma_{name}"] = seen.spread[i]
            row[f"sigma_p{name}"] = seen.momentum_spread[i]
        self.dwell.add(standing.time, seen.regions)
        self._rows.append(row)
        self._region_rows.append([standing.region(i) for i in range(len(self._setup.book.names))])
        if len(self._rows) >= KEPT_ROWS or monotonic() - self._drained > KEPT_SECONDS:
            self.drain()

    def _check(self, standing: Standing, psi: ComplexArray) -> None:
        place = f"step {standing.step}, t = {standing.time:.6g}"
        norm = standing.moments.norm
        if not np.isfinite(norm):
            bad = np.argwhere(~np.isfinite(psi))
            where = (
                ", ".join(
                    f"{axis.name} = {axis.coordinates[i]:.4g}"
                    for axis, i in zip(self._setup.grid.axes, bad[0], strict=True)
                )
                if bad.size
                else "the sum of the density"
            )
            raise NumericalFault(f"{place}: the state is not finite at {where}")
        if norm > 1 + OPEN_BOOKS:
            raise NumericalFault(f"{place}: the norm has grown to {norm:.9g}; it started at 1")
        if abs(standing.balance - 1) > OPEN_BOOKS:
            raise NumericalFault(
                f"{place}: the books do not balance: transmission + reflection + held + lost "
                f"= {standing.balance:.9g}, need 1"
            )


def _section(state: Mapping[str, Any], prefix: str) -> dict[str, Any]:
    """Return what stands under a prefix, without it."""
    return {k.removeprefix(prefix): v for k, v in state.items() if k.startswith(prefix)}

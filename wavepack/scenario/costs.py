"""What a run will cost: memory, disk and time."""

import math
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np

from wavepack.grid import spectral
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.observing.moments import moments
from wavepack.observing.regions import RegionBook
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import SpectralKinetic, StaggeredKinetic
from wavepack.physics.landscape import Landscape
from wavepack.scenario.build import Setup

FIELD: Final = 16
#: Complex fields held at once, measured with tracemalloc on 1,024 x 1,024 points: while
#: the run is made ready (the initial state's analysis) and while it goes.
FIELDS_AT_START: Final = {"order 2": 7.8, "order 4": 8.9, "implicit": 8.8}
FIELDS_RUNNING: Final = {"order 2": 4.7, "order 4": 5.7, "implicit": 6.8}
#: The interpreter and its libraries [bytes].
PROGRAM: Final = 150e6
#: Seconds that timing may take in all, and for the steps on one grid.
BUDGET: Final = 4.0
STRETCH: Final = 0.3
#: Points that can be set up in no time.
SMALL: Final = 1 << 14
#: What each thread beyond the first adds (measured with two, from 512 x 512 points on).
THREAD_GAIN: Final = 0.7
#: Bytes a second that a disk surely takes.
DISK_SPEED: Final = 3e8


def memory(setup: Setup) -> tuple[float, float]:
    """Return the bytes held while a run is made ready and while it goes."""
    if setup.spectral:
        kind = "order 4" if setup.scenario.propagator.order == 4 else "order 2"
    else:
        kind = "implicit"
    copies = 4 if kind == "order 4" else 1.5
    driven = sum(copies * part.values.size for part in setup.landscape.driven)
    detectors = sum(
        2 * (points + 128) * setup.grid.size / setup.grid.shape[setup.grid.index(spec.axis)]
        for spec in setup.scenario.detector
        for points in (setup.choices.energies[spec.name][2],)
    )
    start, running = (
        PROGRAM + FIELD * (fields[kind] * setup.grid.size + driven + detectors)
        for fields in (FIELDS_AT_START, FIELDS_RUNNING)
    )
    return start, running


def free_memory() -> float:
    """Return the bytes that can be had without swapping; infinite if unknown."""
    try:
        for line in Path("/proc/meminfo").read_text(encoding="ascii").splitlines():
            if line.startswith("MemAvailable:"):
                return 1024 * float(line.split()[1])
    except (OSError, ValueError):
        pass
    return math.inf


@dataclass(frozen=True)
class Disk:
    """Bytes that a run writes: frames, rows of series and detectors, checkpoints."""

    frames: float
    rows: float
    checkpoints: float

    @property
    def total(self) -> float:
        """All of it [bytes]."""
        return self.frames + self.rows + self.checkpoints


def disk(setup: Setup) -> Disk:
    """Return the size of a run's folder."""
    output = setup.scenario.output
    schedule = setup.schedule()
    value = (16 if output.store == "wavefunction" else 8) // (1 + (output.precision == "single"))
    stored = math.prod(-(-n // output.thin) for n in setup.grid.shape)
    frames = len(schedule.frame_steps) * stored * value
    columns = 8 * (12 + 4 * setup.grid.ndim) + 16 * len(setup.scenario.region)
    rows = schedule.steps // schedule.record_every * columns
    rows += schedule.steps // schedule.read_every * 16 * len(setup.scenario.detector)
    # The newest and the one before it, and the next while it is written.
    checkpoints = 3 * FIELD * setup.grid.size
    return Disk(frames, rows + 100_000, checkpoints)


@dataclass(frozen=True)
class Timing:
    """Seconds of a run: one step, one row of the series, everything."""

    step: float
    record: float
    total: float


def time_run(setup: Setup, budget: float = BUDGET) -> Timing:
    """Time a few steps and one row of the series; estimate the whole run.

    What would take too long to plan is timed on a smaller grid of the same
    kind, and its cost scaled as n log n. One thread is timed, since planning
    for several may take seconds on a busy machine; each further one is taken to
    add `THREAD_GAIN` to the speed.
    """
    began = time.perf_counter()
    if setup.spectral:
        spectral.planner_version()  # loads the library, which is no part of the cost
    grid = _small(setup.grid, SMALL)
    while True:
        started = time.perf_counter()
        step, record = _measure(setup, grid, STRETCH)
        planning = time.perf_counter() - started - STRETCH
        left = budget - (time.perf_counter() - began)
        larger = _small(setup.grid, 5 * grid.size)
        # Four times the points take five times as long to plan, on a quiet machine.
        if larger.size == grid.size or 8 * planning + STRETCH > left:
            break
        grid = larger
    scale = _work(setup.grid.size) / _work(grid.size)
    step *= scale / (1 + THREAD_GAIN * (setup.default_threads() - 1))
    record *= scale
    schedule = setup.schedule()
    readings = schedule.steps // schedule.read_every * len(setup.scenario.detector)
    across = setup.grid.size / max(setup.grid.shape)
    reading = 3e-5 + 5e-8 * across + 2e-9 * setup.grid.size * (setup.grid.ndim > 1)
    total = (
        schedule.steps * step
        + schedule.steps // schedule.record_every * record
        + readings * reading
        + disk(setup).total / DISK_SPEED
    )
    return Timing(step, record, total)


def _measure(setup: Setup, grid: Grid, seconds: float) -> tuple[float, float]:
    """Return the seconds of a step and of the moments on a grid."""
    landscape = setup.landscape
    kinetic = setup.kinetic
    if grid.shape != setup.grid.shape:
        landscape = Landscape(grid, setup.particle, setup.scenario.potential)
        kinetic = (
            SpectralKinetic(grid, setup.particle)
            if setup.spectral
            else StaggeredKinetic(
                grid,
                setup.particle,
                (setup.particle.mass,) * grid.ndim,
                setup.scenario.propagator.space_order or 2,
            )
        )
    hamiltonian = Hamiltonian(kinetic, landscape, setup.hamiltonian.layers)
    stepper = setup.scheme.bind(hamiltonian, setup.dt, threads=1, reference=setup.choices.reference)
    # A wave of one modulus: no number gets so small that it slows arithmetic down.
    stepper.psi[...] = np.exp(1j * np.arange(grid.size).reshape(grid.shape))
    stepper.psi /= math.sqrt(grid.norm(stepper.psi))
    stepper.advance(0, 1)
    # The quickest stretch: others are longer because the machine is shared.
    stretch, done, step = 1, 1, math.inf
    end = time.perf_counter() + seconds
    while (started := time.perf_counter()) < end:
        stepper.advance(done, done + stretch)
        step = min(step, (time.perf_counter() - started) / stretch)
        done += stretch
        stretch = min(2 * stretch, setup.choices.read_every)
    book = RegionBook(grid, [])
    rows = []
    for _ in range(2):  # the first call loads and plans
        started = time.perf_counter()
        moments(stepper.psi, 0.0, hamiltonian, book)
        rows.append(time.perf_counter() - started)
    return step, min(rows)


def _small(grid: Grid, most: int) -> Grid:
    """Return the grid with its points halved along all axes until they are few enough."""
    while grid.size > most:
        grid = Grid(tuple(_halved(axis) for axis in grid.axes))
    return grid


def _halved(axis: Axis) -> Axis:
    wall = axis.basis == "sine"
    points = max(8, (axis.points + wall) // 2 - wall)
    return Axis(axis.name, axis.start, axis.stop, points, axis.ends)


def _work(size: int) -> float:
    return size * math.log2(size + 1)

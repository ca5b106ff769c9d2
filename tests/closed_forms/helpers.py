"""A scenario propagated in memory, with the program's own journal and results."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, cast

import numpy as np
import numpy.typing as npt

from tests.closed_forms.reference_values import Row
from wavepack.arrays import ComplexArray, RealArray
from wavepack.observing.flux import FluxDetector, Overlap
from wavepack.observing.moments import momentum_density
from wavepack.running.journal import Journal, Standing
from wavepack.running.state import Record
from wavepack.running.summary import summarise
from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario
from wavepack.stepping.march import Snapshot, march

if TYPE_CHECKING:
    from wavepack.archive.writer import RunWriter


@dataclass
class Memory:
    """What a run folder would get, kept as lists."""

    columns: dict[str, list[Any]] = field(default_factory=dict)
    frames: list[tuple[float, ComplexArray]] = field(default_factory=list)
    regions: dict[str, list[float]] = field(default_factory=dict)
    fluxes: dict[str, list[RealArray]] = field(default_factory=dict)

    def append_series(self, rows: Mapping[str, npt.ArrayLike]) -> None:
        """Keep rows of the series: numbers, or arrays of equal length."""
        for name, values in rows.items():
            self.columns.setdefault(name, []).extend(np.atleast_1d(values))

    def append_frame(self, time: float, values: ComplexArray) -> None:
        """Keep one frame."""
        self.frames.append((time, np.array(values)))

    def append_region(self, name: str, times: npt.ArrayLike, values: npt.ArrayLike) -> None:
        """Keep the probability of a region; its times are those of the series."""
        del times
        self.regions.setdefault(name, []).extend(np.atleast_1d(values))

    def append_detector(self, name: str, times: RealArray, fluxes: RealArray) -> None:
        """Keep readings of a detector, rows of time and flux."""
        self.fluxes.setdefault(name, []).append(np.column_stack((times, fluxes)))


@dataclass(frozen=True)
class Outcome:
    """A finished propagation.

    Attributes
    ----------
    setup : Setup
        What was propagated.
    psi : complex array
        The last state.
    memory : Memory
        Series, frames, regions and fluxes.
    results : dict
        What ``results.json`` would hold.
    detectors : dict of name to FluxDetector
        As they stood at the end.
    standing : Standing
        Where the probability is at the end.
    """

    setup: Setup
    psi: ComplexArray
    memory: Memory
    results: dict[str, Any]
    detectors: dict[str, FluxDetector]
    standing: Standing

    def series(self, name: str) -> Any:  # noqa: ANN401 - a real or complex array
        """Return one column of the series."""
        return np.array(self.memory.columns[name])

    def region(self, name: str) -> RealArray:
        """Return the probability of a region at the times of the series."""
        return np.array(self.memory.regions[name])

    def flux(self, name: str) -> RealArray:
        """Return the readings of a detector, shape (readings, 2): time and flux."""
        return np.concatenate(self.memory.fluxes[name])

    def quantity(self, name: str) -> float:
        """Return one of the results' quantities."""
        return float(self.results["quantities"][name]["value"])

    def spectrum(self, name: str, least: float = 0.01) -> tuple[RealArray, RealArray]:
        """Return energies and transmission where the incident weight is not small.

        ``least`` is the smallest weight counted, as a share of the largest. Behind
        the packet's start the reflection stands for the transmission.
        """
        detector = self.results["detectors"][name]
        values = detector["transmission"]
        if values is None:
            values = detector["reflection"]
        assert values is not None, detector["reason"]
        incident = detector["flux"] / values
        keep = incident > least * np.nanmax(incident)
        return detector["energy"][keep], values[keep]


def at_table(
    outcome: Outcome, table: Iterable[Row], least: float = 1e-4
) -> tuple[RealArray, RealArray]:
    """Return what the exit detector gives at a table's energies, and the table's values.

    Rows whose energy the packet does not hold are passed over.
    """
    energies, found = outcome.spectrum("exit", least)
    pairs = [
        (found[hit[0]], row.value)
        for row in table
        if (hit := np.flatnonzero(np.abs(energies - row.parameters["energy"]) < 1e-9)).size
    ]
    return np.array([a for a, _ in pairs]), np.array([b for _, b in pairs])


def propagate(text: str, *overrides: str) -> Outcome:
    """Return the outcome of a scenario, propagated as a run does but without a folder.

    ``overrides`` are KEY=VALUE as on the command line.
    """
    scenario = parse_scenario(text, overrides=overrides)
    setup = Setup(scenario)
    stepper = setup.bind(1)
    start, found = setup.start
    stepper.psi[...] = start
    before = tuple(momentum_density(start, setup.grid, i)[1] for i in range(setup.grid.ndim))
    record = Record(
        setup.choices,
        setup.incidents(),
        setup.central_energy(),
        found,
        before,
        1,
        b"",
        "",
        setup.end,
    )
    memory = Memory()
    journal = Journal(setup, stepper, Overlap.of(start, setup.grid.cell), cast("RunWriter", memory))
    schedule = setup.schedule()
    snapshot = Snapshot(0, 0.0, stepper.psi)
    for snapshot in march(stepper, schedule):
        journal.observe(snapshot, schedule)
    journal.drain()
    standing = journal.standing(snapshot)
    results = summarise("finished", setup, record, journal, standing, scenario)
    detectors = {detector.name: detector for detector in journal.detectors}
    return Outcome(setup, np.array(stepper.psi), memory, results, detectors, standing)

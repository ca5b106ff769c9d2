"""What the whole course of a run tells: slow tails and times."""

from collections.abc import Callable, Mapping
from typing import Any, TypeAlias

import numpy as np

from wavepack.analysis.outcome import mean_crossing_time
from wavepack.analysis.tails import (
    decay_results,
    extrapolate,
    extrapolation_results,
    fit_decay,
)
from wavepack.analysis.times import (
    crossing_results,
    dwell_results,
    free_crossing_time,
    phase_times,
)
from wavepack.arrays import RealArray
from wavepack.observing.flux import FluxDetector
from wavepack.observing.incident import Incident
from wavepack.observing.regions import PARTS
from wavepack.physics.kinetic import SpectralKinetic
from wavepack.running.journal import Journal, Standing
from wavepack.running.state import Record
from wavepack.scenario.build import Setup

#: Gives a dataset of the run that grows along time by its path, such as ``series/held``.
Columns: TypeAlias = Callable[[str], RealArray]

#: Names of tails that are series; a region of such a name is called ``region NAME``.
SERIES = ("held", "norm")


def tail_results(columns: Columns, setup: Setup, units: Mapping[str, str]) -> dict[str, Any]:
    """Return the decay of what is held, of the norm, and of each region without a role.

    Without regions that have a role all on the grid is held: only the norm is fitted.
    """
    with_role = any(spec.role != "none" for spec in setup.scenario.region)
    sources = {name: f"series/{name}" for name in SERIES if with_role or name == "norm"}
    for spec in setup.scenario.region:
        if spec.role == "none":
            key = f"region {spec.name}" if spec.name in SERIES else spec.name
            sources[key] = f"regions/{spec.name}/probability"
    times = columns("series/time")
    found = {name: fit_decay(times, columns(path)) for name, path in sources.items()}
    hbar = setup.particle.hbar
    results: dict[str, Any] = {
        "tails": {name: decay_results(decay, hbar, units) for name, decay in found.items()}
    }
    if with_role:
        series = [columns(f"series/{name}") for name in ("transmission", "reflection", "lost")]
        held = float(columns("series/held")[-1])
        final = extrapolate(found["held"], times, series[0], series[1], series[2], held)
        results["extrapolated"] = extrapolation_results(final)
    return results


def dwell_of(journal: Journal, standing: Standing, index: int, unit: str) -> dict[str, Any]:
    """Return the dwell time of a region by its number."""
    absorbed = float(standing.absorbed[len(PARTS) + index])
    return dwell_results(float(journal.dwell.times[index]), absorbed, unit)


def times_at(
    columns: Columns, detector: FluxDetector, setup: Setup, record: Record, unit: str
) -> dict[str, Any]:
    """Return the times at one detector, in time and by energy."""
    group = f"detectors/{detector.name}"
    mean = mean_crossing_time(detector)
    incident = record.incidents[detector.name]
    free = _free(columns, detector.name, setup, record)
    result = crossing_results(columns(f"{group}/time"), columns(f"{group}/flux"), mean, free, unit)
    return result | _phase(detector, incident, setup, one_way=mean is not None)


def _phase(
    detector: FluxDetector, incident: Incident, setup: Setup, *, one_way: bool
) -> dict[str, Any]:
    amplitude, reason = detector.amplitude_by_energy(), incident.phase_reason
    if reason is None and not one_way:
        reason = "waves pass the plane both ways: their sum has no phase of its own"
    if detector.spectrum is None or reason or amplitude is None or incident.free is None:
        return {"phase_time": None, "phase_time_reason": reason}
    times = phase_times(
        detector.spectrum.energies, amplitude, incident.free, incident.density, setup.particle.hbar
    )
    if not np.isfinite(times).any():
        reason = "its energies stand too far apart to follow the phase, or hold no packet"
    return {"phase_time": None if reason else times, "phase_time_reason": reason}


def _free(
    columns: Columns, name: str, setup: Setup, record: Record
) -> tuple[float | None, str | None]:
    """Return when free motion would cross the plane of a detector [time], or why not known."""
    incident = record.incidents[name]
    if incident.reason is not None:
        return None, incident.reason
    (spec,) = [spec for spec in setup.scenario.detector if spec.name == name]
    axis = setup.grid.index(spec.axis)
    line = setup.grid.axes[axis]
    k = np.sort(line.wavenumbers)
    start = float(columns(f"series/{spec.axis}")[0])
    distance = spec.at - start
    place = int(np.argmin(np.abs(line.coordinates - start)))
    lightness = setup.particle.mass / _mass_at(setup, axis, place)
    speeds = lightness * setup.kinetic.energy_slope(k, axis) / setup.particle.hbar
    density = record.before[axis]
    if line.basis == "sine":
        # Standing waves do not tell directions; the incident weights do.
        away, towards = incident.away.sum(), incident.density.sum()
        share = float(away / (away + towards)) if away + towards > 0 else 1.0
        density = np.concatenate((share * density, (1 - share) * density))
        speeds = np.sign(distance) * np.concatenate((-speeds, speeds))
    return free_crossing_time(distance, density, speeds)


def _mass_at(setup: Setup, axis: int, place: int) -> float:
    """Return the mass where a packet starts, which an incident weight needs uniform."""
    if isinstance(setup.kinetic, SpectralKinetic):
        return setup.particle.mass
    masses = np.asarray(setup.kinetic.masses[axis])
    if masses.ndim == 0:
        return float(masses)
    return float(np.median(np.take(masses, place, axis=axis)))

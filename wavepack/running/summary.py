"""The results of a run, from what was gathered."""

import platform
from importlib.metadata import PackageNotFoundError, version
from typing import Any

import numpy as np

from wavepack import __version__
from wavepack.analysis.outcome import detector_results, quantity, sidebands
from wavepack.archive.layout import text_sha256
from wavepack.observing.flux import FluxDetector
from wavepack.observing.moments import Moments
from wavepack.observing.regions import PARTS
from wavepack.running.history import Columns, dwell_of, tail_results, times_at
from wavepack.running.journal import Journal, Standing
from wavepack.running.plan import unit_symbols
from wavepack.running.state import Record
from wavepack.scenario.build import Setup
from wavepack.scenario.schema import Scenario
from wavepack.scenario.write import to_toml

#: Packages whose versions can change a result.
PACKAGES = ("numpy", "scipy", "pyfftw", "h5py")


def summarise(
    status: str,
    setup: Setup,
    record: Record,
    journal: Journal,
    standing: Standing | None,
    scenario: Scenario,
    columns: Columns | None = None,
) -> dict[str, Any]:
    """Return what `results.json` holds; without a standing only what is known at once.

    ``columns`` gives the course of the run, for slow tails and times.
    """
    units = unit_symbols(scenario)
    step = 0 if standing is None else standing.step
    results: dict[str, Any] = {
        "status": status,
        "title": scenario.title,
        "time": {"value": step * setup.dt, "unit": units["time"]},
    }
    seen = nothing_seen(setup) if standing is None else standing
    results |= _standing_results(setup, record, seen, units)
    results["detectors"] = {
        detector.name: _detector(detector, setup, record, units) for detector in journal.detectors
    }
    if standing is not None and columns is not None:
        _add_history(results, columns, setup, record, journal, standing, units)
    results["numerics"] = _numerics(setup, record, journal, units)
    results["provenance"] = _provenance(record, scenario)
    return results


def _standing_results(
    setup: Setup, record: Record, standing: Standing, units: dict[str, str]
) -> dict[str, Any]:
    seen = standing.moments
    quantities = {
        "transmission": quantity(standing.transmission),
        "reflection": quantity(standing.reflection),
        "held": quantity(standing.held),
        "lost": quantity(standing.lost),
        "balance": quantity(standing.balance),
        "unfinished": quantity(seen.norm),
    }
    if record.found is not None:
        quantities["found"] = quantity(record.found)
    momentum = f"1/{units['length']}"
    expectations = {
        "norm": quantity(seen.norm),
        "energy": quantity(seen.energy, units["energy"]),
        "kinetic": quantity(seen.kinetic, units["energy"]),
        "potential": quantity(seen.potential, units["energy"]),
    }
    for i, name in enumerate(setup.grid.names):
        expectations[name] = quantity(seen.position[i], units["length"])
        expectations[f"p{name}"] = quantity(seen.momentum[i], momentum)
        expectations[f"sigma_{name}"] = quantity(seen.spread[i], units["length"])
        expectations[f"sigma_p{name}"] = quantity(seen.momentum_spread[i], momentum)
    regions = {
        spec.name: {"role": spec.role, "probability": quantity(standing.region(i))}
        for i, spec in enumerate(setup.scenario.region)
    }
    return {"quantities": quantities, "regions": regions, "expectations": expectations}


def nothing_seen(setup: Setup) -> Standing:
    """Return a standing in which nothing is known: every value becomes null."""
    unknown, along = float("nan"), (float("nan"),) * setup.grid.ndim
    parts, regions = np.full(len(PARTS), unknown), np.full(len(setup.book.names), unknown)
    moments = Moments(unknown, unknown, unknown, along, along, along, along, parts, regions)
    return Standing(0, 0.0, moments, np.concatenate([parts, regions]))


def _add_history(
    results: dict[str, Any],
    columns: Columns,
    setup: Setup,
    record: Record,
    journal: Journal,
    standing: Standing,
    units: dict[str, str],
) -> None:
    """Add what the course of the run tells."""
    time = units["time"]
    results |= tail_results(columns, setup, units)
    for i, name in enumerate(setup.book.names):
        results["regions"][name] |= dwell_of(journal, standing, i, time)
    for detector in journal.detectors:
        results["detectors"][detector.name] |= times_at(columns, detector, setup, record, time)


def _detector(
    detector: FluxDetector, setup: Setup, record: Record, units: dict[str, str]
) -> dict[str, Any]:
    bands = []
    photons = {
        part.drive.photon_energy for part in setup.landscape.driven if part.drive.photon_energy
    }
    if len(photons) == 1 and detector.spectrum is not None:
        bands = sidebands(
            detector.spectrum.energies,
            detector.flux_by_energy(),
            record.central_energy,
            photons.pop(),
        )
    return detector_results(detector, record.incidents[detector.name], units, bands)


def _numerics(
    setup: Setup, record: Record, journal: Journal, units: dict[str, str]
) -> dict[str, Any]:
    propagator = setup.scenario.propagator
    choices = setup.choices
    return {
        "points": {axis.name: axis.points for axis in setup.grid.axes},
        "spacing": {
            axis.name: {"value": axis.spacing, "unit": units["length"]} for axis in setup.grid.axes
        },
        "step": {"value": setup.dt, "unit": units["time"]},
        "steps": setup.steps,
        "method": propagator.method,
        "order": propagator.order or 2,
        "space_order": None if setup.spectral else propagator.space_order or 2,
        "threads": record.threads,
        "record_every": choices.record_every,
        "detectors": {
            "read_every": choices.read_every,
            "band": {"value": setup.band, "unit": units["energy"]},
            "probability_beyond_band": journal.beyond_band,
        },
        "absorbers": [
            {
                "axis": setup.grid.names[layer.axis],
                "end": "upper" if layer.upper else "lower",
                "form": layer.form,
                "strength": {"value": layer.strength, "unit": units["energy"]},
            }
            for layer in setup.hamiltonian.layers
        ],
    }


def _provenance(record: Record, scenario: Scenario) -> dict[str, Any]:
    return {
        "wavepack": __version__,
        "python": platform.python_version(),
        "packages": {name: _version(name) for name in PACKAGES},
        "planner": record.planner,
        "scenario_sha256": text_sha256(to_toml(scenario)),
        "wall_seconds": record.wall_seconds,
        "former_ends": list(record.former_ends),
    }


def _version(package: str) -> str | None:
    try:
        return version(package)
    except PackageNotFoundError:
        return None

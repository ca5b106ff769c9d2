"""What the archive is told about a run before it starts."""

from typing import Any

from wavepack import __version__
from wavepack.archive.layout import RunPlan
from wavepack.observing.moments import momentum_density
from wavepack.scenario.build import Setup
from wavepack.scenario.schema import Scenario


def unit_symbols(scenario: Scenario) -> dict[str, str]:
    """Return the symbols of the scenario's four units."""
    return {kind: scenario.units.symbol(kind) for kind in ("length", "energy", "time", "mass")}


def run_plan(setup: Setup, text: str) -> RunPlan:
    """Return the layout of a run's file."""
    output = setup.scenario.output
    thin = slice(None, None, output.thin)
    names = setup.grid.names
    schedule = setup.schedule()
    series = ["norm", "energy", "kinetic", "potential"]
    for name in names:
        series += [name, f"p{name}", f"sigma_{name}", f"sigma_p{name}"]
    series += ["transmission", "reflection", "held", "lost", "autocorrelation"]
    energies = {d.name: d.spectrum.energies for d in setup.detectors(setup.clock) if d.spectrum}
    psi = setup.start[0]
    momentum = {"x": momentum_density(psi, setup.grid, 0)[0]} if setup.grid.ndim == 1 else {}
    return RunPlan(
        title=setup.scenario.title,
        scenario_text=text,
        wavepack_version=__version__,
        units=unit_symbols(setup.scenario),
        axes={axis.name: axis.coordinates[thin] for axis in setup.grid.axes},
        potential=setup.landscape.at(0.0)[(thin,) * setup.grid.ndim],
        frame_kind="psi" if output.store == "wavefunction" else "density",
        precision=output.precision,
        series=tuple(series),
        regions=setup.book.names,
        detectors=energies,
        frames=len(schedule.frame_steps),
        records=schedule.steps // schedule.record_every + 2,
        samples=schedule.steps // schedule.read_every + 2,
        momentum=momentum,
        facts=facts(setup),
    )


def facts(setup: Setup) -> dict[str, Any]:
    """Return what a reader of the file alone must know, as JSON can hold it."""
    names = setup.grid.names
    return {
        "regions": [
            {"name": spec.name, "role": spec.role, **_extent(spec)}
            for spec in setup.scenario.region
        ],
        "detectors": [
            {
                "name": spec.name,
                "axis": spec.axis,
                "at": spec.at,
                "toward": f"{'+' if setup.choices.signs[spec.name] > 0 else '-'}{spec.axis}",
                **_extent(spec),
            }
            for spec in setup.scenario.detector
        ],
        "absorbers": [
            {"axis": names[layer.axis], "from": layer.start, "to": layer.stop}
            for layer in setup.bare_layers
        ],
        "mean_energy": setup.choices.reference,
        "parameters": dict(setup.scenario.parameters),
        "driven": bool(setup.landscape.driven),
        "axes": {
            axis.name: {"from": axis.start, "to": axis.stop, "ends": list(axis.ends)}
            for axis in setup.grid.axes
        },
    }


def _extent(spec: Any) -> dict[str, Any]:  # noqa: ANN401 - a region or a detector
    """Return the spans, unlimited sides as null, and the expression if there is one."""
    spans = {
        name: [None if abs(v) == float("inf") else v for v in (span.lower, span.upper)]
        for name, span in spec.spans.items()
    }
    where = getattr(spec, "where", None)
    return {"spans": spans, "where": None if where is None else str(where)}

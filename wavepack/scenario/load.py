"""From TOML text to a validated Scenario; reports all faults at once."""

import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path as FilePath
from typing import Any, Final

from wavepack.errors import Fault, ScenarioError, UsageError
from wavepack.physics.expressions import RESERVED
from wavepack.physics.packets import PACKETS
from wavepack.physics.potentials import SHAPES
from wavepack.physics.units import ATOMIC, UnitSystem
from wavepack.scenario.lines import LineMap, Path, syntax_line
from wavepack.scenario.overrides import apply_overrides
from wavepack.scenario.reader import UNREADABLE, Reader, nearest, shown
from wavepack.scenario.rules import check_rules
from wavepack.scenario.schema import (
    AbsorberSpec,
    AccuracySpec,
    AxisSpec,
    DetectorSpec,
    OutputSpec,
    ParticleSpec,
    PropagatorSpec,
    RegionSpec,
    Scenario,
    TimeSpec,
)

LARGEST_FILE: Final = 4_000_000
TABLES: Final = (
    "title", "units", "parameters", "particle", "grid", "potential", "packet", "absorber",
    "propagator", "time", "region", "detector", "output", "accuracy",
)
#: Single tables: key, class, and whether it may be left out.
SINGLE: Final = (
    ("absorber", AbsorberSpec, True),
    ("propagator", PropagatorSpec, False),
    ("time", TimeSpec, False),
    ("output", OutputSpec, False),
    ("accuracy", AccuracySpec, True),
)


def load_scenario(path: FilePath | str, overrides: Sequence[str] = ()) -> Scenario:
    """Return the scenario of a TOML file, with ``KEY=VALUE`` overrides applied.

    Raises
    ------
    UsageError
        If the file cannot be read.
    ScenarioError
        Holding every fault found, each with file, line and key.
    """
    path = FilePath(path)
    try:
        if path.stat().st_size > LARGEST_FILE:
            raise UsageError(f"{path}: need a scenario of at most {LARGEST_FILE} bytes")
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise UsageError(f"{path}: cannot be read: {error.strerror}") from error
    except ValueError as error:
        raise UsageError(f"{path}: need a text file in UTF-8: {error}") from error
    return parse_scenario(text, str(path), overrides, path.parent)


def parse_scenario(
    text: str,
    file: str = "scenario",
    overrides: Sequence[str] = (),
    folder: FilePath | None = None,
) -> Scenario:
    """Return the scenario of a TOML text; ``folder`` is where file names start from.

    Raises
    ------
    ScenarioError
        Holding every fault found, each with file, line and key.
    """
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise ScenarioError([Fault("", f"not TOML: {error}", syntax_line(error), file)]) from None
    except RecursionError:
        raise ScenarioError([Fault("", "not TOML: nested too deeply", None, file)]) from None
    overridden, faults = apply_overrides(raw, overrides)
    reader = Reader(
        file, LineMap(text), overridden, (folder or FilePath()).resolve(), UnitSystem()
    )
    reader.faults += faults
    scenario = _read(raw, reader)
    if scenario is not None and not reader.faults:
        check_rules(scenario, reader)
    if scenario is None or reader.faults:
        unique = list(dict.fromkeys(reader.faults))
        raise ScenarioError(sorted(unique, key=lambda fault: fault.line or 0))
    return scenario


def _read(raw: dict[str, Any], reader: Reader) -> Scenario | None:
    reader.known_keys(raw, TABLES, ())
    title = raw.get("title", "")
    if not isinstance(title, str):
        reader.fault(("title",), f"need a text, got {shown(title)}")
        title = ""
    reader.units = _units(raw.get("units", {}), reader)
    reader.parameters = _parameters(raw.get("parameters", {}), reader)
    grid = _grid(raw, reader)
    reader.axes = tuple(grid) if grid else ("x",)
    particle = _required_table(raw, "particle", ParticleSpec, reader)
    single = {
        key: None if optional and key not in raw else reader.read(cls, raw.get(key, {}), (key,))
        for key, cls, optional in SINGLE
    }
    potential = _shaped(raw, "potential", SHAPES, reader)
    packet = _shaped(raw, "packet", PACKETS, reader)
    region = _list(raw, "region", RegionSpec, reader)
    detector = _list(raw, "detector", DetectorSpec, reader)
    if not raw.get("packet"):
        reader.fault(("packet",), "missing; need at least one [[packet]], the initial state")
    parts = [particle, *single.values(), potential, packet, region, detector]
    if grid is None or any(part is UNREADABLE for part in parts):
        return None
    return Scenario(
        title=title,
        units=reader.units,
        particle=reader.units.particle(particle.mass, particle.charge),
        parameters=reader.parameters,
        grid=grid,
        potential=tuple(_bound(piece, reader.units) for piece in potential),
        packet=packet,
        absorber=_spread(single["absorber"], tuple(grid)),
        propagator=single["propagator"],
        time=single["time"],
        region=tuple(
            replace(spec, role="none") if spec.role == "held" else spec for spec in region
        ),
        detector=detector,
        output=single["output"],
        accuracy=single["accuracy"],
        name=reader.file,
        raw=raw,
    )


def _units(raw: Any, reader: Reader) -> UnitSystem:  # noqa: ANN401 - any TOML value
    table = reader.table(raw, ("units",)) or {}
    keys = ("length", "energy", "time", "mass")
    reader.known_keys(table, ("system", *keys), ("units",))
    chosen: dict[str, str] = {}
    if "system" in table:
        if table["system"] != "atomic":
            reader.fault(("units", "system"), f'need "atomic", got {shown(table["system"])}')
        else:
            chosen = dict(ATOMIC)
    for key in keys:
        if key in table:
            try:
                UnitSystem(**{key: table[key]})
                chosen[key] = table[key]
            except (ValueError, TypeError) as error:
                reader.fault(("units", key), str(error))
    return UnitSystem(**chosen)


def _parameters(raw: Any, reader: Reader) -> dict[str, float]:  # noqa: ANN401 - any TOML value
    values: dict[str, float] = {}
    for name, value in (reader.table(raw, ("parameters",)) or {}).items():
        path: Path = ("parameters", name)
        if name in RESERVED:
            reader.fault(path, f"need a name that is not taken, got {name}")
        elif not name.isidentifier() or not name.isascii():
            reader.fault(path, f"need a name of letters, digits and _, got {shown(name)}")
        else:
            try:
                values[name] = reader.units.parameter(value)
            except ValueError as error:
                reader.fault(path, str(error))
    return values


def _grid(raw: Mapping[str, Any], reader: Reader) -> dict[str, AxisSpec] | None:
    if "grid" not in raw:
        reader.fault(("grid",), "missing; need [grid] with x = { from, to, points, ends }")
        return None
    table = reader.table(raw["grid"], ("grid",))
    if table is None:
        return None
    reader.known_keys(table, ("x", "y"), ("grid",))
    if "x" not in table:
        reader.fault(("grid", "x"), "missing; need x = { from, to, points, ends }")
        return None
    reader.axes = tuple(axis for axis in ("x", "y") if axis in table)
    found = {axis: reader.read(AxisSpec, table[axis], ("grid", axis)) for axis in reader.axes}
    return None if UNREADABLE in found.values() else found


def _required_table(raw: Mapping[str, Any], key: str, cls: type, reader: Reader) -> Any:  # noqa: ANN401 - an instance
    if key not in raw:
        reader.fault((key,), f"missing; need a table [{key}]")
        return UNREADABLE
    return reader.read(cls, raw[key], (key,))


def _items(raw: Mapping[str, Any], key: str, reader: Reader) -> list[Any]:
    items = raw.get(key, [])
    if not isinstance(items, list):
        reader.fault((key,), f"need a list of tables [[{key}]], got {shown(items)}")
        return []
    return items


def _shaped(raw: Mapping[str, Any], key: str, classes: Mapping[str, type], reader: Reader) -> Any:  # noqa: ANN401 - a tuple of instances
    """Read the tables of a list whose class depends on their ``shape``."""
    found = []
    for i, item in enumerate(_items(raw, key, reader)):
        path: Path = (key, i)
        table = reader.table(item, path)
        if table is None:
            found.append(UNREADABLE)
            continue
        shape = table.get("shape")
        if not isinstance(shape, str) or shape not in classes:
            what = "missing" if shape is None else f"unknown shape {shown(shape)}"
            hint = nearest(str(shape), classes) if shape is not None else (
                f"; known: {', '.join(sorted(classes))}"
            )
            reader.fault((*path, "shape"), f"{what}{hint}")
            found.append(UNREADABLE)
            continue
        value = reader.read(classes[shape], table, path, extra=("shape",))
        if value is not UNREADABLE:
            value = value if value.name else replace(value, name=f"{shape}{i}")
            for inner, message in value.faults(reader.axes):
                reader.fault((*path, *inner.split(".")), message)
        found.append(value)
    return UNREADABLE if UNREADABLE in found else tuple(found)


def _list(raw: Mapping[str, Any], key: str, cls: type, reader: Reader) -> Any:  # noqa: ANN401 - a tuple of instances
    found = []
    for i, item in enumerate(_items(raw, key, reader)):
        value = reader.read(cls, item, (key, i))
        if value is not UNREADABLE and not value.name:
            value = replace(value, name=f"{key}{i}")
        found.append(value)
    return UNREADABLE if UNREADABLE in found else tuple(found)


def _bound(piece: Any, units: UnitSystem) -> Any:  # noqa: ANN401 - a piece
    return piece if piece.drive is None else replace(piece, drive=piece.drive.bound(units.hbar))


def _spread(absorber: Any, axes: tuple[str, ...]) -> Any:  # noqa: ANN401 - an AbsorberSpec or None
    """Give every axis its own widths where one pair serves all."""
    if absorber is None or "*" not in absorber.width:
        return absorber
    return replace(absorber, width=dict.fromkeys(axes, absorber.width["*"]))

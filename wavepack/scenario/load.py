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
from wavepack.scenario.places import Places
from wavepack.scenario.reader import UNREADABLE, Reader, nearest, shown
from wavepack.scenario.rules import Draft, check_rules, sound
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
    "title",
    "units",
    "parameters",
    "particle",
    "grid",
    "potential",
    "packet",
    "absorber",
    "propagator",
    "time",
    "region",
    "detector",
    "output",
    "accuracy",
)
#: What rules see in the place of a table that could not be read.
_STAND_INS: Final[Mapping[str, Any]] = {
    "absorber": None,
    "propagator": PropagatorSpec(),
    "time": TimeSpec(),
    "output": OutputSpec(),
}


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
        text = path.read_text(encoding="utf-8-sig")
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
        lines = LineMap(text)
    except RecursionError:
        raise ScenarioError([Fault("", "not TOML: nested too deeply", None, file)]) from None
    except ValueError as error:
        raise ScenarioError(
            [Fault("", f"not TOML: {error}", syntax_line(error, text), file)]
        ) from None
    overridden, faults = apply_overrides(raw, overrides)
    places = Places(file, lines, overridden)
    reader = Reader(places, (folder or FilePath()).resolve(), UnitSystem())
    reader.faults += faults
    scenario = _read(raw, reader)
    if scenario is None:
        unique = list(dict.fromkeys(reader.faults))
        raise ScenarioError(sorted(unique, key=lambda fault: fault.line or 0))
    return scenario


def _read(raw: dict[str, Any], reader: Reader) -> Scenario | None:
    """Return the scenario, or None with every fault noted."""
    reader.known_keys(raw, TABLES, ())
    title = _title(raw.get("title", ""), reader)
    reader.units = _units(raw.get("units", {}), reader)
    reader.parameters = _parameters(raw.get("parameters", {}), reader)
    particle = _required_table(raw, "particle", ParticleSpec, reader)
    draft = _draft(raw, reader)
    check_rules(draft, reader)
    if reader.faults:
        return None
    return Scenario(
        title=title,
        units=reader.units,
        particle=reader.units.particle(particle.mass, particle.charge),
        parameters=reader.parameters,
        grid=draft.grid,
        potential=tuple(_bound(piece, reader.units) for piece in draft.potential),
        packet=tuple(draft.packet),
        absorber=draft.absorber,
        propagator=draft.propagator,
        time=draft.time,
        region=tuple(draft.region),
        detector=tuple(draft.detector),
        output=draft.output,
        accuracy=_optional_table(raw, "accuracy", AccuracySpec, reader),
        name=reader.places.file,
        raw=raw,
        places=reader.places,
    )


def _draft(raw: dict[str, Any], reader: Reader) -> Draft:
    """Read every part that rules look at; what cannot be read gets a stand-in."""
    grid = _grid(raw, reader)
    reader.axes = tuple(grid) or ("x",)
    single: dict[str, Any] = {
        "absorber": _optional_table(raw, "absorber", AbsorberSpec, reader),
        "propagator": reader.read(PropagatorSpec, raw.get("propagator", {}), ("propagator",)),
        "time": reader.read(TimeSpec, raw.get("time", {}), ("time",)),
        "output": reader.read(OutputSpec, raw.get("output", {}), ("output",)),
    }
    _optional_table(raw, "accuracy", AccuracySpec, reader)
    lists: dict[str, Any] = {
        "potential": _shaped(raw, "potential", SHAPES, reader),
        "packet": _shaped(raw, "packet", PACKETS, reader),
        "region": _list(raw, "region", RegionSpec, reader),
        "detector": _list(raw, "detector", DetectorSpec, reader),
    }
    if not raw.get("packet"):
        reader.fault(("packet",), "missing; need at least one [[packet]], the initial state")
    broken = {key for key, value in single.items() if value is UNREADABLE}
    broken |= {key for key, items in lists.items() if UNREADABLE in items}
    if not grid or UNREADABLE in grid.values():
        broken.add("grid")
    if "x" not in grid or not all(map(sound, grid.values())):
        broken.add("axes")
    single |= {key: _STAND_INS[key] for key in broken & single.keys()}
    single["absorber"] = _spread(single["absorber"], reader.axes)
    axes = {name: AxisSpec() if axis is UNREADABLE else axis for name, axis in grid.items()}
    return Draft(grid=axes, **single, **lists, broken=frozenset(broken))


def _title(raw: Any, reader: Reader) -> str:  # noqa: ANN401 - any TOML value
    if isinstance(raw, str):
        return raw
    reader.fault(("title",), f"need a text, got {shown(raw)}")
    return ""


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
            except ValueError as error:
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


def _grid(raw: Mapping[str, Any], reader: Reader) -> dict[str, Any]:
    """Return each axis in order, `UNREADABLE` in the place of a faulty one."""
    if "grid" not in raw:
        reader.fault(("grid",), "missing; need [grid] with x = { from, to, points, ends }")
        return {}
    table = reader.table(raw["grid"], ("grid",))
    if table is None:
        return {}
    reader.known_keys(table, ("x", "y"), ("grid",))
    if "x" not in table:
        reader.fault(("grid", "x"), "missing; need x = { from, to, points, ends }")
    names = tuple(axis for axis in ("x", "y") if axis in table)
    return {axis: reader.read(AxisSpec, table[axis], ("grid", axis)) for axis in names}


def _optional_table(raw: Mapping[str, Any], key: str, cls: type, reader: Reader) -> Any:  # noqa: ANN401 - an instance
    return reader.read(cls, raw[key], (key,)) if key in raw else None


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


def _shaped(
    raw: Mapping[str, Any], key: str, classes: Mapping[str, type], reader: Reader
) -> list[Any]:
    """Read the tables of a list whose class depends on their ``shape``."""
    return [
        _one_shaped(item, (key, i), classes, reader)
        for i, item in enumerate(_items(raw, key, reader))
    ]


def _one_shaped(raw: Any, path: Path, classes: Mapping[str, type], reader: Reader) -> Any:  # noqa: ANN401 - an instance
    table = reader.table(raw, path)
    if table is None:
        return UNREADABLE
    shape = table.get("shape")
    if not isinstance(shape, str) or shape not in classes:
        wanted = f"need one of {', '.join(sorted(classes))}"
        if shape is None:
            reader.fault((*path, "shape"), f"missing; {wanted}")
        else:
            hint = nearest(shape, classes) if isinstance(shape, str) else ""
            reader.fault((*path, "shape"), f"{wanted}, got {shown(shape)}{hint}")
        return UNREADABLE
    value = reader.read(classes[shape], table, path, extra=("shape",))
    if value is UNREADABLE:
        return value
    value = value if value.name else replace(value, name=f"{shape}{path[-1]}")
    found = value.faults(reader.axes)
    for inner, message in found:
        reader.fault((*path, *inner.split(".")), message)
    return UNREADABLE if found else value


def _list(raw: Mapping[str, Any], key: str, cls: type, reader: Reader) -> list[Any]:
    found = []
    for i, item in enumerate(_items(raw, key, reader)):
        value = reader.read(cls, item, (key, i))
        if value is not UNREADABLE and not value.name:
            value = replace(value, name=f"{key}{i}")
        if getattr(value, "role", "") == "held":
            value = replace(value, role="none")
        found.append(value)
    return found


def _bound(piece: Any, units: UnitSystem) -> Any:  # noqa: ANN401 - a piece
    return piece if piece.drive is None else replace(piece, drive=piece.drive.bound(units.hbar))


def _spread(absorber: Any, axes: tuple[str, ...]) -> Any:  # noqa: ANN401 - an AbsorberSpec or None
    """Give every axis its own widths where one pair serves all."""
    if absorber is None or "*" not in absorber.width:
        return absorber
    return replace(absorber, width=dict.fromkeys(axes, absorber.width["*"]))

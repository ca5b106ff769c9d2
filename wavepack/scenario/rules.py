"""Rules between the parts of a scenario that need no arrays."""

import math
from collections import Counter
from collections.abc import Iterator

from wavepack.fields import Span
from wavepack.physics.packets import ChannelPacket, Eigenstate, GaussianPacket
from wavepack.scenario.lines import Path
from wavepack.scenario.reader import Reader
from wavepack.scenario.schema import AxisSpec, DetectorSpec, Scenario

#: More points than this cannot be meant: the state alone would take 32 GiB.
MOST_POINTS = 2**31

Found = Iterator[tuple[Path, str]]


def check_rules(scenario: Scenario, reader: Reader) -> None:
    """Note every fault; rules that need numbers left out wait for them."""
    rules = [
        _left_out, _names, _propagator, _masses, _drives, _absorber, _grid, _places, _regions,
        _detectors, _time, _output,
    ]
    for rule in rules:
        for path, message in rule(scenario):
            reader.fault(path, message)


def require_numerics(scenario: Scenario) -> list[tuple[Path, str]]:
    """Return what has been left out and must be given: (path, what to give)."""
    found: list[tuple[Path, str]] = []
    for name, axis in scenario.grid.items():
        for key, value in (("from", axis.start), ("to", axis.stop), ("points", axis.points)):
            if value is None:
                found.append((("grid", name, key), f"left out; give {key} of axis {name}"))
    if scenario.propagator.step is None:
        found.append((("propagator", "step"), "left out; give the longest time step"))
    if scenario.time.end is None:
        found.append((("time", "end"), "left out; give the time when the run ends"))
    absorbing = [name for name, axis in scenario.grid.items() if "absorbing" in axis.ends]
    if absorbing:
        width = scenario.absorber.width if scenario.absorber else {}
        missing = [name for name in absorbing if name not in width]
        if missing:
            what = f"left out; axis {', '.join(missing)} has an absorbing end: give [absorber] width"
            found.append((("absorber", "width") if scenario.absorber else ("absorber",), what))
    return found


def _left_out(scenario: Scenario) -> Found:
    yield from require_numerics(scenario)


def _names(scenario: Scenario) -> Found:
    for key in ("potential", "packet", "region", "detector"):
        items = getattr(scenario, key)
        counts = Counter(item.name for item in items)
        for i, item in enumerate(items):
            if counts[item.name] > 1:
                yield (key, i, "name"), f"need names unique within {key}, got {item.name} twice"


def _propagator(scenario: Scenario) -> Found:
    spec = scenario.propagator
    if spec.method == "split-operator":
        if spec.order not in (None, 2, 4):
            yield ("propagator", "order"), f"need 2 or 4 for split-operator, got {spec.order}"
        if spec.space_order is not None:
            yield (
                ("propagator", "space_order"),
                f"belongs to crank-nicolson (split-operator is spectral), got {spec.space_order}",
            )
        return
    if spec.order not in (None, 2):
        yield (
            ("propagator", "order"),
            f"need 2 or left out for crank-nicolson (space_order may be 4), got {spec.order}",
        )
    if spec.space_order not in (None, 2, 4):
        yield ("propagator", "space_order"), f"need 2 or 4, got {spec.space_order}"


def _masses(scenario: Scenario) -> Found:
    if scenario.propagator.method != "split-operator":
        return
    for i, piece in enumerate(scenario.potential):
        layers = getattr(piece, "layers", ())
        if getattr(piece, "mass", None) is not None or any(x.mass is not None for x in layers):
            yield (
                ("potential", i, "mass"),
                "the split operator carries one mass only: "
                'set propagator.method = "crank-nicolson"',
            )


def _drives(scenario: Scenario) -> Found:
    for i, piece in enumerate(scenario.potential):
        if piece.drive is None:
            continue
        if piece.acts == "before":
            yield ("potential", i, "drive"), "a piece that acts before the start cannot be driven"
        for key, message in piece.drive.faults():
            yield ("potential", i, "drive", *key.split(".")), message


def _absorber(scenario: Scenario) -> Found:
    spec = scenario.absorber
    if spec is None:
        return
    if spec.strength is not None and spec.lowest_energy is not None:
        yield ("absorber", "strength"), "need either strength or lowest_energy, got both"
    for name in spec.width:
        if name not in scenario.grid:
            yield ("absorber", "width", name), f"need an axis of the grid, got {name}"
    for name, axis in scenario.grid.items():
        if axis.start is None or axis.stop is None or name not in spec.width:
            continue
        layers = sum(
            width
            for width, end in zip(spec.width[name], axis.ends, strict=True)
            if end == "absorbing"
        )
        if layers >= axis.stop - axis.start:
            yield (
                ("absorber", "width"),
                f"need layers narrower than axis {name} ({axis.stop - axis.start:g}), "
                f"got {layers:g} in all",
            )


def _grid(scenario: Scenario) -> Found:
    total = math.prod(axis.points or 1 for axis in scenario.grid.values())
    if total > MOST_POINTS:
        yield ("grid",), f"need at most {MOST_POINTS} points in all, got {total}"
    for name, axis in scenario.grid.items():
        if axis.start is not None and axis.stop is not None and axis.stop <= axis.start:
            yield (
                ("grid", name, "to"),
                f"need to > from = {axis.start:g}, got {axis.stop:g}",
            )


def _places(scenario: Scenario) -> Found:
    names = {piece.name for piece in scenario.potential}
    for i, packet in enumerate(scenario.packet):
        if isinstance(packet, GaussianPacket | ChannelPacket):
            for axis, value in packet.center.items():
                if not _inside(scenario.grid[axis], value):
                    yield (
                        ("packet", i, "center", axis),
                        f"need a place on axis {axis} ({_extent(scenario.grid[axis])}), "
                        f"got {value:g}",
                    )
        if isinstance(packet, Eigenstate):
            for name in packet.of:
                if name not in names:
                    known = ", ".join(sorted(names)) or "none"
                    yield ("packet", i, "of"), f"no potential is named {name}; named: {known}"


def _regions(scenario: Scenario) -> Found:
    for i, spec in enumerate(scenario.region):
        if spec.where is None and not spec.spans:
            yield ("region", i), "need its extent: x or y = { from, to }, or where"
        if spec.where is not None and spec.spans:
            yield ("region", i, "where"), "need either where or x and y, got both"
        if spec.where is not None and not spec.where.logical:
            yield (
                ("region", i, "where"),
                f"need a comparison such as x > 0, got {spec.where.text!r}",
            )
        used = set(spec.spans) | (set(spec.where.names) if spec.where else set())
        for axis in sorted(used - set(scenario.grid)):
            yield ("region", i, axis), f"need an axis of the grid, got {axis}"
        for axis, span in spec.spans.items():
            if axis in scenario.grid and not _meets(scenario.grid[axis], span):
                yield (
                    ("region", i, axis),
                    f"lies outside axis {axis} ({_extent(scenario.grid[axis])})",
                )


def _detectors(scenario: Scenario) -> Found:
    for i, spec in enumerate(scenario.detector):
        path: Path = ("detector", i)
        places = [key for key in ("x", "y") if isinstance(getattr(spec, key), float)]
        if len(places) != 1:
            yield path, "need one plane: x = at or y = at"
            continue
        axis = places[0]
        if axis not in scenario.grid:
            yield (*path, axis), f"need an axis of the grid, got {axis}"
            continue
        for other in spec.spans:
            if other not in scenario.grid:
                yield (*path, other), f"need an axis of the grid, got {other}"
        if spec.toward is not None and spec.toward[1] != axis:
            yield (
                (*path, "toward"),
                f"need +{axis} or -{axis} for a plane across {axis}, got {spec.toward}",
            )
        if spec.energies is not None and spec.energies.stop <= spec.energies.start:
            yield (*path, "energies", "to"), "need to > from"
        yield from _detector_place(scenario, spec, path)


def _detector_place(scenario: Scenario, spec: DetectorSpec, path: Path) -> Found:
    axis = scenario.grid[spec.axis]
    if not _inside(axis, spec.at):
        yield (
            (*path, spec.axis),
            f"need a place on axis {spec.axis} ({_extent(axis)}), got {spec.at:g}",
        )
        return
    if scenario.absorber is None or axis.start is None or axis.stop is None:
        return
    lower, upper = scenario.absorber.width.get(spec.axis, (0.0, 0.0))
    inner = (
        axis.start + (lower if axis.ends[0] == "absorbing" else 0.0),
        axis.stop - (upper if axis.ends[1] == "absorbing" else 0.0),
    )
    if not inner[0] <= spec.at <= inner[1]:
        yield (
            (*path, spec.axis),
            f"stands inside an absorber: need {inner[0]:g} to {inner[1]:g}, got {spec.at:g}",
        )


def _time(scenario: Scenario) -> Found:
    absorbing = any("absorbing" in axis.ends for axis in scenario.grid.values())
    if scenario.time.stop_when_left_below is not None and not absorbing:
        yield ("time", "stop_when_left_below"), "needs an absorbing end: nothing leaves this grid"
    end, step = scenario.time.end, scenario.propagator.step
    if end is not None and step is not None and end / step > 1e12:
        yield ("propagator", "step"), f"need at most 1e12 steps, got {end / step:.3g}"


def _output(scenario: Scenario) -> Found:
    fewest = min((axis.points or 2**31 for axis in scenario.grid.values()), default=1)
    if scenario.output.thin > fewest // 4:
        yield (
            ("output", "thin"),
            f"need at least 4 points left along each axis: at most {max(1, fewest // 4)}, "
            f"got {scenario.output.thin}",
        )


def _inside(axis: AxisSpec, place: float) -> bool:
    return (axis.start is None or place >= axis.start) and (
        axis.stop is None or place <= axis.stop
    )


def _meets(axis: AxisSpec, span: Span) -> bool:
    return (axis.start is None or span.upper > axis.start) and (
        axis.stop is None or span.lower < axis.stop
    )


def _extent(axis: AxisSpec) -> str:
    ends = ["?" if end is None else f"{end:g}" for end in (axis.start, axis.stop)]
    return " to ".join(ends)

"""Rules between the parts of a scenario that need no arrays."""

import math
from collections import Counter
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final, TypeAlias

from wavepack.fields import Span
from wavepack.physics.packets import ChannelPacket, Eigenstate, GaussianPacket
from wavepack.scenario.lines import Path
from wavepack.scenario.reader import UNREADABLE, Reader
from wavepack.scenario.schema import (
    AbsorberSpec,
    AxisSpec,
    DetectorSpec,
    OutputSpec,
    PropagatorSpec,
    TimeSpec,
)

#: More points than this cannot be meant: the state alone would take 32 GiB.
MOST_POINTS: Final = 2**31
#: Nor can more steps.
MOST_STEPS: Final = 1e12

Found: TypeAlias = Iterator[tuple[Path, str]]


@dataclass(frozen=True)
class Draft:
    """The parts of a scenario as far as they could be read.

    Attributes
    ----------
    grid, absorber, propagator, time, output
        As in a Scenario, or a stand-in where the part is in ``broken``.
    potential, packet, region, detector : sequence
        With `UNREADABLE` in the place of an item that could not be read.
    broken : set of str
        Names of parts that could not be read whole; "axes" where not even the
        names of the axes are known, or one leads nowhere.
    """

    grid: Mapping[str, AxisSpec]
    absorber: AbsorberSpec | None
    propagator: PropagatorSpec
    time: TimeSpec
    output: OutputSpec
    potential: Sequence[Any]
    packet: Sequence[Any]
    region: Sequence[Any]
    detector: Sequence[Any]
    broken: frozenset[str] = frozenset()

    def items(self, key: str) -> list[tuple[int, Any]]:
        """Return number and item of those of a list that could be read."""
        return [(i, x) for i, x in enumerate(getattr(self, key)) if x is not UNREADABLE]


def sound(axis: Any) -> bool:  # noqa: ANN401 - an AxisSpec or `UNREADABLE`
    """Whether an axis, as far as it could be read, leads upward."""
    if axis is UNREADABLE or axis.start is None or axis.stop is None:
        return True
    return bool(axis.start < axis.stop)


def check_rules(draft: Draft, reader: Reader) -> None:
    """Note every fault; a rule waits for the parts it needs whole."""
    for rule, needs in _RULES:
        if not draft.broken & set(needs):
            for path, message in rule(draft):
                reader.fault(path, message)


def _names(draft: Draft) -> Found:
    for key in ("potential", "packet", "region", "detector"):
        items = draft.items(key)
        counts = Counter(item.name for _, item in items)
        for i, item in items:
            if counts[item.name] > 1:
                message = (
                    f"need names unique within {key}, got {item.name} {counts[item.name]} times"
                )
                yield (key, i, "name"), message


def _propagator(draft: Draft) -> Found:
    spec = draft.propagator
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


def _masses(draft: Draft) -> Found:
    if draft.propagator.method != "split-operator":
        return
    for i, piece in draft.items("potential"):
        layers = getattr(piece, "layers", ())
        if getattr(piece, "mass", None) is not None or any(x.mass is not None for x in layers):
            yield (
                ("potential", i, "mass"),
                'the split operator carries one mass: need propagator.method = "crank-nicolson"',
            )


def _drives(draft: Draft) -> Found:
    for i, piece in draft.items("potential"):
        if piece.drive is None:
            continue
        if piece.acts == "before":
            yield ("potential", i, "drive"), "a piece that acts before the start cannot be driven"
        for key, message in piece.drive.faults():
            yield ("potential", i, "drive", *key.split(".")), message


def _absorber(draft: Draft) -> Found:
    spec = draft.absorber
    if spec is None:
        return
    if spec.strength is not None and spec.lowest_energy is not None:
        yield ("absorber", "strength"), "need either strength or lowest_energy, got both"
    if not any("absorbing" in axis.ends for axis in draft.grid.values()):
        yield ("absorber",), "no end absorbs; leave [absorber] out or set ends"
        return
    for name in spec.width:
        if name not in draft.grid:
            yield ("absorber", "width", name), f"need an axis of the grid, got {name}"
    for name, axis in draft.grid.items():
        if axis.start is None or axis.stop is None or name not in spec.width:
            continue
        absorbing = [
            width
            for width, end in zip(spec.width[name], axis.ends, strict=True)
            if end == "absorbing"
        ]
        layers = sum(absorbing)
        if not all(absorbing):
            yield ("absorber", "width"), f"need a width > 0 at each absorbing end of {name}, got 0"
        if layers >= axis.stop - axis.start:
            yield (
                ("absorber", "width"),
                f"need layers narrower than the axis {name} ({_extent(axis)}), got {layers:g}",
            )


def _grid(draft: Draft) -> Found:
    total = math.prod(axis.points or 1 for axis in draft.grid.values())
    if total > MOST_POINTS:
        yield ("grid",), f"need at most {MOST_POINTS} points in all, got {total}"
    for name, axis in draft.grid.items():
        if not sound(axis):
            yield (
                ("grid", name, "to"),
                f"need to > from = {axis.start:g}, got {axis.stop:g}",
            )


def _places(draft: Draft) -> Found:
    for i, packet in draft.items("packet"):
        if not isinstance(packet, GaussianPacket | ChannelPacket):
            continue
        names = list(draft.grid)
        if isinstance(packet, ChannelPacket):  # across its travel it fills the channel
            names = names[packet.travel : packet.travel + 1]
        for name in names:
            value = packet.center[name]
            if not _inside(draft.grid[name], value):
                wanted = f"need a place on axis {name} ({_extent(draft.grid[name])})"
                yield ("packet", i, "center", name), f"{wanted}, got {value:g}"


def _binding(draft: Draft) -> Found:
    names = {piece.name for _, piece in draft.items("potential")}
    known = ", ".join(sorted(names)) or "none"
    for i, packet in draft.items("packet"):
        if not isinstance(packet, Eigenstate):
            continue
        for name in packet.of:
            if name not in names:
                yield ("packet", i, "of"), f"no potential is named {name}; named: {known}"


def _conditions(draft: Draft) -> Found:
    for key in ("packet", "region"):
        for i, item in draft.items(key):
            if item.where is not None and not item.where.logical:
                message = f"need a comparison such as x > 0, got {item.where.text!r}"
                yield (key, i, "where"), message


def _regions(draft: Draft) -> Found:
    for i, spec in draft.items("region"):
        if spec.where is None and not spec.spans:
            yield ("region", i), "need its extent: x or y = { from, to }, or where"
        if spec.where is not None and spec.spans:
            yield ("region", i, "where"), "need either where or x and y, got both"
        used = set(spec.spans) | (set(spec.where.names) if spec.where else set())
        for axis in sorted(used - set(draft.grid)):
            yield ("region", i, axis), f"need an axis of the grid, got {axis}"
        for axis, span in spec.spans.items():
            if axis in draft.grid and not _meets(draft.grid[axis], span):
                yield (
                    ("region", i, axis),
                    f"lies outside axis {axis} ({_extent(draft.grid[axis])})",
                )


def _detectors(draft: Draft) -> Found:
    for i, spec in draft.items("detector"):
        path: Path = ("detector", i)
        places = [key for key in ("x", "y") if isinstance(getattr(spec, key), float)]
        if len(places) != 1:
            yield path, "need one plane: x = at or y = at"
            continue
        axis = places[0]
        if axis not in draft.grid:
            yield (*path, axis), f"need an axis of the grid, got {axis}"
            continue
        for other in spec.spans:
            if other not in draft.grid:
                yield (*path, other), f"need an axis of the grid, got {other}"
        if spec.toward is not None and spec.toward[1] != axis:
            yield (
                (*path, "toward"),
                f"need +{axis} or -{axis} for a plane across {axis}, got {spec.toward}",
            )
        if spec.energies is not None and spec.energies.stop <= spec.energies.start:
            start, stop = spec.energies.start, spec.energies.stop
            yield (*path, "energies", "to"), f"need to > from = {start:g}, got {stop:g}"
        yield from _detector_place(draft, spec, path)


def _detector_place(draft: Draft, spec: DetectorSpec, path: Path) -> Found:
    axis = draft.grid[spec.axis]
    if not _inside(axis, spec.at):
        yield (
            (*path, spec.axis),
            f"need a place on axis {spec.axis} ({_extent(axis)}), got {spec.at:g}",
        )
        return
    if draft.absorber is None or axis.start is None or axis.stop is None:
        return
    lower, upper = draft.absorber.width.get(spec.axis, (0.0, 0.0))
    inner = (
        axis.start + (lower if axis.ends[0] == "absorbing" else 0.0),
        axis.stop - (upper if axis.ends[1] == "absorbing" else 0.0),
    )
    if inner[0] < inner[1] and not inner[0] <= spec.at <= inner[1]:
        yield (
            (*path, spec.axis),
            f"stands inside an absorber: need {inner[0]:g} to {inner[1]:g}, got {spec.at:g}",
        )


def _time(draft: Draft) -> Found:
    absorbing = any("absorbing" in axis.ends for axis in draft.grid.values())
    if draft.time.stop_when_left_below is not None and not absorbing:
        yield ("time", "stop_when_left_below"), "needs an absorbing end: nothing leaves this grid"
    end, step = draft.time.end, draft.propagator.step
    if end is not None and step is not None and end / step > MOST_STEPS:
        yield ("propagator", "step"), f"need at most 1e12 steps, got {end / step:.3g}"


def _output(draft: Draft) -> Found:
    fewest = min((axis.points or 2**31 for axis in draft.grid.values()), default=2**31)
    if draft.output.thin > fewest // 4:
        yield (
            ("output", "thin"),
            f"need at most {max(1, fewest // 4)}, to leave 4 points, got {draft.output.thin}",
        )


def _inside(axis: AxisSpec, place: float) -> bool:
    return (axis.start is None or place >= axis.start) and (axis.stop is None or place <= axis.stop)


def _meets(axis: AxisSpec, span: Span) -> bool:
    return (axis.start is None or span.upper > axis.start) and (
        axis.stop is None or span.lower < axis.stop
    )


def _extent(axis: AxisSpec) -> str:
    ends = ["?" if end is None else f"{end:g}" for end in (axis.start, axis.stop)]
    return " to ".join(ends)


#: Every rule, and the parts it needs whole.
_RULES: Final[tuple[tuple[Callable[[Draft], Found], tuple[str, ...]], ...]] = (
    (_names, ()),
    (_propagator, ("propagator",)),
    (_masses, ("propagator",)),
    (_drives, ()),
    (_absorber, ("absorber", "axes")),
    (_grid, ()),
    (_places, ("axes",)),
    (_binding, ("potential",)),
    (_conditions, ()),
    (_regions, ("axes",)),
    (_detectors, ("axes",)),
    (_time, ("grid", "time", "propagator")),
    (_output, ("output",)),
)

"""What a scenario says, in run units: frozen, complete, free of arrays."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from wavepack.fields import Span, declare
from wavepack.grid.axis import End
from wavepack.observing.regions import Role
from wavepack.physics.absorbers import Form
from wavepack.physics.expressions import Expression
from wavepack.physics.packets import Packet
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import Piece
from wavepack.physics.units import UnitSystem
from wavepack.scenario.places import Places

ENDS = ("absorbing", "walls", "periodic")
DIRECTIONS = ("+x", "-x", "+y", "-y")


@dataclass(frozen=True)
class ParticleSpec:
    """What moves."""

    mass: float = declare("number", "mass of the particle", dimension="mass", above=0.0)
    charge: float = declare(
        "number", "charge in units of e; only matters where fields act", default=-1.0
    )


@dataclass(frozen=True)
class AxisSpec:
    """One axis of the grid."""

    start: float | None = declare(
        "number", "where the axis starts", dimension="length", key="from", default=None
    )
    stop: float | None = declare(
        "number", "where the axis stops", dimension="length", key="to", default=None
    )
    points: int | None = declare(
        "whole", "number of points", at_least=8, at_most=2**24, default=None
    )
    ends: tuple[End, End] = declare(
        "custom",
        "what stands at the ends: absorbing, walls or periodic, or a pair of two",
        default=("absorbing", "absorbing"),
    )

    @classmethod
    def read_ends(cls, raw: object, units: UnitSystem) -> tuple[End, End]:
        """Return the pair of ends of one word or a list of two.

        Raises
        ------
        ValueError
            If it is neither, or only one of the pair is periodic.
        """
        del units
        pair = [raw, raw] if isinstance(raw, str) else raw
        if not isinstance(pair, list) or len(pair) != 2 or any(e not in ENDS for e in pair):
            raise ValueError(f"need one of {', '.join(ENDS)}, or a pair of two, got {raw!r}")
        if pair.count("periodic") == 1:
            raise ValueError(f"a periodic end needs the other end periodic too, got {raw!r}")
        return (pair[0], pair[1])

    @classmethod
    def write_ends(cls, value: tuple[End, End]) -> list[str]:
        """Return the pair as `read_ends` reads it."""
        return list(value)


@dataclass(frozen=True)
class AbsorberSpec:
    """The absorbing layers."""

    width: Mapping[str, tuple[float, float]] = declare(
        "custom",
        "width of the layer at each absorbing end: one, a pair of ends, or either for each axis",
        dimension="length",
        default={},
    )
    form: Form = declare(
        "choice",
        "shape of the negative imaginary potential",
        options=("transmission-free", "polynomial"),
        default="transmission-free",
    )
    lowest_energy: float | None = declare(
        "number",
        "lowest kinetic energy to be absorbed well; default: suited to the packet",
        dimension="energy",
        above=0.0,
        default=None,
    )
    strength: float | None = declare(
        "number",
        "height scale of the layer's potential; default: suited to the packet",
        dimension="energy",
        above=0.0,
        default=None,
    )
    power: float = declare(
        "number", "power of the polynomial form", at_least=1.0, at_most=8.0, default=3.0
    )

    @classmethod
    def read_width(cls, raw: object, units: UnitSystem) -> Mapping[str, tuple[float, float]]:
        """Return widths by axis; ``"*"`` stands for every axis.

        Raises
        ------
        ValueError
            If a width is not positive or the form is none of those described.
        """
        if isinstance(raw, dict):
            unknown = [key for key in raw if key not in ("x", "y")]
            if unknown or not raw:
                raise ValueError(f"need a table with x, y, got {raw!r}")
            return {axis: _width_pair(value, units) for axis, value in raw.items()}
        return {"*": _width_pair(raw, units)}

    @classmethod
    def write_width(cls, value: Mapping[str, tuple[float, float]]) -> dict[str, list[float]]:
        """Return the widths as `read_width` reads them."""
        return {axis: list(pair) for axis, pair in value.items()}


def _width_pair(raw: object, units: UnitSystem) -> tuple[float, float]:
    pair = raw if isinstance(raw, list) else [raw, raw]
    if len(pair) != 2:
        raise ValueError(f"need one width or a pair [lower, upper], got {raw!r}")
    lower, upper = (units.convert(value, "length") for value in pair)
    # 0 is for an end of a pair that does not absorb.
    if not (lower >= 0 and upper >= 0 and lower + upper > 0):
        raise ValueError(f"need a width > 0, got {raw!r}")
    return (lower, upper)


@dataclass(frozen=True)
class PropagatorSpec:
    """How the state is stepped through time."""

    method: str = declare(
        "choice",
        "the propagator",
        options=("split-operator", "crank-nicolson"),
        default="split-operator",
    )
    order: int | None = declare(
        "whole",
        "order in time: 2 or 4 for split-operator, 2 for crank-nicolson; default: 2",
        default=None,
    )
    space_order: int | None = declare(
        "whole", "order in space of crank-nicolson: 2 or 4; default: 2", default=None
    )
    step: float | None = declare(
        "number",
        "longest time step; reduced so that whole steps reach the end",
        dimension="time",
        above=0.0,
        default=None,
    )


@dataclass(frozen=True)
class TimeSpec:
    """How long."""

    end: float | None = declare(
        "number", "when the run ends", dimension="time", above=0.0, default=None
    )
    stop_when_left_below: float | None = declare(
        "number",
        "stop at a record once less probability is left on the grid",
        above=0.0,
        below=1.0,
        default=None,
    )


@dataclass(frozen=True)
class RegionSpec:
    """A named part of space whose probability is accounted for."""

    name: str = declare("text", "its name; default: region and its number", default="")
    role: Role = declare(
        "choice",
        "what being there means; none (or held): recorded only",
        options=("transmitted", "reflected", "none", "held"),
        default="none",
    )
    x: Span = declare("span", "its extent along x", dimension="length", default=Span())
    y: Span = declare("span", "its extent along y", dimension="length", default=Span())
    where: Expression | None = declare(
        "expression", "where it is, as a comparison in `x` and `y`", default=None
    )

    @property
    def spans(self) -> dict[str, Span]:
        """Its extent along each axis that limits it."""
        return {k: s for k, s in (("x", self.x), ("y", self.y)) if s != Span()}


@dataclass(frozen=True)
class EnergyGrid:
    """Evenly spaced total energies, on the scenario's zero."""

    start: float = declare("number", "lowest energy", dimension="energy", key="from")
    stop: float = declare("number", "highest energy", dimension="energy", key="to")
    points: int = declare("whole", "how many", at_least=2, at_most=100_000, default=251)


@dataclass(frozen=True)
class DetectorSpec:
    """A plane whose flux is recorded."""

    name: str = declare("text", "its name; default: detector and its number", default="")
    x: float | Span | None = declare(
        "custom",
        "plane x = at, or limits { from, to } of a plane y = at",
        dimension="length",
        default=None,
    )
    y: float | Span | None = declare(
        "custom",
        "plane y = at, or limits { from, to } of a plane x = at",
        dimension="length",
        default=None,
    )
    toward: str | None = declare(
        "choice",
        "direction that counts as forward; default: away from where the packet starts",
        options=DIRECTIONS,
        default=None,
    )
    energies: EnergyGrid | None = declare(
        "table",
        "total energies of the spectrum; default: 251 over the packet's own",
        of=EnergyGrid,
        default=None,
    )

    @classmethod
    def read_x(cls, raw: object, units: UnitSystem) -> float | Span:
        """Return a place, or limits; see `_place`."""
        return _place(raw, units)

    @classmethod
    def read_y(cls, raw: object, units: UnitSystem) -> float | Span:
        """Return a place, or limits; see `_place`."""
        return _place(raw, units)

    @classmethod
    def write_x(cls, value: float | Span) -> float | Span:
        """Return it as it is: a number or a span."""
        return value

    @classmethod
    def write_y(cls, value: float | Span) -> float | Span:
        """Return it as it is: a number or a span."""
        return value

    @property
    def axis(self) -> str:
        """The axis that the plane crosses."""
        return "x" if isinstance(self.x, float) else "y"

    @property
    def at(self) -> float:
        """Where the plane stands [length]."""
        place = self.x if isinstance(self.x, float) else self.y
        if not isinstance(place, float):
            raise TypeError(f"detector {self.name}: no plane")
        return place

    @property
    def spans(self) -> dict[str, Span]:
        """Limits along the other axis, if any."""
        return {k: s for k, s in (("x", self.x), ("y", self.y)) if isinstance(s, Span)}


def _place(raw: object, units: UnitSystem) -> float | Span:
    """Return where a plane stands, or the limits { from, to } of one across the other axis.

    Raises
    ------
    ValueError
        If it is neither.
    """
    if not isinstance(raw, dict):
        return units.convert(raw, "length")
    if set(raw) != {"from", "to"}:
        raise ValueError(f"need a place, or limits {{ from, to }}, got {raw!r}")
    lower, upper = (units.convert(raw[key], "length") for key in ("from", "to"))
    if not lower < upper:
        raise ValueError(f"need from < to, got {lower:g} and {upper:g}")
    return Span(lower, upper)


@dataclass(frozen=True)
class OutputSpec:
    """What is kept."""

    frames: int = declare(
        "whole", "states evenly spaced from 0 to the end", at_least=2, at_most=100_000, default=200
    )
    store: str = declare(
        "choice", "what a frame holds", options=("wavefunction", "density"), default="wavefunction"
    )
    thin: int = declare("whole", "keep every n-th point along each axis", at_least=1, default=1)
    precision: Literal["single", "double"] = declare(
        "choice", "of the frames", options=("single", "double"), default="double"
    )
    record_every: float | None = declare(
        "number",
        "time between rows of the series; default: 1,000 to 2,000 rows a run",
        dimension="time",
        above=0.0,
        default=None,
    )
    checkpoint_every: float = declare(
        "custom",
        'wall-clock time between checkpoints, such as "60 s"; a bare number is in seconds',
        default=60.0,
    )

    @classmethod
    def read_checkpoint_every(cls, raw: object, units: UnitSystem) -> float:
        """Return seconds of wall-clock time.

        Raises
        ------
        ValueError
            If it is no time, or not positive.
        """
        del units
        seconds = UnitSystem(time="s").convert(raw, "time")
        if not seconds > 0:
            raise ValueError(f"need a time > 0, got {raw!r}")
        return seconds

    @classmethod
    def write_checkpoint_every(cls, value: float) -> str:
        """Return the time as `read_checkpoint_every` reads it."""
        return f"{value!r} s"


@dataclass(frozen=True)
class AccuracySpec:
    """What is asked of the numbers."""

    target: float = declare(
        "number", "absolute error wanted of probabilities", above=0.0, below=1.0
    )


@dataclass(frozen=True)
class Scenario:
    """Everything a run needs to know, in the units of ``units``."""

    title: str
    units: UnitSystem
    particle: Particle
    parameters: Mapping[str, float]
    grid: Mapping[str, AxisSpec]
    potential: tuple[Piece, ...]
    packet: tuple[Packet, ...]
    absorber: AbsorberSpec | None
    propagator: PropagatorSpec
    time: TimeSpec
    region: tuple[RegionSpec, ...]
    detector: tuple[DetectorSpec, ...]
    output: OutputSpec
    accuracy: AccuracySpec | None
    name: str = field(default="scenario", compare=False)
    raw: Mapping[str, Any] = field(default_factory=dict, compare=False, repr=False)
    places: Places = field(default_factory=Places, compare=False, repr=False)

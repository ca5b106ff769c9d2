r"""How far the box must reach: potential, packets, regions, detectors.

Along each axis the box holds every sharp edge, all places where V varies by more
than a trifle, the packets out to eight standard deviations, and the limits of
regions and detectors. Where V never ends but rises it is followed until the
packet, as :math:`\exp(-\int\kappa\,dx)`, has died away beyond it.
"""

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import Span
from wavepack.physics.shapes import AXES, Piece
from wavepack.scenario.choose_motion import SHARP, Flight, potential
from wavepack.scenario.choose_terms import path_of
from wavepack.scenario.schema import Scenario

if TYPE_CHECKING:
    from wavepack.errors import Fault

#: Standard deviations of a packet that are kept clear.
CLEAR: Final = 8.0
#: V counts as constant where it varies by less than this share of the kinetic energy.
CONSTANT: Final = 5e-3
#: Points of a probe along an axis and lines across, and how often its reach is doubled.
PROBE: Final = 4001
LINES: Final = 9
DOUBLINGS: Final = 8


@dataclass(frozen=True)
class Side:
    """How far the box reaches at one end of an axis.

    Attributes
    ----------
    place : float
        The outermost thing it must hold [length].
    thing : str
        What that is.
    closed : bool
        Whether V turns everything back before.
    """

    place: float
    thing: str
    closed: bool = False


@dataclass(frozen=True)
class Extent:
    """What one axis must hold, from end to end."""

    lower: Side
    upper: Side

    def side(self, upper: bool) -> Side:  # noqa: FBT001 - an index in disguise
        """Return one end."""
        return self.upper if upper else self.lower


class Boxes:
    """Finds the extents of the axes of a scenario.

    Attributes
    ----------
    faults : list of Fault
        What cannot be told, each with what to give.
    """

    def __init__(self, scenario: Scenario, packets: tuple[Flight, ...], target: float) -> None:
        self.scenario = scenario
        self.packets = packets
        self.depth = math.log(1 / target) / 2 + 4
        self.faults: list[Fault] = []
        self.stiffness = scenario.particle.stiffness

    @property
    def wavelength(self) -> float:
        """The longest of the packets' central waves [length]."""
        return 2 * math.pi / min(flight.central for flight in self.packets)

    @property
    def trifle(self) -> float:
        """By how much V may vary where it counts as constant [energy]."""
        return CONSTANT * self.stiffness * min(flight.central for flight in self.packets) ** 2

    def extent(self, name: str) -> Extent | None:
        """Return what an axis must hold, or None with a fault noted."""
        sides = [self._side(name, upper) for upper in (False, True)]
        if sides[0] is None or sides[1] is None:
            return None
        return Extent(sides[0], sides[1])

    def _side(self, name: str, upper: bool) -> Side | None:  # noqa: FBT001 - an index in disguise
        axis = self.scenario.grid[name]
        key = f"grid.{name}.{'to' if upper else 'from'}"
        fixed = axis.stop if upper else axis.start
        things = self.things(name)
        if fixed is not None and (not things or not self.packets):
            return Side(fixed, "the end given")
        if not self.packets:
            self._fault(key, "left out, and the packet does not say where it starts; give it")
            return None
        if not things:
            end = axis.ends[int(upper)]
            lone = "left out, and nothing lies along this axis to go by; give it"
            self._fault(key, lone if end == "absorbing" else self._unknown(end, name))
            return None
        pick = max if upper else min
        outermost = pick(things, key=lambda side: side.place)
        found = self._beyond(name, upper, outermost)
        if found is None and fixed is None:
            self._fault(key, self._unknown(axis.ends[int(upper)], name))
            return None
        return found or outermost

    def _beyond(self, name: str, upper: bool, outermost: Side) -> Side | None:  # noqa: FBT001 - an index in disguise
        """Return what lies outermost, the reach of V counted; None if it never ends."""
        pick = max if upper else min
        end = self.scenario.grid[name].ends[int(upper)]
        reach = self._varies(name, upper)
        if end == "absorbing" and math.isfinite(reach):
            varying = Side(reach, "the potential")
            return pick((outermost, varying), key=lambda side: side.place)
        turned = self._turned(name, upper)
        if turned is not None:
            side = pick((outermost, Side(turned, "")), key=lambda side: side.place)
            return Side(side.place, "where V has turned the packet back", closed=True)
        return None

    def _unknown(self, end: str, name: str) -> str:
        if end != "absorbing":
            what = "walls stand" if end == "walls" else "a period ends"
            return f"left out; {what} where you put it, for V does not close axis {name}: give it"
        return f"left out; along {name} V neither ends nor turns the packet back: give it"

    def things(self, name: str) -> list[Side]:
        """Return everything along an axis whose place is known."""
        found = []
        for flight in self.packets:
            if name in flight.center:
                reach = CLEAR * flight.sigma[name]
                found += [Side(flight.center[name] + s * reach, "the packet") for s in (-1, 1)]
        index = tuple(self.scenario.grid).index(name)
        for piece in self.scenario.potential:
            found += [Side(x, f"the edges of {piece.name}") for x in _places(piece, name, index)]
        for region in self.scenario.region:
            found += [Side(x, f"region {region.name}") for x in _ends(region.spans.get(name))]
        for detector in self.scenario.detector:
            if detector.axis == name:
                found.append(Side(detector.at, f"detector {detector.name}"))
            span = detector.spans.get(name)
            found += [Side(x, f"detector {detector.name}") for x in _ends(span)]
        return found

    def _across(self, name: str) -> RealArray | None:
        """Return places along the other axis at which V is looked at."""
        others = [other for other in self.scenario.grid if other != name]
        if not others:
            return None
        places = [side.place for side in self.things(others[0])]
        axis = self.scenario.grid[others[0]]
        places += [end for end in (axis.start, axis.stop) if end is not None]
        if not places:
            return np.zeros(1)
        centers = [f.center[others[0]] for f in self.packets if others[0] in f.center]
        spread = np.linspace(min(places), max(places), LINES)
        return np.unique(np.concatenate([spread, centers, places]))

    def mesh(self, name: str, x: RealArray) -> tuple[RealArray, ...]:
        """Return places along an axis and places across it, as an open mesh."""
        across = self._across(name)
        if across is None:
            return (x,)
        if tuple(self.scenario.grid).index(name) == 0:
            return (x[:, None], across[None, :])
        return (across[:, None], x[None, :])

    def lines(self, name: str, values: RealArray, size: int) -> RealArray:
        """Return values on a mesh as lines along an axis, shape (size, lines)."""
        index = tuple(self.scenario.grid).index(name)
        across = self._across(name)
        if across is None:
            return np.broadcast_to(values, (size,))[:, None]
        shape = (size, across.size) if index == 0 else (across.size, size)
        return np.moveaxis(np.broadcast_to(values, shape), index, 0)

    def _varies(self, name: str, upper: bool) -> float:  # noqa: FBT001 - an index in disguise
        """Return up to where V varies along an axis, infinite if it never ends."""
        sign = 1 if upper else -1
        reaches = [self._piece_varies(piece, name, sign) for piece in self._acting]
        if not reaches:
            return self.things(name)[0].place
        return max(reaches) if upper else min(reaches)

    @property
    def _acting(self) -> list[Piece]:
        return [piece for piece in self.scenario.potential if piece.acts != "before"]

    def _piece_varies(self, piece: Piece, name: str, sign: int) -> float:
        places = [side.place for side in self.things(name)]
        middle = (min(places) + max(places)) / 2
        size = max(max(places) - min(places), 10 * self.wavelength)
        for doubling in range(DOUBLINGS):
            reach = size * 2**doubling
            x = middle + sign * reach * np.linspace(-1.0, 1.0, PROBE)
            mesh = self.mesh(name, x)
            values = piece.evaluate(mesh, (SHARP,) * len(mesh), self.scenario.particle)
            lines = self.lines(name, values, x.size)
            varies = np.flatnonzero((np.abs(lines - lines[-1]) > self.trifle).any(axis=1))
            if not varies.size:
                return middle
            if varies[-1] < 0.9 * x.size:
                return float(x[varies[-1]])
        return sign * math.inf

    def _turned(self, name: str, upper: bool) -> float | None:  # noqa: FBT001 - an index in disguise
        """Return where V has let the packet die away, or None if it never does."""
        sign = 1 if upper else -1
        energy = max(flight.energy(self.stiffness) for flight in self.packets)
        start = self._lowest(name)
        for doubling in range(2 * DOUBLINGS):
            x = start + sign * self.wavelength / 8 * 2**doubling * np.linspace(0.0, 1.0, PROBE)
            values = potential(self.scenario, self.mesh(name, x))
            lowest = self.lines(name, values, x.size).min(axis=1)
            decay = np.sqrt(np.maximum(lowest - energy, 0.0) / self.stiffness)
            died = np.cumsum(decay) * abs(x[1] - x[0]) > self.depth
            # Barriers that end again do not close an axis.
            if died.any() and decay[-1] > 0 and decay[-1] >= decay[int(np.argmax(died))]:
                return float(x[int(np.argmax(died))])
        return None

    def _lowest(self, name: str) -> float:
        """Return where the packets are along an axis, else where V is lowest."""
        centers = [flight.center[name] for flight in self.packets if name in flight.center]
        if centers:
            return sum(centers) / len(centers)
        places = [side.place for side in self.things(name)]
        size = max(max(places) - min(places), self.wavelength)
        x = (min(places) + max(places)) / 2 + size * np.linspace(-1.0, 1.0, PROBE)
        values = potential(self.scenario, self.mesh(name, x))
        return float(x[int(np.argmin(self.lines(name, values, x.size).min(axis=1)))])

    def _fault(self, key: str, message: str) -> None:
        self.faults.append(self.scenario.places.fault(path_of(key), message))


def _places(piece: Piece, name: str, index: int) -> list[float]:
    """Return edges and the middle of a piece along an axis, as far as it has them."""
    found = [x for x in piece.edges(index) if math.isfinite(x)]
    at, center = getattr(piece, "at", None), getattr(piece, "center", None)
    if isinstance(at, float) and getattr(piece, "axis", AXES[0]) == name:
        found.append(at)
    if center is not None:
        extra = {**getattr(piece, "sigma", {}), **getattr(piece, "quantum", {})}
        if name in center or name in extra or not extra:
            found.append(center.get(name, 0.0))
    return found


def _ends(span: Span | None) -> list[float]:
    return [] if span is None else [x for x in (span.lower, span.upper) if math.isfinite(x)]

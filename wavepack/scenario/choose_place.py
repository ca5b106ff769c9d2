"""Where the ends of the axes go, and how wide layers fit there."""

import math
from dataclasses import replace
from typing import Final

from wavepack.errors import Fault, ScenarioError
from wavepack.scenario.choose_box import Boxes, Extent
from wavepack.scenario.choose_motion import Flight, flights
from wavepack.scenario.choose_terms import Numbers, left_out, path_of, target_of
from wavepack.scenario.schema import Scenario

#: A layer may take this share of an axis whose ends are given.
LARGEST_LAYER: Final = 0.25
#: Standard deviations that a packet that meets nothing is kept clear by at the end.
FLOWN_CLEAR: Final = 6.0


class Placing:
    """Puts the ends of the axes around what they must hold.

    Attributes
    ----------
    packets : tuple of Flight
        Packets that say where they start.
    boxes : Boxes
        What the axes must hold.
    extents : dict of axis to Extent
        The same, found.
    reasons : dict of key to str
        Why each end is where it is.

    Raises
    ------
    ScenarioError
        If the physics does not tell an end that is left out.
    """

    def __init__(self, scenario: Scenario) -> None:
        self.scenario = scenario
        self.packets = flights(scenario)
        self.boxes = Boxes(scenario, self.packets, target_of(scenario))
        self.reasons: dict[str, str] = {}
        self.extents = self._extents()

    def boxed(self, numbers: Numbers, end: float) -> Numbers:
        """Return numbers whose ends hold the extents, a margin and the layers."""
        starts, stops = {}, {}
        for name, axis in self.scenario.grid.items():
            starts[name], stops[name] = (
                self._end_of_axis(name, bool(upper), numbers, end) if fixed is None else fixed
                for upper, fixed in enumerate((axis.start, axis.stop))
            )
        return replace(numbers, starts=starts, stops=stops)

    def _end_of_axis(self, name: str, upper: bool, numbers: Numbers, end: float) -> float:  # noqa: FBT001 - an index in disguise
        side = self.extents[name].side(upper)
        sign = 1 if upper else -1
        place, thing = side.place, side.thing
        for flight in self.packets:
            ahead = self._flown(flight, name, sign, end)
            if ahead is not None and sign * ahead > sign * place:
                place, thing = ahead, "how far the packet flies by the end"
        width = numbers.widths[name][int(upper)]
        margin = 0.0 if side.closed else self.boxes.wavelength
        key = f"grid.{name}.{'to' if upper else 'from'}"
        self.reasons[key] = f"beyond {thing}" if thing[0] != "w" else thing
        if width:
            self.reasons[key] += f", an absorber of {width:g} {self.scenario.units.length}"
            self.reasons[key] += " and a wavelength between" if margin else ""
        return _outward(place + sign * (margin + width), sign, self.boxes.wavelength)

    def _flown(self, flight: Flight, name: str, sign: int, end: float) -> float | None:
        """Return where a lone packet arrives by the end, if nothing else sets the box."""
        given = self.scenario.time.end is not None
        if not given or self.scenario.potential or name not in flight.center:
            return None
        if any(side.thing != "the packet" for side in self.boxes.things(name)):
            return None
        speed = 2 * self.scenario.particle.stiffness / self.scenario.particle.hbar
        spread = speed * end / (2 * flight.sigma[name])
        sigma = math.hypot(flight.sigma[name], spread)
        return (
            flight.center[name] + speed * end * flight.wavenumber[name] + sign * FLOWN_CLEAR * sigma
        )

    def fitting(self, name: str, upper: bool, wanted: float) -> float:  # noqa: FBT001 - an index in disguise
        """Return a width no larger than an end that is given leaves room for."""
        axis = self.scenario.grid[name]
        end = axis.stop if upper else axis.start
        if end is None:
            return wanted
        place = self.extents[name].side(upper).place
        room = abs(end - place)
        outside = (place - end) * (1 if upper else -1) >= 0
        if outside or not self.packets:
            start, stop = axis.start, axis.stop
            if start is None or stop is None:
                return self._no_room(name, upper)
            room = LARGEST_LAYER * (stop - start)
        return min(wanted, room)

    def _no_room(self, name: str, upper: bool) -> float:  # noqa: FBT001 - an index in disguise
        side = self.extents[name].side(upper)
        key = f"grid.{name}.{'to' if upper else 'from'}"
        message = (
            f"leaves no room for an absorber beyond {side.thing} at {side.place:.6g}: move it "
            "outward, leave it out, or give absorber.width"
        )
        raise ScenarioError([self.scenario.places.fault(path_of(key), message)])

    def _extents(self) -> dict[str, Extent]:
        found = {name: self.boxes.extent(name) for name in self.scenario.grid}
        faults = list(self.boxes.faults)
        if not faults:
            faults += self._nothing_to_go_by()
        if faults:
            raise ScenarioError(faults)
        return {name: extent for name, extent in found.items() if extent is not None}

    def _nothing_to_go_by(self) -> list[Fault]:
        """Return the fault of a packet with nothing to meet and no time to do it in."""
        name = self.travel
        lone = all(side.thing == "the packet" for side in self.boxes.things(name))
        if not lone or self.scenario.potential or self.scenario.time.end is not None:
            return []
        ends = {f"grid.{name}.from", f"grid.{name}.to"} & set(left_out(self.scenario))
        if not ends:
            return []
        message = (
            "left out, and there is no potential, region or detector to go by: give time.end, "
            f"or both ends of axis {name}"
        )
        return [self.scenario.places.fault(path_of(min(ends)), message)]

    @property
    def travel(self) -> str:
        """The axis along which the packets move most."""
        sizes = dict.fromkeys(self.scenario.grid, 0.0)
        for flight in self.packets:
            for name, k in flight.wavenumber.items():
                sizes[name] = max(sizes[name], abs(k))
        return max(sizes, key=lambda name: sizes[name])


def _outward(place: float, sign: int, scale: float) -> float:
    """Round a place outward to a tidy number, by less than a part of a scale."""
    unit = 10.0 ** math.floor(math.log10(scale / 5))
    return float(f"{sign * math.ceil(sign * place / unit - 1e-9) * unit:.12g}")

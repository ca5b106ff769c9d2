"""A first guess at all numbers, from the packets' wave numbers alone."""

import math
from dataclasses import replace
from typing import Final

from wavepack.scenario.choose_place import LARGEST_LAYER, Placing
from wavepack.scenario.choose_steps import points_for
from wavepack.scenario.choose_terms import Numbers

#: Points of an axis where the packets' momenta are not known.
FIRST_POINTS: Final = 256
#: Steps of a run.
FIRST_STEPS: Final = 2000


def first_numbers(placing: Placing) -> Numbers:
    """Return numbers to begin with."""
    return _First(placing).numbers()


class _First:
    def __init__(self, placing: Placing) -> None:
        self.placing = placing
        self.scenario = placing.scenario
        self.packets = placing.packets

    def numbers(self) -> Numbers:
        """Return them."""
        wavelength = self.placing.boxes.wavelength if self.packets else 0.0
        widths = self._widths(2 * wavelength)
        numbers = Numbers({}, {}, {}, widths, 0.0, 0.0)
        numbers = self.placing.boxed(numbers, self.scenario.time.end or 0.0)
        points = {}
        for name, axis in self.scenario.grid.items():
            length = numbers.stops[name] - numbers.starts[name]
            spacing = length / FIRST_POINTS
            if self.packets:
                spacing = math.pi / (2 * self._fastest(name))
            points[name] = axis.points or points_for(length, spacing, walls="walls" in axis.ends)
        numbers = replace(numbers, points=points)
        end = self.scenario.time.end or self._end(numbers)
        return replace(numbers, end=end, step=self.scenario.propagator.step or end / FIRST_STEPS)

    def _fastest(self, name: str) -> float:
        """Return about the largest wave number along an axis [1/length]."""
        c = self.scenario.particle.stiffness
        energies = [
            flight.energy(c) - (flight.potential if name in flight.wavenumber else 0.0)
            for flight in self.packets
        ]
        return math.sqrt(max(*energies, c / self.placing.boxes.wavelength**2) / c)

    def _end(self, numbers: Numbers) -> float:
        name = self.placing.travel
        length = numbers.stops[name] - numbers.starts[name]
        c = self.scenario.particle.stiffness
        central = min((f.central for f in self.packets), default=math.pi / length)
        return 2 * length * self.scenario.particle.hbar / (2 * c * central)

    def _widths(self, guess: float) -> dict[str, tuple[float, float]]:
        given = self.scenario.absorber.width if self.scenario.absorber else {}
        widths = {}
        for name, axis in self.scenario.grid.items():
            pair = [guess, guess]
            if axis.start is not None and axis.stop is not None:
                most = LARGEST_LAYER * (axis.stop - axis.start)
                pair = [min(guess, most) or most / 2] * 2
            absorbing = [end == "absorbing" for end in axis.ends]
            widths[name] = given.get(name) or (pair[0] * absorbing[0], pair[1] * absorbing[1])
        return widths

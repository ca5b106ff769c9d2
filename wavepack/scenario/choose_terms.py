"""How choices of numerics are told, and what is aimed at."""

import math
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Final, TypeAlias

from wavepack.scenario.lines import Path
from wavepack.scenario.schema import AbsorberSpec, Scenario

#: The error of a probability [1] aimed at where the scenario asks for none.
UNASKED_TARGET: Final = 1e-3

Value: TypeAlias = float | int | tuple[float, float]


@dataclass(frozen=True)
class Choice:
    """One number that a scenario left out.

    Attributes
    ----------
    key : str
        Its key, such as ``grid.x.points``.
    value : number or pair
        What was chosen.
    unit : str
        Its unit; empty for a pure number.
    reason : str
        Why.
    """

    key: str
    value: Value
    unit: str
    reason: str

    @property
    def text(self) -> str:
        """Key, value and unit, as in the scenario."""
        if isinstance(self.value, tuple):
            value = f"[{', '.join(f'{number:.6g}' for number in self.value)}]"
        else:
            value = f"{self.value:.10g}"
        return f"{self.key} = {value} {self.unit}".rstrip()


def choices_text(choices: Sequence[Choice], width: int = 100) -> str:
    """Return the choices as lines of text, each with its reason."""
    size = max((len(choice.text) for choice in choices), default=0)
    lines = []
    for choice in choices:
        lines += textwrap.wrap(
            f"{choice.text.ljust(size)}  {choice.reason}",
            max(width, size + 30),
            subsequent_indent=" " * (size + 2),
        )
    return "\n".join(lines)


def path_of(key: str) -> Path:
    """Return the path of a key as it is written with ``--set``."""
    return tuple(int(part) if part.isdigit() else part for part in key.split("."))


def target_of(scenario: Scenario) -> float:
    """Return the error of a probability that the choices are made for."""
    return UNASKED_TARGET if scenario.accuracy is None else scenario.accuracy.target


def smooth_length(least: float) -> int:
    """Return the smallest product of twos, threes and fives that is not below a number."""
    wanted = max(1, math.ceil(least - 1e-9))
    best = 1 << (wanted - 1).bit_length()
    five = 1
    while five < best:
        odd = five
        while odd < best:
            quotient = -(-wanted // odd)
            best = min(best, odd << max(0, (quotient - 1).bit_length()))
            odd *= 3
        five *= 5
    return best


def left_out(scenario: Scenario) -> tuple[str, ...]:
    """Return the keys of all numbers that a scenario leaves to be chosen."""
    keys = []
    for name, axis in scenario.grid.items():
        for key, value in (("from", axis.start), ("to", axis.stop), ("points", axis.points)):
            if value is None:
                keys.append(f"grid.{name}.{key}")
    widths = scenario.absorber.width if scenario.absorber else {}
    for name, axis in scenario.grid.items():
        if "absorbing" in axis.ends and name not in widths:
            keys.append(f"absorber.width.{name}")
    if scenario.propagator.step is None:
        keys.append("propagator.step")
    if scenario.time.end is None:
        keys.append("time.end")
    return tuple(keys)


@dataclass(frozen=True)
class Numbers:
    """Numerics under way: everything a scenario may leave out.

    Attributes
    ----------
    starts, stops : dict of axis to float
        Ends of the axes [length].
    points : dict of axis to int
        Their points.
    widths : dict of axis to (float, float)
        Layers at the ends [length], 0 where none stands.
    step, end : float
        Times [time].
    """

    starts: dict[str, float]
    stops: dict[str, float]
    points: dict[str, int]
    widths: dict[str, tuple[float, float]]
    step: float
    end: float

    def spacing(self, scenario: Scenario, name: str) -> float:
        """Return the distance between points of an axis [length]."""
        walls = "walls" in scenario.grid[name].ends
        return (self.stops[name] - self.starts[name]) / (self.points[name] + walls)

    def no_worse_than(self, other: "Numbers") -> "Numbers":
        """Return the wider, finer and longer of two choices, number by number."""
        return Numbers(
            {name: min(x, other.starts[name]) for name, x in self.starts.items()},
            {name: max(x, other.stops[name]) for name, x in self.stops.items()},
            {name: max(n, other.points[name]) for name, n in self.points.items()},
            {
                name: (max(pair[0], other.widths[name][0]), max(pair[1], other.widths[name][1]))
                for name, pair in self.widths.items()
            },
            min(self.step, other.step),
            max(self.end, other.end),
        )

    def into(self, scenario: Scenario) -> Scenario:
        """Return the scenario with these numbers."""
        grid = {
            name: replace(
                axis,
                start=self.starts[name],
                stop=self.stops[name],
                points=self.points[name],
            )
            for name, axis in scenario.grid.items()
        }
        absorber = scenario.absorber
        widths = {name: pair for name, pair in self.widths.items() if max(pair) > 0}
        if widths:
            absorber = replace(absorber or AbsorberSpec(), width=widths)
        return replace(
            scenario,
            grid=grid,
            absorber=absorber,
            propagator=replace(scenario.propagator, step=self.step),
            time=replace(scenario.time, end=self.end),
        )

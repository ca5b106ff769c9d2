"""Numerics that a scenario left out, chosen to meet its accuracy.

First by simple rules from the physics alone (`choose_box`, `choose_motion`), then
again and again from the estimates of the run so set up, until nothing changes.
"""

from dataclasses import replace
from typing import Final

from wavepack.errors import ScenarioError
from wavepack.scenario.build import Setup
from wavepack.scenario.choose_end import Departure, Leaving
from wavepack.scenario.choose_first import first_numbers
from wavepack.scenario.choose_layers import least_width, spacing_for_layers, step_for_layers
from wavepack.scenario.choose_place import Placing
from wavepack.scenario.choose_sampling import sampled_spacing
from wavepack.scenario.choose_steps import bounded, points_for, wanted_spacing, wanted_step
from wavepack.scenario.choose_terms import (
    Choice,
    Numbers,
    choices_text,
    left_out,
    path_of,
    target_of,
)
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.schema import Scenario
from wavepack.scenario.verdicts import up
from wavepack.scenario.write import to_toml

__all__ = ["Choice", "choices_text", "choose", "left_out"]

#: Shares of the target that the errors of the parts may take.
SHARES: Final = {"spacing": 0.2, "step": 0.1, "layers": 0.03, "end": 0.1}
#: What comes back while a resonance still leaks adds by amplitude: layers by this better.
COHERENT: Final = 0.1
#: Rounds of refinement at most.
ROUNDS: Final = 8
#: From this round on numbers only get finer, so that they settle.
SETTLED: Final = 3


def choose(scenario: Scenario) -> tuple[Scenario, tuple[Choice, ...]]:
    """Return a scenario with nothing left out, and what was chosen and why.

    What the scenario gives stays as it is.

    Raises
    ------
    ScenarioError
        If the physics does not tell what was left out, with what to give.
    """
    if not left_out(scenario):
        return scenario, ()
    return _Search(scenario).result()


class _Search:
    """Rounds of numbers, each better than the one before."""

    def __init__(self, scenario: Scenario) -> None:
        self.scenario = scenario
        self.free = frozenset(left_out(scenario))
        self.target = target_of(scenario)
        self.placing = Placing(scenario)
        self.reasons = self.placing.reasons
        self.held = False
        self.settled = False

    def result(self) -> tuple[Scenario, tuple[Choice, ...]]:
        """Return the scenario complete, and its choices."""
        numbers = first_numbers(self.placing)
        for number in range(ROUNDS):
            former = numbers
            self.settled = number >= SETTLED
            numbers = self._better(numbers)
            if self.settled:
                numbers = numbers.no_worse_than(former)
            if numbers == former:
                break
        chosen = numbers.into(self.scenario)
        self._check(chosen)
        return chosen, tuple(self._choices(numbers))

    def _check(self, chosen: Scenario) -> None:
        """Hold the choice against the rules of every scenario."""
        try:
            parse_scenario(to_toml(chosen))
        except ScenarioError as error:
            places = self.scenario.places
            raise ScenarioError(
                [places.fault(path_of(fault.key), fault.message) for fault in error.faults]
            ) from None

    def _better(self, numbers: Numbers) -> Numbers:
        """Return numbers improved by what the estimates of a run with them say."""
        setup = Setup(numbers.into(self.scenario))
        estimates = Estimates(setup)
        numbers = replace(numbers, end=self._end(setup, estimates))
        if not self.settled:
            numbers = replace(numbers, widths=self._widths(setup, estimates, numbers))
        numbers = self.placing.boxed(numbers, numbers.end)
        numbers = replace(numbers, points=self._points(setup, estimates, numbers))
        free = [name for name in numbers.points if f"grid.{name}.points" in self.free]
        numbers, cut = bounded(numbers, free)
        if cut:
            for name in free:
                self.reasons[f"grid.{name}.points"] = "as fine as the most points chosen allow"
        return replace(numbers, step=self._step(setup, estimates, numbers))

    def _end(self, setup: Setup, estimates: Estimates) -> float:
        if self.scenario.time.end is not None:
            return self.scenario.time.end
        axis = setup.grid.axes[estimates.travel[0]]
        extent = self.placing.extents[axis.name]
        open_end = any(
            end == "absorbing" and not extent.side(bool(upper)).closed
            for upper, end in enumerate(axis.ends)
        )
        if not open_end or estimates.resting:
            why = (
                "the packet has no direction that tells when it has left"
                if open_end
                else f"nothing leaves along {axis.name}"
            )
            message = f"left out, and {why}: give it"
            raise ScenarioError([self.scenario.places.fault(("time", "end"), message)])
        leaving = Departure(setup, estimates).leaving(SHARES["end"] * self.target)
        self.reasons["time.end"] = self._why_end(leaving)
        self.held = bool(leaving.held)
        # What is turned back where none should be is seen by the forecast alone.
        _, doubted = estimates.departure(self.target / 6)
        return up(max(leaving.time, doubted) * 1.02)

    def _why_end(self, leaving: Leaving) -> str:
        units = self.scenario.units
        reason = f"all but {SHARES['end'] * self.target:.1g} of the packet has left by then"
        if leaving.held:
            longest = max(leaving.held, key=lambda held: held.lifetime)
            reason += (
                f"; a resonance {longest.energy:.4g} {units.energy} above V at the start holds "
                f"{longest.share:.1g} for {longest.lifetime:.3g} {units.time}"
            )
        return reason

    def _widths(
        self, setup: Setup, estimates: Estimates, numbers: Numbers
    ) -> dict[str, tuple[float, float]]:
        widths = dict(numbers.widths)
        goal = SHARES["layers"] * self.target * (COHERENT if self.held else 1.0)
        for layer in setup.bare_layers:
            name = setup.grid.names[layer.axis]
            if f"absorber.width.{name}" not in self.free:
                continue
            pair = list(widths[name])
            wanted = least_width(setup, estimates, layer, goal)
            pair[layer.upper] = self.placing.fitting(name, layer.upper, wanted)
            widths[name] = (pair[0], pair[1])
            self.reasons[f"absorber.width.{name}"] = (
                f"each gives back {goal:.1g} of what reaches it, or as little as any does"
            )
        return widths

    def _points(self, setup: Setup, estimates: Estimates, numbers: Numbers) -> dict[str, int]:
        goal = SHARES["spacing"] * self.target
        spacings, reasons = wanted_spacing(setup, estimates, goal)
        points = dict(numbers.points)
        for name, grain, why in zip(setup.grid.names, spacings, reasons, strict=True):
            spacing, reason = grain, why
            key = f"grid.{name}.points"
            if key not in self.free:
                continue
            index = setup.grid.index(name)
            if self.placing.packets:
                sampled = sampled_spacing(setup, estimates, self.placing.boxes, index, goal)
                if sampled < spacing:
                    spacing, reason = sampled, "V between the points must be what it is on them"
            layers = spacing_for_layers(setup, estimates, numbers.widths, goal / 4, index)
            if layers < spacing:
                spacing, reason = layers, "the absorbers, which more coarsely give back more"
            length = numbers.stops[name] - numbers.starts[name]
            walls = "walls" in self.scenario.grid[name].ends
            points[name] = points_for(length, spacing, walls=walls)
            self.reasons[key] = f"{reason}; a quick number to transform"
        return points

    def _step(self, setup: Setup, estimates: Estimates, numbers: Numbers) -> float:
        if self.scenario.propagator.step is not None:
            return self.scenario.propagator.step
        spacings = [numbers.spacing(self.scenario, name) for name in setup.grid.names]
        goal = SHARES["step"] * self.target
        layers = step_for_layers(setup, estimates, numbers.widths, goal)
        step, reason = wanted_step(setup, estimates, goal, spacings, layers)
        self.reasons["propagator.step"] = reason
        return min(step, numbers.end)

    def _choices(self, numbers: Numbers) -> list[Choice]:
        length, time = self.scenario.units.length, self.scenario.units.time
        found = []
        for key in left_out(self.scenario):
            name = key.split(".")[-1] if key.startswith("absorber") else key.split(".")[1]
            value, unit = {
                "from": (numbers.starts.get(name, 0.0), length),
                "to": (numbers.stops.get(name, 0.0), length),
                "points": (numbers.points.get(name, 0), ""),
                "step": (numbers.step, time),
                "end": (numbers.end, time),
            }.get(key.split(".")[-1], (numbers.widths.get(name, (0.0, 0.0)), length))
            found.append(Choice(key, value, unit, self.reasons.get(key, "as the packet moves")))
        return found

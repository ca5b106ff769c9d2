"""From a scenario to the objects that propagate it."""

import math
import os
from dataclasses import asdict, dataclass, field
from functools import cached_property
from typing import Any, TypeVar

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.errors import Fault, ScenarioError
from wavepack.fields import Span
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.observing.flux import FluxDetector, Spectrum
from wavepack.observing.incident import Incident, Launch, incident
from wavepack.observing.moments import momentum_density
from wavepack.observing.regions import Region, RegionBook
from wavepack.physics.absorbers import Layer, suited_strength
from wavepack.physics.edges import covered_by_span, covered_fraction
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.kinetic import SpectralKinetic, StaggeredKinetic, link_positions
from wavepack.physics.landscape import Landscape
from wavepack.physics.packets import initial_state
from wavepack.scenario.content import Content, content
from wavepack.scenario.places import placed
from wavepack.scenario.schema import DetectorSpec, RegionSpec, Scenario
from wavepack.scenario.tables import digests
from wavepack.stepping.crank_nicolson import CrankNicolson
from wavepack.stepping.schedule import Schedule, frame_steps
from wavepack.stepping.scheme import Clock, Fill, Scheme, Stepper, leave_empty
from wavepack.stepping.split_operator import SplitOperator

T = TypeVar("T")

#: Detectors keep up with this many times the largest kinetic energy expected, so
#: that what is expected lies below the taper of their band.
BAND_MARGIN = 4.0
#: Series have between this many rows and twice as many, unless told otherwise.
RECORDS = 1000
#: A detector's energies, left out, hold all but this share of the packet at either
#: end, found among so many, and so many photons more where the potential is driven.
LEFT_OUT = 1e-4
TRIAL_ENERGIES = 801
SIDEBANDS = 3
#: Fields below this many points are not worth a second thread.
THREADED_POINTS = 1 << 15


@dataclass(frozen=True)
class Choices:
    """What was chosen from the initial state; a resumed run takes it as it was.

    Attributes
    ----------
    dt, span, frames : float, float, int
        Time step, and the time over which so many frames are spread [time].
    strengths : tuple of float
        Strength of each absorbing layer [energy].
    reference : float
        Energy about which implicit steps turn [energy].
    read_every, record_every, pause_every : int
        Strides of the schedule.
    energies : dict of name to (start, stop, points)
        Energies of each detector.
    signs : dict of name to +1 or -1
        The direction along its axis that counts as forward at each detector.
    """

    dt: float
    span: float
    frames: int
    strengths: tuple[float, ...]
    reference: float
    read_every: int
    record_every: int
    pause_every: int
    energies: dict[str, tuple[float, float, int]] = field(default_factory=dict)
    signs: dict[str, float] = field(default_factory=dict)

    def as_dict(self) -> dict[str, Any]:
        """Return plain values for a file."""
        return asdict(self)

    @classmethod
    def from_dict(cls, saved: dict[str, Any]) -> "Choices":
        """Return the choices read from a file."""
        energies = {k: (v[0], v[1], int(v[2])) for k, v in saved["energies"].items()}
        return cls(**(saved | {"strengths": tuple(saved["strengths"]), "energies": energies}))


class Setup:
    """A scenario made ready: grid, Hamiltonian, initial state, scheme, schedule.

    Parameters
    ----------
    scenario : Scenario
        What was asked.
    choices : Choices, optional
        Those of an earlier process; without them they are made from the
        initial state.

    Raises
    ------
    ScenarioError
        If the potential is not finite, the initial state cannot be made, or
        regions with a role overlap.
    UsageError
        If a table cannot be read.
    """

    def __init__(self, scenario: Scenario, choices: Choices | None = None) -> None:
        with placed(scenario):
            self._prepare(scenario, choices)

    def _prepare(self, scenario: Scenario, choices: Choices | None) -> None:
        self.scenario = scenario
        self.tables = digests(scenario)
        self.particle = scenario.particle
        self.grid = Grid(
            tuple(
                Axis(
                    name,
                    given(spec.start, f"grid.{name}.from"),
                    given(spec.stop, f"grid.{name}.to"),
                    given(spec.points, f"grid.{name}.points"),
                    spec.ends,
                )
                for name, spec in scenario.grid.items()
            )
        )
        self.landscape = Landscape(self.grid, self.particle, scenario.potential)
        self.book = RegionBook(self.grid, [self._region(spec) for spec in scenario.region])
        self._check_overlap()
        if choices is None:
            steps = self.whole_steps(scenario)
            self.dt = self.end / steps
            self.choices = self._choose(steps)
        else:
            self.dt = choices.dt
            self.choices = choices
        self.steps = max(1, math.ceil(self.end / self.dt * (1 - 1e-12)))

    @staticmethod
    def whole_steps(scenario: Scenario) -> int:
        """Return how many steps, none longer than asked, reach the scenario's end."""
        end = given(scenario.time.end, "time.end")
        step = given(scenario.propagator.step, "propagator.step")
        return max(1, math.ceil(end / step * (1 - 1e-12)))

    @property
    def end(self) -> float:
        """When the run ends [time]."""
        return given(self.scenario.time.end, "time.end")

    @property
    def spectral(self) -> bool:
        """Whether the kinetic step is made in wave-number space."""
        return self.scenario.propagator.method == "split-operator"

    @cached_property
    def kinetic(self) -> SpectralKinetic | StaggeredKinetic:
        """The propagator's kinetic operator."""
        if self.spectral:
            return SpectralKinetic(self.grid, self.particle)
        masses = tuple(self._masses(axis) for axis in range(self.grid.ndim))
        order = self.scenario.propagator.space_order or 2
        return StaggeredKinetic(self.grid, self.particle, masses, order)

    @cached_property
    def hamiltonian(self) -> Hamiltonian:
        """Kinetic operator, potential and layers."""
        layers = tuple(
            Layer(
                layer.axis,
                layer.upper,
                layer.start,
                layer.stop,
                layer.form,
                strength,
                layer.power,
            )
            for layer, strength in zip(self.bare_layers, self.choices.strengths, strict=True)
        )
        return Hamiltonian(self.kinetic, self.landscape, layers)

    @cached_property
    def bare_layers(self) -> tuple[Layer, ...]:
        """Where the layers lie, their strength not yet chosen."""
        spec = self.scenario.absorber
        layers = []
        for i, axis in enumerate(self.grid.axes):
            for upper, end in enumerate(axis.ends):
                if end != "absorbing" or spec is None:
                    continue
                width = spec.width[axis.name][upper]
                start = axis.stop - width if upper else axis.start
                layers.append(
                    Layer(i, bool(upper), start, start + width, spec.form, 1.0, spec.power)
                )
        return tuple(layers)

    @cached_property
    def start(self) -> tuple[ComplexArray, float | None]:
        """The initial state, and the probability found where a packet was cut."""
        differences = None if self.spectral else self.scenario.propagator.space_order or 2
        return initial_state(
            self.scenario.packet, self.grid, self.particle, self.scenario.potential, differences
        )

    @cached_property
    def content(self) -> Content:
        """Momenta and energies of the initial state."""
        return content(self.start[0], self.grid, self.landscape)

    @cached_property
    def scheme(self) -> Scheme:
        """The propagator."""
        if self.spectral:
            return SplitOperator(4 if self.scenario.propagator.order == 4 else 2)
        return CrankNicolson()

    def bind(self, threads: int, fill: Fill = leave_empty) -> Stepper:
        """Return the stepper; ``fill`` writes the state into its array."""
        return self.scheme.bind(
            self.hamiltonian,
            self.dt,
            threads=threads,
            reference=self.choices.reference,
            fill=fill,
        )

    def hand_over(self, psi: ComplexArray) -> None:
        """Write the initial state into an array and let go of it."""
        psi[...] = self.start[0]
        self.__dict__.pop("start", None)

    def schedule(self) -> Schedule:
        """Return the stops, up to the scenario's end."""
        frames = frame_steps(self.choices.frames, self.choices.span, self.dt, self.steps * self.dt)
        return Schedule(
            self.dt,
            self.steps,
            self.choices.read_every,
            self.choices.record_every,
            self.choices.pause_every,
            frames,
        )

    @property
    def clock(self) -> Clock:
        """How fast the scheme turns stationary states."""
        cayley = not self.spectral and self.grid.ndim == 1
        return Clock(self.dt, self.particle.hbar, cayley=cayley, reference=self.choices.reference)

    def central_energy(self) -> float:
        """Return the total energy [energy] of the central momentum of the initial state.

        Mean energy less that of the momentum spread, summed over the axes.
        """
        spread = 0.0
        for axis in range(self.grid.ndim):
            k, density = momentum_density(self.start[0], self.grid, axis)
            apart = _variance(np.abs(k), density)
            speed = float(np.abs(k) @ density / density.sum())
            # Packets that move apart have no mean momentum, but their speed has little spread.
            spread += apart if apart < speed**2 / 4 else _variance(k, density)
        return self.choices.reference - self.particle.stiffness * spread

    def detectors(self, clock: Clock) -> tuple[FluxDetector, ...]:
        """Return the detectors, nothing gathered yet."""
        return tuple(self._detector(spec, clock) for spec in self.scenario.detector)

    def incidents(self) -> dict[str, Incident]:
        """Return the incident weight by energy for each detector."""
        return {
            spec.name: incident(
                self.start[0],
                self.hamiltonian,
                self.grid.index(spec.axis),
                spec.at,
                np.linspace(*self.choices.energies[spec.name]),
                self._reading(spec),
            )
            for spec in self.scenario.detector
        }

    def default_threads(self) -> int:
        """Return one thread for small fields, else the processors this process may use."""
        if self.grid.size < THREADED_POINTS:
            return 1
        return min(len(os.sched_getaffinity(0)), 8)

    @property
    def band(self) -> float:
        """Kinetic energy [energy] up to which the detectors' sampling can tell."""
        return math.pi * self.particle.hbar / (self.choices.read_every * self.dt)

    def _detector(self, spec: DetectorSpec, clock: Clock) -> FluxDetector:
        axis = self.grid.index(spec.axis)
        energies = np.linspace(*self.choices.energies[spec.name])
        return FluxDetector(
            spec.name,
            self.kinetic.plane(axis, spec.at, self.band),
            self._across(spec, axis),
            self.choices.signs[spec.name],
            self.dt,
            self.particle.hbar,
            self.choices.read_every,
            Spectrum(energies, clock.angle(energies), clock.rate(energies)),
        )

    def _reading(self, spec: DetectorSpec) -> float:
        """Where a detector reads its amplitude along its axis."""
        if self.grid.ndim > 1:
            return spec.at
        return self.kinetic.plane(0, spec.at, self.band).position

    def _across(self, spec: DetectorSpec, axis: int) -> RealArray:
        """Transverse cell size times the share of each transverse cell counted."""
        weights = np.ones(1)
        for i, line in enumerate(self.grid.axes):
            if i != axis:
                share = covered_by_span(spec.spans.get(line.name, Span()), line)
                weights = np.outer(weights, share * line.spacing).ravel()
        return weights

    def _region(self, spec: RegionSpec) -> Region:
        if spec.where is not None:
            counts, samples = covered_fraction(spec.where, self.grid)
            return Region(spec.name, spec.role, counts=counts, samples=samples)
        windows = tuple(
            covered_by_span(spec.spans.get(axis.name, Span()), axis) for axis in self.grid.axes
        )
        return Region(spec.name, spec.role, windows)

    def _check_overlap(self) -> None:
        claimed = self.book.overlap()
        if claimed > 1 + 1e-9:
            names = ", ".join(r.name for r in self.book.regions if r.role != "none")
            raise ScenarioError(
                [
                    Fault(
                        "region",
                        f"regions with a role overlap ({names}): some point is claimed "
                        f'{claimed:.3g} times; give one of them role = "none" or move its edge',
                    )
                ]
            )

    def _masses(self, axis: int) -> float | RealArray:
        """Return the mass on the links of an axis: a number if it is one everywhere."""
        lines = list(self.grid.axes)
        positions = [line.coordinates for line in lines]
        positions[axis] = link_positions(lines[axis])
        mesh = tuple(np.ix_(*positions))
        spacing = tuple(line.spacing for line in lines)
        total: float | RealArray = self.particle.mass
        for piece in self.scenario.potential:
            excess = piece.mass_excess(mesh, spacing, self.particle)
            if excess is not None and piece.acts != "before":
                total = total + excess
        if isinstance(total, np.ndarray):
            shape = [p.size for p in positions]
            return np.ascontiguousarray(np.broadcast_to(total, shape))
        return total

    def _choose(self, steps: int) -> Choices:
        strengths = tuple(self._strength(layer) for layer in self.bare_layers)
        fastest = self.content.largest_kinetic(self.landscape.lowest(self.end))
        reads = (
            math.floor(math.pi * self.particle.hbar / (BAND_MARGIN * fastest * self.dt))
            if fastest > 0
            else 1
        )
        record = self._record_every(steps)
        limit = record or max(1, steps // RECORDS)
        read = max(1, min(reads, limit)) if self.scenario.detector else limit
        if record is None:
            record = read * max(1, steps // (RECORDS * read))
        else:
            read = _divisor(record, read)
        reference = Hamiltonian(self.kinetic, self.landscape).energy(self.start[0])
        return Choices(
            self.dt,
            self.end,
            self.scenario.output.frames,
            strengths,
            reference,
            read,
            record,
            self._pause_every(),
            {spec.name: self._energies(spec) for spec in self.scenario.detector},
            {spec.name: self._sign(spec) for spec in self.scenario.detector},
        )

    def _sign(self, spec: DetectorSpec) -> float:
        if spec.toward is not None:
            return 1.0 if spec.toward.startswith("+") else -1.0
        axis = self.grid.index(spec.axis)
        away = spec.at - self.content.centre[axis]
        if abs(away) < self.grid.axes[axis].spacing:
            # The packet starts on the plane: forward is where it moves.
            k, density = momentum_density(self.start[0], self.grid, axis)
            away = float(k @ density)
        return 1.0 if away >= 0 else -1.0

    def _record_every(self, steps: int) -> int | None:
        asked = self.scenario.output.record_every
        return None if asked is None else max(1, min(round(asked / self.dt), steps))

    def _strength(self, layer: Layer) -> float:
        spec = self.scenario.absorber
        if spec is not None and spec.strength is not None:
            return spec.strength
        if spec is not None and spec.lowest_energy is not None and layer.form != "polynomial":
            return spec.lowest_energy
        inner = layer.start if layer.upper else layer.stop
        energies, weights = self.content.towards(layer.axis, self.landscape, inner)
        if spec is not None and spec.lowest_energy is not None:
            energies, weights = np.array([spec.lowest_energy]), np.array([1.0])
        closed = "walls" in self.grid.axes[layer.axis].ends
        return suited_strength(layer, energies, weights, self.particle.stiffness, closed=closed)

    def _pause_every(self) -> int:
        """Return how many steps are about a third of a second, by size alone."""
        size = self.grid.size
        cost = 2e-5 + 1e-8 * size * math.log2(size + 1) * (1 if self.spectral else 8)
        return max(1, int(0.3 / cost))

    def _energies(self, spec: DetectorSpec) -> tuple[float, float, int]:
        if spec.energies is not None:
            return (spec.energies.start, spec.energies.stop, spec.energies.points)
        axis = self.grid.index(spec.axis)
        launch = Launch(self.start[0], self.hamiltonian_bare, axis)
        k = np.array([0.0, self.content.fastest(axis)])
        kinetic = launch.kinetic.energy_of(k, axis)
        span = np.linspace(launch.levels.min(), launch.levels.max() + kinetic[1], TRIAL_ENERGIES)
        density = launch.by_energy(span, 1.0) + launch.by_energy(span, -1.0)
        share = np.cumsum(density) / max(density.sum(), 1e-300)
        low = float(span[max(int(np.searchsorted(share, LEFT_OUT)) - 1, 0)])
        high = float(span[min(int(np.searchsorted(share, 1 - LEFT_OUT)) + 1, span.size - 1)])
        photons = SIDEBANDS * max(self.content.photons, default=0.0)
        low = max(low - photons, float(self.landscape.static.min()))
        return (low, high + photons, 251)

    @cached_property
    def hamiltonian_bare(self) -> Hamiltonian:
        """The Hamiltonian without its layers."""
        return Hamiltonian(self.kinetic, self.landscape)


def given(value: T | None, key: str) -> T:
    """Return what a scenario that may be run must give.

    Raises
    ------
    ValueError
        If it has been left out, which the rules of a scenario report first.
    """
    if value is None:
        raise ValueError(f"{key}: left out")
    return value


def _variance(values: RealArray, weights: RealArray) -> float:
    total = weights.sum()
    mean = float(values @ weights / total)
    return float((values - mean) ** 2 @ weights / total)


def _divisor(number: int, limit: int) -> int:
    """Return the largest divisor of a number up to a limit."""
    return next(d for d in range(min(number, limit), 0, -1) if number % d == 0)

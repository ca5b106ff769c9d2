r"""Rough errors of a run before it is run, from the potential and the packet alone.

On one axis with a static potential the transmission is worked out twice by
slices of constant V, with and without what the scheme does to the potential;
the difference is the error. A symmetric split with V outside moves in

.. math:: V - \frac{dt^2}{24 m}\,|V'|^2

to the second order on the energy shell [Strang1968]_; edges are smoothed to the
spacing. Elsewhere the same is done to first order, for the worst line.
"""

import math
from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.observing.moments import momentum_density
from wavepack.physics.absorbers import Layer, reflection, suited_strength
from wavepack.physics.kinetic import StaggeredKinetic
from wavepack.physics.packets import ChannelPacket, GaussianPacket, launch
from wavepack.scenario.build import Setup
from wavepack.scenario.slices import Line, gathered, nearest

#: Energies towards a layer that are told apart.
LAYER_ENERGIES: Final = 48
#: A Gaussian has about 1e-9 of its probability beyond this many standard deviations.
TAIL: Final = 6.0
#: Energies that are given back by more than this share count as not absorbed.
GIVEN_BACK: Final = 0.1
#: Measured on barriers of 1 to 4 nm: what order 4 leaves of the error of order 2, per
#: (dt times the fastest oscillation)^2; and the error of edges smoothed to dx in
#: (V/c)^2 dx^3/k.
ORDER_4_SHARE: Final = 0.5
EDGE_SHARE: Final = 0.03


@dataclass(frozen=True)
class LayerForecast:
    """What one absorbing layer gives back.

    Attributes
    ----------
    layer : Layer
        The layer.
    mean, worst : float
        Share given back: averaged over the energies that arrive before the end,
        and the worst of those with more than 1e-4 of the largest weight.
    slow : float
        Weight of energies that are given back by more than a tenth.
    kinetic : float
        Mean kinetic energy towards the layer [energy].
    """

    layer: Layer
    mean: float
    worst: float
    slow: float
    kinetic: float


class Estimates:
    """Numbers about a run that has been set up but not started."""

    def __init__(self, setup: Setup) -> None:
        self.setup = setup
        self.c = setup.particle.stiffness
        self.hbar = setup.particle.hbar

    @cached_property
    def fastest(self) -> tuple[float, ...]:
        """Largest wave number [1/length] of the packet along each axis, at its launch.

        A momentum that the grid cannot hold shows up as a smaller one, so what
        the scenario says of its packets is asked too.
        """
        setup = self.setup
        found = [setup.content.fastest(i) for i in range(setup.grid.ndim)]
        for packet in setup.scenario.packet:
            if not isinstance(packet, GaussianPacket | ChannelPacket):
                continue
            start = launch(packet, setup.grid, setup.particle, setup.scenario.potential)
            for i, name in enumerate(setup.grid.names):
                sigma = packet.sigma.get(name)
                if sigma is not None and start.travel in (None, i):
                    said = abs(start.wavevector[i]) + TAIL / (2 * sigma)
                    found[i] = max(found[i], said)
        return tuple(found)

    @cached_property
    def gain(self) -> float:
        """Kinetic energy [energy] that the deepest well and the drives can add."""
        content = self.setup.content
        gain = max(content.launch - self.setup.landscape.lowest(self.end), 0.0)
        return gain + 10 * max(content.photons, default=0.0)

    @cached_property
    def steepest(self) -> tuple[float, ...]:
        """Largest wave number [1/length] anywhere along each axis."""
        return tuple(math.sqrt(k**2 + self.gain / self.c) for k in self.fastest)

    @cached_property
    def largest_energy(self) -> float:
        """Largest kinetic energy of the packet anywhere [energy]."""
        return self.c * sum(k**2 for k in self.fastest) + self.gain

    @cached_property
    def central(self) -> float:
        """Root mean square wave number [1/length], over all axes."""
        return math.sqrt(max(self.setup.content.kinetic, 1e-300) / self.c)

    @cached_property
    def travel(self) -> tuple[int, float]:
        """The axis along which the packet moves most, and +1 or -1."""
        axis = int(np.argmax(np.abs(self._means)))
        return axis, math.copysign(1.0, self._means[axis])

    @property
    def _drift(self) -> float:
        """Largest mean momentum along an axis, without sign [1/length]."""
        return max(abs(mean) for mean in self._means)

    @cached_property
    def _means(self) -> list[float]:
        """Mean momentum along each axis [1/length]."""
        means = []
        for axis in range(self.setup.grid.ndim):
            k, density = momentum_density(self.setup.start[0], self.setup.grid, axis)
            mean = float(k @ density / density.sum())
            if self.setup.grid.axes[axis].basis == "sine":
                mean = self._current(axis)
            means.append(mean)
        return means

    @cached_property
    def grid_energy(self) -> float:
        """Largest kinetic energy on the grid [energy]."""
        return self.c * sum(axis.largest_wavenumber**2 for axis in self.setup.grid.axes)

    @cached_property
    def edged(self) -> tuple[bool, ...]:
        """For each axis whether V jumps along it, as far as known."""
        pieces = [piece for piece in self.setup.scenario.potential if piece.acts != "before"]
        return tuple(
            any(piece.sharp and (piece.cell_sampled or piece.edges(i)) for piece in pieces)
            for i in range(self.setup.grid.ndim)
        )

    @cached_property
    def fastest_kicked(self) -> float:
        """Largest kinetic energy [energy] that edges can kick to: along one of their axes.

        Without edges that of the whole grid.
        """
        axes = [a for a, edged in zip(self.setup.grid.axes, self.edged, strict=True) if edged]
        if not axes:
            return self.grid_energy
        return self.c * max(axis.largest_wavenumber for axis in axes) ** 2

    @cached_property
    def phase(self) -> float:
        r"""Phase per step, :math:`E dt/\hbar`, of the fastest wave that edges can kick to."""
        return self.setup.dt * self.fastest_kicked / self.hbar

    @cached_property
    def own_phase(self) -> float:
        r"""Phase per step of all but 1e-4 of the packet, :math:`E dt/\hbar`."""
        content = self.setup.content
        fast = sum(content.slowest(i, 1 - 1e-4) ** 2 for i in range(self.setup.grid.ndim))
        return self.setup.dt * (self.c * fast + self.gain) / self.hbar

    @cached_property
    def uniform(self) -> bool:
        """Whether V is the same everywhere and always: every step is then exact."""
        return float(np.ptp(self._reached)) == 0.0

    def near_limit(self, axis: int) -> float:
        """Return the share of the packet in the last tenth of the grid's wave numbers."""
        limit = self.setup.grid.axes[axis].largest_wavenumber
        k, w = self.setup.content.wavenumbers[axis], self.setup.content.weights[axis]
        return float(w[k > 0.9 * limit].sum())

    @cached_property
    def jump(self) -> tuple[float, ...]:
        """Largest jump of V [energy] at a sharp edge, along each axis."""
        return tuple(
            self._largest(np.abs(_apart(self._reached, axis, 5))) if edged else 0.0
            for axis, edged in enumerate(self.edged)
        )

    @cached_property
    def resonance(self) -> float:
        r"""Probability kicked by sharp edges to waves that the step cannot tell apart.

        .. math:: \frac12\sum_{n,\pm} \frac{|V_q f(q)|^2}{4 c^2 k k'}, \qquad
            c k'^2 = c k^2 + 2\pi n\hbar/dt,\ q = k' \mp k,\ V_q = V/q

        with f the spectrum of the smoothed edge. Zero for smooth potentials,
        for steps below resonance and for implicit steps.
        """
        if not self.setup.spectral or not any(self.edged):
            return 0.0
        quantum = 2 * math.pi * self.hbar / self.setup.dt
        total = 0.0
        for jump, line in zip(self.jump, self.setup.grid.axes, strict=True):
            most = int((line.largest_wavenumber**2 - self.central**2) * self.c / quantum)
            n = np.arange(1, min(most, 100_000) + 1)
            fast = np.sqrt(self.central**2 + n * quantum / self.c)
            for sign in (1, -1):
                q = fast - sign * self.central
                z = (q * line.spacing) ** 2
                edge = jump / q * np.exp(-z / 2) * (1 + z / 2)
                total += float(np.sum(edge**2 / (8 * self.c**2 * self.central * fast)))
        return min(total, 1.0)

    @cached_property
    def step_error(self) -> float:
        """Error of a probability from the time step, resonance apart."""
        if not self.setup.spectral:
            return self._implicit_step_error
        second = self._split_error
        if self.setup.scenario.propagator.order != 4:
            return second
        fastest = max(
            self._largest(np.abs(_curvature(self._reached, i))) / line.spacing**2
            for i, line in enumerate(self.setup.grid.axes)
        )
        oscillation = 2 * self.c / self.hbar**2 * fastest * self.setup.dt**2
        return second * min(1.0, ORDER_4_SHARE * oscillation)

    @property
    def second_order(self) -> float:
        """Error of a probability from the step of a split of order 2, resonance apart."""
        return self._split_error

    @cached_property
    def spacing_error(self) -> float:
        """Error of a probability from the spacing: smoothed edges, differences."""
        if self._line is not None and not any(
            piece.cell_sampled for piece in self.setup.scenario.potential
        ):
            edges = self._line.compare(self._line.edges_sharp, self._line.edges_smoothed)
        else:
            edges = sum(
                EDGE_SHARE * (jump / self.c) ** 2 * line.spacing**3 / self.central
                for jump, line in zip(self.jump, self.setup.grid.axes, strict=True)
            )
        return min(edges + self._difference_error, 1.0)

    @cached_property
    def layers(self) -> tuple[LayerForecast, ...]:
        """What each absorbing layer gives back."""
        return tuple(self._layer(layer) for layer in self.setup.hamiltonian.layers)

    @cached_property
    def start_in_layers(self) -> float:
        """Probability that starts inside the absorbers."""
        density = np.abs(self.setup.start[0]) ** 2 * self.setup.grid.cell
        free = np.ones([1] * self.setup.grid.ndim)
        for i, axis in enumerate(self.setup.grid.axes):
            x = axis.coordinates
            outside = np.ones(axis.points)
            for layer in self.setup.bare_layers:
                if layer.axis == i:
                    outside[(x >= layer.start) & (x <= layer.stop)] = 0.0
            free = free * self.setup.grid.along(outside, i)
        return float(np.sum(density * (1 - free)))

    def wide_enough(self, forecast: LayerForecast, goal: float) -> float | None:
        """Return a width [length] at which a layer gives back less than a goal."""
        layer = forecast.layer
        energies, weights = self.arriving(layer)
        for factor in (1.25, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0, 12.0):
            wider = Layer(
                layer.axis, layer.upper, 0.0, layer.width * factor, layer.form, 1.0, layer.power
            )
            closed = self.closed(layer)
            strength = suited_strength(wider, energies, weights, self.c, closed=closed)
            wider = Layer(
                layer.axis, layer.upper, 0.0, wider.width, layer.form, strength, layer.power
            )
            back = reflection(wider, energies, self.c, closed=closed)
            if float(back @ weights) < goal:
                return wider.width
        return None

    def layer_slope(self, forecast: LayerForecast) -> float:
        """Return how much the static V varies through a layer [energy], where it is reached."""
        layer = forecast.layer
        x = self.setup.grid.axes[layer.axis].coordinates
        inside = (x >= layer.start) & (x <= layer.stop)
        if not inside.any():
            return 0.0
        values = np.moveaxis(self.setup.landscape.static, layer.axis, 0)[inside]
        lowest = values.min(axis=0)
        reached = lowest <= self.setup.content.launch + self.largest_energy
        return float(np.max(np.ptp(values, axis=0), where=reached, initial=0.0))

    @cached_property
    def resting(self) -> bool:
        """Whether the packet has no direction: what it does next is not in its momenta."""
        return self._drift**2 < 0.1 * self.central**2

    def departure(self, share: float) -> tuple[float, float]:
        """Return the share too slow to leave by the end, and the time until a share is left.

        The path is to the farther absorbing end, or to what turns the packet
        back and from there to the nearer one, at the speed of the launch.
        """
        axis, sign = self.travel
        line = self.setup.grid.axes[axis]
        if "absorbing" not in line.ends or self.resting:
            return 0.0, 0.0
        path = self._path(axis, sign)
        speed = 2 * self.c / self.hbar
        k, w = self.setup.content.wavenumbers[axis], self.setup.content.weights[axis]
        slow = float(w[k < path / (speed * self.end)].sum())
        slowest = max(self.setup.content.slowest(axis, share), 1e-6 * self.central)
        return slow, path / (speed * slowest)

    @property
    def end(self) -> float:
        """When the run ends [time]."""
        return self.setup.dt * self.setup.steps

    def _current(self, axis: int) -> float:
        """Mean momentum along an axis of standing waves [1/length]."""
        from wavepack.grid import spectral  # noqa: PLC0415 - loads the transforms

        psi = self.setup.start[0]
        slope = spectral.slope(psi, self.setup.grid.axes[axis], axis)
        return self.setup.grid.inner(psi, slope).imag

    def _path(self, axis: int, sign: float) -> float:
        line = self.setup.grid.axes[axis]
        centre = self.setup.content.centre[axis]
        ahead = line.stop - centre if sign > 0 else centre - line.start
        behind = line.length - ahead
        ends = line.ends if sign > 0 else line.ends[::-1]
        along = np.moveaxis(self.setup.landscape.static, axis, 0).reshape(line.points, -1)
        changed = np.abs(along - along[nearest(line.coordinates, centre)]).max(axis=1)
        forward = sign * (line.coordinates - centre)
        met = forward[(changed > 1e-3 * self.setup.content.kinetic) & (forward > 0)]
        back = (2 * float(met.min()) if met.size else math.inf) + behind
        if ends[1] != "absorbing":
            back = 2 * ahead + behind
        paths = [ahead] * (ends[1] == "absorbing") + [back] * (ends[0] == "absorbing")
        return max((p for p in paths if math.isfinite(p)), default=ahead)

    def closed(self, layer: Layer) -> bool:
        """Return whether a wall stands behind a layer."""
        return "walls" in self.setup.grid.axes[layer.axis].ends

    def arriving(self, layer: Layer) -> tuple[RealArray, RealArray]:
        """Return the energies that reach a layer before the end, and their weights."""
        inner = layer.start if layer.upper else layer.stop
        content = self.setup.content
        energies, weights = content.towards(layer.axis, self.setup.landscape, inner)
        # Half the way: what scatters to it may start from nearer than the packet does.
        way = abs(inner - content.centre[layer.axis]) / 2
        speeds = 2 * np.sqrt(self.c * np.maximum(energies, 0.0)) / self.hbar
        arrives = speeds * self.end > way
        if not arrives.any():
            return energies[-1:], np.zeros(1)
        share = float(weights[arrives].sum())
        energies, weights = gathered(energies[arrives], weights[arrives], LAYER_ENERGIES)
        return energies, share * weights

    def _layer(self, layer: Layer) -> LayerForecast:
        energies, weights = self.arriving(layer)
        back = reflection(layer, energies, self.c, closed=self.closed(layer))
        present = weights > 1e-4 * weights.max()
        worst = float(back[present].max()) if present.any() else 0.0
        total = max(float(weights.sum()), 1e-300)
        return LayerForecast(
            layer,
            float(back @ weights),
            worst,
            float(weights[back > GIVEN_BACK].sum()),
            float(energies @ weights) / total,
        )

    @cached_property
    def _reached(self) -> RealArray:
        """V that acts at any time [energy], cut off at twice the mean kinetic energy.

        What stands higher acts as a wall: how high no longer matters (measured on a
        screen with apertures, ten times as high).
        """
        values = self.setup.landscape.static
        if self.setup.landscape.driven:
            values = values.copy()
            for part in self.setup.landscape.driven:
                values[part.box] += part.drive.largest(self.end) * part.values
        highest = self.setup.content.launch + 2 * self.setup.content.kinetic
        return np.minimum(values, highest)

    def _largest(self, values: RealArray) -> float:
        return float(values.max()) if values.size else 0.0

    @cached_property
    def _line(self) -> Line | None:
        """The line of a static potential in one dimension, else None."""
        if self.setup.grid.ndim > 1 or self.setup.landscape.driven:
            return None
        kinetic = self.setup.kinetic
        if isinstance(kinetic, StaggeredKinetic) and not isinstance(kinetic.masses[0], float):
            return None
        return Line(self.setup, self.travel[1])

    @cached_property
    def _split_error(self) -> float:
        r"""Error of the split to first order, :math:`dt^2 \int V'^2 dx / 48\hbar^2 k`."""
        if self._line is not None:
            return self._line.compare(self._line.static, self._line.split(self.setup.dt))
        worst = 0.0
        for axis, line in enumerate(self.setup.grid.axes):
            slopes = np.diff(self._reached, axis=axis) ** 2 / line.spacing
            worst += self._largest(slopes.sum(axis=axis))
        return min(1.0, self.setup.dt**2 * worst / (48 * self.hbar**2 * self.central))

    @cached_property
    def _implicit_step_error(self) -> float:
        """Cayley steps of a static line keep its stationary states: only times are off."""
        if self.setup.grid.ndim == 1 and not self.setup.landscape.driven:
            return 0.0
        turned = (self.setup.content.kinetic * self.setup.dt / self.hbar) ** 2 / 12
        split = self._split_error if self.setup.grid.ndim > 1 else 0.0
        return min(1.0, turned * self._sensitivity + split)

    @cached_property
    def _difference_error(self) -> float:
        """What differences change: the energy of a wave number, by a share of it."""
        if self.setup.spectral:
            return 0.0
        share = 0.0
        for i, line in enumerate(self.setup.grid.axes):
            k, w = self.setup.content.wavenumbers[i], self.setup.content.weights[i]
            z = (float(k**2 @ w) + self.gain / self.c) * line.spacing**2
            fourth = self.setup.scenario.propagator.space_order == 4
            share += 3 / 320 * z**2 if fourth else z / 12
        return share * self._sensitivity

    @cached_property
    def _sensitivity(self) -> float:
        """|dT/d ln E|, averaged over the packet; 1 where it is not known."""
        if self._line is not None:
            return self._line.sensitivity
        return 0.0 if self.uniform else 1.0


def _apart(values: RealArray, axis: int, steps: int) -> RealArray:
    """Return the difference between points some steps apart along an axis."""
    lines = np.moveaxis(values, axis, 0)
    return lines[steps:] - lines[:-steps]


def _curvature(values: RealArray, axis: int) -> RealArray:
    return np.diff(values, n=2, axis=axis)

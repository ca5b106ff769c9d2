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

#: Energies of a packet that are told apart.
ENERGIES: Final = 160
LAYER_ENERGIES: Final = 48
#: Slices a spacing for a potential with sharp edges.
SLICES: Final = 4
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
        Share given back: averaged over the energies expected, and the worst of
        those with more than 1e-4 of the largest weight.
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
        gain = max(content.launch - self.setup.landscape.lowest, 0.0)
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
        means = []
        for axis in range(self.setup.grid.ndim):
            k, density = momentum_density(self.setup.start[0], self.setup.grid, axis)
            mean = float(k @ density / density.sum())
            if self.setup.grid.axes[axis].basis == "sine":
                mean = self._current(axis)
            means.append(mean)
        axis = int(np.argmax(np.abs(means)))
        return axis, math.copysign(1.0, means[axis])

    @cached_property
    def grid_energy(self) -> float:
        """Largest kinetic energy on the grid [energy]."""
        return self.c * sum(axis.largest_wavenumber**2 for axis in self.setup.grid.axes)

    @cached_property
    def phase(self) -> float:
        r"""Phase per step of the fastest wave of the grid, :math:`E dt/\hbar`."""
        return self.setup.dt * self.grid_energy / self.hbar

    @cached_property
    def own_phase(self) -> float:
        r"""Phase per step of the fastest part of the packet, :math:`E dt/\hbar`."""
        return self.setup.dt * self.largest_energy / self.hbar

    @cached_property
    def jump(self) -> tuple[float, ...]:
        """Largest jump of V [energy] at a sharp edge, along each axis."""
        if not self.setup.landscape.sharp:
            return (0.0,) * self.setup.grid.ndim
        return tuple(
            self._largest(np.abs(_apart(self._reached, axis, 5)))
            for axis in range(self.setup.grid.ndim)
        )

    @cached_property
    def resonance(self) -> float:
        r"""Probability kicked by sharp edges to waves that the step cannot tell apart.

        .. math:: \frac12\sum_{n,\pm} \frac{|V_q f(q)|^2}{4 c^2 k k'}, \qquad
            c k'^2 = c k^2 + 2\pi n\hbar/dt,\ q = k' \mp k,\ V_q = V/q

        with f the spectrum of the smoothed edge. Zero for smooth potentials,
        for steps below resonance and for implicit steps.
        """
        if not self.setup.spectral or not self.setup.landscape.sharp:
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

    def wide_enough(self, forecast: LayerForecast, goal: float) -> float | None:
        """Return a width [length] at which a layer gives back less than a goal."""
        layer = forecast.layer
        energies, weights = self._towards(layer)
        for factor in (1.25, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0, 12.0):
            wider = Layer(
                layer.axis, layer.upper, 0.0, layer.width * factor, layer.form, 1.0, layer.power
            )
            closed = self._closed(layer)
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
    def slow_share(self) -> tuple[float, float]:
        """Share of the packet too slow to leave by the end, and the time it would take [time].

        The path is to the farther absorbing end, or to what turns the packet
        back and from there to the nearer one, at the speed of the launch.
        """
        axis, sign = self.travel
        line = self.setup.grid.axes[axis]
        if "absorbing" not in line.ends:
            return 0.0, 0.0
        path = self._path(axis, sign)
        speed = 2 * self.c / self.hbar
        k, w = self.setup.content.wavenumbers[axis], self.setup.content.weights[axis]
        slow = float(w[k < path / (speed * self.setup.scenario.time.end)].sum())
        slowest = max(self.setup.content.slowest(axis), 1e-6 * self.central)
        return slow, path / (speed * slowest)

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
        changed = np.abs(along - along[_nearest(line.coordinates, centre)]).max(axis=1)
        forward = sign * (line.coordinates - centre)
        met = forward[(changed > 1e-3 * self.setup.content.kinetic) & (forward > 0)]
        back = (2 * float(met.min()) if met.size else math.inf) + behind
        if ends[1] != "absorbing":
            back = 2 * ahead + behind
        paths = [ahead] * (ends[1] == "absorbing") + [back] * (ends[0] == "absorbing")
        return max((p for p in paths if math.isfinite(p)), default=ahead)

    def _closed(self, layer: Layer) -> bool:
        return "walls" in self.setup.grid.axes[layer.axis].ends

    def _towards(self, layer: Layer) -> tuple[RealArray, RealArray]:
        inner = layer.start if layer.upper else layer.stop
        energies, weights = self.setup.content.towards(layer.axis, self.setup.landscape, inner)
        return gathered(energies, weights, LAYER_ENERGIES)

    def _layer(self, layer: Layer) -> LayerForecast:
        energies, weights = self._towards(layer)
        back = reflection(layer, energies, self.c, closed=self._closed(layer))
        present = weights > 1e-4 * weights.max()
        return LayerForecast(
            layer, float(back @ weights), float(back[present].max()),
            float(weights[back > GIVEN_BACK].sum()), float(energies @ weights),
        )

    @cached_property
    def _reached(self) -> RealArray:
        """V that acts at any time [energy], cut off where the packet cannot get."""
        values = self.setup.landscape.static
        if self.setup.landscape.driven:
            values = values.copy()
            for part in self.setup.landscape.driven:
                values[part.box] += part.drive.largest() * part.values
        highest = self.setup.content.launch + 3 * self.largest_energy
        return np.minimum(values, highest)

    def _largest(self, values: RealArray) -> float:
        return float(values.max()) if values.size else 0.0

    @cached_property
    def _line(self) -> "Line | None":
        """The line of a static potential in one dimension, else None."""
        if self.setup.grid.ndim > 1 or self.setup.landscape.driven:
            return None
        kinetic = self.setup.kinetic
        if isinstance(kinetic, StaggeredKinetic) and not isinstance(kinetic.masses[0], float):
            return None
        return Line(self.setup, self.travel[1])

    @cached_property
    def _split_error(self) -> float:
        r"""First order of the split: :math:`dt^2 \int V'^2 dx / 48\hbar^2 k`, or both ways in 1D."""
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
        return 1.0 if float(np.ptp(self._reached)) > 0 else 0.0


class Line:
    """Transmission of a packet through a potential on a line, by slices of constant V.

    Parameters
    ----------
    setup : Setup
        On one axis, static.
    sign : float
        +1 or -1: where the packet moves.
    """

    def __init__(self, setup: Setup, sign: float) -> None:
        self._setup = setup
        self._sign = int(sign)
        self._axis = setup.grid.axes[0]
        self._c = setup.particle.stiffness
        k, w = setup.content.wavenumbers[0], setup.content.weights[0]
        self._energies, self._weights = gathered(self._c * k**2, w, ENERGIES)
        self.static = self._ahead(setup.landscape.static)

    def split(self, dt: float) -> RealArray:
        """Return the potential that a symmetric split moves in [energy]."""
        slope = np.gradient(self._setup.landscape.static, self._axis.spacing)
        shift = dt**2 * self._c / (12 * self._setup.particle.hbar**2) * slope**2
        return self._ahead(self._setup.landscape.static - shift)

    @cached_property
    def edges_smoothed(self) -> RealArray:
        """V as on the grid, on finer slices [energy]."""
        return self._finer(self._axis.spacing)

    @cached_property
    def edges_sharp(self) -> RealArray:
        """V with sharp edges, on finer slices [energy]."""
        if not self._setup.landscape.sharp:
            return self.edges_smoothed
        return self._finer(self._axis.spacing / SLICES)

    def compare(self, one: RealArray, other: RealArray) -> float:
        """Return by how much the packet's transmission differs between two potentials."""
        if one is other or np.array_equal(one, other):
            return 0.0
        thickness = self._axis.spacing * len(self.static) / len(one)
        a, b = (self._transmission(v, thickness, self._energies) for v in (one, other))
        return float(abs((a - b) @ self._weights))

    @cached_property
    def sensitivity(self) -> float:
        """|dT/d ln E|, averaged over the packet."""
        a, b = (
            self._transmission(self.static, self._axis.spacing, self._energies * factor)
            for factor in (0.99, 1.01)
        )
        return float(np.abs(b - a) @ self._weights) / 0.02

    def _ahead(self, values: RealArray) -> RealArray:
        """Return the part of V between the packet's centre and the end it moves to."""
        here = _nearest(self._axis.coordinates, self._setup.content.centre[0])
        return values[here:] if self._sign > 0 else values[here::-1]

    def _finer(self, width: float) -> RealArray:
        """Return V on `SLICES` slices a spacing with its edges smoothed to a width."""
        fine = self._axis.spacing / SLICES
        x = self._axis.coordinates[0] + fine * np.arange(self._axis.points * SLICES)
        total = np.zeros(x.size)
        for piece in self._setup.landscape.static_pieces:
            total += piece.evaluate((x,), (width,), self._setup.particle)
        here = SLICES * _nearest(self._axis.coordinates, self._setup.content.centre[0])
        return total[here:] if self._sign > 0 else total[here::-1]

    def _transmission(
        self, values: RealArray, thickness: float, kinetic: RealArray
    ) -> RealArray:
        """Return T at kinetic energies of the launch, from the first slice to the last."""
        energy = kinetic + values[0]
        k = np.sqrt((energy[:, None] - _trimmed(values)) / self._c + 0j)
        k[np.abs(k) < 1e-9] = 1e-9
        cos, sin = np.cos(k * thickness), np.sin(k * thickness)
        inside, beyond = k[:, 0], k[:, -1]
        psi, slope = np.ones(energy.size, dtype=complex), 1j * beyond
        size = np.zeros(energy.size)
        for i in range(k.shape[1] - 2, 0, -1):
            q, c, s = k[:, i], cos[:, i], sin[:, i]
            psi, slope = c * psi - s / q * slope, q * s * psi + c * slope
            if i % 32 == 0:
                scale = np.abs(psi) + np.abs(slope)
                psi, slope = psi / scale, slope / scale
                size += np.log(scale)
        incoming = (psi + slope / (1j * inside)) / 2
        flux = np.where(beyond.imag == 0, (beyond / inside).real, 0.0)
        with np.errstate(under="ignore"):
            return np.asarray(flux * np.exp(-2 * size) / np.abs(incoming) ** 2)


def gathered(energies: RealArray, weights: RealArray, count: int) -> tuple[RealArray, RealArray]:
    """Gather weighted energies into at most a number of them; weights add to one."""
    if energies.size <= count:
        return energies, weights / weights.sum()
    root = np.sqrt(np.maximum(energies, 0.0))
    edges = np.linspace(root.min(), root.max(), count + 1)
    weight, _ = np.histogram(root, edges, weights=weights)
    first, _ = np.histogram(root, edges, weights=weights * energies)
    keep = weight > 0
    return first[keep] / weight[keep], weight[keep] / weight.sum()


def _trimmed(values: RealArray) -> RealArray:
    """Drop what is constant at both ends but for one slice each."""
    differs = np.flatnonzero(np.abs(np.diff(values)) > 1e-14 * max(np.ptp(values), 1e-300))
    if not differs.size:
        return np.repeat(values[:1], 3)
    return values[differs[0] : differs[-1] + 2]


def _apart(values: RealArray, axis: int, steps: int) -> RealArray:
    """Return the difference between points some steps apart along an axis."""
    lines = np.moveaxis(values, axis, 0)
    return lines[steps:] - lines[:-steps]


def _curvature(values: RealArray, axis: int) -> RealArray:
    return np.diff(values, n=2, axis=axis)


def _nearest(coordinates: RealArray, position: float) -> int:
    return int(np.argmin(np.abs(coordinates - position)))

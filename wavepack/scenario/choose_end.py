r"""When the slowest part that matters has left.

Each energy of the packet moves along the line of its travel at its local speed,
:math:`t(E) = \int dx\,\hbar/2\sqrt{c\,|E - V|}`; the part that gets through to the end
ahead, the rest to the far side of the structure and back. What a well between
barriers holds leaves at its own rate: levels of the well with walls in the barriers
start the search for the poles :math:`E_R - i\Gamma/2` of a stack of flat slices.
"""

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.errors import NumericalFault
from wavepack.physics.exact.layers import Layer, Lead, Stack, stack_transmission
from wavepack.physics.exact.resonances import resonance_pole
from wavepack.scenario.build import Setup
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.slices import gathered, nearest

#: Energies of the packet that are told apart.
ENERGIES: Final = 160
#: Standard deviations by which the packet's end lags behind its middle.
LAG: Final = 4.0
#: Slowest speed, as a share of the launch energy: on top of barriers times are finite.
SLOWEST: Final = 0.05
#: Energies below this share of the mean count as this.
AT_REST: Final = 1e-4
#: At an angle to the travel the way is longer.
OBLIQUE: Final = 1.5
#: Levels of wells that are looked at, and slices of a stack at most.
LEVELS: Final = 24
SLICES: Final = 1200
#: Neighbouring points whose V or mass differ by a smaller share are joined.
SAME: Final = 1e-9


@dataclass(frozen=True)
class Held:
    """What one resonance holds: its share of the packet and its lifetime [time]."""

    energy: float
    share: float
    lifetime: float


@dataclass(frozen=True)
class Leaving:
    """When a packet has left.

    Attributes
    ----------
    time : float
        When only a share is left [time].
    held : tuple of Held
        Resonances that hold back more than that share.
    """

    time: float
    held: tuple[Held, ...]


class Departure:
    """Follows the energies of a packet along its travel."""

    def __init__(self, setup: Setup, estimates: Estimates) -> None:
        self._setup = setup
        self._c = setup.particle.stiffness
        self._hbar = setup.particle.hbar
        axis, sign = estimates.travel
        self._index, self._sign = axis, int(sign)
        self._axis = setup.grid.axes[axis]
        self._centre = setup.content.centre[axis]
        self._k, self._w = setup.content.wavenumbers[axis], setup.content.weights[axis]
        self._here = nearest(self._axis.coordinates, self._centre)
        line = self._through_centre(setup.landscape.static)
        self._potential = line - line[self._here]
        self._stiffness = self._local_stiffness()

    def leaving(self, share: float) -> Leaving:
        """Return when all but a share of the packet has left."""
        energies, weights = gathered(self._c * self._k**2, self._w, ENERGIES)
        energies = np.maximum(energies, AT_REST * float(energies @ weights))
        ahead, back = self._times(energies)
        through = self._transmission(energies)
        held = tuple(h for h in self._held() if h.share > share / 4)
        times = np.concatenate([ahead, back])
        parts = np.concatenate([weights * through, weights * (1 - through)])
        arrival = float(np.median(ahead))

        def left(t: float) -> float:
            gone = sum(h.share * math.exp(-max(t - arrival, 0) / h.lifetime) for h in held)
            return float(parts[times > t].sum()) + gone

        lower, upper = 0.0, float(times.max()) + sum(60 * h.lifetime for h in held)
        for _ in range(60):
            middle = (lower + upper) / 2
            lower, upper = (middle, upper) if left(middle) > share else (lower, middle)
        return Leaving(upper * (OBLIQUE if self._spreads else 1.0), held)

    @property
    def _spreads(self) -> bool:
        """Whether what is scattered may move at any angle."""
        grid = self._setup.grid
        return grid.ndim > 1 and all("absorbing" in axis.ends for axis in grid.axes)

    def _through_centre(self, values: RealArray) -> RealArray:
        index = [
            nearest(axis.coordinates, centre)
            for axis, centre in zip(self._setup.grid.axes, self._setup.content.centre, strict=True)
        ]
        line = np.moveaxis(values, self._index, 0)
        for i, place in enumerate(index):
            if i != self._index:
                line = line[:, place]
        return line

    def _local_stiffness(self) -> RealArray:
        """Return hbar^2/2m at the points of the line [energy length**2]."""
        places = [np.array([x]) for x in self._setup.content.centre]
        places[self._index] = self._axis.coordinates
        spacing = tuple(axis.spacing for axis in self._setup.grid.axes)
        mass = np.full(self._axis.points, self._setup.particle.mass)
        for piece in self._setup.scenario.potential:
            excess = piece.mass_excess(tuple(np.ix_(*places)), spacing, self._setup.particle)
            if excess is not None and piece.acts != "before":
                shape = tuple(place.size for place in places)
                mass = mass + np.broadcast_to(excess, shape).ravel()
        return np.asarray(self._c * self._setup.particle.mass / mass)

    def _times(self, energies: RealArray) -> tuple[RealArray, RealArray]:
        """Return the times [time] to the end ahead, and back from the structure."""
        order = slice(None, None, self._sign)
        v = self._potential[order]
        start = self._here if self._sign > 0 else self._axis.points - 1 - self._here
        local = np.maximum(np.abs(energies[:, None] - v), SLOWEST * energies[:, None])
        pace = self._hbar * self._axis.spacing / (2 * np.sqrt(self._c * local))
        walked = np.cumsum(pace, axis=1)
        lag = LAG * math.sqrt(self._variance()) / self._axis.spacing * pace[:, start]
        ahead = walked[:, -1] - walked[:, start]
        # A plateau beyond a step is no structure: what turns does so where V last changes.
        changes = np.flatnonzero(np.abs(np.diff(v[start:])) > 1e-4 * float(energies.mean()))
        far = start + int(changes[-1]) + 1 if changes.size else start
        back = 2 * (walked[:, far] - walked[:, start]) + walked[:, start]
        ends = self._axis.ends[order]
        if ends[1] != "absorbing":
            ahead = 2 * ahead + walked[:, start]
        if ends[0] != "absorbing":
            back = back + walked[:, -1]
        return ahead + lag, back + lag

    def _variance(self) -> float:
        density = np.abs(self._setup.start[0]) ** 2
        others = tuple(i for i in range(self._setup.grid.ndim) if i != self._index)
        line = density.sum(axis=others)
        line = line / line.sum()
        return float(line @ (self._axis.coordinates - self._centre) ** 2)

    def _stack(self) -> Stack:
        """Return V ahead of the packet as flat slices, equal neighbours joined."""
        order = slice(None, None, self._sign)
        start = self._here if self._sign > 0 else self._axis.points - 1 - self._here
        v, c = self._potential[order][start:], self._stiffness[order][start:]
        kinetic = self._setup.content.kinetic
        steps = (np.abs(np.diff(v)) > SAME * kinetic) | (np.abs(np.diff(c)) > SAME * self._c)
        changes = np.flatnonzero(steps)
        if changes.size > SLICES:
            changes = changes[:: -(-changes.size // SLICES)]
        edges = np.concatenate([[0], changes + 1, [v.size]])
        layers = []
        for first, last in pairwise(edges[1:-1]):
            if last > first:
                thickness = (last - first) * self._axis.spacing
                mean = float(v[first:last].mean())
                layers.append(Layer(thickness, mean, float(c[first:last].mean())))
        left, right = (Lead(float(v[i]), float(c[i])) for i in (0, -1))
        return Stack(tuple(layers), left, right)

    def _transmission(self, energies: RealArray) -> RealArray:
        """Return about the share that gets through, by kinetic energy at the launch."""
        stack = self._stack()
        if not stack.layers and stack.left == stack.right:
            return np.ones(energies.size)
        with np.errstate(all="ignore"):
            found = stack_transmission(stack, energies)
        return np.clip(np.nan_to_num(found, nan=0.5), 0.0, 1.0)

    def _held(self) -> list[Held]:
        """Return what the resonances of a static line hold."""
        if self._setup.grid.ndim > 1 or self._setup.landscape.driven:
            return []
        stack = self._stack()
        found: dict[float, Held] = {}
        for level in self._levels(stack):
            try:
                pole = resonance_pole(stack, level)
            except NumericalFault:
                continue
            share = self._density(pole.energy) * math.pi * pole.width
            if pole.width > 0 and abs(pole.energy - level) < 0.2 * abs(level) and share < 1:
                key = float(f"{pole.energy:.6g}")
                found[key] = Held(pole.energy, share, self._hbar / pole.width)
        return list(found.values())

    def _levels(self, stack: Stack) -> list[float]:
        """Return levels of the structure between walls that lie among the packet's energies."""
        from scipy.linalg import eigh_tridiagonal  # noqa: PLC0415 - slow to import

        lowest = self._c * self._setup.content.slowest(self._index, 1e-5) ** 2
        highest = self._c * self._setup.content.slowest(self._index, 1 - 1e-5) ** 2
        heights = np.array([layer.height for layer in stack.layers])
        barriers = np.flatnonzero(heights > lowest)
        if barriers.size < 2 or not (heights[barriers[0] : barriers[-1]] < lowest).any():
            return []
        order = slice(None, None, self._sign)
        start = self._here if self._sign > 0 else self._axis.points - 1 - self._here
        v, c = self._potential[order][start:], self._stiffness[order][start:]
        inside = np.flatnonzero(v > lowest)
        v, c = v[inside[0] : inside[-1] + 1], c[inside[0] : inside[-1] + 1]
        link = (c[1:] + c[:-1]) / 2 / self._axis.spacing**2
        sides = np.concatenate([[c[0] / self._axis.spacing**2], link]) + np.concatenate(
            [link, [c[-1] / self._axis.spacing**2]]
        )
        levels = eigh_tridiagonal(
            v + sides, -link, eigvals_only=True, select="v", select_range=(lowest, highest)
        )
        return [float(level) for level in levels[:LEVELS]]

    def _density(self, energy: float) -> float:
        """Return the packet's probability per energy [1/energy], at a kinetic energy."""
        k = math.sqrt(max(energy, 1e-300) / self._c)
        order = np.argsort(self._k)
        spacing = 2 * math.pi / self._axis.length
        near = np.interp(k, self._k[order], self._w[order], left=0.0, right=0.0)
        return float(near) / spacing / (2 * self._c * k)

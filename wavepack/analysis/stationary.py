r"""Exact stationary scattering along a line, beside any propagation.

At one energy the wave obeys :math:`-(c\,\psi')' + V\psi = E\psi` between two
uniform leads. :math:`\psi` and :math:`c\,\psi'` are continuous
[BenDanielDuke1966]_, so the outgoing wave of the far lead, carried back to the
near one, splits there into what comes in and what is thrown back. Stacks of
constant layers are carried by matrices, all else by an adaptive Runge-Kutta
method of order 8 from one sharp edge to the next [HairerNorsettWanner1993]_.
"""

import math
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import Final

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.errors import NumericalFault
from wavepack.physics.exact.layers import Layer, Lead, Stack, stack_reflection, stack_transmission
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import Formula, Layers, Piece, Slab, Step

#: Relative error of a step of the integration.
TOLERANCE: Final = 1e-10
#: Absolute error beside amplitudes that start each piece with 1.
FLOOR: Final = 1e-12
#: Pieces of the way are so short that no wave grows by more than this exponent.
GROWTH: Final = 8.0
#: Width of an edge and the distance kept from it, over the length of the line.
EDGE_WIDTH: Final = 1e-10
EDGE_DISTANCE: Final = 1e-8
#: Energies carried together.
TOGETHER: Final = 128
#: A jump of a formula is halved in so many times.
HALVINGS: Final = 45


@dataclass(frozen=True)
class Line:
    """A potential along a line between two uniform leads.

    Attributes
    ----------
    pieces : tuple of Piece
        What adds up to V; none of them driven.
    particle : Particle
        What moves.
    left, right : float
        Where the leads begin [length].
    resolution : float
        No feature of V is narrower [length], jumps apart.
    from_right : bool
        Whether the wave comes in from the right.
    """

    pieces: tuple[Piece, ...]
    particle: Particle
    left: float
    right: float
    resolution: float
    from_right: bool = False

    @property
    def length(self) -> float:
        """Distance between the leads [length]."""
        return self.right - self.left

    def height(self, x: RealArray) -> RealArray:
        """Return V [energy], edges as good as sharp."""
        width = (EDGE_WIDTH * self.length,)
        total = np.zeros_like(x)
        for piece in self.pieces:
            total = total + piece.evaluate((x,), width, self.particle)
        return total

    def stiffness(self, x: RealArray) -> RealArray:
        r"""Return :math:`\hbar^2/2m` [energy length**2] of the local mass."""
        width = (EDGE_WIDTH * self.length,)
        mass = np.full_like(x, self.particle.mass)
        for piece in self.pieces:
            excess = piece.mass_excess((x,), width, self.particle)
            if excess is not None:
                mass = mass + excess
        return np.asarray(self.particle.hbar2_per_mass / (2 * mass))

    @property
    def constant_by_layers(self) -> bool:
        """Whether V and mass are constant between edges."""
        return all(
            isinstance(piece, (Slab, Layers)) or (isinstance(piece, Step) and piece.width is None)
            for piece in self.pieces
        )

    @cached_property
    def cuts(self) -> tuple[float, ...]:
        """The leads' beginnings and all edges between them, in the wave's way."""
        found = [x for piece in self.pieces for x in piece.edges(0)]
        for piece in self.pieces:
            if isinstance(piece, Formula):
                found += self._jumps(piece)
        inside = sorted(x for x in found if self.left < x < self.right)
        apart = 4 * EDGE_DISTANCE * self.length
        kept = [self.left]
        for x in inside:
            if x - kept[-1] > apart:
                kept.append(x)
        if len(kept) > 1 and self.right - kept[-1] <= apart:
            kept.pop()
        kept.append(self.right)
        return tuple(-x for x in reversed(kept)) if self.from_right else tuple(kept)

    def scatter(self, energies: RealArray) -> tuple[RealArray, RealArray]:
        """Return transmission and reflection at total energies [energy].

        They are computed apart, so that their sum is a check. A closed far lead
        transmits nothing, a closed near lead reflects all.

        Raises
        ------
        NumericalFault
            If the integration fails.
        """
        energies = np.asarray(energies, dtype=float)
        if self.constant_by_layers:
            stack = self._stack()
            return stack_transmission(stack, energies), stack_reflection(stack, energies)
        found = [
            self._integrated(energies[first : first + TOGETHER])
            for first in range(0, energies.size, TOGETHER)
        ]
        if not found:
            return np.zeros(0), np.zeros(0)
        return np.concatenate([t for t, _ in found]), np.concatenate([r for _, r in found])

    def lead(self, *, far: bool) -> Lead:
        """Return the lead that the wave leaves into, or comes in from."""
        distance = EDGE_DISTANCE * self.length
        right = far != self.from_right
        x = np.array([self.right + distance if right else self.left - distance])
        return Lead(float(self.height(x)[0]), float(self.stiffness(x)[0]))

    def _along(self, s: float, first: float, last: float) -> RealArray:
        """Return the position at s along the way, kept off the edges of its piece."""
        distance = EDGE_DISTANCE * self.length
        s = min(max(s, first + distance), last - distance)
        return np.array([-s if self.from_right else s])

    def _stack(self) -> Stack:
        layers = []
        for first, last in pairwise(self.cuts):
            x = self._along((first + last) / 2, first, last)
            height, c = float(self.height(x)[0]), float(self.stiffness(x)[0])
            layers.append(Layer(last - first, height, c))
        return Stack(tuple(layers), self.lead(far=False), self.lead(far=True))

    def _integrated(self, energies: RealArray) -> tuple[RealArray, RealArray]:
        near, far = self.lead(far=False), self.lead(far=True)
        z_near, z_far = (
            lead.c * np.sqrt((energies - lead.height + 0j) / lead.c) for lead in (near, far)
        )
        # Both amplitudes in units of an energy times a length, and of order one.
        scale = max(float(np.abs(z_far).max()), float(np.abs(z_near).max()), 1e-300)
        u, w = np.ones(energies.size, dtype=complex), 1j * z_far / scale
        growth = np.zeros(energies.size)
        for first, last in reversed(list(pairwise(self.cuts))):
            for start, stop in self.short(first, last, float(energies.min())):
                u, w = self._carried((u, w), energies, scale, (start, stop), (first, last))
                size = np.hypot(np.abs(u), np.abs(w))
                u, w, growth = u / size, w / size, growth + np.log(size)
        z = z_near / scale
        incoming, outgoing = z * u - 1j * w, z * u + 1j * w
        both = (energies > near.height) & (energies > far.height)
        size = np.where(both, np.abs(incoming), 1.0)
        t = 4 * (z * z_far / scale).real / size**2 * np.exp(-2 * growth)
        is_open = energies > near.height
        ratio = np.abs(outgoing) / np.where(is_open, np.abs(incoming), 1.0)
        return np.where(both, t, 0.0), np.where(is_open, ratio**2, 1.0)

    def short(self, first: float, last: float, energy: float) -> list[tuple[float, float]]:
        """Return a piece of the way cut into short ones, the last first, each backward."""
        count = max(2, min(4096, math.ceil((last - first) / self.resolution)))
        edge = EDGE_DISTANCE * self.length
        s = np.linspace(first + edge, last - edge, count)
        x = -s if self.from_right else s
        decay = np.sqrt(np.maximum(self.height(x) - energy, 0.0) / self.stiffness(x))
        parts = max(1, math.ceil(float(decay.max()) * (last - first) / GROWTH))
        places = np.linspace(last, first, parts + 1)
        return [(float(a), float(b)) for a, b in pairwise(places)]

    def _carried(
        self,
        state: tuple[ComplexArray, ComplexArray],
        energies: RealArray,
        scale: float,
        way: tuple[float, float],
        piece: tuple[float, float],
    ) -> tuple[ComplexArray, ComplexArray]:
        r"""Return :math:`\psi` and :math:`c\psi'/\mathrm{scale}` at the other end of the way."""
        from scipy.integrate import solve_ivp  # noqa: PLC0415 - kept out of the program's start

        n = energies.size

        def slope(s: float, y: ComplexArray) -> ComplexArray:
            x = self._along(s, *piece)
            c, v = float(self.stiffness(x)[0]), float(self.height(x)[0])
            return np.concatenate([scale / c * y[n:], (v - energies) / scale * y[:n]])

        solved = solve_ivp(
            slope,
            way,
            np.concatenate(state),
            method="DOP853",
            rtol=TOLERANCE,
            atol=FLOOR,
            max_step=min(2 * self.resolution, abs(way[1] - way[0])),
            t_eval=[way[1]],
        )
        if not solved.success:
            raise NumericalFault(f"stationary calculation between {way}: {solved.message}")
        return solved.y[:n, -1], solved.y[n:, -1]

    def _jumps(self, piece: Formula) -> list[float]:
        """Return where a formula jumps, by halving the intervals that hold a large difference."""
        if not piece.sharp:
            return []
        count = math.ceil(64 * self.length / self.resolution) + 1
        x = np.linspace(self.left, self.right, min(count, 1 << 20))
        change = np.abs(np.diff(self._formula(piece, x)))
        held = np.flatnonzero(change > 1e-9 * float(change.max(initial=0.0)))
        low, high, before = x[held], x[held + 1], change[held]
        for _ in range(HALVINGS):
            middle = (low + high) / 2
            values = [self._formula(piece, place) for place in (low, middle, high)]
            upper = np.abs(values[2] - values[1]) > np.abs(values[1] - values[0])
            low, high = np.where(upper, middle, low), np.where(upper, high, middle)
        left = np.abs(self._formula(piece, high) - self._formula(piece, low))
        # What is smooth falls by half each time, what jumps keeps its height.
        real = left > 0.1 * before
        return [float(place) for place in (low[real] + high[real]) / 2]

    def _formula(self, piece: Formula, x: RealArray) -> RealArray:
        return np.broadcast_to(piece.evaluate((x,), (0.0,), self.particle), x.shape)

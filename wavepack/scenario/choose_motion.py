"""Where packets start and how they move, as far as the scenario says it without a grid."""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.physics.packet_travel import unit_vector
from wavepack.physics.packets import ChannelPacket, GaussianPacket
from wavepack.scenario.schema import Scenario

#: Sharp edges count as this sharp where V is asked for at single places [length].
SHARP: Final = 1e-6
#: Standard deviations of the momentum that count where V must turn the packet back.
TURNED: Final = 4.0
#: Points across a channel for its level, and how often its width is doubled.
ACROSS: Final = 400
DOUBLINGS: Final = 24
#: The level is known once doubling changes it by less than this share.
SETTLED: Final = 0.01


@dataclass(frozen=True)
class Flight:
    """One packet on its way.

    Attributes
    ----------
    center, sigma, wavenumber : mapping of axis to float
        Mean position, its standard deviation [length] and wave number
        [1/length]; without the axis that a channel packet fills.
    potential : float
        V at the center, for a channel packet its transverse level [energy].
    """

    center: Mapping[str, float]
    sigma: Mapping[str, float]
    wavenumber: Mapping[str, float]
    potential: float
    channel: bool = field(default=False)

    @property
    def central(self) -> float:
        """Size of its wave number [1/length], at least that of its spread."""
        squares = sum(k**2 for k in self.wavenumber.values())
        spread = sum(1 / (4 * sigma**2) for sigma in self.sigma.values())
        return math.sqrt(max(squares, spread))

    def energy(self, stiffness: float) -> float:
        """Return the total energy that hardly any of it exceeds [energy]."""
        fast = sum(
            (abs(k) + TURNED / (2 * self.sigma[name])) ** 2 for name, k in self.wavenumber.items()
        )
        return self.potential + stiffness * fast


def flights(scenario: Scenario) -> tuple[Flight, ...]:
    """Return the packets that say where they start and how they move."""
    return tuple(
        _channel(packet, scenario)
        if isinstance(packet, ChannelPacket)
        else _gaussian(packet, scenario)
        for packet in scenario.packet
        if isinstance(packet, GaussianPacket | ChannelPacket)
    )


def potential(scenario: Scenario, coordinates: tuple[RealArray, ...]) -> RealArray:
    """Return the static V [energy] at any places, without what acts only before the start."""
    spacing = (SHARP,) * len(coordinates)
    total = np.zeros(np.broadcast_shapes(*(x.shape for x in coordinates)))
    for piece in scenario.potential:
        if piece.acts != "before" and piece.drive is None:
            total = total + piece.evaluate(coordinates, spacing, scenario.particle)
    return np.asarray(total)


def _gaussian(packet: GaussianPacket, scenario: Scenario) -> Flight:
    names = tuple(scenario.grid)
    place = tuple(np.array([packet.center[name]]) for name in names)
    here = float(potential(scenario, place)[0])
    if packet.wavenumber:
        wavenumber = {name: packet.wavenumber.get(name, 0.0) for name in names}
    else:
        kinetic = packet.energy if packet.energy is not None else (packet.total_energy or 0) - here
        k = math.sqrt(max(kinetic, 0.0) / scenario.particle.stiffness)
        towards = unit_vector(packet.direction or 0.0)
        wavenumber = {name: k * part for name, part in zip(names, towards, strict=False)}
    center = {name: packet.center[name] for name in names}
    return Flight(center, {name: packet.sigma[name] for name in names}, wavenumber, here)


def _channel(packet: ChannelPacket, scenario: Scenario) -> Flight:
    names = tuple(scenario.grid)
    name = names[packet.travel]
    c = scenario.particle.stiffness
    scale = packet.energy or abs(packet.total_energy or 0.0) or c / packet.sigma[name] ** 2
    level = _level(packet, scenario, 8 * math.pi * math.sqrt(c / scale))
    kinetic = packet.energy if packet.energy is not None else (packet.total_energy or 0.0) - level
    k = math.sqrt(max(kinetic, 0.0) / c) * sum(unit_vector(packet.direction or 0.0))
    at, sigma = {name: packet.center[name]}, {name: packet.sigma[name]}
    return Flight(at, sigma, {name: k}, level, channel=True)


def _level(packet: ChannelPacket, scenario: Scenario, reach: float) -> float:
    """Return about the transverse level of a channel packet [energy]."""
    from scipy.linalg import eigh_tridiagonal  # noqa: PLC0415 - slow to import

    names = tuple(scenario.grid)
    axis = scenario.grid[names[1 - packet.travel]]
    place = np.array([packet.center[names[packet.travel]]])
    lower, upper = axis.start, axis.stop
    level = math.inf
    for doubling in range(DOUBLINGS):
        size = reach / 64 * 2**doubling
        y = np.linspace(-size if lower is None else lower, size if upper is None else upper, ACROSS)
        v = potential(scenario, (place, y) if packet.travel == 0 else (y, place))
        hop = scenario.particle.stiffness / (y[1] - y[0]) ** 2
        former = level
        found = eigh_tridiagonal(
            v + 2 * hop,
            np.full(y.size - 1, -hop),
            eigvals_only=True,
            select="i",
            select_range=(packet.mode, packet.mode),
        )
        level = float(found[0])
        settled = abs(former - level) < SETTLED * (level - float(v.min()))
        if settled or (lower is not None and upper is not None):
            break
    return level

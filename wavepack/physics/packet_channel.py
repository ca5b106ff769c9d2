"""The channel packet: a transverse eigenstate that travels."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.fields import declare
from wavepack.grid.grid import Grid
from wavepack.physics.packet_eigenstate import plane_kinetic, twin_of
from wavepack.physics.packet_shapes import Launch, Packet, Scene
from wavepack.physics.packet_travel import (
    DIRECTIONS,
    energy_faults,
    gaussian_line,
    missing_faults,
    nearest_row,
    potential_at,
    read_direction,
    unit_vector,
    write_direction,
)
from wavepack.physics.shapes import Converter, Faults


@dataclass(frozen=True)
class ChannelPacket(Packet):
    """A Gaussian along its travel times a transverse eigenstate of V there."""

    shape: ClassVar[str] = "channel"

    center: Mapping[str, float] = declare(
        "each_axis", "mean position along the travel", dimension="length"
    )
    sigma: Mapping[str, float] = declare(
        "each_axis", "standard deviation of |psi|^2 along it", dimension="length", above=0.0
    )
    mode: int = declare("whole", "transverse state, 0 the lowest", at_least=0, default=0)
    energy: float | None = declare(
        "number", "kinetic energy along the travel", dimension="energy", at_least=0.0, default=None
    )
    total_energy: float | None = declare(
        "number", "that energy plus the transverse level", dimension="energy", default=None
    )
    direction: float | None = declare(
        "custom", '"+x", "-x", "+y" or "-y"; default "+x"', default=None
    )

    @classmethod
    def read_direction(cls, raw: object, units: Converter) -> float:
        """Return the angle [radians]; see `packet_travel.read_direction`."""
        return read_direction(raw, units)

    @classmethod
    def write_direction(cls, value: float | None) -> str | None:
        """Return the direction as `read_direction` reads it."""
        return write_direction(value)

    @property
    def travel(self) -> int:
        """Axis along which it travels."""
        return int(unit_vector(self.direction or 0.0)[0] == 0.0)

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        if len(axes) < 2:
            return (("shape", "need axes x and y for a channel, got x alone"),)
        found = list(energy_faults(self, ("energy", "total_energy")))
        if 0.0 not in unit_vector(self.direction or 0.0):
            name = write_direction(self.direction)
            found.append(("direction", f"need one of {', '.join(DIRECTIONS)}, got {name}"))
        for key in ("center", "sigma"):
            found += missing_faults(key, getattr(self, key), (axes[self.travel],))
        return tuple(found)

    def launch(self, scene: Scene) -> Launch:
        """Return its central position and wave number, and its level."""
        return self._prepare(scene)[0]

    def wavefunction(self, scene: Scene) -> ComplexArray:
        """Return psi on the grid, of any norm."""
        launch, across = self._prepare(scene)
        axis = scene.grid.axes[self.travel]
        center, k = launch.center[self.travel], launch.wavevector[self.travel]
        along = gaussian_line(axis, center, self.sigma[axis.name], k)
        psi = np.outer(along, across)
        return psi if self.travel == 0 else np.ascontiguousarray(psi.T)

    def _prepare(self, scene: Scene) -> tuple[Launch, RealArray]:
        """Return the launch and the transverse state on the grid's points."""
        grid, travel = scene.grid, self.travel
        name = grid.names[travel]
        self.check_inside(grid, {name: self.center[name]})
        place = [self.center[name]] * 2
        level, across = self._transverse(scene, place)
        line = grid.axes[1 - travel]
        mean = float(np.sum(across**2 * line.coordinates) / np.sum(across**2))
        place[1 - travel] = mean
        kinetic = self.energy
        if kinetic is None:
            kinetic = (self.total_energy or 0.0) - level
            if kinetic < 0:
                message = f"need at least the transverse level {level:g}, got {self.total_energy:g}"
                raise self.error("total_energy", message)
        k = np.sqrt(kinetic / scene.particle.stiffness) * sum(unit_vector(self.direction or 0.0))
        wavevector = (float(k), 0.0) if travel == 0 else (0.0, float(k))
        launch = Launch(tuple(place), wavevector, potential_at(scene, place), level, travel)
        return launch, across

    def _transverse(self, scene: Scene, place: list[float]) -> tuple[float, RealArray]:
        """Return level and state across the plane of launch."""
        from wavepack.physics.eigenstates import lowest_states  # noqa: PLC0415 - slow to import

        travel = self.travel
        line = scene.grid.axes[1 - travel]
        row = nearest_row(scene, place, travel)
        kinetic = plane_kinetic(scene, place[travel], travel)
        walled = Grid((line,)).walled()
        lost = line.points - walled.shape[0]
        if self.mode + 1 >= walled.size:
            raise self.error("mode", f"need a mode below {walled.size - 1}, got {self.mode}")
        energies, states = lowest_states(walled, row[lost:], scene.particle, self.mode + 2, kinetic)
        twin = twin_of(energies, self.mode, float(row.min()))
        if twin is not None:
            raise self.error("mode", f"need a level of one state, got {self.mode} equal to {twin}")
        return float(energies[self.mode]), np.pad(states[self.mode], (lost, 0))

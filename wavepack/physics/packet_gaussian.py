"""The Gaussian packet."""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, Final

import numpy as np

from wavepack.arrays import ComplexArray
from wavepack.fields import declare
from wavepack.physics.packet_shapes import Launch, Packet, Scene
from wavepack.physics.packet_travel import (
    energy_faults,
    gaussian_line,
    missing_faults,
    potential_at,
    read_direction,
    unit_vector,
    write_direction,
)
from wavepack.physics.potentials import total
from wavepack.physics.shapes import Converter, Faults, mapping_faults

#: V counts as uniform if it varies over this many sigma either side by less
#: than this part of the kinetic energy.
UNIFORM_REACH: Final = 4.0
UNIFORM_PART: Final = 1e-3


@dataclass(frozen=True)
class GaussianPacket(Packet):
    """exp(-(x - center)^2/(4 sigma^2) + i k (x - center))."""

    shape: ClassVar[str] = "gaussian"

    center: Mapping[str, float] = declare("each_axis", "mean position", dimension="length")
    sigma: Mapping[str, float] = declare(
        "each_axis", "standard deviation of |psi|^2", dimension="length", above=0.0
    )
    energy: float | None = declare(
        "number",
        "kinetic energy of the central momentum",
        dimension="energy",
        at_least=0.0,
        default=None,
    )
    total_energy: float | None = declare(
        "number",
        "that energy plus V at the center, which must be uniform over the packet",
        dimension="energy",
        default=None,
    )
    direction: float | None = declare(
        "custom",
        '"+x", "-x", "+y", "-y", or an angle from +x towards +y; default "+x"',
        default=None,
    )
    wavenumber: Mapping[str, float] = declare(
        "each_axis",
        "central wave number, instead of energy and direction",
        dimension="wavenumber",
        default={},
    )

    @classmethod
    def read_direction(cls, raw: object, units: Converter) -> float:
        """Return the angle [radians]; see `packet_travel.read_direction`."""
        return read_direction(raw, units)

    @classmethod
    def write_direction(cls, value: float | None) -> str | None:
        """Return the direction as `read_direction` reads it."""
        return write_direction(value)

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        found = list(energy_faults(self, ("energy", "total_energy", "wavenumber")))
        for key in ("center", "sigma", "wavenumber"):
            found += mapping_faults(key, getattr(self, key), axes)
        for key in ("center", "sigma"):
            found += missing_faults(key, getattr(self, key), axes)
        if self.direction is not None:
            if self.wavenumber:
                found.append(("direction", "need direction or wavenumber, got both"))
            if len(axes) == 1 and unit_vector(self.direction)[1] != 0.0:
                name = write_direction(self.direction)
                found.append(("direction", f"need +x or -x on a grid of x alone, got {name}"))
        return tuple(found)

    def launch(self, scene: Scene) -> Launch:
        """Return its central position and wave number, and V there."""
        grid = scene.grid
        self.check_inside(grid, self.center)
        center = tuple(self.center[name] for name in grid.names)
        potential = potential_at(scene, center)
        if self.wavenumber:
            wavevector = tuple(self.wavenumber.get(name, 0.0) for name in grid.names)
            return Launch(center, wavevector, potential)
        kinetic = self.energy
        if kinetic is None:
            kinetic = self._kinetic_of_total(scene, potential)
        k = math.sqrt(kinetic / scene.particle.stiffness)
        towards = unit_vector(self.direction or 0.0)
        return Launch(center, tuple(k * part for part in towards[: grid.ndim]), potential)

    def wavefunction(self, scene: Scene) -> ComplexArray:
        """Return psi on the grid, of any norm."""
        launch = self.launch(scene)
        psi = np.ones([1] * scene.grid.ndim, dtype=complex)
        for i, axis in enumerate(scene.grid.axes):
            sigma = self.sigma[axis.name]
            line = gaussian_line(axis, launch.center[i], sigma, launch.wavevector[i])
            psi = psi * line.reshape([-1 if j == i else 1 for j in range(scene.grid.ndim)])
        return psi

    def _kinetic_of_total(self, scene: Scene, potential: float) -> float:
        """Return the kinetic energy [energy]; V must be uniform over the packet."""
        kinetic = (self.total_energy or 0.0) - potential
        if kinetic < 0:
            message = f"need at least V at the center, {potential:g}, got {self.total_energy:g}"
            raise self.error("total_energy", message)
        spans = []
        for axis in scene.grid.axes:
            reach = UNIFORM_REACH * self.sigma[axis.name]
            spans.append(np.flatnonzero(np.abs(axis.coordinates - self.center[axis.name]) < reach))
        rows = slice(int(spans[0][0]), int(spans[0][-1]) + 1)
        values = total(scene.pieces, scene.grid, scene.particle, rows=rows)
        values = values[(slice(None), *(slice(s[0], s[-1] + 1) for s in spans[1:]))]
        spread = float(np.ptp(values))
        if spread > UNIFORM_PART * kinetic:
            message = (
                f"need V uniform over the packet ({UNIFORM_REACH:g} sigma), "
                f"got a spread of {spread:g} at {kinetic:g} kinetic; give energy instead"
            )
            raise self.error("total_energy", message)
        return kinetic

"""A stack of layers, such as a double barrier grown layer by layer."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import accumulate
from typing import ClassVar

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import declare
from wavepack.physics.edges import profile
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import AXES, Converter, Faults, Piece, axis_faults


@dataclass(frozen=True)
class Layer:
    """One layer of a stack."""

    thickness: float = declare("number", "its thickness", dimension="length", above=0.0)
    height: float = declare("number", "V inside", dimension="energy")
    mass: float | None = declare(
        "number", "mass inside; default: the particle's", dimension="mass", above=0.0, default=None
    )


@dataclass(frozen=True)
class Layers(Piece):
    """A stack of layers from ``start`` on, 0 outside it."""

    shape: ClassVar[str] = "layers"

    start: float = declare("number", "where the first layer begins", dimension="length")
    layers: tuple[Layer, ...] = declare(
        "custom", "[{ thickness, height, mass }, ...] or [[thickness, height], ...]"
    )
    axis: str = declare("choice", "axis it runs along", options=AXES, default="x")

    @classmethod
    def read_layers(cls, raw: object, units: Converter) -> tuple[Layer, ...]:
        """Return the layers of a list of tables or of [thickness, height(, mass)] lists.

        Raises
        ------
        ValueError
            If an entry is neither, lacks a value or holds one too many.
        """
        if not isinstance(raw, list) or not raw:
            raise ValueError(f"need a list of layers, got {raw!r}")
        return tuple(_read_layer(number, entry, units) for number, entry in enumerate(raw))

    @classmethod
    def write_layers(cls, value: tuple[Layer, ...]) -> list[dict[str, float]]:
        """Return the layers as `read_layers` reads them."""
        return [
            {"thickness": layer.thickness, "height": layer.height}
            | ({} if layer.mass is None else {"mass": layer.mass})
            for layer in value
        ]

    @property
    def sharp(self) -> bool:
        """Always: a layer has edges."""
        return True

    @property
    def boundaries(self) -> tuple[float, ...]:
        """Positions of all edges, one more than layers [length]."""
        thicknesses = (layer.thickness for layer in self.layers)
        return tuple(accumulate(thicknesses, initial=self.start))

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return its edges along an axis [length]."""
        return self.boundaries if AXES[axis] == self.axis else ()

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return axis_faults(self.axis, axes)

    def _stack(
        self,
        values: Sequence[float],
        coordinates: tuple[RealArray, ...],
        spacing: tuple[float, ...],
    ) -> RealArray:
        axis = AXES.index(self.axis)
        x = coordinates[axis]
        total = np.zeros_like(x)
        # One jump at each boundary: neighbours of equal value join without a seam.
        jumps = np.diff(values, prepend=0.0, append=0.0)
        for position, jump in zip(self.boundaries, jumps, strict=True):
            if jump:
                total += jump * profile((x - position) / spacing[axis])
        return total

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del particle
        return self._stack([layer.height for layer in self.layers], coordinates, spacing)

    def mass_excess(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray | None:
        """Return what it adds to the mass [mass]; see `Piece.mass_excess`."""
        if all(layer.mass is None for layer in self.layers):
            return None
        excess = [
            0.0 if layer.mass is None else layer.mass - particle.mass for layer in self.layers
        ]
        return self._stack(excess, coordinates, spacing)


def _read_layer(number: int, entry: object, units: Converter) -> Layer:
    keys = ("thickness", "height", "mass")
    if isinstance(entry, list) and len(entry) in (2, 3):
        entry = dict(zip(keys, entry, strict=False))
    if not isinstance(entry, dict) or not {"thickness", "height"} <= entry.keys() <= set(keys):
        wanted = "{ thickness, height, mass } or [thickness, height]"
        raise ValueError(f"layer {number}: need {wanted}, got {entry!r}")
    values = {
        key: units.convert(entry[key], dimension)
        for key, dimension in zip(keys, ("length", "energy", "mass"), strict=True)
        if key in entry
    }
    for key in ("thickness", "mass"):
        if not values.get(key, 1.0) > 0:
            raise ValueError(f"layer {number}: need {key} > 0, got {values[key]:g}")
    return Layer(**values)

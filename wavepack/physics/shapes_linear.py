"""Pieces with corners: ramp and field, linear in part.

Each corner is smoothed to the spacing as `wavepack.physics.edges` says.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.edges import clipped
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import (
    AXES,
    Converter,
    Faults,
    Piece,
    axis_faults,
    finite,
    mapping_faults,
)


@dataclass(frozen=True)
class Ramp(Piece):
    """Linear between two heights, constant outside; along y if only `y` is given."""

    shape: ClassVar[str] = "ramp"

    x: Span = declare("span", "where it climbs, along x", dimension="length", default=Span())
    y: Span = declare("span", "where it climbs, along y", dimension="length", default=Span())
    heights: tuple[float, float] = declare("custom", "[left, right]: V before and after")
    axis: str | None = declare(
        "choice", "axis it runs along; default: that of the span given", options=AXES, default=None
    )

    @classmethod
    def read_heights(cls, raw: object, units: Converter) -> tuple[float, float]:
        """Return [left, right].

        Raises
        ------
        ValueError
            If that is no list of two energies.
        """
        if not isinstance(raw, list) or len(raw) != 2:
            raise ValueError(f"need a list [left, right] of two energies, got {raw!r}")
        left, right = (units.convert(value, "energy") for value in raw)
        return left, right

    @classmethod
    def write_heights(cls, value: tuple[float, float]) -> list[float]:
        """Return the pair as `read_heights` reads it."""
        return list(value)

    @property
    def along(self) -> str:
        """Name of the axis it runs along."""
        return self.axis or ("y" if self.x == Span() and self.y != Span() else "x")

    @property
    def span(self) -> Span:
        """Where it climbs; with ``axis`` given, either key may hold it."""
        return self.y if self.x == Span() else self.x

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return its corners along an axis [length]."""
        return finite(self.span.lower, self.span.upper) if AXES[axis] == self.along else ()

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        if self.x != Span() and self.y != Span():
            return (("y", "need one span, along the axis of the ramp, got x and y"),)
        if len(finite(self.span.lower, self.span.upper)) < 2:
            return ((self.along, "need { from, to }, both finite, for a ramp"),)
        if not self.span.lower < self.span.upper:
            message = f"need from < to, got {self.span.lower:g}..{self.span.upper:g}"
            return ((self.along, message),)
        return axis_faults(self.along, axes)

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del particle
        axis = AXES.index(self.along)
        left, right = self.heights
        slope = (right - left) / (self.span.upper - self.span.lower)
        climbed = clipped(coordinates[axis], self.span, spacing[axis]) - self.span.lower
        return left + slope * climbed


@dataclass(frozen=True)
class Field(Piece):
    """A uniform field: energy -charge e F x, constant before `from` and after `to`."""

    shape: ClassVar[str] = "field"

    strength: Mapping[str, float] = declare(
        "each_axis", "field F along each axis; 0 along an axis left out", dimension="field"
    )
    start: Mapping[str, float] = declare(
        "each_axis", "where the field begins", dimension="length", key="from", default={}
    )
    stop: Mapping[str, float] = declare(
        "each_axis", "where the field ends", dimension="length", key="to", default={}
    )

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return its corners along an axis [length]."""
        span = self._span(AXES[axis])
        return finite(span.lower, span.upper) if AXES[axis] in self.strength else ()

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        found = [
            *mapping_faults("strength", self.strength, axes),
            *mapping_faults("from", self.start, axes),
            *mapping_faults("to", self.stop, axes),
        ]
        for name in axes:
            span = self._span(name)
            if not span.lower < span.upper:
                found.append(("to", f"need from < to, got {span.lower:g}..{span.upper:g}"))
        return tuple(found)

    def _span(self, name: str) -> Span:
        return Span(self.start.get(name, -math.inf), self.stop.get(name, math.inf))

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        total = np.zeros([1] * coordinates[0].ndim)
        for i, (name, x) in enumerate(zip(AXES, coordinates, strict=False)):
            force = particle.charge * self.strength.get(name, 0.0)
            if force:
                total = total - force * clipped(x, self._span(name), spacing[i])
        return total

"""Pieces with sharp edges: slab, step, screen.

Each edge is smoothed to the spacing as `wavepack.physics.edges` says.
"""

from dataclasses import dataclass
from itertools import pairwise
from typing import ClassVar

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.edges import profile, window
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import (
    AXES,
    Faults,
    Piece,
    axis_faults,
    finite,
    spans_faults,
)


@dataclass(frozen=True)
class Slab(Piece):
    """``height`` inside a box, 0 outside; unlimited along an axis left out."""

    shape: ClassVar[str] = "slab"

    height: float = declare("number", "V inside", dimension="energy")
    x: Span = declare("span", "extent along x", dimension="length", default=Span())
    y: Span = declare("span", "extent along y", dimension="length", default=Span())
    mass: float | None = declare(
        "number", "mass inside; default: the particle's", dimension="mass", above=0.0, default=None
    )

    @property
    def sharp(self) -> bool:
        """Whether it has an edge."""
        return any(self.edges(axis) for axis in range(2))

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return its edges along an axis [length]."""
        span = (self.x, self.y)[axis]
        return finite(span.lower, span.upper)

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return spans_faults({"x": self.x, "y": self.y}, axes)

    def _inside(self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...]) -> RealArray:
        inside = window(self.x, coordinates[0], spacing[0])
        if len(coordinates) == 1 or self.y == Span():
            return inside
        return inside * window(self.y, coordinates[1], spacing[1])

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del particle
        return self.height * self._inside(coordinates, spacing)

    def mass_excess(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray | None:
        """Return what it adds to the mass [mass]; see `Piece.mass_excess`."""
        if self.mass is None:
            return None
        return (self.mass - particle.mass) * self._inside(coordinates, spacing)


@dataclass(frozen=True)
class Step(Piece):
    """``height`` beyond ``at``; sharp, or height / (1 + exp(-(x - at)/width))."""

    shape: ClassVar[str] = "step"

    height: float = declare("number", "V far beyond `at`", dimension="energy")
    at: float = declare("number", "position of the step", dimension="length")
    width: float | None = declare(
        "number",
        "width of a smooth step; left out, the step is sharp",
        dimension="length",
        above=0.0,
        default=None,
    )
    mass: float | None = declare(
        "number",
        "mass beyond `at`, sharp; default: the particle's",
        dimension="mass",
        above=0.0,
        default=None,
    )
    axis: str = declare("choice", "axis it runs along", options=AXES, default="x")

    @property
    def sharp(self) -> bool:
        """Whether V or the mass jumps."""
        return self.width is None or self.mass is not None

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return its edge along an axis [length], none if it is smooth."""
        return (self.at,) if self.sharp and AXES[axis] == self.axis else ()

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return axis_faults(self.axis, axes)

    def _beyond(self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...]) -> RealArray:
        axis = AXES.index(self.axis)
        return profile((coordinates[axis] - self.at) / spacing[axis])

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del particle
        if self.width is None:
            return self.height * self._beyond(coordinates, spacing)
        z = (coordinates[AXES.index(self.axis)] - self.at) / self.width
        # The same as 1/(1 + exp(-z)), without overflow far away.
        return self.height * (1 + np.tanh(z / 2)) / 2

    def mass_excess(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray | None:
        """Return what it adds to the mass [mass]; see `Piece.mass_excess`."""
        if self.mass is None:
            return None
        return (self.mass - particle.mass) * self._beyond(coordinates, spacing)


@dataclass(frozen=True)
class Aperture:
    """An opening of a screen along y."""

    center: float = declare("number", "its middle", dimension="length")
    width: float = declare("number", "its width", dimension="length", above=0.0)


@dataclass(frozen=True)
class Screen(Piece):
    """A wall across x, ``thickness`` thick with its middle at ``at``, with openings along y."""

    shape: ClassVar[str] = "screen"

    at: float = declare("number", "middle of the wall along x", dimension="length")
    thickness: float = declare("number", "its thickness", dimension="length", above=0.0)
    height: float = declare("number", "V inside the wall", dimension="energy")
    apertures: tuple[Aperture, ...] = declare(
        "tables", "the openings, { center, width } each", of=Aperture, default=()
    )

    @property
    def sharp(self) -> bool:
        """Always: a wall has edges."""
        return True

    def _wall(self) -> Span:
        return Span(self.at - self.thickness / 2, self.at + self.thickness / 2)

    def _openings(self) -> tuple[Span, ...]:
        return tuple(
            Span(opening.center - opening.width / 2, opening.center + opening.width / 2)
            for opening in self.apertures
        )

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return its edges along an axis [length]."""
        spans = (self._wall(),) if axis == 0 else self._openings()
        return tuple(edge for span in spans for edge in (span.lower, span.upper))

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        if len(axes) < 2:
            return (("shape", "need axes x and y for a screen, got x alone"),)
        spans = sorted(self._openings(), key=lambda span: span.lower)
        for before, after in pairwise(spans):
            if after.lower < before.upper:
                message = f"need openings apart, two share y = {after.lower:g}..{before.upper:g}"
                return (("apertures", message),)
        return ()

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del particle
        x, y = coordinates
        solid = 1.0 - sum(window(span, y, spacing[1]) for span in self._openings())
        return self.height * window(self._wall(), x, spacing[0]) * solid

"""Pieces with sharp edges: slab, step, layers, screen.

Each edge is smoothed to the spacing as `wavepack.physics.edges` says.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.edges import profile, window
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import AXES, Faults, Piece, finite


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

"""Pieces without jumps: ramp, gaussian, sech2, harmonic, saddle, morse, softcore, field."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.edges import clipped
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import AXES, Faults, Piece, finite


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


@dataclass(frozen=True)
class Gaussian(Piece):
    r"""height exp(-sum (x - center)^2 / (2 sigma^2)); uniform along an axis left out."""

    shape: ClassVar[str] = "gaussian"

    height: float = declare("number", "V at the center", dimension="energy")
    center: Mapping[str, float] = declare(
        "each_axis", "its center; 0 along an axis left out", dimension="length", default={}
    )
    sigma: Mapping[str, float] = declare(
        "each_axis", "its width; uniform along an axis left out", dimension="length", above=0.0
    )


@dataclass(frozen=True)
class Sech2(Piece):
    """height / cosh^2((x - at)/width)."""

    shape: ClassVar[str] = "sech2"

    height: float = declare("number", "V at the middle", dimension="energy")
    at: float = declare("number", "its middle", dimension="length")
    width: float = declare("number", "its width", dimension="length", above=0.0)
    axis: str = declare("choice", "axis it runs along", options=AXES, default="x")


@dataclass(frozen=True)
class Harmonic(Piece):
    r"""m omega^2 (x - center)^2 / 2 = quantum^2 (x - center)^2 / (4 c), c = hbar^2/2m."""

    shape: ClassVar[str] = "harmonic"

    quantum: Mapping[str, float] = declare(
        "each_axis",
        "hbar omega; an axis left out is not confined",
        dimension="energy",
        at_least=0.0,
    )
    center: Mapping[str, float] = declare(
        "each_axis", "its middle; 0 along an axis left out", dimension="length", default={}
    )


@dataclass(frozen=True)
class Saddle(Piece):
    r"""height - m wx^2 x^2/2 + m wy^2 y^2/2, from the center."""

    shape: ClassVar[str] = "saddle"

    height: float = declare("number", "V at the saddle point", dimension="energy", default=0.0)
    quantum: Mapping[str, float] = declare(
        "each_axis",
        "hbar omega along x, the way over, and y, across it",
        dimension="energy",
        at_least=0.0,
    )
    center: Mapping[str, float] = declare(
        "each_axis", "the saddle point; 0 along an axis left out", dimension="length", default={}
    )


@dataclass(frozen=True)
class Morse(Piece):
    """depth ((1 - exp(-stiffness (x - at)))^2 - 1)."""

    shape: ClassVar[str] = "morse"

    depth: float = declare("number", "depth of the well", dimension="energy")
    stiffness: float = declare("number", "range parameter", dimension="wavenumber")
    at: float = declare("number", "position of the minimum", dimension="length")
    axis: str = declare("choice", "axis it runs along", options=AXES, default="x")


@dataclass(frozen=True)
class SoftCore(Piece):
    """charge e^2 / (4 pi eps0 sqrt(r^2 + softening^2))."""

    shape: ClassVar[str] = "softcore"

    charge: float = declare("number", "product of both charges in e^2; negative attracts")
    softening: float = declare("number", "softening length", dimension="length", above=0.0)
    center: Mapping[str, float] = declare(
        "each_axis", "its center; 0 along an axis left out", dimension="length", default={}
    )


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

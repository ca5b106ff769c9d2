"""Smooth pieces: gaussian, sech2, harmonic, saddle, morse, softcore."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import declare
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import AXES, Faults, Piece, axis_faults, mapping_faults

#: Exponents are cut here: e^(-FAR) is nothing, e^(FAR) still a number.
FAR: Final = 690.0


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

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return (
            *mapping_faults("center", self.center, axes),
            *mapping_faults("sigma", self.sigma, axes),
        )

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing, particle
        exponent = np.zeros([1] * coordinates[0].ndim)
        for name, x in zip(AXES, coordinates, strict=False):
            if name in self.sigma:
                z = (x - self.center.get(name, 0.0)) / self.sigma[name]
                exponent = exponent + z**2 / 2
        return self.height * np.exp(-np.minimum(exponent, FAR))


@dataclass(frozen=True)
class Sech2(Piece):
    """height / cosh^2((x - at)/width)."""

    shape: ClassVar[str] = "sech2"

    height: float = declare("number", "V at the middle", dimension="energy")
    at: float = declare("number", "its middle", dimension="length")
    width: float = declare("number", "its width", dimension="length", above=0.0)
    axis: str = declare("choice", "axis it runs along", options=AXES, default="x")

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return axis_faults(self.axis, axes)

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing, particle
        z = np.abs(coordinates[AXES.index(self.axis)] - self.at) / self.width
        return self.height / np.cosh(np.minimum(z, FAR / 2)) ** 2


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

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return (
            *mapping_faults("quantum", self.quantum, axes),
            *mapping_faults("center", self.center, axes),
        )

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing
        return _parabolas(coordinates, self.quantum, self.center, particle)


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

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return (
            *mapping_faults("quantum", self.quantum, axes),
            *mapping_faults("center", self.center, axes),
        )

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing
        over = {name: quantum for name, quantum in self.quantum.items() if name == "x"}
        across = {name: quantum for name, quantum in self.quantum.items() if name != "x"}
        hill = _parabolas(coordinates, over, self.center, particle)
        return self.height - hill + _parabolas(coordinates, across, self.center, particle)


@dataclass(frozen=True)
class Morse(Piece):
    """depth ((1 - exp(-stiffness (x - at)))^2 - 1)."""

    shape: ClassVar[str] = "morse"

    depth: float = declare("number", "depth of the well", dimension="energy")
    stiffness: float = declare("number", "range parameter", dimension="wavenumber")
    at: float = declare("number", "position of the minimum", dimension="length")
    axis: str = declare("choice", "axis it runs along", options=AXES, default="x")

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return axis_faults(self.axis, axes)

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing, particle
        z = self.stiffness * (coordinates[AXES.index(self.axis)] - self.at)
        return self.depth * (np.expm1(np.minimum(-z, FAR / 2)) ** 2 - 1)


@dataclass(frozen=True)
class SoftCore(Piece):
    """charge e^2 / (4 pi eps0 sqrt(r^2 + softening^2))."""

    shape: ClassVar[str] = "softcore"

    charge: float = declare("number", "product of both charges in e^2; negative attracts")
    softening: float = declare("number", "softening length", dimension="length", above=0.0)
    center: Mapping[str, float] = declare(
        "each_axis", "its center; 0 along an axis left out", dimension="length", default={}
    )

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return (*mapping_faults("center", self.center, axes),)

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing
        square = np.full([1] * coordinates[0].ndim, self.softening**2)
        for name, x in zip(AXES, coordinates, strict=False):
            square = square + (x - self.center.get(name, 0.0)) ** 2
        return np.asarray(self.charge * particle.coulomb / np.sqrt(square))


def _parabolas(
    coordinates: tuple[RealArray, ...],
    quantum: Mapping[str, float],
    center: Mapping[str, float],
    particle: Particle,
) -> RealArray:
    r"""Return the sum of :math:`(\hbar\omega)^2 (x - x_0)^2/4c` over the axes [energy]."""
    total = np.zeros([1] * coordinates[0].ndim)
    for name, x in zip(AXES, coordinates, strict=False):
        if name in quantum:
            spring = quantum[name] ** 2 / (4 * particle.stiffness)
            total = total + spring * (x - center.get(name, 0.0)) ** 2
    return total

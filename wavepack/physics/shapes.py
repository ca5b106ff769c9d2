"""What every piece of the potential shares."""

import math
from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, Protocol

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.drives import Drive
from wavepack.physics.particle import Particle

#: (key, message) of each contradiction between the fields of a piece or packet.
Faults = tuple[tuple[str, str], ...]

#: Names of the axes, in array order; a grid uses the first one or two.
AXES = ("x", "y")


class Converter(Protocol):
    """A unit system, as far as the readers of custom fields need it."""

    def convert(self, value: object, dimension: str) -> float:
        """Return a number, or a text with a unit, in units of the run."""
        ...


@dataclass(frozen=True)
class Piece(ABC):
    """A piece of the potential; the pieces of a scenario add up."""

    shape: ClassVar[str]

    name: str = declare("text", "name of the piece; default: the shape and its number", default="")
    acts: str = declare(
        "choice",
        "`before`: only shapes eigenstate packets, gone at t = 0; `during`: only from t = 0 on",
        options=("always", "before", "during"),
        default="always",
    )
    drive: Drive | None = declare(
        "table", "a factor in time that multiplies the whole piece", of=Drive, default=None
    )

    @abstractmethod
    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy], without its drive, at any positions.

        Parameters
        ----------
        coordinates : tuple of real arrays
            Position along each axis [length], broadcasting against each other.
        spacing : tuple of float
            Widths to which sharp edges are smoothed [length].
        particle : Particle
            What feels it.

        Returns
        -------
        real array
            V, of a shape that broadcasts to that of the coordinates.
        """

    def mass_excess(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray | None:
        """Return what the piece adds to the particle's mass [mass], smoothed alike.

        None if the piece sets no mass.
        """
        del coordinates, spacing, particle
        return None

    @property
    def sharp(self) -> bool:
        """Whether V jumps somewhere."""
        return False

    @property
    def cell_sampled(self) -> bool:
        """Whether V on a grid is the average of many samples of each cell."""
        return False

    def edges(self, axis: int) -> tuple[float, ...]:
        """Return where V or its slope jumps along an axis, as far as known [length]."""
        del axis
        return ()

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        del axes
        return ()


def finite(*positions: float) -> tuple[float, ...]:
    """Return those positions that are not infinite."""
    return tuple(position for position in positions if math.isfinite(position))


def axis_faults(axis: str, axes: tuple[str, ...]) -> Faults:
    """Return the fault of a piece that runs along an axis the grid lacks."""
    if axis in axes:
        return ()
    return (("axis", f"need an axis of the grid ({', '.join(axes)}), got {axis}"),)


def mapping_faults(key: str, values: Mapping[str, float], axes: tuple[str, ...]) -> Faults:
    """Return a fault for each axis of a mapping that the grid lacks."""
    return tuple(
        (f"{key}.{name}", f"need an axis of the grid ({', '.join(axes)}), got {name}")
        for name in values
        if name not in axes
    )


def spans_faults(spans: Mapping[str, Span], axes: tuple[str, ...]) -> Faults:
    """Return the faults of spans by axis: an axis the grid lacks, an empty span."""
    found = []
    for name, span in spans.items():
        if name not in axes and span != Span():
            found.append((name, f"need an axis of the grid ({', '.join(axes)}), got {name}"))
        if not span.lower < span.upper:
            found.append((name, f"need from < to, got {span.lower:g}..{span.upper:g}"))
    return tuple(found)

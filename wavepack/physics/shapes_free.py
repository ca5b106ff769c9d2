"""Pieces of any form: a formula, a table."""

from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

import numpy as np

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import AXES, Faults, Piece
from wavepack.physics.tables import Samples, interpolated, read_samples

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression


@dataclass(frozen=True)
class Formula(Piece):
    """Any expression in x and y; sampled many times a cell where it jumps."""

    shape: ClassVar[str] = "formula"

    expression: "Expression" = declare("expression", "V in `x` and `y`", dimension="energy")
    jumps: bool = declare(
        "flag",
        "sample each cell many times; default: if the expression holds a comparison",
        key="sharp",
        default=False,
    )

    @property
    def sharp(self) -> bool:
        """Whether it may jump: told so, or holding a comparison."""
        return self.jumps or self.expression.sharp

    @property
    def cell_sampled(self) -> bool:
        """Whether V on a grid comes from many samples of each cell."""
        return self.sharp

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        return expression_faults("expression", self.expression, axes)

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions, jumps and all; see `Piece.evaluate`."""
        del spacing, particle
        return evaluated(self.expression, coordinates)


@dataclass(frozen=True)
class Table(Piece):
    """V from a file (CSV, NPY, HDF5), interpolated by cubic splines, constant outside."""

    shape: ClassVar[str] = "table"

    file: str = declare("text", "path of the file, from the scenario's folder")
    x: Span = declare(
        "span",
        "first and last x of a NPY file that holds bare values",
        dimension="length",
        default=Span(),
    )
    y: Span = declare(
        "span",
        "first and last y of a NPY file that holds bare values",
        dimension="length",
        default=Span(),
    )

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        try:
            self._samples(len(axes))
        except ValueError as error:
            return (("file", str(error)),)
        return ()

    def evaluate(
        self, coordinates: tuple[RealArray, ...], spacing: tuple[float, ...], particle: Particle
    ) -> RealArray:
        """Return V [energy] at any positions; see `Piece.evaluate`."""
        del spacing, particle
        return np.real(interpolated(self._samples(len(coordinates)), coordinates))

    def _samples(self, ndim: int) -> Samples:
        return read_samples(self.file, ndim, (self.x, self.y)[:ndim])


def evaluated(expression: "Expression", coordinates: tuple[RealArray, ...]) -> RealArray:
    """Return an expression in x and y at any positions; may be not finite."""
    with np.errstate(all="ignore"):
        value = expression.evaluate(**dict(zip(AXES, coordinates, strict=False)))
        return np.asarray(value, dtype=float)


def expression_faults(key: str, expression: "Expression", axes: tuple[str, ...]) -> Faults:
    """Return the fault of an expression that uses more than the positions."""
    unknown = sorted(expression.names - set(axes))
    if not unknown:
        return ()
    hint = "; give time to a drive" if unknown == ["t"] else ""
    return ((key, f"need an expression in {', '.join(axes)}, found {', '.join(unknown)}{hint}"),)

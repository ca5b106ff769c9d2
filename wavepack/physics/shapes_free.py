"""Pieces of any form: a formula, a table."""

from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

from wavepack.arrays import RealArray
from wavepack.fields import Span, declare
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import AXES, Faults, Piece

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

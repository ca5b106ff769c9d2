"""Packets of any form: a formula, a table."""

from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

import numpy as np

from wavepack.arrays import ComplexArray
from wavepack.fields import Span, declare
from wavepack.physics.packet_shapes import Packet, Scene
from wavepack.physics.shapes import Faults
from wavepack.physics.shapes_free import evaluated, expression_faults
from wavepack.physics.tables import Samples, interpolated, outside, read_samples

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression


@dataclass(frozen=True)
class FormulaPacket(Packet):
    """Any expression in x and y, not normalised."""

    shape: ClassVar[str] = "formula"

    expression: "Expression" = declare("expression", "real part in `x` and `y`")
    imaginary: "Expression | None" = declare(
        "expression", "imaginary part in `x` and `y`", default=None
    )

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        found = expression_faults("expression", self.expression, axes)
        if self.imaginary is not None:
            found += expression_faults("imaginary", self.imaginary, axes)
        return found

    def wavefunction(self, scene: Scene) -> ComplexArray:
        """Return psi on the grid, of any norm."""
        psi = evaluated(self.expression, scene.grid.coordinates).astype(complex)
        if self.imaginary is not None:
            psi = psi + 1j * evaluated(self.imaginary, scene.grid.coordinates)
        return np.array(np.broadcast_to(psi, scene.grid.shape))


@dataclass(frozen=True)
class TablePacket(Packet):
    """psi from a file (CSV, NPY, HDF5), interpolated by cubic splines, zero outside."""

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

    def wavefunction(self, scene: Scene) -> ComplexArray:
        """Return psi on the grid, of any norm."""
        try:
            samples = self._samples(scene.grid.ndim)
        except ValueError as error:
            raise self.error("file", str(error)) from None
        psi = interpolated(samples, scene.grid.coordinates)
        return np.where(outside(samples, scene.grid.coordinates), 0.0, psi).astype(complex)

    def _samples(self, ndim: int) -> Samples:
        return read_samples(self.file, ndim, (self.x, self.y)[:ndim], wave=True)

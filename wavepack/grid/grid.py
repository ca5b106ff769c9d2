"""Space: a product of axes, with its volume element and inner product."""

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.axis import Axis


@dataclass(frozen=True)
class Grid:
    """A product of axes; axis 0 is x, axis 1 is y."""

    axes: tuple[Axis, ...]

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the axes, in array order."""
        return tuple(axis.name for axis in self.axes)

    @property
    def ndim(self) -> int:
        """Number of axes."""
        return len(self.axes)

    @property
    def shape(self) -> tuple[int, ...]:
        """Points along each axis."""
        return tuple(axis.points for axis in self.axes)

    @property
    def size(self) -> int:
        """Points in all."""
        return math.prod(self.shape)

    @property
    def cell(self) -> float:
        """Volume of one cell [length**ndim]."""
        return math.prod(axis.spacing for axis in self.axes)

    @cached_property
    def coordinates(self) -> tuple[RealArray, ...]:
        """Open mesh: for each axis an array of ndim dimensions that broadcasts."""
        return tuple(np.ix_(*(axis.coordinates for axis in self.axes)))

    def index(self, name: str) -> int:
        """Return the array axis of a named axis; KeyError if there is none."""
        try:
            return self.names.index(name)
        except ValueError:
            raise KeyError(name) from None

    def along(self, values: RealArray, axis: int) -> RealArray:
        """Shape a vector of one axis so that it broadcasts over the grid."""
        return values.reshape([-1 if i == axis else 1 for i in range(self.ndim)])

    def inner(self, a: ComplexArray, b: ComplexArray) -> complex:
        r"""Return :math:`\langle a|b\rangle = \sum a^* b\,\mathrm{d}V`."""
        return complex(np.vdot(a, b)) * self.cell

    def norm(self, psi: ComplexArray) -> float:
        r"""Return the probability :math:`\sum |\psi|^2\,\mathrm{d}V`."""
        return float(np.vdot(psi, psi).real) * self.cell

    def walled(self) -> "Grid":
        """Return the grid with walls at its absorbing ends (see `Axis.walled`)."""
        return Grid(tuple(axis.walled() for axis in self.axes))

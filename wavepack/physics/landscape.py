"""The potential on the grid: a static part and parts driven in time."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from wavepack.arrays import Mask, RealArray
from wavepack.grid.grid import Grid
from wavepack.physics.drives import Drive
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import Piece, sample, sample_gradient

#: Below this share of its largest value a driven piece is left out: it could
#: not change the last bit of a phase.
NEGLIGIBLE = 1e-18

#: Rows of axis 0 evaluated at once, so that set-up needs little memory.
BLOCK_POINTS = 1 << 18


@dataclass(frozen=True)
class DrivenPart:
    """One piece times a factor in time, kept only where it acts.

    Attributes
    ----------
    piece : Piece
        The shape and its drive.
    box : tuple of slice
        Where it acts.
    values : real array
        Its values [energy] inside the box, for a factor of one.
    """

    piece: Piece
    drive: Drive
    box: tuple[slice, ...]
    values: RealArray


class Landscape:
    """The real potential of a run, V(x, t) = V_0(x) + sum of f_k(t) V_k(x).

    Pieces that act only before the start shape eigenstates and are absent here.
    """

    def __init__(self, grid: Grid, particle: Particle, pieces: Sequence[Piece]) -> None:
        self.grid = grid
        self.particle = particle
        acting = [piece for piece in pieces if piece.acts != "before"]
        self.static_pieces = tuple(piece for piece in acting if piece.drive is None)
        self.static = self._assemble(self.static_pieces)
        self.driven = tuple(
            self._driven(piece, piece.drive.bound(particle.hbar))
            for piece in acting
            if piece.drive is not None
        )

    @property
    def whole(self) -> tuple[slice, ...]:
        """The box of the whole grid."""
        return tuple(slice(0, n) for n in self.grid.shape)

    def everywhere(self, part: DrivenPart) -> bool:
        """Whether a driven part acts on the whole grid."""
        return part.box == self.whole

    @property
    def sharp(self) -> bool:
        """Whether any piece has sharp edges."""
        return any(p.sharp for p in self.static_pieces) or any(
            part.piece.sharp for part in self.driven
        )

    def at(self, time: float) -> RealArray:
        """Return V [energy] on the grid at one time."""
        if not self.driven:
            return self.static
        values = self.static.copy()
        for part in self.driven:
            values[part.box] += part.drive.factor(time) * part.values
        return values

    def lowest(self, until: float) -> float:
        """Return a lower bound of V at all times up to one [energy]."""
        return float(self.static.min()) - sum(
            part.drive.largest(until) * float(np.abs(part.values).max()) for part in self.driven
        )

    def static_gradient(self, axis: int, rows: slice) -> RealArray:
        """Return the slope of the static part [energy/length] on a block of rows."""
        total = np.zeros((len(range(*rows.indices(self.grid.shape[0]))), *self.grid.shape[1:]))
        for piece in self.static_pieces:
            total += sample_gradient(piece, self.grid, self.particle, axis, rows)
        return total

    def driven_gradient(self, part: DrivenPart, axis: int) -> RealArray:
        """Return the slope of a driven part [energy/length] inside its box."""
        rows = part.box[0]
        return sample_gradient(part.piece, self.grid, self.particle, axis, rows)[
            (slice(None), *part.box[1:])
        ]

    def piece_gradient(self, piece: Piece, axis: int, rows: slice) -> RealArray:
        """Return the slope of one piece [energy/length] on a block of rows."""
        return sample_gradient(piece, self.grid, self.particle, axis, rows)

    def blocks(self) -> Iterator[slice]:
        """Yield the rows of axis 0 in blocks of bounded size."""
        rows = max(1, BLOCK_POINTS * self.grid.shape[0] // self.grid.size)
        for first in range(0, self.grid.shape[0], rows):
            yield slice(first, min(first + rows, self.grid.shape[0]))

    def _assemble(self, pieces: Sequence[Piece]) -> RealArray:
        values = np.zeros(self.grid.shape)
        for rows in self.blocks():
            for piece in pieces:
                values[rows] += sample(piece, self.grid, self.particle, rows)
        return values

    def _driven(self, piece: Piece, drive: Drive) -> DrivenPart:
        values = self._assemble([piece])
        box = _box(np.abs(values) > NEGLIGIBLE * float(np.abs(values).max()))
        if 2 * values[box].size >= self.grid.size:
            box = self.whole
        return DrivenPart(piece, drive, box, values[box].copy())


def _box(mask: Mask) -> tuple[slice, ...]:
    """Return the smallest box that holds every true cell."""
    box = []
    for axis in range(mask.ndim):
        others = tuple(i for i in range(mask.ndim) if i != axis)
        hit = np.flatnonzero(mask.any(axis=others))
        box.append(slice(int(hit[0]), int(hit[-1]) + 1) if hit.size else slice(0, 1))
    return tuple(box)

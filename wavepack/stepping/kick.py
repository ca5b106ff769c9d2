r"""The factor :math:`e^{-i\phi(x,t)}` of a real potential, with the layers' damping."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.blocks import Blocks

#: Values that need no more than single precision.
SmallArray: TypeAlias = npt.NDArray[np.float32]
Factor: TypeAlias = Callable[[float], float]
Term: TypeAlias = tuple[Factor, RealArray | SmallArray]


@dataclass(frozen=True)
class DrivenPhase:
    """A phase that driven parts add inside a box: sum of f_j(t) values_j."""

    box: tuple[slice, ...]
    terms: tuple[Term, ...]


class Kick:
    r"""Multiply the state by a static factor and by driven phases.

    Parameters
    ----------
    static : sequence of complex or real arrays
        Static factors, damping included, multiplied one after the other; each
        has the grid's shape or broadcasts to it.
    driven : sequence of DrivenPhase
        Phases [radians] that are subtracted: the state gets
        :math:`e^{-i\sum f_j(t)\phi_j}`.
    """

    def __init__(
        self,
        psi: ComplexArray,
        static: Sequence[ComplexArray | RealArray],
        driven: Sequence[DrivenPhase],
    ) -> None:
        self._psi = psi
        self._static = tuple(static)
        self._driven = tuple(driven)

    def apply(self, rows: slice, time: float) -> None:
        """Kick a block of rows at a time."""
        part = self._psi[rows]
        for factor in self._static:
            np.multiply(part, factor if len(factor) == 1 else factor[rows], out=part)
        for phase in self._driven:
            first = max(phase.box[0].start, rows.start)
            last = min(phase.box[0].stop, rows.stop)
            if first < last:
                self._turn(phase, first, last, time)

    def _turn(self, phase: DrivenPhase, first: int, last: int, time: float) -> None:
        start = phase.box[0].start
        angle: npt.NDArray[np.floating[Any]] | None = None
        for factor, values in phase.terms:
            strength = factor(time)
            if strength == 0.0:
                continue
            term = strength * values[first - start : last - start]
            angle = term if angle is None else np.add(angle, term, out=angle)
        if angle is not None:
            turn = np.empty(angle.shape, dtype=np.complex128)
            np.cos(angle, out=turn.real)
            np.sin(angle, out=turn.imag)
            part = self._psi[(slice(first, last), *phase.box[1:])]
            np.multiply(part, np.conj(turn, out=turn), out=part)


def phase_factor(potential: RealArray, scale: float, blocks: Blocks) -> ComplexArray:
    """Return exp(-i scale V), built block by block."""
    result = np.empty(potential.shape, dtype=np.complex128)
    for rows in blocks.slices:
        angle = potential[rows] * scale
        np.cos(angle, out=result[rows].real)
        np.sin(-angle, out=result[rows].imag)
    return result

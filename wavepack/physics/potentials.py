"""The potential: every shape a piece can have, and pieces on a grid.

How a scenario's text becomes a piece: `wavepack.fields.specs` of the class says
how each field is read. What that cannot say:

- Kind "custom": the class has ``read_<field>(raw, units) -> value`` (a class
  method; raises ValueError with what was found and what is wanted) and
  ``write_<field>(value) -> number | string | list | dict``, bare numbers in the
  units of the run, which ``read_<field>`` reads back to the same value. These are
  Layers.layers, Ramp.heights, GaussianPacket.direction, ChannelPacket.direction,
  Eigenstate.number, Eigenstate.of. ``units`` need only offer
  ``convert(text_or_number, dimension) -> float``.
- Kind "table" and "tables": nested dataclasses (Drive, Envelope, Aperture) with
  specs of their own.
- ``faults(axes)`` of every piece and packet (``faults()`` of Drive and Envelope)
  returns (key, message) pairs of what is wrong between fields or for these axes;
  to be called after reading. Keys are the scenario's.
- ``file`` of a table must have been made absolute before `faults` is called.
- Optional mappings are empty, optional spans ``Span()``, other optional fields
  None where left out; a writer leaves those out again.
"""

from collections.abc import Sequence
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.errors import Fault, ScenarioError
from wavepack.grid.grid import Grid
from wavepack.physics.lattice import BLOCK_SAMPLES, blocks, size
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import Faults, Piece
from wavepack.physics.shapes_free import Formula, Table
from wavepack.physics.shapes_layers import Layer, Layers
from wavepack.physics.shapes_linear import Field, Ramp
from wavepack.physics.shapes_sharp import Aperture, Screen, Slab, Step
from wavepack.physics.shapes_smooth import (
    Gaussian,
    Harmonic,
    Morse,
    Saddle,
    Sech2,
    SoftCore,
)
from wavepack.physics.smoothing import REACH, Function, smoothed

__all__ = [
    "SHAPES",
    "Aperture",
    "Faults",
    "Field",
    "Formula",
    "Gaussian",
    "Harmonic",
    "Layer",
    "Layers",
    "Morse",
    "Piece",
    "Ramp",
    "Saddle",
    "Screen",
    "Sech2",
    "Slab",
    "SoftCore",
    "Step",
    "Table",
    "sample",
    "sample_gradient",
    "total",
]

#: The class of each `shape` of a scenario's potential.
SHAPES: dict[str, type[Piece]] = {
    cls.shape: cls
    for cls in (
        Slab,
        Step,
        Ramp,
        Layers,
        Gaussian,
        Sech2,
        Harmonic,
        Saddle,
        Morse,
        SoftCore,
        Field,
        Screen,
        Formula,
        Table,
    )
}

#: Steps a spacing of the differences that give slopes.
SLOPE_STEPS: Final = 16


def sample(piece: Piece, grid: Grid, particle: Particle, rows: slice = slice(None)) -> RealArray:
    """Return V of one piece, without its drive, on rows of axis 0 of a grid.

    Parameters
    ----------
    piece : Piece
        What to sample; its edges are smoothed to the spacing
        (`wavepack.physics.edges`), on a periodic axis also across its seam.
    grid : Grid
        Where.
    particle : Particle
        What feels it.
    rows : slice
        Rows of axis 0.

    Returns
    -------
    real array
        V [energy], shape of those rows; its own memory.

    Raises
    ------
    ScenarioError
        If V is not finite somewhere.
    """
    if piece.cell_sampled or _meets_seam(piece, grid):
        values = smoothed(_unsmoothed(piece, grid, particle), grid, rows)
    else:
        mesh = _mesh(grid, rows)
        values = np.array(
            np.broadcast_to(piece.evaluate(mesh, _spacing(grid), particle), size(mesh))
        )
    _check_finite(piece, values, grid, rows)
    return values


def sample_gradient(
    piece: Piece, grid: Grid, particle: Particle, axis: int, rows: slice = slice(None)
) -> RealArray:
    r"""Return the slope of `sample` along one axis [energy/length].

    .. math:: V' = \frac{45(V_1 - V_{-1}) - 9(V_2 - V_{-2}) + (V_3 - V_{-3})}{60\,h},
              \qquad h = \Delta/16

    or, where V is sampled many times a cell, the convolution with the
    kernel's own slope.

    Raises
    ------
    ScenarioError
        If the slope is not finite somewhere.
    """
    if piece.cell_sampled or _meets_seam(piece, grid):
        slope = smoothed(_unsmoothed(piece, grid, particle), grid, rows, axis)
        _check_finite(piece, slope, grid, rows)
        return slope
    mesh, spacing = _mesh(grid, rows), _spacing(grid)
    h = spacing[axis] / SLOPE_STEPS
    slope = np.zeros(size(mesh))
    for steps, weight in ((1, 45.0), (2, -9.0), (3, 1.0)):
        for sign in (1, -1):
            moved = list(mesh)
            moved[axis] = mesh[axis] + sign * steps * h
            value = piece.evaluate(tuple(moved), spacing, particle)
            slope += sign * weight / (60 * h) * value
    _check_finite(piece, slope, grid, rows)
    return slope


def total(
    pieces: Sequence[Piece],
    grid: Grid,
    particle: Particle,
    time: float = 0.0,
    phase: str = "during",
    rows: slice = slice(None),
) -> RealArray:
    """Return V [energy] of all pieces that act, drives included, on rows of axis 0.

    Parameters
    ----------
    pieces : sequence of Piece
        The potential.
    grid : Grid
        Where.
    particle : Particle
        What feels it.
    time : float
        When [time].
    phase : str
        ``"before"`` the start, for eigenstates, or ``"during"`` the run.
    rows : slice
        Rows of axis 0.

    Raises
    ------
    ScenarioError
        If V is not finite somewhere.
    """
    first, last, _ = rows.indices(grid.shape[0])
    values = np.zeros((last - first, *grid.shape[1:]))
    acting = [piece for piece in pieces if piece.acts in ("always", phase)]
    for block in blocks(grid, rows, BLOCK_SAMPLES):
        for piece in acting:
            part = sample(piece, grid, particle, block)
            if piece.drive is not None:
                part *= piece.drive.bound(particle.hbar).factor(time)
            values[block.start - first : block.stop - first] += part
    return values


def _meets_seam(piece: Piece, grid: Grid) -> bool:
    """Whether edges must be smoothed across the seam of a periodic axis.

    So it is where one lies near the seam, or where an odd number of them leaves
    a jump at the seam itself, as a half-space does.
    """
    for i, axis in enumerate(grid.axes):
        if not piece.sharp or "periodic" not in axis.ends:
            continue
        edges = piece.edges(i)
        reach = REACH * axis.spacing
        near = any(min(abs(e - axis.start), abs(e - axis.stop)) < reach for e in edges)
        if near or len(edges) % 2:
            return True
    return False


def _unsmoothed(piece: Piece, grid: Grid, particle: Particle) -> Function:
    """Return V with its edges as good as sharp, for `smoothed` to smooth."""
    spacing = tuple(axis.spacing * 1e-9 for axis in grid.axes)
    return lambda mesh: piece.evaluate(mesh, spacing, particle)


def _spacing(grid: Grid) -> tuple[float, ...]:
    return tuple(axis.spacing for axis in grid.axes)


def _mesh(grid: Grid, rows: slice) -> tuple[RealArray, ...]:
    return (grid.coordinates[0][rows], *grid.coordinates[1:])


def _check_finite(piece: Piece, values: RealArray, grid: Grid, rows: slice) -> None:
    if np.isfinite(values).all():
        return
    first = np.argwhere(~np.isfinite(values))[0]
    mesh = _mesh(grid, rows)
    place = ", ".join(
        f"{name} = {x.ravel()[i]:g}" for name, x, i in zip(grid.names, mesh, first, strict=True)
    )
    message = f"need a finite potential on the grid, got {values[tuple(first)]} at {place}"
    raise ScenarioError([Fault(f"potential.{piece.name or piece.shape}", message)])

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

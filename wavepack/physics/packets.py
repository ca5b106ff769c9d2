"""Initial states: every shape a packet can have.

How a scenario's text becomes a packet: see `wavepack.physics.potentials`.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

from wavepack.fields import Span, declare

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression


@dataclass(frozen=True)
class Packet:
    """One packet; several are each normalised, times amplitude e^(i phase), added."""

    shape: ClassVar[str]

    name: str = declare("text", "name of the packet; default: the shape and its number", default="")
    amplitude: float = declare("number", "factor of the normalised packet", default=1.0)
    phase: float = declare("angle", "phase of that factor", default=0.0)
    where: "Expression | None" = declare(
        "expression",
        "keep only the part where this holds, as after finding the particle there",
        default=None,
    )


@dataclass(frozen=True)
class GaussianPacket(Packet):
    """exp(-(x - center)^2/(4 sigma^2) + i k (x - center))."""

    shape: ClassVar[str] = "gaussian"

    center: Mapping[str, float] = declare("each_axis", "mean position", dimension="length")
    sigma: Mapping[str, float] = declare(
        "each_axis", "standard deviation of |psi|^2", dimension="length", above=0.0
    )
    energy: float | None = declare(
        "number",
        "kinetic energy of the central momentum",
        dimension="energy",
        at_least=0.0,
        default=None,
    )
    total_energy: float | None = declare(
        "number",
        "that energy plus V at the center, which must be uniform over the packet",
        dimension="energy",
        default=None,
    )
    direction: float | None = declare(
        "custom",
        '"+x", "-x", "+y", "-y", or an angle from +x towards +y; default "+x"',
        default=None,
    )
    wavenumber: Mapping[str, float] = declare(
        "each_axis",
        "central wave number, instead of energy and direction",
        dimension="wavenumber",
        default={},
    )


@dataclass(frozen=True)
class ChannelPacket(Packet):
    """A Gaussian along its travel times a transverse eigenstate of V there."""

    shape: ClassVar[str] = "channel"

    center: Mapping[str, float] = declare(
        "each_axis", "mean position along the travel", dimension="length"
    )
    sigma: Mapping[str, float] = declare(
        "each_axis", "standard deviation of |psi|^2 along it", dimension="length", above=0.0
    )
    mode: int = declare("whole", "transverse state, 0 the lowest", at_least=0, default=0)
    energy: float | None = declare(
        "number", "kinetic energy along the travel", dimension="energy", at_least=0.0, default=None
    )
    total_energy: float | None = declare(
        "number", "that energy plus the transverse level", dimension="energy", default=None
    )
    direction: float | None = declare(
        "custom", '"+x", "-x", "+y" or "-y"; default "+x"', default=None
    )


@dataclass(frozen=True)
class Eigenstate(Packet):
    """A bound state of the potential, or of some of its pieces."""

    shape: ClassVar[str] = "eigenstate"

    number: int | Mapping[str, int] = declare(
        "custom", "0 the lowest; { x, y } for a separable potential", default=0
    )
    of: tuple[str, ...] = declare(
        "custom", "names of the pieces that bind it; default: all", default=()
    )
    wavenumber: Mapping[str, float] = declare(
        "each_axis", "a kick: factor e^(i k x)", dimension="wavenumber", default={}
    )


@dataclass(frozen=True)
class FormulaPacket(Packet):
    """Any expression in x and y, not normalised."""

    shape: ClassVar[str] = "formula"

    expression: "Expression" = declare("expression", "real part in `x` and `y`")
    imaginary: "Expression | None" = declare(
        "expression", "imaginary part in `x` and `y`", default=None
    )


@dataclass(frozen=True)
class TablePacket(Packet):
    """psi from a file (CSV, NPY, HDF5), interpolated, zero outside."""

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


#: The class of each `shape` of a scenario's packet.
PACKETS: dict[str, type[Packet]] = {
    cls.shape: cls
    for cls in (GaussianPacket, ChannelPacket, Eigenstate, FormulaPacket, TablePacket)
}

"""What every packet shares."""

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

from wavepack.arrays import ComplexArray
from wavepack.errors import Fault, ScenarioError
from wavepack.fields import declare
from wavepack.grid.grid import Grid
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import Faults, Piece

if TYPE_CHECKING:
    from wavepack.physics.expressions import Expression


@dataclass(frozen=True)
class Scene:
    """Where packets are put.

    Attributes
    ----------
    grid : Grid
        Axes of the run.
    particle : Particle
        What moves.
    pieces : tuple of Piece
        The potential.
    differences : int or None
        Order of the staggered differences that will propagate the state; None
        for the spectral kinetic operator.
    """

    grid: Grid
    particle: Particle
    pieces: tuple[Piece, ...]
    differences: int | None = None


@dataclass(frozen=True)
class Launch:
    """How a packet starts, as detectors and default energies see it.

    Attributes
    ----------
    center, wavevector : tuple of float
        Central position [length] and wave number [1/length] along each axis.
    potential : float
        V [energy] at the center.
    level : float or None
        Transverse level [energy] of a channel packet, V included.
    travel : int or None
        Axis along which a channel packet travels.
    """

    center: tuple[float, ...]
    wavevector: tuple[float, ...]
    potential: float
    level: float | None = None
    travel: int | None = None

    def energy(self, particle: Particle) -> float:
        r"""Return the central total energy :math:`\hbar^2k^2/2m + V` [energy].

        For a channel packet, that of its travel plus the transverse level.
        """
        c = particle.stiffness
        if self.level is not None and self.travel is not None:
            return c * self.wavevector[self.travel] ** 2 + self.level
        return c * sum(k**2 for k in self.wavevector) + self.potential


@dataclass(frozen=True)
class Packet(ABC):
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

    @abstractmethod
    def wavefunction(self, scene: Scene) -> ComplexArray:
        """Return psi on the grid, of any norm.

        Raises
        ------
        ScenarioError
            If there is no such state on this grid and potential.
        """

    def launch(self, scene: Scene) -> Launch | None:
        """Return how it starts; None if only its wavefunction can tell."""
        del scene
        return None

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        del axes
        return ()

    def error(self, key: str, message: str) -> ScenarioError:
        """Return the error that names this packet."""
        place = f"packet.{self.name or self.shape}"
        return ScenarioError([Fault(f"{place}.{key}" if key else place, message)])

    def check_inside(self, grid: Grid, center: Mapping[str, float]) -> None:
        """Raise the error of a center that is not on the grid."""
        for axis in grid.axes:
            position = center.get(axis.name)
            if position is not None and not axis.start <= position <= axis.stop:
                ends = f"{axis.start:g}..{axis.stop:g}"
                message = f"need a center on the grid, {ends}, got {position:g}"
                raise self.error(f"center.{axis.name}", message)

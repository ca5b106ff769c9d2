"""Bound states as packets."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar, Final

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.fields import declare
from wavepack.grid.grid import Grid
from wavepack.physics.packet_shapes import Packet, Scene
from wavepack.physics.potentials import total
from wavepack.physics.shapes import Converter, Faults, Piece, mapping_faults

if TYPE_CHECKING:
    from wavepack.physics.kinetic import StaggeredKinetic

#: Levels closer than this part of their energy above the lowest V count as one.
DEGENERATE: Final = 1e-8


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

    @classmethod
    def read_number(cls, raw: object, units: Converter) -> int | Mapping[str, int]:
        """Return a number, or one for each axis.

        Raises
        ------
        ValueError
            If they are not whole and at least 0.
        """
        del units
        for number in raw.values() if isinstance(raw, Mapping) else (raw,):
            if not isinstance(number, int) or isinstance(number, bool) or number < 0:
                wanted = "a whole number from 0 on, or { x, y } of such"
                raise ValueError(f"need {wanted}, got {raw!r}")
        return raw if isinstance(raw, int) else dict(raw)  # type: ignore[call-overload] # seen above

    @classmethod
    def write_number(cls, value: int | Mapping[str, int]) -> int | dict[str, int]:
        """Return the number as `read_number` reads it."""
        return value if isinstance(value, int) else dict(value)

    @classmethod
    def read_of(cls, raw: object, units: Converter) -> tuple[str, ...]:
        """Return names of pieces, from a list or a single one.

        Raises
        ------
        ValueError
            If they are no texts.
        """
        del units
        names = [raw] if isinstance(raw, str) else raw
        if not isinstance(names, list) or not all(isinstance(name, str) for name in names):
            raise ValueError(f"need a list of names of pieces, got {raw!r}")
        return tuple(names)

    @classmethod
    def write_of(cls, value: tuple[str, ...]) -> list[str]:
        """Return the names as `read_of` reads them."""
        return list(value)

    def faults(self, axes: tuple[str, ...]) -> Faults:
        """Return (key, message) for each contradiction, on a grid of these axes."""
        found = list(mapping_faults("wavenumber", self.wavenumber, axes))
        if isinstance(self.number, Mapping) and set(self.number) != set(axes):
            wanted, given = ", ".join(axes), ", ".join(self.number)
            found.append(("number", f"need one for each of {wanted}, got {given or 'none'}"))
        return tuple(found)

    def wavefunction(self, scene: Scene) -> ComplexArray:
        """Return psi on the grid, of any norm."""
        pieces = self._pieces(scene)
        walled = scene.grid.walled()
        potential = total(pieces, walled, scene.particle, phase="before")
        kinetic = staggered(walled, scene, pieces)
        if isinstance(self.number, int):
            state = self._numbered(self.number, walled, potential, scene, kinetic)
        elif walled.ndim == 1:
            state = self._numbered(self.number["x"], walled, potential, scene, kinetic)
        else:
            state = self._product(self.number, walled, potential, scene, kinetic)
        lost = [
            (whole - part, 0) for whole, part in zip(scene.grid.shape, state.shape, strict=True)
        ]
        psi = np.pad(state, lost).astype(complex)
        for name, x in zip(scene.grid.names, scene.grid.coordinates, strict=True):
            psi *= np.exp(1j * self.wavenumber.get(name, 0.0) * x)
        return psi

    def _pieces(self, scene: Scene) -> tuple[Piece, ...]:
        known = {piece.name for piece in scene.pieces}
        unknown = [name for name in self.of if name not in known]
        if unknown:
            names = ", ".join(sorted(known))
            raise self.error("of", f"need names of pieces ({names}), got {', '.join(unknown)}")
        chosen = [piece for piece in scene.pieces if not self.of or piece.name in self.of]
        return tuple(piece for piece in chosen if piece.acts != "during")

    def _numbered(
        self,
        number: int,
        grid: Grid,
        potential: RealArray,
        scene: Scene,
        kinetic: "StaggeredKinetic | None",
    ) -> RealArray:
        from wavepack.physics.eigenstates import lowest_states  # noqa: PLC0415 - slow to import

        if number + 1 >= grid.size:
            raise self.error("number", f"need a state below {grid.size - 1}, got {number}")
        energies, states = lowest_states(grid, potential, scene.particle, number + 2, kinetic)
        twin = twin_of(energies, number, float(potential.min()))
        if twin is not None:
            message = f"need a level of one state, got {number} equal to {twin} to rounding"
            hint = "; give { x, y } if the potential separates" if grid.ndim == 2 else ""
            raise self.error("number", message + hint)
        return np.asarray(states[number])

    def _product(
        self,
        numbers: Mapping[str, int],
        grid: Grid,
        potential: RealArray,
        scene: Scene,
        kinetic: "StaggeredKinetic | None",
    ) -> RealArray:
        from wavepack.physics.eigenstates import lowest_states, separated  # noqa: PLC0415 - slow

        lines = separated(potential)
        uniform = kinetic is None or all(isinstance(mass, float) for mass in kinetic.masses)
        if lines is None or not uniform:
            raise self.error("number", "need a potential a(x) + b(y) for { x, y }, got another")
        factors = []
        for axis, line in zip(grid.axes, lines, strict=True):
            number, own = numbers[axis.name], Grid((axis,))
            if number >= own.size:
                raise self.error("number", f"need {axis.name} below {own.size}, got {number}")
            alone = staggered(own, scene, ())
            factors.append(lowest_states(own, line, scene.particle, number + 1, alone)[1][number])
        return np.outer(*factors)


def staggered(grid: Grid, scene: Scene, pieces: Sequence[Piece]) -> "StaggeredKinetic | None":
    """Return the kinetic operator by differences; None where the spectral one acts."""
    from wavepack.physics.eigenstates import masses_on_links  # noqa: PLC0415 - slow to import
    from wavepack.physics.kinetic import StaggeredKinetic  # noqa: PLC0415 - slow to import

    masses = masses_on_links(grid, scene.particle, pieces)
    if scene.differences is None and all(isinstance(mass, float) for mass in masses):
        return None
    return StaggeredKinetic(grid, scene.particle, masses, scene.differences or 2)


def plane_kinetic(scene: Scene, position: float, travel: int) -> "StaggeredKinetic | None":
    """Return the kinetic operator across a plane of launch; None for the spectral one."""
    from wavepack.physics.kinetic import StaggeredKinetic  # noqa: PLC0415 - slow to import

    axes = list(scene.grid.axes)
    axes[1 - travel] = axes[1 - travel].walled()
    whole = staggered(Grid(tuple(axes)), scene, [p for p in scene.pieces if p.acts != "before"])
    if whole is None:
        return None
    mass = whole.masses[1 - travel]
    if not isinstance(mass, float):
        nearest = int(np.argmin(np.abs(axes[travel].coordinates - position)))
        mass = np.take(mass, nearest, axis=travel)
    return StaggeredKinetic(Grid((axes[1 - travel],)), scene.particle, (mass,), whole.order)


def twin_of(energies: RealArray, number: int, lowest: float) -> int | None:
    """Return the number of a neighbouring level equal to rounding, None if there is none."""
    for other in (number - 1, number + 1):
        close = DEGENERATE * abs(energies[number] - lowest)
        if 0 <= other < len(energies) and abs(energies[other] - energies[number]) <= close:
            return other
    return None

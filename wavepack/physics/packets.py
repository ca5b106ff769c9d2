"""The initial state: every shape of packet, and their combination.

How a scenario's text becomes a packet: see `wavepack.physics.potentials`.
"""

import cmath
from collections.abc import Sequence

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.errors import Fault, ScenarioError
from wavepack.grid.grid import Grid
from wavepack.physics.edges import covered_fraction
from wavepack.physics.packet_channel import ChannelPacket
from wavepack.physics.packet_eigenstate import Eigenstate
from wavepack.physics.packet_free import FormulaPacket, TablePacket
from wavepack.physics.packet_gaussian import GaussianPacket
from wavepack.physics.packet_shapes import Launch, Packet, Scene
from wavepack.physics.packet_travel import potential_at
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import Piece

__all__ = [
    "PACKETS",
    "ChannelPacket",
    "Eigenstate",
    "FormulaPacket",
    "GaussianPacket",
    "Launch",
    "Packet",
    "TablePacket",
    "initial_state",
    "launch",
]

#: The class of each `shape` of a scenario's packet.
PACKETS: dict[str, type[Packet]] = {
    cls.shape: cls
    for cls in (GaussianPacket, ChannelPacket, Eigenstate, FormulaPacket, TablePacket)
}


def initial_state(
    packets: Sequence[Packet],
    grid: Grid,
    particle: Particle,
    pieces: Sequence[Piece],
    differences: int | None = None,
) -> tuple[ComplexArray, float | None]:
    r"""Return the state that a run starts from.

    .. math:: \psi \propto \sum_j a_j\,e^{i\phi_j}\,\frac{\psi_j}{|\psi_j|}

    A packet with ``where`` is cut to it first: each cell keeps the part of its
    probability that the cell's covered part holds.

    Parameters
    ----------
    packets : sequence of Packet
        At least one.
    grid, particle, pieces
        Where, what, and the potential.
    differences : int or None
        Order of the staggered differences that will propagate the state, so
        that its eigenstates are theirs; None for the spectral operator.

    Returns
    -------
    psi : complex, shape of the grid
        Normalised [length**(-ndim/2)].
    found : float or None
        The probability that ``where`` kept, the mean over the packets weighted
        with the squares of their amplitudes; None if none was cut.

    Raises
    ------
    ScenarioError
        If a packet is zero or not finite on the grid, or their sum is zero.
    """
    scene = Scene(grid, particle, tuple(pieces), differences)
    psi = np.zeros(grid.shape, dtype=complex)
    kept, weight = 0.0, 0.0
    for packet in packets:
        state, found = _prepared(packet, scene)
        psi += packet.amplitude * cmath.exp(1j * packet.phase) * state
        kept += packet.amplitude**2 * found
        weight += packet.amplitude**2
    norm = grid.norm(psi)
    # Two equal packets of opposite phase leave rounding, which is no state.
    if not norm > 1e-20 * weight:
        message = f"need packets whose sum is not zero, got norm {norm:.1e}"
        raise ScenarioError([Fault("packet", message)])
    cut = any(packet.where is not None for packet in packets)
    return psi / np.sqrt(norm), kept / weight if cut else None


def launch(
    packet: Packet,
    grid: Grid,
    particle: Particle,
    pieces: Sequence[Piece],
    differences: int | None = None,
) -> Launch:
    r"""Return where a packet starts and how it moves.

    For a Gaussian and a channel packet as the scenario says it; else the means
    of position and of :math:`-i\partial_x`, and V at the mean position.

    Raises
    ------
    ScenarioError
        As `initial_state`.
    """
    from wavepack.grid import spectral  # noqa: PLC0415 - slow to import

    scene = Scene(grid, particle, tuple(pieces), differences)
    stated = packet.launch(scene)
    if stated is not None:
        return stated
    psi, _ = _prepared(packet, scene)
    density: RealArray = np.abs(psi) ** 2 * grid.cell
    center = tuple(float(np.sum(density * x)) for x in grid.coordinates)
    slopes = (spectral.slope(psi, axis, i) for i, axis in enumerate(grid.axes))
    wavevector = tuple(grid.inner(psi, slope).imag for slope in slopes)
    return Launch(center, wavevector, potential_at(scene, center))


def _prepared(packet: Packet, scene: Scene) -> tuple[ComplexArray, float]:
    """Return a packet cut to its ``where`` and normalised, and the probability kept."""
    grid = scene.grid
    psi = packet.wavefunction(scene)
    # The largest value, not the norm, whose square may overflow or vanish.
    largest = float(np.abs(psi).max())
    if not np.isfinite(largest) or largest == 0.0:
        what = "zero everywhere" if largest == 0.0 else "a value that is not finite"
        raise packet.error("", f"need a packet on the grid, got {what}")
    psi = psi / largest
    psi /= np.sqrt(grid.norm(psi))
    if packet.where is None:
        return psi, 1.0
    counts, samples = covered_fraction(packet.where, grid)
    psi *= np.sqrt(counts / samples)
    found = grid.norm(psi)
    if found == 0.0:
        raise packet.error("where", "need a part that holds some of the packet, got none")
    return psi / np.sqrt(found), found

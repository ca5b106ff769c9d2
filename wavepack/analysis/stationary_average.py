r"""A stationary calculation averaged over what a packet holds.

.. math:: P = \int \frac{dP}{dE}\,T(E)\,dE
"""

import math
from dataclasses import dataclass
from typing import Final, Protocol

import numpy as np

from wavepack.analysis.incoming import Incoming
from wavepack.analysis.passage import Passage
from wavepack.analysis.quadrature import integral
from wavepack.analysis.stationary import Line
from wavepack.analysis.stationary_channels import guide_of
from wavepack.arrays import RealArray

#: Tolerances of the averages, and how many energies they may take, by dimension.
AVERAGE: Final = {1: (1e-8, 1 << 13), 2: (1e-5, 192)}


class Scatterer(Protocol):
    """What gives transmission and reflection by energy."""

    def scatter(self, energies: RealArray) -> tuple[RealArray, RealArray]:
        """Return both at total energies [energy]."""
        ...


@dataclass(frozen=True)
class Solved:
    """The stationary side: by energy, and averaged over the packet.

    ``through`` and ``back`` are what leaves by the far and the near lead after
    infinite time, ``error`` how far they may be off.
    """

    passage: Passage
    incoming: Incoming
    scatterer: Scatterer
    method: str
    through: float
    back: float
    error: float


def solve(passage: Passage) -> Solved:
    """Return the stationary side of a passage."""
    scatterer, incoming, method, doubt = _prepared(passage)
    tolerance, most = AVERAGE[passage.grid.ndim]
    low, high = incoming.energies
    base = float(incoming.levels.min())
    ends = [math.sqrt(max(e - base, 0.0) / incoming.c) for e in (low, high)]

    def density(q: RealArray) -> RealArray:
        return incoming.weight(base + incoming.c * q**2) * 2 * incoming.c * q

    peak = float(density(np.linspace(ends[0], ends[1], 200)).max())

    def weighted(q: RealArray) -> RealArray:
        energies = base + incoming.c * q**2
        weight = density(q)
        heavy = weight > tolerance / 100 * peak
        t, r = np.zeros(q.size), np.zeros(q.size)
        if heavy.any():
            t[heavy], r[heavy] = scatterer.scatter(energies[heavy])
        return np.stack([weight * t, weight * r])

    middle = np.linspace(ends[0], ends[1], 9 if passage.grid.ndim == 1 else 3)
    (through, back), error = integral(weighted, [float(q) for q in middle], tolerance, most)
    return Solved(
        passage,
        incoming,
        scatterer,
        method,
        float(through),
        float(back) + incoming.away,
        error + doubt,
    )


def _prepared(passage: Passage) -> tuple[Scatterer, Incoming, str, float]:
    """Return the calculation, what comes in, what it is called and how far it may be off."""
    if passage.grid.ndim == 2:
        guide = guide_of(passage)
        low, high = guide.incoming.energies
        energies = np.linspace(low, high, 65)[1:]
        weight = guide.incoming.weight(energies)
        some = energies[np.argsort(weight)[-5:]]
        doubt = float(guide.doubt(some).max()) + guide.outside
        points, modes, _ = guide.fine.matrices.shape
        text = (
            f"{modes} coupled modes across, differences of order 4 along on {points} points "
            "extrapolated, transmitting ends"
        )
        return guide, guide.incoming, text, doubt
    line = Line(
        passage.pieces,
        passage.scenario.particle,
        *passage.inner,
        passage.line.spacing,
        passage.from_upper,
    )
    lead = line.lead(far=False)
    s, psi = passage.way
    incoming = Incoming(s, psi, np.array([lead.height]), lead.c, passage.line.spacing)
    text = (
        "exact matrices of a stack of layers"
        if line.constant_by_layers
        else "integration of the stationary equation, adaptive, of order 8"
    )
    return line, incoming, text, 1e-8

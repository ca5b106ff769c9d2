r"""How fine the grid must be for a smooth potential to be itself between the points.

Points a distance :math:`\Delta` apart cannot tell V from V with its spectrum moved by
:math:`2\pi/\Delta`. What that scatters, to first order,

.. math:: |r| = \frac{|\tilde V(q)|}{2 c k}, \qquad q = \frac{2\pi}{\Delta} - 2k

with :math:`\tilde V` from the slope, :math:`\tilde V = \widetilde{V'}/iq`, which is small
where V is constant [Strang1968]_.
"""

import math
from typing import Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.scenario.build import Setup
from wavepack.scenario.choose_box import Boxes
from wavepack.scenario.estimates import Estimates

#: The probe is this much finer than the grid, and again as often as this.
FINER: Final = 8
REFINEMENTS: Final = 6
MOST_PROBES: Final = 1 << 16
#: The box and this share of it on either side, where V is faded out.
FADED: Final = 0.5
#: All but this share of the packet is slower than what is counted as fast.
FAST: Final = 1e-3


def sampled_spacing(
    setup: Setup, estimates: Estimates, boxes: Boxes, axis: int, goal: float
) -> float:
    """Return the largest spacing [length] at which sampling V scatters less than a goal.

    Infinite where no smooth piece acts.
    """
    line = setup.grid.axes[axis]
    fast = setup.content.slowest(axis, 1 - FAST)
    k = max(estimates.central, setup.content.slowest(axis, 0.5))
    for refinement in range(REFINEMENTS):
        fine = line.spacing / (FINER << refinement)
        count = int((1 + 2 * FADED) * line.length / fine)
        spectrum = _spectrum(setup, boxes, axis, min(count, MOST_PROBES))
        if spectrum is None:
            return math.inf
        q, size = spectrum
        small = size <= goal * 2 * estimates.c * k
        if small.any():
            return 2 * math.pi / (float(q[int(np.argmax(small))]) + 2 * fast)
        if count > MOST_PROBES:
            break
    return float(fine)


def _spectrum(
    setup: Setup, boxes: Boxes, axis: int, count: int
) -> tuple[RealArray, RealArray] | None:
    """Return q and the largest of all |V_q| from there on, over the lines along an axis."""
    line = setup.grid.axes[axis]
    extra = FADED * line.length
    x = np.linspace(line.start - extra, line.stop + extra, count)
    window = np.clip(np.minimum(x - x[0], x[-1] - x) / extra, 0.0, 1.0)
    # Smooth to all orders, so that fading adds nothing at large q.
    with np.errstate(divide="ignore", over="ignore"):
        window = 1 / (1 + np.exp(np.clip(1 / window - 1 / (1 - window), -700, 700)))
    mesh = boxes.mesh(line.name, x)
    spacing = tuple(a.spacing for a in setup.grid.axes)
    total = None
    for piece in setup.scenario.potential:
        if piece.acts != "before" and not piece.sharp and not piece.cell_sampled:
            values = piece.evaluate(mesh, spacing, setup.particle)
            values = boxes.lines(line.name, values, x.size)
            total = values if total is None else total + values
    if total is None:
        return None
    step = float(x[1] - x[0])
    slope = np.gradient(total, step, axis=0) * window[:, None]
    q = 2 * math.pi * np.fft.rfftfreq(x.size, step)[1:]
    size = (np.abs(np.fft.rfft(slope, axis=0)[1:]) * step).max(axis=1) / q
    return np.asarray(q), np.asarray(np.maximum.accumulate(size[::-1])[::-1])

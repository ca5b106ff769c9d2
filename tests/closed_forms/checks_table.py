"""What each closed-form check compares, how closely, and why that closely.

The values stand in `reference_values`, each with its source; exact functions of
`wavepack.physics.exact` give them at other energies and averaged over packets.
Errors are absolute unless the tolerance is said to be relative. A sharp edge is
smoothed over one spacing with its second moment removed: what remains is of
order 2.7 in the spacing and the same wherever the edge falls between points.
"""

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from tests.closed_forms.reference_values import rows


@dataclass(frozen=True)
class Check:
    """One quantity of one row.

    Attributes
    ----------
    row : str
        The row of `reference_values`; its source is that row's.
    quantity : str
        What is compared.
    tolerance : float
        Largest difference allowed.
    relative : bool
        Whether it counts relative to the value wanted.
    reason : str
        Where the tolerance comes from.
    """

    row: str
    quantity: str
    tolerance: float
    reason: str
    relative: bool = False

    @property
    def sources(self) -> tuple[str, ...]:
        """The sources of the row's values."""
        return tuple(sorted({row.source for row in rows(self.row)}))


_EDGE: Final = "method: edges, -1.06e-4 at 0.195 nm and of order 2.7 in the spacing"
_LEFT: Final = (
    "method: absorbers that give back |r|^2 = 1e-9 change T(E) by 2|r|; the record ends before "
    "the slowest of the packet has passed"
)
_PACKET: Final = "packet against table: what T changes over the packet's energies"

_LIST: Final = (
    Check("P2", "mean and width", 1e-11, "round-off: the free step is exact", relative=True),
    Check("P2", "mean energy", 1e-10, "the table's last digit"),
    Check("P2", "covariance", 1e-8, "the table's last digit"),
    Check("P2", "mean by differences", 1e-9, "round-off of 5,000 steps: the prediction is exact"),
    Check("P2", "order of differences", 0.06, "the next order, (k dx)^2 of the leading error"),
    Check("P16", "density", 1e-14, "round-off: the free step is exact"),
    Check("P16", "density in the middle", 1e-12, "the table's last digit"),
    Check("P16", "fringe period", 2e-10, "the table's last digit"),
    Check("P3", "probability of the thin barrier", 1e-7, "its last digit"),
    Check("P3", "transmission", 1e-4, _EDGE),
    Check("P3", "reflection", 1e-4, _EDGE),
    Check("P3", "T(E)", 1e-3, _EDGE + ", ten times that at the edge of the packet"),
    Check("P4", "transmission", 1e-3, _EDGE, relative=True),
    Check("P5", "T(E), sharp step", 1e-3, _EDGE + "; " + _LEFT),
    Check("P5", "R(E), smooth step", 2e-4, _LEFT),
    Check("P5", "T(E), step of the mass", 1e-3, "method: order 1 in the spacing at a mass's jump"),
    Check("P5", "transmission, step of the mass", 5e-4, "the same, averaged"),
    Check("P6", "T(E), device", 1.5e-4, _LEFT),
    Check("P6", "transmission, device", 1e-6, "method: order 4 in the step; what is not yet out"),
    Check("P6", "T(E), heavy", 1e-4, _LEFT),
    Check("P6", "T(E), well", 1e-3, _LEFT),
    Check("P7", "T_n(E)", 2e-4, _LEFT),
    Check("P8", "position in widths", 0.01, "physics: a hundredth of the line's width"),
    Check("P8", "width", 0.01, "physics: one in a hundred", relative=True),
    Check("P8", "height", 0.01, "physics: one in a hundred"),
    Check("P9", "position", 0.01, "physics: one in a hundred", relative=True),
    Check("P9", "width", 0.01, "physics: one in a hundred", relative=True),
    Check("P9", "height", 0.01, "physics: one in a hundred"),
    Check("P10", "prepared energy", 5e-5, _EDGE + ", times the height of the walls"),
    Check("P10", "rate", 3e-3, "physics: the line is not exactly Lorentzian", relative=True),
    Check("P10", "rate of survival", 3e-3, "the same", relative=True),
    Check(
        "P11",
        "energy",
        1e-5,
        "method: V is not even at the wall, so the sine basis converges "
        "as a power; the decay holds the broad resonance e^(-1.1 t) until t = 20",
    ),
    Check("P11", "width", 3e-6, "the same"),
    # Splitting turns the trap at arcsin(omega dt/2) 2/dt; 1 + (omega dt)^2/24 is 2.4e-8.
    Check("P12", "mean by split-operator 2", 5e-6, "method: amplitude 20 nm times (omega dt)^2/8"),
    Check("P12", "width by split-operator 2", 1e-6, "the same, of 7.5 nm"),
    Check("P12", "autocorrelation by split-operator 2", 1e-6, "the same"),
    Check("P12", "mean by split-operator 4", 5e-9, "method: amplitude times (omega dt)^4/200"),
    Check("P12", "width by split-operator 4", 5e-9, "the same"),
    Check("P12", "autocorrelation by split-operator 4", 1e-9, "the same"),
    Check(
        "P12",
        "mean by crank-nicolson",
        2e-3,
        "method: 3 (k dx)^4/128 of the speed of a packet "
        "with k up to 0.7/nm at 0.65 nm, and (E dt)^2/12 hbar^2",
    ),
    Check("P12", "width by crank-nicolson", 1e-3, "the same"),
    Check("P12", "autocorrelation by crank-nicolson", 1e-4, "the same"),
    Check("P13", "level", 1e-8, "the table's last digit"),
    Check(
        "P14",
        "level, record of 500",
        2.5e-5,
        "window exp(-5 t^2/T^2): neighbours 0.029 away leave exp(-(0.029 T)^2/20) of their weight",
    ),
    Check("P14", "level, record of 2000", 1e-6, "order 4 in the step; side lobes e^-12 high"),
    Check("P15", "level", 1e-8, "the table's last digit"),
    Check("P18", "sidebands of a packet", 2e-4, _EDGE + "; flux between the bands"),
    Check("P18", "sidebands of the table", 5e-4, _PACKET),
    Check("P18", "modes of a half-space", 1e-4, _EDGE),
    Check("P18", "modes of the table", 2e-4, _PACKET),
    Check("P20", "square well", 2e-6, _EDGE + ", times the density at the walls"),
    Check("P20", "triangular well", 1e-10, "the table's last digit"),
)

CHECKS: Final = {f"{check.row} {check.quantity}": check for check in _LIST}


def agree(name: str, found: npt.ArrayLike, wanted: npt.ArrayLike) -> None:
    """Assert that numbers agree within the tolerance of a check."""
    check = CHECKS[name]
    found, wanted = np.asarray(found), np.asarray(wanted)
    error = np.abs(found - wanted)
    if check.relative:
        error = error / np.abs(wanted)
    assert error.shape == np.broadcast_shapes(found.shape, wanted.shape)
    assert np.all(error <= check.tolerance), (
        f"{name}: off by {error.max():.3g}, allowed {check.tolerance:.3g} ({check.reason}); "
        f"found {found}, wanted {wanted}"
    )

"""Free packets: spreading in one and two dimensions, fringes behind two slits."""

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import Outcome, propagate
from tests.closed_forms.reference_values import HBAR, HBAR2_PER_2ME, MASS, rows
from wavepack.physics import exact

C = HBAR2_PER_2ME / MASS

LINE = """
title = "free packet"
[particle]
mass = 0.067
[grid]
x = { from = -250.0, to = 450.0, points = 1024, ends = "periodic" }
[[packet]]
shape = "gaussian"
center = { x = 0.0 }
sigma = { x = 5.0 }
energy = 0.1
[propagator]
step = 50.0
[time]
end = 200.0
[output]
frames = 2
record_every = 50.0
"""

PLANE = """
title = "turned anisotropic packet"
[particle]
mass = 0.067
[parameters]
a = "30 deg"
[grid]
x = { from = -180.0, to = 180.0, points = 288, ends = "periodic" }
y = { from = -180.0, to = 180.0, points = 288, ends = "periodic" }
[[packet]]
shape = "formula"
expression = "exp(-(x*cos(a) + y*sin(a))**2/64 - (y*cos(a) - x*sin(a))**2/256)"
[propagator]
step = 25.0
[time]
end = 100.0
[output]
frames = 2
"""

SLITS = """
title = "two Gaussian slits"
[particle]
mass = 1.0
[grid]
x = { from = -120.0, to = 520.0, points = 540, ends = "periodic" }
y = { from = -200.0, to = 200.0, points = 256, ends = "periodic" }
[[packet]]
name = "upper"
shape = "gaussian"
center = { x = 0.0, y = 50.0 }
sigma = { x = 10.0, y = 10.0 }
energy = 0.1
[[packet]]
name = "lower"
shape = "gaussian"
center = { x = 0.0, y = -50.0 }
sigma = { x = 10.0, y = 10.0 }
energy = 0.1
[propagator]
step = 1000.0
[time]
end = 2000.0
[output]
frames = 2
"""


def at_times(outcome: Outcome, name: str, times: list[float]) -> list[float]:
    """Return a column of the series at given times."""
    found = dict(zip(outcome.series("time"), outcome.series(name), strict=True))
    return [float(found[t]) for t in times]


@pytest.mark.parametrize("order", [2, 4])
def test_free_packet_moves_and_spreads(order: int) -> None:
    """Mean and width at 50, 100 and 200 fs, and the mean energy above that of k0."""
    outcome = propagate(LINE, f"propagator.order={order}")
    shifts, widths = rows("P2", "free_shift")[:3], rows("P2", "free_width")[:3]
    times = [row.parameters["t"] for row in shifts]
    agree("P2 mean and width", at_times(outcome, "x", times), [row.value for row in shifts])
    agree("P2 mean and width", at_times(outcome, "sigma_x", times), [row.value for row in widths])
    agree("P2 mean energy", outcome.series("energy"), rows("P2", "free_mean_energy")[0].value)


def test_slower_free_packet() -> None:
    """The wider and slower packet of the table at 200 fs."""
    outcome = propagate(LINE, "packet.sigma=10.0", "packet.energy=0.05")
    shift = next(r for r in rows("P2", "free_shift") if r.parameters["sigma"] == 10.0)
    width = next(r for r in rows("P2", "free_width") if r.parameters["sigma"] == 10.0)
    agree("P2 mean and width", outcome.series("x")[-1], shift.value)
    agree("P2 mean and width", outcome.series("sigma_x")[-1], width.value)


def shift_by_differences(dx: float, dt: float, space_order: int, reference: float) -> float:
    """Return the shift of the mean after 100 fs that differences and Cayley steps make.

    Both keep plane waves, so the mean moves exactly at the average of
    (hbar/dt) dtheta/dE dE/dk, with E = c s(k)^2, s = (2/dx) sin(k dx/2) at order 2 and
    tan(theta/2) = (E - E_r) dt/2 hbar.
    """
    k0 = float(exact.wavenumber(0.1, C))
    k = np.linspace(k0 - 1.0, k0 + 1.0, 4001)
    weight = exact.momentum_density(k, k0, 5.0)
    half = k * dx / 2
    s, slope = 2 * np.sin(half) / dx, np.cos(half)
    if space_order == 4:
        s = (27 * np.sin(half) - np.sin(3 * half)) / (12 * dx)
        slope = (27 * np.cos(half) - 3 * np.cos(3 * half)) / 24
    energy, change = C * s**2, 2 * C * s * slope
    rate = 1 / (1 + ((energy - reference) * dt / (2 * HBAR)) ** 2)
    return float(np.sum(weight * change * rate) / np.sum(weight)) * 100.0 / HBAR


@pytest.mark.parametrize("space_order", [2, 4])
def test_free_packet_by_differences(space_order: int) -> None:
    """The mean lags as group velocity and Cayley angle say, and at the order claimed."""
    wanted = rows("P2", "free_shift")[1].value
    lags = []
    for points in (1000, 2000):
        outcome = propagate(
            LINE,
            f"grid.x.points={points}",
            'propagator.method="crank-nicolson"',
            f"propagator.space_order={space_order}",
            "propagator.step=0.02",
            "time.end=100.0",
        )
        dx = outcome.setup.grid.axes[0].spacing
        predicted = shift_by_differences(dx, 0.02, space_order, outcome.setup.choices.reference)
        agree("P2 mean by differences", outcome.series("x")[-1], predicted)
        lags.append(wanted - outcome.series("x")[-1])
    agree("P2 order of differences", np.log2(lags[0] / lags[1]), space_order)


def test_turned_anisotropic_packet_spreads_along_its_own_axes() -> None:
    """Covariance after 100 fs of a packet whose narrow axis lies at 30 degrees."""
    outcome = propagate(PLANE)
    x, y = outcome.setup.grid.coordinates
    density = np.abs(outcome.psi) ** 2
    density /= density.sum()
    found = {(0, 0): np.sum(density * x * x), (0, 1): np.sum(density * x * y),
             (1, 1): np.sum(density * y * y)}  # fmt: skip
    for row in rows("P2", "free_covariance"):
        agree("P2 covariance", found[row.parameters["entry"]], row.value)


def test_two_slits_fringes() -> None:
    """Density across the flight, its tabulated values and its fringe period."""
    outcome = propagate(SLITS)
    axis = outcome.setup.grid.axes[1]
    density = np.sum(np.abs(outcome.psi) ** 2, axis=0) * outcome.setup.grid.axes[0].spacing
    particle = outcome.setup.particle
    wanted = exact.two_slits_density(
        axis.coordinates, 2000.0, 100.0, 10.0, particle.stiffness, particle.hbar
    )
    agree("P16 density", density, wanted)
    middle = rows("P16", "slit_density")[0].value
    agree("P16 density in the middle", density[axis.points // 2], middle)
    period = rows("P16", "fringe_period")[0].value
    agree("P16 fringe period", fringe_period(axis.coordinates, density), period)


def fringe_period(y: np.ndarray, density: np.ndarray) -> float:
    """Return four times where the interference first vanishes beside the middle."""
    s = float(exact.free_width(2000.0, 10.0, HBAR2_PER_2ME, HBAR))
    scale = 2 * np.sqrt(2 * np.pi) * s * (1 + np.exp(-(100.0**2) / (8 * 10.0**2)))
    beams = sum(np.exp(-((y - at) ** 2) / (2 * s * s)) for at in (-50.0, 50.0))
    both = 2 * np.exp(-(y**2 + 50.0**2) / (2 * s * s))
    cosine = (density * scale - beams) / both
    near = np.abs(y) < 12.0
    # cos(2 pi y/period) is what is left: its arc cosine is linear in |y|.
    slope = np.polyfit(np.abs(y[near]), np.arccos(np.clip(cosine[near], -1, 1)), 1)[0]
    return float(2 * np.pi / slope)

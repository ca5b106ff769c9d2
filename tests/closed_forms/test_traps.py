"""Packets in a harmonic trap, at rest and shaken."""

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import propagate
from tests.closed_forms.reference_values import rows
from wavepack.physics import exact

PERIOD = rows("P12", "trap_period")[0].value
GROUND = rows("P12", "trap_ground_width")[0].value

TRAP = f"""
title = "trap"
[particle]
mass = 0.067
[grid]
x = {{ from = -130.0, to = 130.0, points = 192, ends = "walls" }}
[[potential]]
name = "trap"
shape = "harmonic"
quantum = {{ x = 0.010 }}
[[packet]]
shape = "gaussian"
center = {{ x = 20.0 }}
sigma = {{ x = {GROUND} }}
wavenumber = {{ x = 0.0 }}
[propagator]
order = 4
step = 1.0
[time]
end = {PERIOD!r}
[output]
frames = 2
record_every = 1.0
"""

SHAKEN = """
[[potential]]
name = "shaker"
shape = "field"
strength = { x = 0.0005 }
drive = { photon_energy = 0.008, phase = "40 deg" }
"""

PROPAGATORS = {
    "split-operator 2": ("propagator.order=2", "propagator.step=0.05", "output.record_every=0.5"),
    "split-operator 4": (),
    "crank-nicolson": (
        'propagator.method="crank-nicolson"', "propagator.order=2", "propagator.space_order=4",
        "propagator.step=0.1", "grid.x.points=400",
    ),
}  # fmt: skip


@pytest.mark.parametrize("propagator", PROPAGATORS)
def test_coherent_state_swings(propagator: str) -> None:
    """Mean, width and autocorrelation through one whole period."""
    outcome = propagate(TRAP, *PROPAGATORS[propagator])
    particle, t = outcome.setup.particle, outcome.series("time")
    c, hbar = particle.stiffness, particle.hbar
    mean = exact.oscillator_mean(t, 20.0, 0.0, 0.01, c, hbar)
    agree(f"P12 mean by {propagator}", outcome.series("x"), mean)
    agree(f"P12 width by {propagator}", outcome.series("sigma_x"), np.full(t.size, GROUND))
    agree(f"P12 mean by {propagator}", outcome.series("x")[-1], 20.0)
    overlap = exact.coherent_autocorrelation(t, 20.0, 0.0, 0.01, c, hbar)
    agree(f"P12 autocorrelation by {propagator}", outcome.series("autocorrelation"), overlap)


def test_tabulated_coherent_state() -> None:
    """The table's mean and autocorrelation at 100 fs."""
    outcome = propagate(TRAP, "time.end=100.0")
    mean = next(r for r in rows("P12", "trap_mean") if r.parameters["center"] == 20.0)
    agree("P12 mean by split-operator 4", outcome.series("x")[-1], mean.value)
    survival = abs(outcome.series("autocorrelation")[-1]) ** 2
    agree("P12 autocorrelation by split-operator 4", survival, rows("P12", "trap_overlap")[0].value)


def test_squeezed_state_breathes() -> None:
    """Mean and width at 100 fs, and the largest width at a quarter period."""
    squeezed = ("packet.center=15.0", f"packet.sigma={GROUND / 2}", "packet.wavenumber.x=0.1")
    outcome = propagate(TRAP, *squeezed, "time.end=100.0")
    mean = next(r for r in rows("P12", "trap_mean") if r.parameters["center"] == 15.0)
    early, widest = rows("P12", "trap_width")
    agree("P12 mean by split-operator 4", outcome.series("x")[-1], mean.value)
    agree("P12 width by split-operator 4", outcome.series("sigma_x")[-1], early.value)
    outcome = propagate(TRAP, *squeezed, f"propagator.step={PERIOD / 400}")
    widths, times = outcome.series("sigma_x"), outcome.series("time")
    quarter = int(np.argmin(np.abs(times - PERIOD / 4)))
    agree("P12 width by split-operator 4", widths.max(), widest.value)
    agree("P12 width by split-operator 4", widths[quarter], widest.value)
    half = int(np.argmin(np.abs(times - PERIOD / 2)))
    agree("P12 width by split-operator 4", widths[half], GROUND / 2)


@pytest.mark.parametrize(
    ("propagator", "photon", "end"),
    [
        ("split-operator 2", 0.008, 800.0),
        ("split-operator 4", 0.008, 800.0),
        ("split-operator 4", 0.01, 800.0),
        ("crank-nicolson", 0.01, 300.0),
    ],
)
def test_shaken_trap(propagator: str, photon: float, end: float) -> None:
    """A uniform force -F cos(Omega t + phase) moves the mean, off and on resonance."""
    outcome = propagate(
        TRAP + SHAKEN, *PROPAGATORS[propagator], f"potential.shaker.drive.photon_energy={photon}",
        "packet.center=5.0", f"time.end={end}",
    )  # fmt: skip
    particle, t = outcome.setup.particle, outcome.series("time")
    wanted = exact.forced_mean(
        t, 5.0, 0.0, 0.01, -0.0005, photon, particle.stiffness, particle.hbar,
        phase=np.radians(40.0),
    )  # fmt: skip
    assert np.ptp(wanted) > 10.0
    agree(f"P12 mean by {propagator}", outcome.series("x"), wanted)
    agree(f"P12 width by {propagator}", outcome.series("sigma_x"), np.full(t.size, GROUND))

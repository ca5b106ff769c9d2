"""Steps of potential and of mass: flux ratios by energy."""

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import Outcome, at_table, propagate
from tests.closed_forms.reference_values import MASS, rows
from wavepack.physics import exact

STEP = """
title = "step"
[particle]
mass = 0.067
[grid]
x = { from = -300.0, to = 260.0, points = 2048, ends = "absorbing" }
[[potential]]
shape = "step"
height = 0.1
at = 0.0
[[packet]]
shape = "gaussian"
center = { x = -40.0 }
sigma = { x = 4.0 }
energy = 0.2
[absorber]
width = 200.0
[propagator]
step = 0.05
[time]
end = 600.0
[[region]]
name = "beyond"
role = "transmitted"
x = { above = 0.0 }
[[detector]]
name = "exit"
x = 30.0
energies = { from = 0.11, to = 0.5, points = 79 }
[output]
frames = 2
"""


#: A packet just above the step needs layers that take in what lingers behind it.
WIDE = (
    "grid.x.from=-1200.0", "grid.x.to=700.0", "grid.x.points=6400", "absorber.width=600.0",
)  # fmt: skip
SPLIT = ()
IMPLICIT = ('propagator.method="crank-nicolson"', "propagator.step=0.1")
#: Energy and width of a packet that keeps clear of the step's edge at 0.1 eV, where
#: what is transmitted lingers, how long that takes, and energies of the table it holds.
PACKETS = [
    pytest.param(0.2, 12.0, 600.0, (0.15, 0.2), SPLIT, id="0.2 eV, split operator"),
    pytest.param(0.2, 12.0, 600.0, (0.15, 0.2), IMPLICIT, id="0.2 eV, Crank-Nicolson"),
    pytest.param(0.4, 6.0, 600.0, (0.3, 0.5), SPLIT, id="0.4 eV, split operator"),
    pytest.param(0.4, 6.0, 600.0, (0.3, 0.5), IMPLICIT, id="0.4 eV, Crank-Nicolson"),
    pytest.param(
        0.12, 40.0, 4000.0, (0.11,), (*IMPLICIT, "propagator.step=0.2", *WIDE),
        id="0.12 eV, Crank-Nicolson", marks=pytest.mark.full,
    ),
]  # fmt: skip


def flight(energy: float, sigma: float, end: float, *overrides: str) -> Outcome:
    """Return the outcome of one of the packets, its start at a safe distance."""
    return propagate(
        STEP, f"packet.energy={energy}", f"packet.sigma={sigma}",
        f"packet.center={-6 * sigma - 10}", f"time.end={end}",
        f"grid.x.from={-14 * sigma - 220}", f"grid.x.points={1536 + round(51 * sigma)}",
        *overrides,
    )  # fmt: skip


def compare(outcome: Outcome, check: str, quantity: str, energies: tuple[float, ...]) -> None:
    """Hold the exit detector against the table at some of its energies."""
    table = [row for row in rows("P5", quantity) if row.parameters["energy"] in energies]
    found, wanted = at_table(outcome, table, least=1e-3)
    assert len(found) == len(energies)
    agree(check, found, wanted)


@pytest.mark.parametrize(("energy", "sigma", "end", "energies", "method"), PACKETS)
def test_sharp_step(
    energy: float, sigma: float, end: float, energies: tuple[float, ...], method: tuple[str, ...]
) -> None:
    """The transmitted flux over the incident one, behind a sharp step of 0.1 eV."""
    outcome = flight(energy, sigma, end, *method)
    compare(outcome, "P5 T(E), sharp step", "sharp_step", energies)
    reached, found = outcome.spectrum("exit", least=0.05)
    c = outcome.setup.particle.stiffness
    agree("P5 T(E), sharp step", found, exact.sharp_step(reached, 0.1, c))


@pytest.mark.parametrize(
    ("energy", "sigma", "end", "energies", "overrides"),
    [
        pytest.param(0.2, 12.0, 600.0, (0.15, 0.2), (), id="0.2 eV"),
        pytest.param(
            0.12,
            40.0,
            4000.0,
            (0.11, 0.12),
            (*WIDE, "propagator.step=0.2"),
            id="0.12 eV",
            marks=pytest.mark.full,
        ),
    ],
)
def test_smooth_step_reflection(
    energy: float, sigma: float, end: float, energies: tuple[float, ...], overrides: tuple[str, ...]
) -> None:
    """What the smooth step throws back, read behind the packet's start."""
    outcome = flight(
        energy, sigma, end, "potential.width=1.0", "propagator.order=4", "propagator.step=0.1",
        f"detector.exit.x={-12 * sigma - 15}", *overrides,
    )  # fmt: skip
    compare(outcome, "P5 R(E), smooth step", "smooth_step_reflection", energies)


@pytest.mark.parametrize("space_order", [2, 4])
def test_step_of_the_mass_alone(space_order: int) -> None:
    """The same transmission at every energy where only the mass changes."""
    outcome = propagate(
        STEP, "potential.height=0.0", "potential.mass=0.15", 'propagator.method="crank-nicolson"',
        f"propagator.space_order={space_order}", "propagator.step=0.2", "packet.sigma=8.0",
        "packet.center=-60.0", "time.end=500.0", "detector.exit.energies.from=0.12",
        "detector.exit.energies.to=0.3", "detector.exit.energies.points=37",
    )  # fmt: skip
    wanted = rows("P5", "mass_step")[0]
    assert wanted.parameters["mass"] == MASS
    energies, found = outcome.spectrum("exit")
    assert energies.size > 30
    agree("P5 T(E), step of the mass", found, np.full(energies.size, wanted.value))
    agree("P5 transmission, step of the mass", outcome.quantity("transmission"), wanted.value)

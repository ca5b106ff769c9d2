"""Barriers and wells: transmission of packets and by energy."""

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import at_table, propagate
from tests.closed_forms.reference_values import BOHR, Row, rows
from wavepack.physics import exact

SLAB = """
title = "rectangular barrier"
[particle]
mass = 0.067
[grid]
x = { from = -110.0, to = 110.0, points = 1280, ends = "absorbing" }
[[potential]]
shape = "slab"
height = 0.3
x = { from = 0.0, to = 3.37 }
[[packet]]
shape = "gaussian"
center = { x = -42.0 }
sigma = { x = 8.0 }
energy = 0.15
[absorber]
width = 40.0
[propagator]
step = 0.02
[time]
end = 400.0
[[region]]
name = "drain"
role = "transmitted"
x = { above = 10.0 }
[[region]]
name = "source"
role = "reflected"
x = { below = -10.0 }
[[detector]]
name = "exit"
x = 30.0
energies = { from = 0.05, to = 0.30, points = 126 }
[output]
frames = 2
record_every = 10.0
"""

#: Method, points, step and further keys. The steps of the split operator lie below
#: 2 pi hbar/E_max, 0.0218 fs at a spacing of 0.172 nm.
METHODS = {
    "split-operator 2": ("propagator.order=2",),
    "split-operator 4": ("propagator.order=4",),
    "crank-nicolson": (
        'propagator.method="crank-nicolson"', "propagator.step=0.1", "grid.x.points=1600",
    ),
}  # fmt: skip


@pytest.mark.parametrize("share", [0.0, 1 / 3, 1 / 2])
@pytest.mark.parametrize("method", METHODS)
def test_rectangular_barrier(method: str, share: float) -> None:
    """Probability and T(E) of the packet, wherever the edges fall between grid points.

    Spacing 0.172 nm and 0.02 fs for the split operator, 0.1375 nm and 0.1 fs for
    Crank-Nicolson; the grid is shifted by a share of 0.172 nm.
    """
    shift = share * 0.171875
    outcome = propagate(
        SLAB, *METHODS[method], f"grid.x.from={-110 + shift}", f"grid.x.to={110 + shift}"
    )
    c = outcome.setup.particle.stiffness
    wanted = exact.packet_average(
        lambda e: float(exact.rectangular_barrier(e, 0.3, 3.37, c)),
        float(exact.wavenumber(0.15, c)), 8.0, c,
    )  # fmt: skip
    agree("P3 probability of the thin barrier", wanted, 0.1261825)
    agree("P3 transmission", outcome.quantity("transmission"), wanted)
    agree("P3 reflection", outcome.quantity("reflection"), 1 - wanted)
    energies, found = outcome.spectrum("exit")
    assert energies.size > 60
    agree("P3 T(E)", found, exact.rectangular_barrier(energies, 0.3, 3.37, c))


#: The narrowest and the widest packet need the largest boxes.
AVERAGES = [
    pytest.param(row, id=row.id, marks=() if row.parameters["sigma"] == 10.0 else pytest.mark.full)
    for row in rows("P4")
]


@pytest.mark.parametrize("row", AVERAGES)
def test_packet_average(row: Row) -> None:
    """Probability behind a 4 nm barrier, averaged over the packet's momenta."""
    sigma, energy = row.parameters["sigma"], row.parameters["energy"]
    outcome = propagate(
        SLAB, "potential.x.to=4.0", f"packet.sigma={sigma}", f"packet.energy={energy}",
        f"packet.center={-12 - 5 * sigma}", f"grid.x.from={-60 - 10 * sigma}",
        f"grid.x.points={1024 + 64 * round(sigma)}", "grid.x.to=120.0", "detector.exit.x=60.0",
        "time.end=500.0",
    )  # fmt: skip
    agree("P4 transmission", outcome.quantity("transmission"), row.value)


SECH2 = """
title = "sech^2 barrier"
[particle]
mass = 0.067
[grid]
x = { from = -300.0, to = 300.0, points = 1024, ends = "absorbing" }
[[potential]]
shape = "sech2"
height = 0.2
at = 0.0
width = 2.0
[[packet]]
shape = "gaussian"
center = { x = -60.0 }
sigma = { x = 4.0 }
energy = 0.18
[absorber]
width = 200.0
[propagator]
order = 4
step = 0.2
[time]
end = 1000.0
[[region]]
name = "drain"
role = "transmitted"
x = { above = 30.0 }
[[detector]]
name = "exit"
x = 60.0
energies = { from = 0.05, to = 0.45, points = 81 }
[output]
frames = 2
"""

ATOMIC = """
title = "sech^2 barrier, a heavy particle"
[units]
length = "bohr"
[particle]
mass = 1060.0
[grid]
x = { from = -30.0, to = 30.0, points = 1152, ends = "absorbing" }
[[potential]]
shape = "sech2"
height = 0.425
at = 0.0
width = 0.7352941176470588
[[packet]]
shape = "gaussian"
center = { x = -8.0 }
sigma = { x = 0.6 }
energy = 0.4
[absorber]
width = 18.0
[propagator]
order = 4
step = 0.15
[time]
end = 300.0
[[detector]]
name = "exit"
x = 8.0
energies = { from = 0.2, to = 0.6, points = 81 }
[output]
frames = 2
"""

WELL = """
title = "sech^2 well"
[particle]
mass = 0.067
[grid]
x = { from = -1200.0, to = 1200.0, points = 2048, ends = "absorbing" }
[[potential]]
shape = "sech2"
height = -0.2132452674
at = 0.0
width = 4.0
[[packet]]
shape = "gaussian"
center = { x = -260.0 }
sigma = { x = 40.0 }
energy = 0.011
[absorber]
width = 800.0
[propagator]
order = 4
step = 1.0
[time]
end = 4000.0
[[detector]]
name = "exit"
x = 150.0
energies = { from = 0.001, to = 0.022, points = 43 }
[output]
frames = 2
"""


def test_sech2_barrier_by_energy() -> None:
    """T(E) of the device-sized barrier, at the table's energies and all others."""
    outcome = propagate(SECH2)
    table = [row for row in rows("P6", "sech2_barrier") if row.parameters["height"] == 0.2]
    found, wanted = at_table(outcome, table)
    assert len(found) == 7
    agree("P6 T(E), device", found, wanted)
    energies, found = outcome.spectrum("exit")
    c = outcome.setup.particle.stiffness
    agree("P6 T(E), device", found, exact.sech2_barrier(energies, 0.2, 2.0, c))


def test_sech2_barrier_averaged() -> None:
    """The packet average over the same barrier."""
    outcome = propagate(
        SECH2, "packet.sigma=10.0", "packet.energy=0.15", "time.end=700.0", "packet.center=-70.0"
    )
    row = rows("P6", "packet_sech2")[0]
    agree("P6 transmission, device", outcome.quantity("transmission"), row.value)


def test_sech2_barrier_of_a_heavy_particle() -> None:
    """T(E) over four decades for 1060 electron masses, lengths in bohr."""
    outcome = propagate(ATOMIC)
    table = [row for row in rows("P6", "sech2_barrier") if row.parameters["mass"] == 1060.0]
    assert table[0].parameters["width"] == BOHR / 1.36
    found, wanted = at_table(outcome, table)
    assert len(found) == 9
    agree("P6 T(E), heavy", found, wanted)


def test_reflectionless_well() -> None:
    """A sech^2 well of whole strength 2 lets every energy pass."""
    _, found = propagate(WELL).spectrum("exit")
    assert found.size > 20
    agree("P6 T(E), well", found, np.ones(found.size))


@pytest.mark.parametrize(
    ("energy", "energies", "overrides"),
    [
        pytest.param(0.013, (0.02,), (), id="0.02 eV"),
        pytest.param(0.0035, (0.002, 0.005), (
            "packet.sigma=50.0", "packet.center=-330.0", "grid.x.from=-2000.0", "grid.x.to=2000.0",
            "grid.x.points=3456", "absorber.width=500.0", "time.end=9000.0",
        ), id="0.002 eV", marks=pytest.mark.full),
    ],
)  # fmt: skip
def test_well_that_reflects(
    energy: float, energies: tuple[float, ...], overrides: tuple[str, ...]
) -> None:
    """A sech^2 well of strength 1.5 does not: the table's energies, and all others."""
    outcome = propagate(WELL, "potential.height=-0.1332782921", f"packet.energy={energy}",
                        *overrides)  # fmt: skip
    table = [row for row in rows("P6", "sech2_whole_well") if row.parameters["strength"] == 1.5]
    found, wanted = at_table(outcome, table)
    assert len(found) == len(energies)
    agree("P6 T(E), well", found, wanted)
    reached, found = outcome.spectrum("exit", least=0.05)
    c = outcome.setup.particle.stiffness
    agree("P6 T(E), well", found, exact.sech2_barrier(reached, -0.1332782921, 4.0, c))

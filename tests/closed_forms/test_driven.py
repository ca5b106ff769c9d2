"""Regions whose energy oscillates: flux in photon sidebands."""

from collections.abc import Callable

import numpy as np
import pytest

from tests.closed_forms.checks_table import agree
from tests.closed_forms.helpers import Outcome, propagate
from tests.closed_forms.reference_values import rows
from wavepack.physics import exact
from wavepack.physics.packets import GaussianPacket

REGION = """
title = "oscillating region"
[particle]
mass = 0.067
[grid]
x = { from = -1000.0, to = 900.0, points = 4096, ends = "absorbing" }
[[potential]]
name = "region"
shape = "slab"
height = 0.05
x = { from = 0.0, to = 30.0 }
drive = { photon_energy = 0.05 }
[[packet]]
shape = "gaussian"
center = { x = -400.0 }
sigma = { x = 70.0 }
energy = 0.32
[absorber]
width = 300.0
[propagator]
step = 0.1
[time]
end = 900.0
[[detector]]
name = "exit"
x = 150.0
energies = { from = 0.13, to = 0.51, points = 381 }
[output]
frames = 2
"""


def weights(outcome: Outcome) -> dict[int, float]:
    """Return the flux at the exit by photons absorbed."""
    bands = outcome.results["detectors"]["exit"]["sidebands"]
    return {band["n"]: band["flux"]["value"] for band in bands}


def averaged(outcome: Outcome, sidebands: Callable[[float], exact.Sidebands]) -> dict[int, float]:
    """Return the exact weights averaged over the packet's momenta, by photons absorbed."""
    c = outcome.setup.particle.stiffness
    packet = outcome.setup.scenario.packet[0]
    assert isinstance(packet, GaussianPacket)
    assert packet.energy is not None
    k0, sigma = float(exact.wavenumber(packet.energy, c)), packet.sigma["x"]
    k = np.linspace(k0 - 3 / sigma, k0 + 3 / sigma, 61)
    density = exact.momentum_density(k, k0, sigma)
    found = [sidebands(float(energy)) for energy in c * k**2]
    return {
        n: float(density @ [bands.transmission(n) for bands in found] / density.sum())
        for n in range(-4, 5)
    }


@pytest.mark.parametrize(
    ("energy", "amplitude", "quantum", "length", "overrides"),
    [
        pytest.param(0.32, 0.05, 0.05, 30.0, (), id="0.32 eV"),
        pytest.param(1.02, 0.05, 0.05, 30.0, (
            "grid.x.points=6144", "propagator.step=0.05", "packet.sigma=120.0",
            "packet.center=-650.0", "grid.x.from=-1600.0", "detector.exit.energies.from=0.83",
            "detector.exit.energies.to=1.21",
        ), id="1.02 eV", marks=pytest.mark.full),
        pytest.param(0.205, 0.01, 0.01, 100.0, (
            "packet.sigma=320.0", "packet.center=-1400.0", "grid.x.from=-3100.0",
            "grid.x.to=1300.0", "grid.x.points=9000", "propagator.step=0.2", "time.end=3500.0",
            "detector.exit.x=300.0", "detector.exit.energies.from=0.16",
            "detector.exit.energies.to=0.25", "absorber.width=700.0",
        ), id="0.205 eV", marks=pytest.mark.full),
    ],
)  # fmt: skip
def test_oscillating_region(
    energy: float, amplitude: float, quantum: float, length: float, overrides: tuple[str, ...]
) -> None:
    """Transmitted flux at E + n hbar omega, against mode matching over the packet."""
    outcome = propagate(
        REGION, f"packet.energy={energy}", f"potential.region.height={amplitude}",
        f"potential.region.x.to={length}", f"potential.region.drive.photon_energy={quantum}",
        *overrides,
    )  # fmt: skip
    assert outcome.results["detectors"]["exit"]["transmission"] is None
    found = weights(outcome)
    c = outcome.setup.particle.stiffness
    wanted = averaged(outcome, lambda e: exact.oscillating_region(e, amplitude, quantum, length, c))
    orders = range(-3, 4)
    agree("P18 sidebands of a packet", [found[n] for n in orders], [wanted[n] for n in orders])
    table = {row.parameters["order"]: row.value for row in rows("P18", "sideband")
             if row.parameters["energy"] == energy}  # fmt: skip
    agree("P18 sidebands of the table", [found[n] for n in orders], [table[n] for n in orders])


def test_oscillating_half_space() -> None:
    """Weights of the modes behind one oscillating edge, read once the drive has ended.

    While the packet is wholly inside, a uniform V(t) only turns its phase: after
    the drive its energies are those of the modes, E + m hbar omega.
    """
    outcome = propagate(
        REGION, "potential.region.x.to=5000.0", "grid.x.to=1400.0", "grid.x.points=5120",
        "potential.region.drive.envelope={ rise = 20.0, from = -1000.0, to = 640.0 }",
        "detector.exit.x=800.0", "time.end=1300.0",
    )  # fmt: skip
    found = weights(outcome)
    c = outcome.setup.particle.stiffness
    wanted = averaged(outcome, lambda e: exact.oscillating_half_space(e, 0.05, 0.05, c))
    orders = range(-2, 4)
    agree("P18 modes of a half-space", [found[n] for n in orders], [wanted[n] for n in orders])
    table = {row.parameters["order"]: row.value for row in rows("P18", "half_space_sideband")
             if row.parameters["energy"] == 0.32}  # fmt: skip
    agree("P18 modes of the table", [found[n] for n in table], list(table.values()))

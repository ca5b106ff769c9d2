"""Packets in a harmonic trap against the Schroedinger and Newton's equation."""

import numpy as np
import pytest
from scipy import integrate

from wavepack.physics import exact

C, HBAR, QUANTUM = 0.57, 0.66, 0.04
PERIOD = 2 * np.pi * HBAR / QUANTUM
X = np.linspace(-60.0, 60.0, 6001)
DX = X[1] - X[0]


def packet(t: float, sigma: float = 2.0) -> np.ndarray:
    """Return a squeezed moving packet on X."""
    return exact.oscillator_packet(X, t, 5.0, sigma, 0.3, QUANTUM, C, HBAR)


@pytest.mark.parametrize("share", [0.1, 0.6, 1.3])
def test_packet_solves_its_equation(share: float) -> None:
    """The residual of the time-dependent equation vanishes, in the second period too."""
    t, dt = share * PERIOD, 1e-3
    rate = (packet(t + dt) - packet(t - dt)) / (2 * dt)
    psi = packet(t)
    bend = (-psi[4:] + 16 * psi[3:-1] - 30 * psi[2:-2] + 16 * psi[1:-3] - psi[:-4]) / (12 * DX**2)
    potential = QUANTUM**2 / (4 * C) * X**2
    residual = 1j * HBAR * rate[2:-2] + C * bend - (potential * psi)[2:-2]
    assert np.abs(residual).max() < 1e-6 * np.abs(psi).max()


def test_packet_starts_as_a_free_one() -> None:
    """At t = 0 the trap has not acted: the packet is the free one, phase and all."""
    free = exact.free_packet(X, 0.0, 5.0, 2.0, 0.3, C, HBAR)
    assert packet(0.0) == pytest.approx(free, abs=1e-14)


@pytest.mark.parametrize("share", [0.0, 0.2, 0.75])
def test_moments_of_the_packet(share: float) -> None:
    """Norm, mean, width and wave number of the wavefunction are the closed forms."""
    t = share * PERIOD
    psi = packet(t)
    density = np.abs(psi) ** 2
    mean = np.sum(X * density) * DX
    spread = np.sqrt(np.sum((X - mean) ** 2 * density) * DX)
    slope = (psi[:-4] - 8 * psi[1:-3] + 8 * psi[3:-1] - psi[4:]) / (12 * DX)
    k = np.sum(np.conj(psi[2:-2]) * slope).imag * DX
    assert np.sum(density) * DX == pytest.approx(1.0, abs=1e-12)
    assert mean == pytest.approx(
        float(exact.oscillator_mean(t, 5.0, 0.3, QUANTUM, C, HBAR)), abs=1e-10
    )
    assert spread == pytest.approx(
        float(exact.oscillator_width(t, 2.0, QUANTUM, C, HBAR)), rel=1e-10
    )
    assert k == pytest.approx(
        float(exact.oscillator_wavenumber(t, 5.0, 0.3, QUANTUM, C, HBAR)), abs=1e-7
    )


def test_whole_period_turns_the_sign() -> None:
    """After one period every packet is back, times e^(-i pi)."""
    assert packet(PERIOD) == pytest.approx(-packet(0.0), abs=1e-12)


def test_coherent_overlap() -> None:
    """The autocorrelation is the overlap of the wavefunctions, phase and all."""
    sigma = exact.ground_width(QUANTUM, C)
    start = packet(0.0, sigma)
    for t in (0.3 * PERIOD, 0.8 * PERIOD, 1.7 * PERIOD):
        overlap = np.sum(np.conj(start) * packet(t, sigma)) * DX
        found = complex(exact.coherent_autocorrelation(t, 5.0, 0.3, QUANTUM, C, HBAR))
        assert found == pytest.approx(overlap, abs=1e-12)
        width = float(exact.oscillator_width(t, sigma, QUANTUM, C, HBAR))
        assert width == pytest.approx(sigma, rel=1e-14)


@pytest.mark.parametrize("drive", [0.0, 0.031, 0.04, 0.0400001, 0.2])
@pytest.mark.parametrize("phase", [0.0, 1.1])
def test_forced_mean_solves_newton(drive: float, phase: float) -> None:
    """The mean obeys Newton's equation, off, near and at resonance."""
    times = np.linspace(0.0, 3 * PERIOD, 40)
    force, start_speed = 0.01, 2 * C * 0.3 / HBAR

    def newton(t: float, y: np.ndarray) -> np.ndarray:
        pull = 2 * C / HBAR**2 * force * np.cos(drive * t / HBAR + phase)
        return np.array([y[1], -((QUANTUM / HBAR) ** 2) * y[0] + pull])

    path = integrate.solve_ivp(
        newton, (0.0, times[-1]), np.array([5.0, start_speed]),
        method="DOP853", t_eval=times, rtol=1e-11, atol=1e-12,
    )  # fmt: skip
    found = exact.forced_mean(times, 5.0, 0.3, QUANTUM, force, drive, C, HBAR, phase=phase)
    assert found == pytest.approx(path.y[0], abs=1e-7)

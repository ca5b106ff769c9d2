"""Free packets against the Schroedinger equation and against their own moments."""

import numpy as np
import pytest

from wavepack.physics import exact

C, HBAR = 0.57, 0.66
X = np.linspace(-60.0, 90.0, 6001)


def packet(t: float) -> np.ndarray:
    """Return a moving packet on X."""
    return exact.free_packet(X, t, -5.0, 3.0, 0.4, C, HBAR)


def test_packet_solves_its_equation() -> None:
    """The residual i hbar psi_t + c psi_xx vanishes with the differences taken."""
    t, dt, dx = 20.0, 1e-3, X[1] - X[0]
    rate = (packet(t + dt) - packet(t - dt)) / (2 * dt)
    psi = packet(t)
    # Fourth-order second difference.
    bend = -psi[4:] + 16 * psi[3:-1] - 30 * psi[2:-2] + 16 * psi[1:-3] - psi[:-4]
    residual = 1j * HBAR * rate[2:-2] + C * bend / (12 * dx**2)
    assert np.abs(residual).max() < 1e-7 * np.abs(psi).max()


@pytest.mark.parametrize("t", [0.0, 7.0, 25.0])
def test_moments_of_the_packet(t: float) -> None:
    """Norm, mean and width of the wavefunction are those of the closed forms."""
    dx = X[1] - X[0]
    density = np.abs(packet(t)) ** 2
    mean = np.sum(X * density) * dx
    assert np.sum(density) * dx == pytest.approx(1.0, abs=1e-12)
    assert mean == pytest.approx(float(exact.free_mean(t, -5.0, 0.4, C, HBAR)), abs=1e-10)
    spread = np.sqrt(np.sum((X - mean) ** 2 * density) * dx)
    assert spread == pytest.approx(float(exact.free_width(t, 3.0, C, HBAR)), rel=1e-11)


def test_speed_is_the_slope_of_the_dispersion() -> None:
    """The group speed is dE/dk over hbar."""
    k, dk = 0.7, 1e-5
    slope = (C * (k + dk) ** 2 - C * (k - dk) ** 2) / (2 * dk * HBAR)
    assert float(exact.speed(k, C, HBAR)) == pytest.approx(slope, rel=1e-9)
    assert float(exact.wavenumber(C * k**2, C)) == pytest.approx(k, rel=1e-14)


def test_covariance_is_that_of_its_principal_axes() -> None:
    """A turned packet spreads along its own axes as two packets of one dimension."""
    start = exact.rotated_covariance((2.0, 5.0), 0.6)
    values, axes = np.linalg.eigh(exact.free_covariance(9.0, start, C, HBAR))
    widths = [float(exact.free_width(9.0, s, C, HBAR)) for s in (2.0, 5.0)]
    assert np.sqrt(values) == pytest.approx(sorted(widths), rel=1e-12)
    narrow_at_start = np.array([np.cos(0.6), np.sin(0.6)])
    assert max(abs(narrow_at_start @ axes)) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize("t", [0.0, 3.0, 30.0])
def test_slits_are_two_free_packets(t: float) -> None:
    """The density behind the slits is that of two packets added and normalised."""
    psi = sum(exact.free_packet(X, t, y0, 2.0, 0.0, C, HBAR) for y0 in (-4.0, 4.0))
    dx = X[1] - X[0]
    wide = np.linspace(-400, 400, 20001)
    all_of_it = sum(exact.free_packet(wide, t, y0, 2.0, 0.0, C, HBAR) for y0 in (-4.0, 4.0))
    norm = np.sum(np.abs(all_of_it) ** 2) * (wide[1] - wide[0])
    found = exact.two_slits_density(X, t, 8.0, 2.0, C, HBAR)
    assert dx > 0
    assert np.abs(found - np.abs(psi) ** 2 / norm).max() < 1e-12


def test_fringes_tend_to_the_far_field_rule() -> None:
    """Far away the period is h t/(m d)."""
    t, d = 1e6, 30.0
    assert exact.fringe_period(t, d, 2.0, C, HBAR) == pytest.approx(
        4 * np.pi * C * t / (HBAR * d), rel=1e-8
    )

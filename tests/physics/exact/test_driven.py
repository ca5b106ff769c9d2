"""The oscillating region against coupled channels, unitarity and its limits."""

import numpy as np
import pytest
from scipy import linalg

from wavepack.physics import exact

C = 0.5686540464132216


def coupled_channels(
    energy: float, amplitude: float, quantum: float, length: float, height: float, reach: int
) -> np.ndarray:
    """Return T_n by carrying coupled channels across the region as one matrix exponential.

    c u_n'' = (V0 - E - n quantum) u_n + (V1/2)(u_(n-1) + u_(n+1)).
    """
    orders = np.arange(-reach, reach + 1)
    count = len(orders)
    k = np.sqrt((energy + orders * quantum) / C + 0j)
    ladder = np.eye(count, k=1) + np.eye(count, k=-1)
    force = (np.diag(height - energy - orders * quantum) + amplitude / 2 * ladder) / C
    zero, one = np.zeros((count, count)), np.eye(count)
    across = linalg.expm(length * np.block([[zero, one], [force, zero]]))
    # (e + r, iK(e - r)) is carried to (t, iKt): solve for r and t.
    ik = np.diag(1j * k)
    right = np.vstack([one, ik])
    left = across @ np.vstack([one, -ik])
    source = across @ np.concatenate([(orders == 0) + 0j, 1j * k * (orders == 0)])
    solution = np.linalg.solve(np.hstack([right, -left]), source)
    return np.asarray(k.real / k[reach].real * np.abs(solution[:count]) ** 2)


@pytest.mark.parametrize(
    ("energy", "amplitude", "quantum", "length", "height"),
    [(0.32, 0.05, 0.05, 8.0, 0.0), (0.07, 0.03, 0.02, 5.0, 0.1), (0.205, 0.01, 0.01, 30.0, 0.0)],
)
def test_matching_agrees_with_coupled_channels(
    energy: float, amplitude: float, quantum: float, length: float, height: float
) -> None:
    """Mode matching and the matrix exponential give one answer, static part or none."""
    found = exact.oscillating_region(energy, amplitude, quantum, length, C, height=height)
    other = coupled_channels(energy, amplitude, quantum, length, height, 8)
    ours = np.array([found.transmission(n) for n in range(-8, 9)])
    assert ours == pytest.approx(other, abs=1e-9)


@pytest.mark.parametrize("energy", [0.013, 0.12, 0.91])
def test_books_balance(energy: float) -> None:
    """Transmitted and reflected sidebands sum to 1 at any energy, drive and length."""
    for amplitude, length, height in ((0.3, 40.0, 0.0), (0.02, 3.0, 0.2)):
        found = exact.oscillating_region(energy, amplitude, 0.05, length, C, height=height)
        assert found.transmitted.sum() + found.reflected.sum() == pytest.approx(1, abs=1e-12)
        assert not found.transmitted[energy + 0.05 * found.orders < 0].any()
    half = exact.oscillating_half_space(energy, 0.07, 0.05, C)
    assert half.transmitted.sum() + half.reflected.sum() == pytest.approx(1, abs=1e-12)


def test_still_region_is_the_rectangular_barrier() -> None:
    """Without a drive only order 0 is left, and it is the static barrier's T."""
    found = exact.oscillating_region(0.11, 0.0, 0.05, 4.0, C, height=0.3)
    static = float(exact.rectangular_barrier(0.11, 0.3, 4.0, C))
    assert found.transmission(0) == pytest.approx(static, rel=1e-12)
    assert found.transmitted.sum() == pytest.approx(static, rel=1e-12)


def test_fast_particle_takes_the_bessel_weights() -> None:
    """At high energy the exact sidebands of region and half-space are Bessel functions."""
    region = exact.oscillating_region(400.02, 0.05, 0.05, 900.0, C)
    half = exact.oscillating_half_space(400.02, 0.05, 0.05, C)
    for n in (-2, -1, 0, 1):
        limit = exact.fast_limit(n, 400.02, 0.05, 0.05, 900.0, C)
        assert region.transmission(n) == pytest.approx(limit, abs=2e-4)
        assert half.transmission(n) == pytest.approx(
            exact.half_space_limit(n, 0.05, 0.05), abs=1e-4
        )


def test_more_channels_change_nothing() -> None:
    """The channels kept by default suffice."""
    few = exact.oscillating_region(0.12, 0.2, 0.05, 10.0, C)
    many = exact.oscillating_region(0.12, 0.2, 0.05, 10.0, C, extra=30)
    for n in range(-2, 6):
        assert few.transmission(n) == pytest.approx(many.transmission(n), abs=1e-13)
    assert few.transmission(999) == 0.0


def test_thresholds_and_closed_entrance_are_refused() -> None:
    """An energy on a multiple of the quantum, or not positive, is named."""
    with pytest.raises(ValueError, match="threshold"):
        exact.oscillating_region(0.1, 0.02, 0.05, 5.0, C)
    with pytest.raises(ValueError, match="energy > 0"):
        exact.oscillating_region(-0.1, 0.02, 0.05, 5.0, C)
    with pytest.raises(ValueError, match="energy > 0"):
        exact.oscillating_half_space(0.0, 0.02, 0.05, C)

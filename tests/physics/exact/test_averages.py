"""Averages over the momenta of a packet."""

import math

import numpy as np
import pytest

from wavepack.errors import NumericalFault
from wavepack.physics import exact

C = 0.57


def test_momentum_density_is_that_of_the_packet() -> None:
    """The density of wave numbers is the squared Fourier transform of the packet."""
    x = np.linspace(-60, 60, 4001)
    psi = exact.free_packet(x, 0.0, 2.0, 3.0, 0.5, C, 1.0)
    for k in (0.2, 0.5, 0.9):
        g = np.sum(np.exp(-1j * k * x) * psi) * (x[1] - x[0]) / math.sqrt(2 * math.pi)
        assert float(exact.momentum_density(k, 0.5, 3.0)) == pytest.approx(abs(g) ** 2, abs=1e-12)


def test_perfect_transmission_counts_what_moves_forward() -> None:
    """With T = 1 the average is the probability of k > 0."""
    forward = 0.5 * math.erfc(-math.sqrt(2) * 2.0 * 0.4)
    found = exact.packet_average(lambda _: 1.0, 0.4, 2.0, C)
    assert found == pytest.approx(forward, abs=1e-13)


def test_energies_count_from_the_launch() -> None:
    """A potential under the launch shifts every energy alike."""
    flat = exact.packet_average(lambda e: e, 0.4, 5.0, C)
    raised = exact.packet_average(lambda e: e, 0.4, 5.0, C, launch=0.3)
    assert flat == pytest.approx(C * (0.4**2 + 1 / 100), abs=1e-6)
    assert raised - flat == pytest.approx(0.3 * 0.5 * math.erfc(-math.sqrt(2) * 2), abs=1e-11)


def test_narrow_line_is_found() -> None:
    """A resonance far narrower than the packet is integrated whole."""
    center, width = 0.1, 1e-6
    found = exact.packet_average(
        lambda e: width**2 / 4 / ((e - center) ** 2 + width**2 / 4), 0.41, 5.0, C, near=(center,)
    )
    k = math.sqrt(center / C)
    area = math.pi * width / 2 / (2 * C * k)
    assert found == pytest.approx(float(exact.momentum_density(k, 0.41, 5.0)) * area, rel=1e-4)


def test_noise_is_refused() -> None:
    """A function that no quadrature resolves is an error, not a number."""
    with pytest.raises(NumericalFault, match="packet average"):
        exact.packet_average(lambda e: math.sin(1e9 * e) ** 2, 0.4, 5.0, C)

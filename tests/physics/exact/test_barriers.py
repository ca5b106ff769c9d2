"""Barriers, wells and steps against the integrated equation and their limits."""

import math

import numpy as np
import pytest

from tests.physics.exact.by_integration import scatter
from wavepack.physics import exact

C = 0.5686540464132216


@pytest.mark.parametrize("height", [0.3, -0.2])
@pytest.mark.parametrize("energy", [0.04, 0.17, 0.3, 0.55])
def test_rectangular_solves_its_equation(height: float, energy: float) -> None:
    """T of barrier and well is that of the integrated equation, T + R = 1."""
    transmitted, reflected = scatter(lambda x: height if 0 < x < 4 else 0.0, energy, C, (0.0, 4.0))
    found = float(exact.rectangular_barrier(energy, height, 4.0, C))
    assert found == pytest.approx(transmitted, abs=1e-11)
    assert found == pytest.approx(1 - reflected, abs=1e-11)


def test_rectangular_at_its_top() -> None:
    """At E = V0 the branches meet in 1/(1 + E L^2/4c), smoothly."""
    top = float(exact.rectangular_barrier(0.3, 0.3, 4.0, C))
    assert top == pytest.approx(1 / (1 + 0.3 * 16 / (4 * C)), rel=1e-14)
    beside = exact.rectangular_barrier([0.3 - 1e-9, 0.3 + 1e-9], 0.3, 4.0, C)
    assert beside == pytest.approx([top, top], abs=1e-7)


def test_rectangular_extremes() -> None:
    """Closed below zero energy, opaque when very thick, open where half waves fit."""
    assert exact.rectangular_barrier([-0.1, 0.0], 0.3, 4.0, C).tolist() == [0.0, 0.0]
    assert float(exact.rectangular_barrier(0.1, 0.3, 1e5, C)) == 0.0
    well = -0.3 + C * (math.pi * 3 / 5.0) ** 2
    assert float(exact.rectangular_barrier(well, -0.3, 5.0, C)) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize("height", [0.1, -0.25])
def test_sharp_step_solves_its_equation(height: float) -> None:
    """T and R of a step up and a step down, with a step of the mass inside the region."""
    transmitted, reflected = scatter(lambda x: height if x > 0 else 0.0, 0.13, C, (0.0, 1.0))
    found = float(exact.sharp_step(0.13, height, C))
    assert found == pytest.approx(transmitted, abs=1e-11)
    assert found == pytest.approx(1 - reflected, abs=1e-11)


def test_sharp_step_is_closed_below_its_top() -> None:
    """Nothing is transmitted where either side is closed."""
    assert exact.sharp_step([0.05, 0.1, -0.1], 0.1, C).tolist() == [0.0, 0.0, 0.0]


def test_mass_step_forgets_the_energy() -> None:
    """A step of the mass alone transmits alike at every energy."""
    found = exact.sharp_step([0.01, 0.1, 3.0], 0.0, C, 0.4 * C)
    ratio = math.sqrt(0.4)
    assert found == pytest.approx([4 * ratio / (1 + ratio) ** 2] * 3, rel=1e-13)


@pytest.mark.parametrize(("energy", "height"), [(0.11, 0.1), (0.3, 0.1), (0.05, -0.2)])
def test_smooth_step_solves_its_equation(energy: float, height: float) -> None:
    """R of the logistic step is that of the integrated equation, up and down."""
    _, reflected = scatter(lambda x: height / (1 + math.exp(-x)), energy, C, (-32.0, 32.0))
    found = float(exact.smooth_step_reflection(energy, height, 1.0, C))
    assert found == pytest.approx(reflected, abs=2e-11)


def test_smooth_step_limits() -> None:
    """A narrow smooth step is the sharp one; a wide one reflects nothing; below, all."""
    narrow = float(exact.smooth_step_reflection(0.15, 0.1, 1e-5, C))
    assert narrow == pytest.approx(1 - float(exact.sharp_step(0.15, 0.1, C)), abs=1e-8)
    assert float(exact.smooth_step_reflection(0.15, 0.1, 1e4, C)) == 0.0
    assert float(exact.smooth_step_reflection(0.05, 0.1, 1.0, C)) == 1.0


@pytest.mark.parametrize(("height", "width"), [(0.2, 2.0), (0.01, 1.0), (-0.13, 4.0)])
@pytest.mark.parametrize("energy", [0.02, 0.18, 0.4])
def test_sech2_solves_its_equation(height: float, width: float, energy: float) -> None:
    """T of a high and a low barrier and of a well is that of the integrated equation."""
    transmitted, reflected = scatter(
        lambda x: height / math.cosh(x / width) ** 2, energy, C, (-17 * width, 17 * width)
    )
    found = float(exact.sech2_barrier(energy, height, width, C))
    assert found == pytest.approx(transmitted, abs=1e-11)
    assert found == pytest.approx(1 - reflected, abs=1e-11)


def test_sech2_extremes() -> None:
    """Nothing overflows: a huge barrier is opaque, a fast particle passes."""
    assert float(exact.sech2_barrier(0.01, 50.0, 1e3, C)) == 0.0
    assert float(exact.sech2_barrier(1e6, 0.2, 2.0, C)) == pytest.approx(1.0, abs=1e-14)
    assert float(exact.sech2_barrier(-0.1, 0.2, 2.0, C)) == 0.0


@pytest.mark.parametrize("energy", [-0.4, 0.0, 0.3])
def test_parabola_solves_its_equation(energy: float) -> None:
    """T of the inverted parabola is that of the integrated equation with WKB ends.

    In natural lengths psi'' = -(2e + x^2) psi; far out the waves are
    (2e + x^2)^(-1/4) exp(+-i int sqrt(2e + x^2) dx), good to 1/x^4.
    """
    from scipy import integrate  # noqa: PLC0415 - for this test alone

    far = 40.0

    def wave(x: float) -> tuple[complex, complex]:
        p = math.sqrt(2 * energy + x * x)
        return p**-0.5 + 0j, (1j * p - x / (2 * p * p)) * p**-0.5

    end = integrate.solve_ivp(
        lambda x, y: np.array([y[1], -(2 * energy + x * x) * y[0]]),
        (far, -far), np.array(wave(far)), method="DOP853", rtol=1e-11, atol=1e-13,
    )  # fmt: skip
    psi, slope = end.y[:, -1]
    u, du = wave(-far)
    incoming = (psi * np.conj(du) - slope * np.conj(u)) / (u * np.conj(du) - du * np.conj(u))
    found = float(exact.parabolic_barrier(energy, 0.0, 1.0))
    assert found == pytest.approx(1 / abs(incoming) ** 2, abs=1e-6)


def test_saddle_counts_its_modes() -> None:
    """Each mode opens where its transverse level passes the saddle's top."""
    thresholds = [0.1 + 0.02 * (n + 0.5) for n in range(3)]
    for mode, energy in enumerate(thresholds):
        found = float(exact.saddle_transmission(energy, mode, 0.1, 0.004, 0.02))
        assert found == pytest.approx(0.5, abs=1e-12)
    assert float(exact.saddle_transmission(1e3, 0, 0.1, 0.004, 0.02)) == 1.0


def test_low_sech2_top_is_a_parabola() -> None:
    """Near the top of a wide barrier the parabola of the same curvature serves."""
    height, width = 2.0, 300.0
    quantum = 2 * math.sqrt(height * C) / width  # hbar omega of the inverted top
    energies = height + quantum * np.array([-0.5, 0.0, 0.5])
    smooth = exact.sech2_barrier(energies, height, width, C)
    assert exact.parabolic_barrier(energies, height, quantum) == pytest.approx(smooth, abs=3e-3)

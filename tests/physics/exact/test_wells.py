"""Bound levels against a lattice of the same equation and against each other."""

from collections.abc import Callable

import numpy as np
import pytest
from scipy import integrate, linalg

from wavepack.physics import exact

C, HEAVY = 0.57, 0.41


def sinc_levels(
    potential: Callable[[np.ndarray], np.ndarray], reach: float, points: int, count: int
) -> np.ndarray:
    """Return the lowest levels on a sinc lattice from -reach to reach."""
    x, dx = np.linspace(-reach, reach, points, retstep=True)
    gap = np.arange(points)
    row = np.concatenate([[np.pi**2 / 3], 2 * (-1.0) ** gap[1:] / gap[1:] ** 2])
    matrix = linalg.toeplitz(C * row / dx**2) + np.diag(potential(x))
    return np.asarray(linalg.eigvalsh(matrix, subset_by_index=(0, count - 1)))


def test_harmonic_levels() -> None:
    """The ladder of the harmonic oscillator is that of the lattice."""
    quantum = 0.08  # m omega^2/2 = quantum^2/4c
    found = sinc_levels(lambda x: quantum**2 / (4 * C) * x**2, 30.0, 201, 4)
    assert exact.harmonic_levels(4, quantum) == pytest.approx(found, abs=1e-12)


def test_morse_levels() -> None:
    """All bound levels of a Morse oscillator are those of the lattice, and no more."""
    found = exact.morse_levels(1.0, 0.6, C)
    lattice = sinc_levels(
        lambda x: 1.0 * (1 - np.exp(-0.6 * np.clip(x, -5, None))) ** 2, 40, 600, 4
    )
    assert len(found) == 2
    assert found == pytest.approx(lattice[:2], abs=1e-7)
    assert lattice[2] > 1.0
    assert len(exact.morse_levels(0.01, 3.0, C)) == 0


def test_sech2_levels() -> None:
    """The levels of a sech^2 well of broken strength are those of the lattice."""
    found = exact.sech2_well_levels(0.5, 2.0, C)
    lattice = sinc_levels(lambda x: -0.5 / np.cosh(x / 2.0) ** 2, 60.0, 400, 3)
    assert len(found) == 2
    assert found == pytest.approx(lattice[:2], abs=1e-6)


@pytest.mark.parametrize("strength", [1.0, 3.0])
def test_whole_strength_binds_no_level_at_zero(strength: float) -> None:
    """A reflectionless well binds as many levels as its strength, all below zero."""
    depth = strength * (strength + 1) * C / 4.0
    levels = exact.sech2_well_levels(depth, 2.0, C)
    assert len(levels) == strength
    assert levels[-1] == pytest.approx(-C / 4.0, rel=1e-12)


@pytest.mark.parametrize("c_outside", [None, HEAVY])
def test_finite_well_states_decay_outside(c_outside: float | None) -> None:
    """At each level psi and c psi' leave the well as a decaying exponential does."""
    depth, width = 0.3, 10.0
    outside = C if c_outside is None else c_outside
    levels = exact.finite_well_levels(depth, width, C, c_outside)
    for number, energy in enumerate(levels):
        even = number % 2 == 0
        start = np.array([1.0, 0.0] if even else [0.0, 1.0])
        end = integrate.solve_ivp(
            lambda _, y, e: np.array([y[1], -e / C * y[0]]), (0.0, width / 2), start,
            method="DOP853", rtol=1e-12, atol=1e-13, args=(energy,),
        )  # fmt: skip
        psi, slope = end.y[:, -1]
        kappa = np.sqrt((depth - energy) / outside)
        assert C * slope == pytest.approx(-outside * kappa * psi, abs=1e-9)
    assert len(levels) == np.ceil(np.sqrt(depth / C) * width / np.pi)


def test_deep_well_is_a_box_and_shallow_well_binds_once() -> None:
    """Between the limits: hard walls for a huge depth, one level for a tiny one."""
    deep = exact.finite_well_levels(1e8, 2.0, C)[:3]
    assert deep == pytest.approx(exact.box_levels(3, 2.0, C), rel=3e-4)
    shallow = exact.finite_well_levels(1e-4, 1.0, C)
    assert len(shallow) == 1
    # Weak binding: depth - E -> (depth width)^2/4c.
    assert 1e-4 - shallow[0] == pytest.approx((1e-4) ** 2 / (4 * C), rel=1e-3)


def test_triangular_states_vanish_at_the_wall() -> None:
    """Integrated inwards from far up the slope, each state is zero at the wall."""
    slope = 0.02
    for energy in exact.triangular_well_levels(3, slope, C):
        far = energy / slope + 12 * (C / slope) ** (1 / 3)
        end = integrate.solve_ivp(
            lambda x, y, e: np.array([y[1], (slope * x - e) / C * y[0]]), (far, 0.0),
            np.array([1e-12, -1e-12]), method="DOP853", rtol=1e-12, atol=0.0, args=(energy,),
        )  # fmt: skip
        assert abs(end.y[0, -1]) < 1e-8 * np.abs(end.y[0]).max()


def test_softcore_state_solves_its_equation() -> None:
    """The closed soft-core state leaves no residual in -c psi'' + V psi = E psi."""
    attraction, dx = 1.4, 0.01
    x = np.arange(-10.0, 10.0, dx)
    softening, energy, psi = exact.softcore_ground_state(attraction, C, x)
    bend = (-psi[4:] + 16 * psi[3:-1] - 30 * psi[2:-2] + 16 * psi[1:-3] - psi[:-4]) / (12 * dx**2)
    potential = -attraction / np.hypot(x, softening)
    residual = -C * bend + (potential[2:-2] - energy) * psi[2:-2]
    assert np.abs(residual).max() < 1e-7 * psi.max()
    assert exact.softcore_ground_state(1.0, 0.5)[:2] == pytest.approx((np.sqrt(2), -0.5))

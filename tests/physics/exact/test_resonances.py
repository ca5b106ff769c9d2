"""Poles and peaks of stacks, and the decay they foretell."""

import numpy as np
import pytest

from wavepack.errors import NumericalFault
from wavepack.physics import exact

C, HBAR = 0.5686540464132216, 0.6582119569509067
DOUBLE = exact.uniform_stack([(3.0, 0.3), (5.0, 0.0), (3.0, 0.3)], C)
THICK = exact.uniform_stack([(9.0, 0.3), (5.0, 0.0), (9.0, 0.3)], C)


def test_pole_is_a_zero_of_the_incoming_amplitude() -> None:
    """At the pole nothing need come in: the amplitude falls by many digits."""
    found = exact.resonance_pole(DOUBLE, 0.09)
    at_pole, _ = exact.incoming_amplitude(DOUBLE, found.energy - 0.5j * found.width)
    beside, _ = exact.incoming_amplitude(DOUBLE, found.energy + 0j)
    assert abs(at_pole) < 1e-10 * abs(beside)
    assert found.lifetime(HBAR) == HBAR / found.width


def test_thin_line_is_a_breit_wigner_line() -> None:
    """For thick barriers the peak is the pole's: position, width, shape; and T = 1."""
    pole = exact.resonance_pole(THICK, 0.0896)
    assert pole.width < 5e-6
    reach = 20 * pole.width
    peak = exact.resonance_peak(THICK, pole.energy - reach, pole.energy + reach)
    assert peak.energy == pytest.approx(pole.energy, abs=1e-3 * pole.width)
    assert peak.width == pytest.approx(pole.width, rel=1e-4)
    assert peak.transmission == pytest.approx(1.0, abs=1e-6)
    offsets = np.array([-3.0, -1.0, 0.5, 2.0])
    line = 1 / (1 + 4 * offsets**2)
    found = exact.stack_transmission(THICK, pole.energy + offsets * pole.width)
    assert found == pytest.approx(line, rel=1e-3)


def test_thick_walls_hold_the_bound_level() -> None:
    """As its walls grow the resonance becomes the level of the finite well."""
    level = float(exact.finite_well_levels(0.3, 5.0, C)[0])
    assert exact.resonance_pole(THICK, level).energy == pytest.approx(level, abs=1e-5)


def test_prepared_state_decays_at_the_rate_of_the_pole() -> None:
    """The well's ground state, its outer walls gone at t = 0, decays as exp(-Gamma t/hbar).

    Its survival amplitude is the Fourier transform of its energy spectrum over the even
    scattering states, normalised to energy far outside: an independent route to Gamma.
    """
    half, wall, height = 2.5, 3.0, 0.3
    level = float(exact.finite_well_levels(height, 2 * half, C)[0])
    # Even states on one side: cos kx, through the wall, then outside.
    x = np.linspace(0.0, 40.0, 16001)
    k0, kappa0 = np.sqrt(level / C), np.sqrt((height - level) / C)
    state = np.where(x < half, np.cos(k0 * x), np.cos(k0 * half) * np.exp(-kappa0 * (x - half)))
    energies = np.linspace(0.0885 - 0.08, 0.0885 + 0.12, 1201)
    weight = np.array([_even_overlap(e, x, state, half, wall, height) for e in energies])
    norm = 2 * np.sum(state**2) * (x[1] - x[0])
    spectrum = weight**2 / norm
    times = np.array([200.0, 350.0, 500.0])
    de = energies[1] - energies[0]
    survival = np.array(
        [abs(np.sum(spectrum * np.exp(-1j * energies * t / HBAR)) * de) ** 2 for t in times]
    )
    rate = -np.diff(np.log(survival)) / np.diff(times)
    gamma = exact.resonance_pole(DOUBLE, 0.09).width
    assert np.sum(spectrum) * de > 0.95
    assert rate == pytest.approx([gamma / HBAR] * 2, rel=3e-3)


def _even_overlap(
    energy: float, x: np.ndarray, state: np.ndarray, half: float, wall: float, height: float
) -> float:
    """Return the overlap of an even state with the energy-normalised scattering state."""
    k, kappa = np.sqrt(energy / C), np.sqrt(complex((height - energy) / C))
    u, du = np.cos(k * half), -k * np.sin(k * half)
    inside = u * np.cosh(kappa * (x - half)) + du * np.sinh(kappa * (x - half)) / kappa
    v = (u * np.cosh(kappa * wall) + du * np.sinh(kappa * wall) / kappa).real
    dv = (u * np.sinh(kappa * wall) * kappa + du * np.cosh(kappa * wall)).real
    far = x - half - wall
    outside = v * np.cos(k * far) + dv / k * np.sin(k * far)
    wave = np.where(x < half, np.cos(k * x), np.where(far < 0, inside.real, outside))
    # Half of the density of states is on each side: A^2 = 1/(2 pi c k).
    amplitude = np.hypot(v, dv / k) * np.sqrt(2 * np.pi * C * k)
    return float(2 * np.sum(wave * state) * (x[1] - x[0]) / amplitude)


def test_what_is_not_there_is_refused() -> None:
    """No peak between two energies, or an iteration that runs away, is an error."""
    with pytest.raises(NumericalFault, match="no peak"):
        exact.resonance_peak(DOUBLE, 0.02, 0.05)
    bare = exact.uniform_stack([], C)
    with pytest.raises(NumericalFault, match="resonance pole near"):
        exact.resonance_pole(bare, 0.1)


def test_bound_state_is_no_resonance() -> None:
    """A level below both leads lets nothing out: it is refused, not given a zero width."""
    well = exact.uniform_stack([(10.0, -0.3)], C)
    level = float(exact.finite_well_levels(0.3, 10.0, C)[0]) - 0.3
    with pytest.raises(NumericalFault, match="does not decay"):
        exact.resonance_pole(well, level + 1e-4)


def test_low_shoulder_has_no_half_height() -> None:
    """A peak whose background never falls to its half is refused."""
    well = exact.uniform_stack([(10.0, -0.05)], C)
    with pytest.raises(NumericalFault, match="half"):
        exact.resonance_peak(well, 0.05, 0.3)

"""Conductance and currents against closed forms in SI."""

import math
from typing import Any

import numpy as np
import pytest

from wavepack.analysis.current import (
    BOLTZMANN,
    CHARGE,
    ELECTRON_MASS,
    PLANCK,
    QUANTUM,
    Leads,
    Transmission,
    conductance,
    current,
    current_density,
)
from wavepack.arrays import RealArray

ENERGIES: RealArray = np.linspace(0.0, 2.0, 21)
OPEN = Transmission(ENERGIES, np.ones(21), np.full(21, 1e-3))
HBAR = PLANCK / (2 * math.pi)


def test_the_quantum_of_conductance() -> None:
    """An open channel conducts 2 e^2/h, at any temperature."""
    assert pytest.approx(7.748091729e-5, rel=1e-9) == QUANTUM
    for temperature in (0.0, 4.2, 300.0):
        found = conductance(OPEN, 1.0, temperature)
        assert found.value == pytest.approx(QUANTUM, rel=1e-12)
        assert found.error == pytest.approx(1e-3 * QUANTUM)
        assert found.unit == "S"


def test_conductance_of_a_slope_needs_no_fine_energies() -> None:
    """A straight T(E) averages to its value at the Fermi level, however cold it is."""
    slope = Transmission(ENERGIES, ENERGIES / 2)
    for temperature in (0.0, 1.0, 100.0):
        assert conductance(slope, 0.83, temperature).value == pytest.approx(0.415 * QUANTUM)


def test_conductance_of_a_step_is_the_occupation() -> None:
    """A step of T at E0 conducts f(E0 - mu) quanta at temperature T."""
    energies = np.sort(np.concatenate((ENERGIES, [0.95 - 1e-9, 0.95 + 1e-9])))
    step = Transmission(energies, np.where(energies > 0.95, 1.0, 0.0))
    kt = BOLTZMANN * 300 / CHARGE
    expected = QUANTUM / (1 + math.exp((0.95 - 0.9) / kt))
    assert conductance(step, 0.9, 300).value == pytest.approx(expected, rel=1e-6)


def test_current_of_an_open_channel_is_ohmic() -> None:
    """I = (2 e^2/h) V for T = 1, cold or warm."""
    for temperature in (0.0, 77.0):
        found = current(OPEN, Leads.biased(1.0, 0.3, temperature))
        assert found.value == pytest.approx(0.3 * QUANTUM, rel=1e-10)
        assert found.error == pytest.approx(0.3e-3 * QUANTUM)
        assert found.outside < 1e-12 * QUANTUM


def test_current_over_a_step_is_logarithmic() -> None:
    """A step of T at E0 lets k_B T ln[(1 + e^((mu_L-E0)/k_B T))/(1 + e^((mu_R-E0)/k_B T))] pass."""
    energies = np.sort(np.concatenate((ENERGIES, [0.95 - 1e-9, 0.95 + 1e-9])))
    step = Transmission(energies, np.where(energies > 0.95, 1.0, 0.0))
    kt = BOLTZMANN * 300 / CHARGE
    left, right = (math.log1p(math.exp((level - 0.95) / kt)) for level in (0.98, 0.9))
    found = current(step, Leads(0.98, 0.9, 300.0))
    assert found.value == pytest.approx(QUANTUM * kt * (left - right), rel=1e-6)


def test_current_density_of_open_leads_without_temperature() -> None:
    """J = e m (mu_L^2 - mu_R^2) / 4 pi^2 hbar^3 for T = 1 at T = 0."""
    found = current_density(OPEN, Leads.biased(0.9, 0.35), 0.067)
    joule = CHARGE**2 * (0.9**2 - 0.55**2)
    expected = CHARGE * 0.067 * ELECTRON_MASS * joule / (4 * math.pi**2 * HBAR**3)
    assert found.value == pytest.approx(expected, rel=1e-12)
    assert found.unit == "A/m^2"


def test_current_density_of_a_thin_gas_is_thermionic() -> None:
    """J = A T^2 exp(mu/k_B T), A = 4 pi e m k_B^2/h^3 = 1.20173e6 A/m^2/K^2, for T = 1."""
    richardson = 4 * math.pi * CHARGE * ELECTRON_MASS * BOLTZMANN**2 / PLANCK**3
    assert richardson == pytest.approx(1.20173e6, rel=1e-5)
    kt = BOLTZMANN * 300 / CHARGE
    found = current_density(OPEN, Leads(-0.6, -3.0, 300.0), 1.0)
    expected = richardson * 300**2 * math.exp(-0.6 / kt)
    assert found.value == pytest.approx(expected, rel=1e-9)


def test_currents_change_sign_with_the_bias() -> None:
    """Exchanging the leads turns the current round and leaves its error."""
    there = current_density(OPEN, Leads(0.4, 0.3, 50.0), 1.0)
    back = current_density(OPEN, Leads(0.3, 0.4, 50.0), 1.0)
    assert back.value == pytest.approx(-there.value)
    assert back.error == pytest.approx(there.error)


def test_unknown_energies_are_not_guessed() -> None:
    """What lies outside the energies adds nothing; its bound for T = 1 stands beside."""
    part = Transmission(ENERGIES[5:8], np.ones(3))
    found = current(part, Leads(0.9, 0.4))
    assert found.value == pytest.approx(0.2 * QUANTUM)
    assert found.outside == pytest.approx(0.3 * QUANTUM)
    assert found.error is None
    assert conductance(part, 0.9).outside == pytest.approx(QUANTUM)


def test_nothing_flows_below_the_bottom() -> None:
    """Levels below the band edge carry no current at zero temperature."""
    assert current(OPEN, Leads(0.5, 0.2, bottom=0.6)).value == 0
    assert conductance(OPEN, 0.5, bottom=0.6).value == 0


def test_transmission_of_a_run() -> None:
    """Energies come in eV, those without a value are left out, errors if all are known."""
    seen: dict[str, Any] = {
        "energy": [100.0, 200.0, 300.0, 400.0],
        "transmission": [None, 0.5, 0.6, -1e-17],
        "transmission_error": [None, 0.1, 0.1, 0.1],
        "energy_unit": "meV",
    }
    found = Transmission.from_results({"detectors": {"exit": seen}}, "exit")
    assert found.energies == pytest.approx([0.2, 0.3, 0.4])
    assert found.values == pytest.approx([0.5, 0.6, 0.0])
    assert found.errors == pytest.approx([0.1, 0.1, 0.1])
    seen["transmission_error"] = None
    assert Transmission.from_results({"detectors": {"exit": seen}}, "exit").errors is None
    with pytest.raises(ValueError, match="'entry': not in these results; they hold exit"):
        Transmission.from_results({"detectors": {"exit": seen}}, "entry")
    seen |= {"transmission": None, "reason": "the potential is driven"}
    with pytest.raises(ValueError, match="no transmission by energy: the potential is driven"):
        Transmission.from_results({"detectors": {"exit": seen}}, "exit")


def test_bad_input_is_named() -> None:
    """Each message says what was wrong and where."""
    with pytest.raises(ValueError, match="energies: need finite numbers in ascending order"):
        Transmission(np.array([0.2, 0.1]), np.ones(2))
    with pytest.raises(ValueError, match=r"energies: need at least two in one row"):
        Transmission(np.ones(1), np.ones(1))
    with pytest.raises(ValueError, match="values: need one an energy, 21"):
        Transmission(ENERGIES, np.ones(3))
    with pytest.raises(ValueError, match=r"values: need numbers of 0 or more, got -1.0 at 0 eV"):
        Transmission(ENERGIES, -np.ones(21))
    with pytest.raises(ValueError, match="temperature: need 0 or more kelvin"):
        Leads(0.1, 0.1, -1.0)
    with pytest.raises(ValueError, match="left: need a finite number"):
        Leads(math.nan, 0.1)
    with pytest.raises(ValueError, match="mass: need a positive number of electron masses"):
        current_density(OPEN, Leads(0.1, 0.0), 0.0)

"""Units against two independent tables, and how texts are read."""

import math
import warnings
from collections.abc import Callable
from typing import Any

import pytest
import scipy.constants
from hypothesis import given
from hypothesis import strategies as st

from wavepack.physics.units import TABLE, UnitSystem

#: The project's spelling and that of pint, where they differ.
PINT_NAMES = {
    "A": "angstrom",
    "Å": "angstrom",
    "a0": "bohr",
    "Eh": "hartree",
    "Ha": "hartree",
    "Hartree": "hartree",
    "mHartree": "millihartree",
    "mHa": "millihartree",
    "Ry": "rydberg",
    "ueV": "microelectron_volt",
    "µeV": "microelectron_volt",
    "um": "micrometer",
    "µm": "micrometer",
    "us": "microsecond",
    "µs": "microsecond",
    "atomic_time": "hbar/hartree",
    "hbar/Eh": "hbar/hartree",
    "hbar/Ha": "hbar/hartree",
    "me": "electron_mass",
    "m_e": "electron_mass",
    "m_p": "proton_mass",
    "u": "unified_atomic_mass_unit",
    "Da": "dalton",
    "K": "boltzmann_constant*kelvin",
    "cm^-1": "planck_constant*speed_of_light/centimeter",
    "1/cm": "planck_constant*speed_of_light/centimeter",
    "THz": "planck_constant*terahertz",
    "GHz": "planck_constant*gigahertz",
    "kJ/mol": "kilojoule/mole/avogadro_number*mole",
    "kcal/mol": "kilocalorie/mole/avogadro_number*mole",
    "h": "hour",
    "°": "degree",
}
SI = {"length": "m", "energy": "J", "time": "s", "mass": "kg", "angle": "rad"}
DEFAULT = UnitSystem()
ATOMIC = UnitSystem.atomic()


@pytest.fixture(scope="module")
def si_value() -> Callable[[str, str], float]:
    """Return a function that gives the SI value a units library has for a unit."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import pint  # noqa: PLC0415 - slow to import

        registry: Any = pint.UnitRegistry()
    return lambda unit, si: float(registry(f"1 {unit}").to(si).magnitude)


def test_every_unit_agrees_with_a_units_library(si_value: Callable[[str, str], float]) -> None:
    """Each unit of the table has the SI value that pint gives it."""
    for dimension, si in SI.items():
        for name, factor in TABLE[dimension].items():
            value = si_value(PINT_NAMES.get(name, name), si)
            # The ratio: an approximate comparison of values near 1e-20 would pass anything.
            # Later adjustments of the constants moved them by parts in 1e9.
            assert float(factor) / value == pytest.approx(1.0, rel=2e-9), (dimension, name)


def test_derived_units_agree_with_a_units_library(si_value: Callable[[str, str], float]) -> None:
    """Fields and wave numbers too, in every spelling."""
    lengths = {name: si_value(PINT_NAMES.get(name, name), "m") for name in TABLE["length"]}
    for name, length in lengths.items():
        for spelling in (f"1/{name}", f"{name}^-1", f"/{name}"):
            found = float(TABLE["wavenumber"][spelling]) * length
            assert found == pytest.approx(1.0, rel=2e-9), spelling
        for volts in ("mV", "V", "kV", "MV", "GV"):
            found = float(TABLE["field"][f"{volts}/{name}"]) * length / si_value(volts, "V")
            assert found == pytest.approx(1.0, rel=2e-9), (volts, name)
    hartree = float(TABLE["field"]["Hartree/(e bohr)"])
    assert hartree / si_value("hartree/elementary_charge/bohr", "V/m") == pytest.approx(1, rel=2e-9)


@pytest.mark.parametrize(
    ("dimension", "name", "constant"),
    [
        ("length", "bohr", "Bohr radius"),
        ("energy", "Hartree", "Hartree energy"),
        ("energy", "eV", "electron volt"),
        ("time", "atomic_time", "atomic unit of time"),
        ("mass", "m_e", "electron mass"),
        ("mass", "m_p", "proton mass"),
        ("mass", "u", "atomic mass constant"),
        ("energy", "K", "Boltzmann constant"),
    ],
)
def test_constants_agree_with_codata(dimension: str, name: str, constant: str) -> None:
    """Each constant agrees with the adjustment that scipy holds, to its uncertainty."""
    value, _, uncertainty = scipy.constants.physical_constants[constant]
    allowed = max(uncertainty, 1e-10 * value)
    assert float(TABLE[dimension][name]) == pytest.approx(value, abs=allowed, rel=0)


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("3.37 nm", "length", 3.37),
        ("33.7 A", "length", 3.37),
        ("33.7Å", "length", 3.37),
        ("3370 pm", "length", 3.37),
        ("2 µm", "length", 2000.0),
        ("80 meV", "energy", 0.08),
        ("1.5e-3 keV", "energy", 1.5),
        ("5 ps", "time", 5000.0),
        ("250 as", "time", 0.25),
        ("1 MV/cm", "field", 0.1),
        ("10 kV / cm", "field", 0.001),
        ("1 V/nm", "field", 1.0),
        ("0.5 1/nm", "wavenumber", 0.5),
        ("0.5 nm^-1", "wavenumber", 0.5),
        ("0.05 1/A", "wavenumber", 0.5),
        ("+.5 1/nm", "stiffness", 0.5),
        ("180 deg", "angle", math.pi),
        ("-0.5 rad", "angle", -0.5),
        ("50 %", "", 0.5),
        (3, "length", 3.0),
        (-0.25, "energy", -0.25),
    ],
)
def test_texts_mean_what_they_say(text: str | float, dimension: str, value: float) -> None:
    """A decimal number with a decimal unit converts to the last bit."""
    assert DEFAULT.convert(text, dimension) == value


@pytest.mark.parametrize(
    ("raw", "dimension", "needed", "found"),
    [
        ("3 parsec", "length", "need a length", "unknown unit 'parsec'"),
        ("80 mev", "energy", "need an energy", "did you mean 'meV'?"),
        ("5 PS", "time", "need a time", "did you mean 'ps'?"),
        ("3 nm", "energy", "need an energy", "unknown unit 'nm'"),
        ("fast", "time", "need a time", "got 'fast'"),
        ("", "time", "need a time", "got ''"),
        ("1.2.3 nm", "length", "need a length", "1.2.3"),
        ("1e999999999 nm", "length", "need a length", "1e999999999"),
        ("1e999 nm", "length", "need a finite number", "1e999"),
        (math.inf, "length", "need a finite number", "inf"),
        (math.nan, "energy", "need a finite number", "nan"),
        (10**400, "length", "need a finite number", "1000"),
        (True, "mass", "need a mass", "True"),
        ([1], "mass", "need a mass", "[1]"),
        (30, "angle", "need an angle", "30"),
        ("30", "angle", "need an angle", "unknown unit ''"),
        ("1 nm", "", "need a pure number", "1 nm"),
        ("\u0661 nm", "length", "need a length", "nm"),
    ],
)
def test_bad_texts_are_refused(raw: object, dimension: str, needed: str, found: str) -> None:
    """A refusal says what is needed and what was found."""
    with pytest.raises(ValueError, match="need") as refused:
        DEFAULT.convert(raw, dimension)
    assert needed in str(refused.value)
    assert found in str(refused.value)


def test_atomic_units_have_constants_of_one() -> None:
    """In atomic units hbar, hbar^2/m and e^2/(4 pi eps0) are exactly 1."""
    assert (ATOMIC.hbar, ATOMIC.hbar2_per_mass, ATOMIC.coulomb) == (1.0, 1.0, 1.0)
    field = scipy.constants.value("atomic unit of electric field")
    assert ATOMIC.convert(f"{field!r} V/m", "field") == pytest.approx(1.0, rel=1e-9)


def test_default_units_have_the_known_constants() -> None:
    """The constants in eV, nm, fs and m_e agree with those put together by scipy."""
    c = scipy.constants
    assert pytest.approx(c.hbar / c.e * 1e15, rel=1e-12) == DEFAULT.hbar
    assert pytest.approx(c.hbar**2 / c.m_e / c.e * 1e18, rel=1e-9) == DEFAULT.hbar2_per_mass
    coulomb = c.e / (4 * math.pi * c.epsilon_0) * 1e9
    assert pytest.approx(coulomb, rel=1e-9) == DEFAULT.coulomb


def test_a_particle_gets_its_constants() -> None:
    """The stiffness of an electron in a semiconductor is hbar^2/2m."""
    particle = DEFAULT.particle(0.067, -1.0)
    assert particle.stiffness == pytest.approx(0.0380998211 / 0.067, rel=1e-8)
    assert particle.charge == -1.0


def test_parameters_take_the_unit_of_their_own_dimension() -> None:
    """A parameter with a unit is converted; a bare one is a pure number."""
    units = UnitSystem(length="pm", energy="meV")
    assert units.parameter(3) == 3.0
    assert units.parameter("3 nm") == 3000.0
    assert units.parameter("0.3 eV") == 300.0
    with pytest.raises(ValueError, match="energy and wavenumber"):
        units.parameter("3 cm^-1")
    with pytest.raises(ValueError, match="unknown unit"):
        units.parameter("3 parsec")


def test_unknown_units_of_a_system_are_refused() -> None:
    """A system cannot be made of a unit of another dimension."""
    with pytest.raises(ValueError, match="need a unit of length, got 'eV'"):
        UnitSystem(length="eV")


def test_symbols_are_written_out() -> None:
    """Each dimension has the symbol that its numbers are labelled with."""
    symbols = [DEFAULT.symbol(d) for d in ("length", "energy", "wavenumber", "field", "")]
    assert symbols == ["nm", "eV", "1/nm", "eV/(e nm)", ""]
    with pytest.raises(KeyError):
        DEFAULT.symbol("colour")


@given(
    number=st.floats(1e-200, 1e200),
    dimension=st.sampled_from(["length", "energy", "time", "mass", "wavenumber", "field"]),
    data=st.data(),
)
def test_own_unit_changes_nothing(number: float, dimension: str, data: st.DataObject) -> None:
    """A number with the run's own unit reads back bit for bit, whatever the system."""
    system = UnitSystem(
        *(
            data.draw(st.sampled_from(sorted(TABLE[d])))
            for d in ("length", "energy", "time", "mass")
        )
    )
    assert system.convert(f"{number!r} {system.symbol(dimension)}", dimension) == number

r"""Units: what a quantity's text means, and the constants in the units of a run.

Every unit is an exact fraction of the SI unit, so "80 meV" is 0.08 eV to the last
bit. The constants are those that define the SI, and CODATA 2022 [CODATA2022]_,
tabulated rather than imported: reading a scenario needs no scientific library, and
a test compares them with one. Of the electron mass, the Bohr radius and the Hartree
energy any one follows from the others, :math:`E_h = \hbar^2/m_e a_0^2`. Here the mass
does, within its uncertainty, so that :math:`\hbar`, :math:`\hbar^2/m_e` and
:math:`e^2/4\pi\epsilon_0` are exactly 1 in atomic units.
"""

import difflib
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from types import MappingProxyType
from typing import Final

from wavepack.physics.particle import Particle

_PLANCK: Final = Fraction("6.62607015e-34")  # J s
_CHARGE: Final = Fraction("1.602176634e-19")  # C
_LIGHT: Final = Fraction(299792458)  # m/s
_BOLTZMANN: Final = Fraction("1.380649e-23")  # J/K
_AVOGADRO: Final = Fraction("6.02214076e23")  # 1/mol
_HBAR: Final = _PLANCK / (2 * Fraction("3.14159265358979323846264338327950288"))
_BOHR: Final = Fraction("5.29177210544e-11")  # m
_HARTREE: Final = Fraction("4.3597447222060e-18")  # J
_ELECTRON_MASS: Final = _HBAR**2 / (_HARTREE * _BOHR**2)  # kg
_PROTON_MASS: Final = Fraction("1.67262192595e-27")  # kg
_ATOMIC_MASS: Final = Fraction("1.66053906892e-27")  # kg
_COULOMB: Final = _HARTREE * _BOHR  # e^2/(4 pi eps0), J m


def _ten(power: int) -> Fraction:
    return Fraction(10) ** power


_LENGTH = {
    "m": _ten(0),
    "cm": _ten(-2),
    "mm": _ten(-3),
    "um": _ten(-6),
    "µm": _ten(-6),
    "nm": _ten(-9),
    "pm": _ten(-12),
    "angstrom": _ten(-10),
    "Å": _ten(-10),
    "A": _ten(-10),
    "bohr": _BOHR,
    "a0": _BOHR,
}
_ENERGY = {
    "J": _ten(0),
    "eV": _CHARGE,
    "meV": _CHARGE * _ten(-3),
    "ueV": _CHARGE * _ten(-6),
    "µeV": _CHARGE * _ten(-6),
    "keV": _CHARGE * _ten(3),
    "Hartree": _HARTREE,
    "hartree": _HARTREE,
    "Ha": _HARTREE,
    "Eh": _HARTREE,
    "mHartree": _HARTREE * _ten(-3),
    "mHa": _HARTREE * _ten(-3),
    "Ry": _HARTREE / 2,
    "K": _BOLTZMANN,
    "cm^-1": _PLANCK * _LIGHT * _ten(2),
    "1/cm": _PLANCK * _LIGHT * _ten(2),
    "THz": _PLANCK * _ten(12),
    "GHz": _PLANCK * _ten(9),
    "kJ/mol": _ten(3) / _AVOGADRO,
    "kcal/mol": Fraction(4184) / _AVOGADRO,
}
_TIME = {
    "s": _ten(0),
    "ms": _ten(-3),
    "us": _ten(-6),
    "µs": _ten(-6),
    "ns": _ten(-9),
    "ps": _ten(-12),
    "fs": _ten(-15),
    "as": _ten(-18),
    "atomic_time": _HBAR / _HARTREE,
    "hbar/Eh": _HBAR / _HARTREE,
    "hbar/Ha": _HBAR / _HARTREE,
    "min": Fraction(60),
    "h": Fraction(3600),
}
_MASS = {
    "kg": _ten(0),
    "g": _ten(-3),
    "m_e": _ELECTRON_MASS,
    "me": _ELECTRON_MASS,
    "m_p": _PROTON_MASS,
    "u": _ATOMIC_MASS,
    "Da": _ATOMIC_MASS,
}
_VOLTAGE = {"V": _ten(0), "mV": _ten(-3), "kV": _ten(3), "MV": _ten(6), "GV": _ten(9)}
_FIELD = {
    f"{volts}/{length}": _VOLTAGE[volts] / _LENGTH[length]
    for volts in _VOLTAGE
    for length in _LENGTH
} | {
    f"{energy}/(e {length})": _ENERGY[energy] / _CHARGE / _LENGTH[length]
    for energy in _ENERGY
    for length in _LENGTH
}
# A degree is no fraction of a radian: to the last bit of a double.
_ANGLE = {"rad": _ten(0), "deg": Fraction(math.pi / 180), "°": Fraction(math.pi / 180)}


def _inverse(table: Mapping[str, Fraction]) -> dict[str, Fraction]:
    return {
        text: 1 / factor
        for symbol, factor in table.items()
        for text in (f"1/{symbol}", f"{symbol}^-1", f"/{symbol}")
    }


#: SI factor of every unit, by dimension.
TABLE: Final[Mapping[str, Mapping[str, Fraction]]] = MappingProxyType(
    {
        "length": _LENGTH,
        "energy": _ENERGY,
        "time": _TIME,
        "mass": _MASS,
        "wavenumber": _inverse(_LENGTH),
        "field": _FIELD,
        "angle": _ANGLE,
        "": {"": _ten(0), "1": _ten(0), "%": _ten(-2)},
    }
)

#: The four units of a system of Hartree atomic units.
ATOMIC: Final = {"length": "bohr", "energy": "Hartree", "time": "atomic_time", "mass": "m_e"}

#: Exponents have four digits at most: a longer one would take hours to expand.
_QUANTITY = re.compile(
    r"\s*([+-]?(?:\d+(?:_\d+)*\.?\d*|\.\d+)(?:[eE][+-]?\d{1,4})?)(?![\d.])\s*(.*?)\s*",
    re.ASCII | re.DOTALL,
)
#: Signs that look alike or stand for the same: micro, superscripts.
_LIKE: Final = str.maketrans({"μ": "µ", "⁻": "^-", "¹": "1", "·": " "})
#: Units named in a message where none is near.
MOST_NAMED: Final = 12


@dataclass(frozen=True)
class UnitSystem:
    """The units of a run: those of bare numbers and of everything written out.

    Raises
    ------
    ValueError
        If one of the four is no unit of its dimension.
    """

    length: str = "nm"
    energy: str = "eV"
    time: str = "fs"
    mass: str = "m_e"

    def __post_init__(self) -> None:
        for dimension in ("length", "energy", "time", "mass"):
            _factor(getattr(self, dimension), dimension)

    @classmethod
    def atomic(cls) -> "UnitSystem":
        """Return Hartree atomic units."""
        return cls(**ATOMIC)

    def scale(self, dimension: str) -> Fraction:
        """Return what one of this system's units is in SI, exactly.

        Raises
        ------
        KeyError
            If the dimension is not known.
        """
        match dimension:
            case "length" | "energy" | "time" | "mass":
                return _factor(getattr(self, dimension), dimension)
            case "wavenumber" | "stiffness":
                return 1 / self.scale("length")
            case "field":
                return self.scale("energy") / (_CHARGE * self.scale("length"))
            case "angle" | "":
                return Fraction(1)
        raise KeyError(dimension)

    def symbol(self, dimension: str) -> str:
        """Return the symbol of this system's unit of a dimension.

        Raises
        ------
        KeyError
            If the dimension is not known.
        """
        match dimension:
            case "length" | "energy" | "time" | "mass":
                return str(getattr(self, dimension))
            case "wavenumber" | "stiffness":
                return f"1/{self.length}"
            case "field":
                return f"{self.energy}/(e {self.length})"
            case "angle":
                return "rad"
            case "":
                return ""
        raise KeyError(dimension)

    def convert(self, value: object, dimension: str) -> float:
        """Return a bare number as it is, a text with a unit in this system's units.

        An angle must be a text with ``deg`` or ``rad``.

        Raises
        ------
        ValueError
            If it is neither, not finite, or the unit is none of the dimension.
        """
        if isinstance(value, str):
            number = self._convert_text(value, dimension)
        elif isinstance(value, bool) or not isinstance(value, int | float):
            raise ValueError(f"need {_wanted(dimension)}, got {_shown(value)}")
        elif dimension == "angle":
            raise ValueError(f'need an angle with its unit, such as "30 deg", got {value!r}')
        else:
            number = _float(value)
        if not math.isfinite(number):
            raise ValueError(f"need a finite number, got {_shown(value)}")
        return number

    def parameter(self, value: object) -> float:
        """Return a parameter: a pure number, or a quantity of any dimension.

        Raises
        ------
        ValueError
            If no dimension has the unit, or several do.
        """
        if not isinstance(value, str):
            return self.convert(value, "")
        unit = _split(value, "a number, with a unit if it is no pure number")[1]
        dimensions = [name for name, table in TABLE.items() if unit in table]
        if not dimensions:
            every = [symbol for table in TABLE.values() for symbol in table]
            raise ValueError(f"unknown unit {unit!r}{_nearest(unit, every)}")
        if len(dimensions) > 1:
            both = " and ".join(dimensions)
            raise ValueError(f"need a unit of one dimension, got {unit!r}, which is {both}")
        return self.convert(value, dimensions[0])

    @cached_property
    def hbar(self) -> float:
        """The constant [energy time]."""
        return float(_HBAR / (self.scale("energy") * self.scale("time")))

    @cached_property
    def hbar2_per_mass(self) -> float:
        """hbar^2 over the unit of mass [energy length**2]."""
        scale = self.scale("mass") * self.scale("energy") * self.scale("length") ** 2
        return float(_HBAR**2 / scale)

    @cached_property
    def coulomb(self) -> float:
        """e^2/(4 pi epsilon_0) [energy length]."""
        return float(_COULOMB / (self.scale("energy") * self.scale("length")))

    def particle(self, mass: float, charge: float) -> Particle:
        """Return a particle of a mass [mass] and charge [e] with the constants it needs."""
        return Particle(mass, charge, self.hbar, self.hbar2_per_mass, self.coulomb)

    def _convert_text(self, text: str, dimension: str) -> float:
        number, unit = _split(text, _wanted(dimension))
        if not unit and dimension != "angle":
            return _float(number)
        table = TABLE["wavenumber" if dimension == "stiffness" else dimension]
        if unit not in table:
            raise ValueError(
                f"need {_wanted(dimension)}, got {_shown(text)}: "
                f"unknown unit {_shown(unit)}{_nearest(unit, list(table))}"
            )
        return _float(number * table[unit] / self.scale(dimension))


def _split(text: str, wanted: str) -> tuple[Fraction, str]:
    """Return number and unit, one space at most within it and none around / and ^."""
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise ValueError(f"need {wanted}, got {_shown(text)}")
    unit = " ".join(match[2].translate(_LIKE).split())
    return Fraction(match[1]), re.sub(r" ?([/^]) ?", r"\1", unit)


def _float(value: float | Fraction) -> float:
    try:
        return float(value)
    except OverflowError:
        return math.inf


def _factor(unit: object, dimension: str) -> Fraction:
    table = TABLE[dimension]
    if not isinstance(unit, str):
        raise ValueError(f"need a unit of {dimension}, got {_shown(unit)}")
    if unit not in table:
        raise ValueError(f"need a unit of {dimension}, got {unit!r}{_nearest(unit, sorted(table))}")
    return table[unit]


def _nearest(unit: str, known: list[str]) -> str:
    # Case first: "ev" and "MEV" mean eV and meV, whatever else is near.
    folded = {name.lower(): name for name in reversed(known)}
    close = difflib.get_close_matches(unit.lower(), folded, n=1, cutoff=0.5)
    if close:
        return f"; did you mean {folded[close[0]]!r}?"
    return f"; known: {', '.join(known[:MOST_NAMED])}"


def _wanted(dimension: str) -> str:
    examples = {
        "": "a pure number",
        "length": 'a length, such as 3.37 or "3.37 nm"',
        "energy": 'an energy, such as 0.08 or "80 meV"',
        "time": 'a time, such as 20 or "5 ps"',
        "mass": 'a mass, such as 0.067 or "1 m_p"',
        "wavenumber": 'a wave number, such as 0.5 or "0.5 1/nm"',
        "stiffness": 'an inverse length, such as 1.2 or "1.2 1/bohr"',
        "field": 'a field, such as 0.1 or "1 MV/cm"',
        "angle": 'an angle, such as "30 deg"',
    }
    return examples[dimension]


def _shown(value: object) -> str:
    text = repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."

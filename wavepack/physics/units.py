"""Units: what a quantity's text means, and the constants in the units of a run.

The table is tabulated from CODATA 2022 [CODATA2022]_ rather than imported, so
that reading a scenario needs no scientific library; a test compares it with
`scipy.constants` and with a units library.
"""

import difflib
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from types import MappingProxyType
from typing import Final

from wavepack.physics.particle import Particle

# CODATA 2022, SI.
HBAR: Final = 1.0545718176461565e-34
PLANCK: Final = 6.62607015e-34
CHARGE: Final = 1.602176634e-19
ELECTRON_MASS: Final = 9.1093837139e-31
PROTON_MASS: Final = 1.67262192595e-27
ATOMIC_MASS: Final = 1.66053906892e-27
BOHR: Final = 5.29177210544e-11
HARTREE: Final = 4.3597447222060e-18
LIGHT: Final = 299792458.0
BOLTZMANN: Final = 1.380649e-23
AVOGADRO: Final = 6.02214076e23
ATOMIC_TIME: Final = 2.4188843265864e-17
EPSILON_0: Final = 8.8541878188e-12

_LENGTH = {
    "m": 1.0, "mm": 1e-3, "um": 1e-6, "µm": 1e-6, "nm": 1e-9, "pm": 1e-12,
    "angstrom": 1e-10, "Å": 1e-10, "A": 1e-10, "bohr": BOHR, "a0": BOHR,
}
_ENERGY = {
    "J": 1.0, "eV": CHARGE, "meV": 1e-3 * CHARGE, "ueV": 1e-6 * CHARGE, "µeV": 1e-6 * CHARGE,
    "keV": 1e3 * CHARGE, "Hartree": HARTREE, "hartree": HARTREE, "Eh": HARTREE,
    "mHartree": 1e-3 * HARTREE, "Ry": HARTREE / 2, "K": BOLTZMANN, "cm^-1": PLANCK * LIGHT * 100,
    "1/cm": PLANCK * LIGHT * 100, "THz": PLANCK * 1e12, "GHz": PLANCK * 1e9,
    "kJ/mol": 1e3 / AVOGADRO, "kcal/mol": 4184.0 / AVOGADRO,
}
_TIME = {
    "s": 1.0, "ms": 1e-3, "us": 1e-6, "µs": 1e-6, "ns": 1e-9, "ps": 1e-12, "fs": 1e-15,
    "as": 1e-18, "atomic_time": ATOMIC_TIME, "hbar/Eh": ATOMIC_TIME, "min": 60.0, "h": 3600.0,
}
_MASS = {
    "kg": 1.0, "g": 1e-3, "m_e": ELECTRON_MASS, "me": ELECTRON_MASS, "m_p": PROTON_MASS,
    "u": ATOMIC_MASS, "Da": ATOMIC_MASS,
}
_FIELD = {
    "V/m": 1.0, "kV/m": 1e3, "MV/m": 1e6, "V/cm": 1e2, "kV/cm": 1e5, "MV/cm": 1e8,
    "V/um": 1e6, "V/µm": 1e6, "V/nm": 1e9, "mV/nm": 1e6, "V/angstrom": 1e10, "V/Å": 1e10,
    "Eh/(e bohr)": HARTREE / CHARGE / BOHR,
}
_ANGLE = {"rad": 1.0, "deg": math.pi / 180, "°": math.pi / 180}


def _inverse(table: Mapping[str, float]) -> dict[str, float]:
    found: dict[str, float] = {}
    for symbol, factor in table.items():
        for text in (f"1/{symbol}", f"{symbol}^-1", f"/{symbol}"):
            found[text] = 1 / factor
    return found


#: SI factor of every unit, by dimension.
TABLE: Final[Mapping[str, Mapping[str, float]]] = MappingProxyType(
    {
        "length": _LENGTH,
        "energy": _ENERGY,
        "time": _TIME,
        "mass": _MASS,
        "wavenumber": _inverse(_LENGTH),
        "field": _FIELD,
        "angle": _ANGLE,
        "": {"": 1.0, "1": 1.0, "%": 0.01},
    }
)

#: The four units of a system of Hartree atomic units.
ATOMIC: Final = {"length": "bohr", "energy": "Hartree", "time": "atomic_time", "mass": "m_e"}

_QUANTITY = re.compile(
    r"\s*([+-]?(?:\d[\d_]*\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*?)\s*", re.ASCII | re.DOTALL
)


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

    def scale(self, dimension: str) -> float:
        """Return what one of this system's units is in SI.

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
                return self.scale("energy") / (CHARGE * self.scale("length"))
            case "angle" | "":
                return 1.0
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
            try:
                number = float(value)
            except OverflowError:
                number = math.inf
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
        number, unit = _split(value, "a number, with a unit if it is no pure number")
        dimensions = [name for name, table in TABLE.items() if unit in table]
        if not dimensions:
            every = [symbol for table in TABLE.values() for symbol in table]
            raise ValueError(f"unknown unit {unit!r}{_nearest(unit, every)}")
        return self.convert(f"{number!r} {unit}", dimensions[0])

    @cached_property
    def hbar(self) -> float:
        """The constant [energy time]."""
        return HBAR / (self.scale("energy") * self.scale("time"))

    @cached_property
    def hbar2_per_mass(self) -> float:
        """hbar^2 over the unit of mass [energy length**2]."""
        if self == UnitSystem.atomic():
            return 1.0
        return HBAR**2 / (self.scale("mass") * self.scale("energy") * self.scale("length") ** 2)

    @cached_property
    def coulomb(self) -> float:
        """e^2/(4 pi epsilon_0) [energy length]."""
        value = CHARGE**2 / (4 * math.pi * EPSILON_0)
        return value / (self.scale("energy") * self.scale("length"))

    def particle(self, mass: float, charge: float) -> Particle:
        """Return a particle of a mass [mass] and charge [e] with the constants it needs."""
        return Particle(mass, charge, self.hbar, self.hbar2_per_mass, self.coulomb)

    def _convert_text(self, text: str, dimension: str) -> float:
        number, unit = _split(text, _wanted(dimension))
        if not unit and dimension != "angle":
            return number
        scale = self.scale(dimension)
        table = TABLE.get("wavenumber" if dimension == "stiffness" else dimension, {})
        own = self.symbol(dimension)
        if unit == own and unit not in table:
            return number
        if unit not in table:
            known = sorted(table)
            raise ValueError(
                f"need {_wanted(dimension)}, got {_shown(text)}: "
                f"unknown unit {unit!r}{_nearest(unit, known)}"
            )
        if unit == own:
            return number
        return number * table[unit] / scale


def _split(text: str, wanted: str) -> tuple[float, str]:
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise ValueError(f"need {wanted}, got {_shown(text)}")
    return float(match[1]), " ".join(match[2].split())


def _factor(unit: str, dimension: str) -> float:
    table = TABLE[dimension]
    if unit not in table:
        raise ValueError(
            f"need a unit of {dimension}, got {unit!r}{_nearest(unit, sorted(table))}"
        )
    return table[unit]


def _nearest(unit: str, known: list[str]) -> str:
    close = difflib.get_close_matches(unit, known, n=1, cutoff=0.5)
    return f"; did you mean {close[0]!r}?" if close else f"; known: {', '.join(known)}"


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

r"""Conductance and current from a transmission by energy.

Between two leads that fill states up to :math:`\mu_L` and :math:`\mu_R` flows

.. math:: I = \frac{2e}{h}\int T(E)\,[f_L(E)-f_R(E)]\,dE, \qquad
          f = \frac{1}{1+e^{(E-\mu)/k_BT}}

through a channel [Landauer1957]_, [Buttiker1985]_, and through a plane between
leads in three dimensions the density of [TsuEsaki1973]_. Energies are in eV,
temperatures in K, results in SI; positive is the flow of particles from left to
right, times e. The factor 2 counts both spins.

A transmission is known at some energies: between them it is taken as straight
lines, outside them nothing is assumed: what it could add there, were it 1, is
given beside the result as ``outside``.
"""

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.physics.units import UnitSystem

#: Exact, or [CODATA2022]_ for the mass, in SI.
CHARGE: Final = 1.602176634e-19
PLANCK: Final = 6.62607015e-34
BOLTZMANN: Final = 1.380649e-23
ELECTRON_MASS: Final = 9.1093837139e-31

#: 2 e^2/h [S] and 2 e/h times 1 eV [A].
QUANTUM: Final = 2 * CHARGE**2 / PLANCK
#: Occupations differ from 0 and 1 within so many k_B T of a Fermi level.
REACH: Final = 40.0
#: Each interval is integrated by Gauss and Legendre with so many points.
NODES, WEIGHTS = np.polynomial.legendre.leggauss(10)


@dataclass(frozen=True)
class Current:
    """A conductance, a current or a current density.

    Attributes
    ----------
    value : float
        From the energies at which the transmission is known [unit].
    error : float or None
        Error carried through from the transmission, the errors at all energies
        taken to be of one sign; None if the transmission has none.
    outside : float
        What the energies where it is not known would add if it were 1 there [unit].
    unit : str
        "S", "A" or "A/m^2".
    """

    value: float
    error: float | None
    outside: float
    unit: str


@dataclass(frozen=True)
class Transmission:
    """A transmission by energy.

    Attributes
    ----------
    energies : real, shape (n,)
        Ascending [eV].
    values : real, shape (n,)
        Transmission probability, or its sum over channels.
    errors : real, shape (n,), or None
        Absolute errors of the values.

    Raises
    ------
    ValueError
        If lengths differ, fewer than two energies are given, one does not
        ascend, or a value or an error is not a number or negative.
    """

    energies: RealArray
    values: RealArray
    errors: RealArray | None = None

    def __post_init__(self) -> None:
        for name in ("energies", "values", "errors"):
            given = getattr(self, name)
            if given is not None:
                object.__setattr__(self, name, np.asarray(given, dtype=float))
        _check_ascending(self.energies)
        _check_values("values", self.values, self.energies)
        if self.errors is not None:
            _check_values("errors", self.errors, self.energies)

    @classmethod
    def from_results(cls, results: Mapping[str, Any], detector: str) -> "Transmission":
        """Return what a detector of a run measured, in eV; energies without a value left out.

        Raises
        ------
        ValueError
            If the run has no such detector, or it has no transmission by energy.
        """
        detectors = results.get("detectors") or {}
        if detector not in detectors:
            names = ", ".join(detectors) or "none"
            raise ValueError(f"detector {detector!r}: not in these results; they hold {names}")
        seen = detectors[detector]
        if seen.get("transmission") is None:
            reason = seen.get("reason") or "the run is not finished"
            raise ValueError(f"detector {detector!r}: no transmission by energy: {reason}")
        values = np.array(seen["transmission"], dtype=float)
        known = np.isfinite(values)
        scale = UnitSystem().convert(f"1 {seen['energy_unit']}", "energy")
        errors = _errors(seen.get("transmission_error"), known)
        # A measured value may lie below 0 by its rounding.
        kept = np.maximum(values[known], 0.0)
        return cls(scale * np.array(seen["energy"], dtype=float)[known], kept, errors)


@dataclass(frozen=True)
class Leads:
    r"""Two leads and what fills them.

    Attributes
    ----------
    left, right : float
        Fermi levels (electrochemical potentials) [eV] on the energy scale of the
        transmission; under a bias V they differ by eV.
    temperature : float
        Of both leads [K]; 0 for sharp Fermi levels.
    bottom : float
        Energy [eV] below which not both leads have states: the higher of their
        band edges. Nothing flows below it.

    Raises
    ------
    ValueError
        If the temperature is negative or a number is not finite.
    """

    left: float
    right: float
    temperature: float = 0.0
    bottom: float = 0.0

    def __post_init__(self) -> None:
        for name in ("left", "right", "temperature", "bottom"):
            if not math.isfinite(getattr(self, name)):
                raise ValueError(f"{name}: need a finite number, got {getattr(self, name)}")
        if self.temperature < 0:
            raise ValueError(f"temperature: need 0 or more kelvin, got {self.temperature}")

    @classmethod
    def biased(
        cls, fermi: float, bias: float, temperature: float = 0.0, bottom: float = 0.0
    ) -> "Leads":
        """Return leads whose left Fermi level is ``fermi``, the right one lower by e bias [V]."""
        return cls(fermi, fermi - bias, temperature, bottom)

    @property
    def thermal(self) -> float:
        """k_B T [eV]."""
        return BOLTZMANN * self.temperature / CHARGE


def conductance(
    transmission: Transmission, fermi: float, temperature: float = 0.0, bottom: float = 0.0
) -> Current:
    r"""Return the conductance of a channel between leads of equal Fermi level [S].

    .. math:: G = \frac{2e^2}{h}\int_{E_b}^\infty T(E)\Big(-\frac{\partial f}{\partial E}\Big)dE,
              \qquad \frac{2e^2}{h} = 7.748091729\times10^{-5}\,{\rm S}

    [Landauer1957]_, [Buttiker1985]_; at zero temperature :math:`(2e^2/h)\,T(\mu)`.

    Parameters
    ----------
    transmission : Transmission
        Of the channel, or summed over channels.
    fermi : float
        Fermi level [eV].
    temperature : float
        [K].
    bottom : float
        Lower limit of the integral [eV].

    Raises
    ------
    ValueError
        If the temperature is negative or a number is not finite.
    """
    leads = Leads(fermi, fermi, temperature, bottom)
    if leads.thermal == 0:
        # The window is a peak at the Fermi level: one place of weight 1.
        return _weighed(
            transmission, np.array([fermi]), np.ones(1) * (fermi >= bottom), QUANTUM, "S"
        )
    kt = leads.thermal

    def window(energies: RealArray) -> RealArray:
        return np.asarray(
            1 / (4 * kt * np.cosh(np.clip((energies - fermi) / (2 * kt), -300, 300)) ** 2)
        )

    return _integrated(transmission, window, leads, QUANTUM, "S")


def current(transmission: Transmission, leads: Leads) -> Current:
    r"""Return the current through a channel between two leads [A].

    .. math:: I = \frac{2e}{h}\int_{E_b}^\infty T(E)\,[f_L(E)-f_R(E)]\,dE

    [Buttiker1985]_. Under a bias the transmission must be that at this bias.
    """

    def window(energies: RealArray) -> RealArray:
        filled = (
            _occupation(energies, level, leads.thermal) for level in (leads.left, leads.right)
        )
        return np.subtract(*filled)

    return _integrated(transmission, window, leads, QUANTUM, "A")


def current_density(transmission: Transmission, leads: Leads, mass: float) -> Current:
    r"""Return the current density between leads in three dimensions [A/m^2].

    .. math:: J = \frac{e\,m\,k_BT}{2\pi^2\hbar^3}\int_{E_b}^\infty T(E)\,
              \ln\frac{1+e^{(\mu_L-E)/k_BT}}{1+e^{(\mu_R-E)/k_BT}}\,dE

    [TsuEsaki1973]_, with E the energy of the motion across the layers and the
    motion along them free, of the same mass everywhere and conserved. At zero
    temperature :math:`k_BT\ln(1+e^{(\mu-E)/k_BT})` becomes :math:`\mu-E`, or 0
    above :math:`\mu`.

    Parameters
    ----------
    transmission : Transmission
        At this bias.
    leads : Leads
        Fermi levels and temperature.
    mass : float
        Of the motion along the layers [m_e].

    Raises
    ------
    ValueError
        If the mass is not positive.
    """
    if not (math.isfinite(mass) and mass > 0):
        raise ValueError(f"mass: need a positive number of electron masses, got {mass}")
    hbar = PLANCK / (2 * math.pi)
    # Energies in eV: two factors e, from the supply and from the integral.
    factor = CHARGE**3 * mass * ELECTRON_MASS / (2 * math.pi**2 * hbar**3)

    def window(energies: RealArray) -> RealArray:
        supply = (_supply(energies, level, leads.thermal) for level in (leads.left, leads.right))
        return np.subtract(*supply)

    return _integrated(transmission, window, leads, factor, "A/m^2")


def _occupation(energies: RealArray, level: float, thermal: float) -> RealArray:
    if thermal == 0:
        return np.asarray(np.where(energies < level, 1.0, 0.0))
    return np.asarray((1 - np.tanh((energies - level) / (2 * thermal))) / 2)


def _supply(energies: RealArray, level: float, thermal: float) -> RealArray:
    """Return k_B T ln(1 + exp((level - E)/k_B T)) [eV]."""
    if thermal == 0:
        return np.maximum(level - energies, 0.0)
    return np.asarray(thermal * np.logaddexp(0.0, (level - energies) / thermal))


def _integrated(
    transmission: Transmission,
    window: Callable[[RealArray], RealArray],
    leads: Leads,
    factor: float,
    unit: str,
) -> Current:
    """Integrate a window times the straight lines between the values of a transmission."""
    nodes, weights = _quadrature(transmission.energies, leads)
    return _weighed(transmission, nodes, weights * window(nodes), factor, unit)


def _quadrature(energies: RealArray, leads: Leads) -> tuple[RealArray, RealArray]:
    """Return nodes and weights from the bottom to where all states are empty.

    Intervals end at every energy, at the Fermi levels and the bottom, and near
    those at every k_B T, so that what is integrated is smooth within each.
    """
    # At the bottom too: over a Fermi level far below it states are filled by the tail.
    levels = np.array([leads.left, leads.right, leads.bottom])
    steps = leads.thermal * np.arange(-REACH, REACH + 1)
    top = levels.max() + steps[-1]
    breaks = np.unique(np.concatenate((energies, *(level + steps for level in levels), [top])))
    breaks = np.unique(np.clip(breaks, leads.bottom, top))
    half, middle = np.diff(breaks)[:, None] / 2, (breaks[1:] + breaks[:-1])[:, None] / 2
    return (middle + half * NODES).ravel(), (half * WEIGHTS).ravel()


def _shared(energies: RealArray, places: RealArray, weights: RealArray) -> RealArray:
    """Return the weight of each value if straight lines between them are summed at places."""
    left = np.clip(np.searchsorted(energies, places, side="right") - 1, 0, energies.size - 2)
    share = (places - energies[left]) / (energies[left + 1] - energies[left])
    lower = np.bincount(left, weights * (1 - share), energies.size)
    upper = np.bincount(left + 1, weights * share, energies.size)
    return np.asarray(lower + upper)


def _weighed(
    transmission: Transmission, places: RealArray, weights: RealArray, factor: float, unit: str
) -> Current:
    """Return the weighted sum of a transmission at places, and what its errors make of it."""
    energies, errors = transmission.energies, transmission.errors
    inside = (places >= energies[0]) & (places <= energies[-1])
    shares = _shared(energies, places[inside], weights[inside])
    return Current(
        float(factor * (shares @ transmission.values)),
        None if errors is None else float(factor * (np.abs(shares) @ errors)),
        float(factor * np.abs(weights[~inside]).sum()),
        unit,
    )


def _errors(given: Any, known: np.ndarray) -> RealArray | None:  # noqa: ANN401 - from JSON
    """Return the errors at the known energies, None unless each has one."""
    if given is None:
        return None
    errors = np.array(given, dtype=float)[known]
    return errors if np.isfinite(errors).all() else None


def _check_ascending(energies: RealArray) -> None:
    if energies.ndim != 1 or energies.size < 2:
        raise ValueError(f"energies: need at least two in one row, got shape {energies.shape}")
    if not (np.isfinite(energies).all() and (np.diff(energies) > 0).all()):
        raise ValueError("energies: need finite numbers in ascending order")


def _check_values(name: str, values: RealArray, energies: RealArray) -> None:
    if values.shape != energies.shape:
        raise ValueError(f"{name}: need one an energy, {energies.size}, got shape {values.shape}")
    bad = np.flatnonzero(~(np.isfinite(values) & (values >= 0)))
    if bad.size:
        place = f"at {energies[bad[0]]:.6g} eV"
        raise ValueError(f"{name}: need numbers of 0 or more, got {values[bad[0]]} {place}")

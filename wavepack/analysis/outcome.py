"""The results of a run as plain values: what `results.json` holds."""

import math
from collections.abc import Mapping, Sequence
from typing import Any, Final

import numpy as np

from wavepack.arrays import RealArray
from wavepack.observing.flux import FluxDetector
from wavepack.observing.incident import Incident

#: Transmission by energy is given where the incident weight is above this share of its peak.
LEAST_INCIDENT: Final = 1e-4
#: A mean crossing time is given where this little has crossed backward.
LEAST_BACKWARD: Final = 1e-3
#: A plane that this little of the packet moves towards sees what moves back from it.
LEAST_TOWARDS: Final = 1e-3


def quantity(value: float | None, unit: str = "", error: float | None = None) -> dict[str, Any]:
    """Return one quantity; what is not a finite number becomes None."""
    if value is not None and not math.isfinite(value):
        value = None
    return {"value": None if value is None else float(value), "error": error, "unit": unit}


def detector_results(
    detector: FluxDetector,
    incident: Incident,
    units: Mapping[str, str],
    sidebands: Sequence[Mapping[str, Any]],
) -> dict[str, Any]:
    """Return what one detector saw, in time and by energy."""
    crossed, forward, backward = detector.crossed, detector.forward, detector.backward
    result: dict[str, Any] = {
        "crossed": quantity(crossed),
        "forward": quantity(forward),
        "backward": quantity(backward),
        "mean_crossing_time": quantity(mean_crossing_time(detector), units["time"]),
    }
    if detector.spectrum is None:
        return result
    energies = detector.spectrum.energies
    flux = detector.flux_by_energy()
    transmission, reason = by_energy(flux, incident, towards=True)
    reflection, _ = by_energy(flux, incident, towards=False)
    total, away = (float(np.trapezoid(d, energies)) for d in (incident.density, incident.away))
    if total < LEAST_TOWARDS * away:
        transmission = None
        reason = reason or (
            "the packet starts moving away from this plane: flux over what moves away "
            "is given as reflection"
        )
    else:
        reflection = None
    result |= {
        "energy": energies,
        "flux": flux,
        "incident": incident.density,
        "transmission": transmission,
        "transmission_error": None,
        "reflection": reflection if incident.reason is None else None,
        "reason": reason,
        "sidebands": list(sidebands),
        "energy_unit": units["energy"],
    }
    return result


def mean_crossing_time(detector: FluxDetector) -> float | None:
    """Return the mean crossing time [time]; None unless the flux is one-way."""
    one_way = detector.forward > 0 and detector.backward < LEAST_BACKWARD * detector.forward
    return detector.mean_crossing_time if one_way else None


def by_energy(
    flux: RealArray, incident: Incident, *, towards: bool
) -> tuple[RealArray | None, str | None]:
    """Return flux over incident weight, NaN where little comes in, or None and why."""
    if incident.reason is not None:
        return None, incident.reason
    density = incident.density if towards else incident.away
    peak = float(density.max(initial=0.0))
    if peak <= 0:
        return None, "nothing of the initial state comes in at these energies"
    enough = density > LEAST_INCIDENT * peak
    return np.where(enough, flux / np.where(enough, density, 1.0), np.nan), None


def sidebands(
    energies: RealArray, flux: RealArray, central: float, photon: float
) -> list[dict[str, Any]]:
    r"""Return the flux within half a photon of the central energy plus n photons.

    .. math:: P_n = \int_{E_0+(n-1/2)\hbar\omega}^{E_0+(n+1/2)\hbar\omega}
              \frac{dP}{dE}\,dE

    for every n whose interval lies within the detector's energies, by the
    trapezoidal rule on them, interpolated at the interval's ends.
    """
    first = math.ceil((energies[0] - central) / photon + 0.5 - 1e-9)
    last = math.floor((energies[-1] - central) / photon - 0.5 + 1e-9)
    running = np.concatenate(([0.0], np.cumsum((flux[1:] + flux[:-1]) / 2 * np.diff(energies))))
    bands = []
    for n in range(first, last + 1):
        edges = central + (n + np.array([-0.5, 0.5])) * photon
        below, above = (_running_at(edge, energies, flux, running) for edge in edges)
        bands.append(
            {"n": n, "energy": float(central + n * photon), "flux": quantity(above - below)}
        )
    return bands


def _running_at(edge: float, energies: RealArray, flux: RealArray, running: RealArray) -> float:
    """Return the integral of the flux up to an energy, exact for the linear interpolant."""
    place = int(np.clip(np.searchsorted(energies, edge) - 1, 0, energies.size - 2))
    width = energies[place + 1] - energies[place]
    share = float(np.clip((edge - energies[place]) / width, 0.0, 1.0))
    middle = flux[place] + share * (flux[place + 1] - flux[place]) / 2
    return float(running[place] + share * width * middle)

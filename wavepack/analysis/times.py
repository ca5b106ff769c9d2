r"""Times of a run: when a packet crosses a plane, how long it stays, how late it is.

The trade does not agree on one tunnelling time [HaugeStovneng1989]_; each of
these answers a question of its own, stated with it. What they are and are not
stands in ``docs/times.md``.
"""

import math
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from wavepack.analysis.outcome import LEAST_INCIDENT, quantity
from wavepack.arrays import ComplexArray, Mask, RealArray

#: Free motion is a reference where no more than this starts away from the plane:
#: with slower waves the mean of the inverse speed has no limit.
LEAST_AWAY: Final = 1e-6
#: A phase that turns further from one energy to the next, in radians, is not resolved.
LARGEST_TURN: Final = 1.0
#: Time spent in a region is given where no more than this has been absorbed in it.
LEAST_ABSORBED: Final = 1e-9


@dataclass(frozen=True)
class Crossing:
    """Mean, median and standard deviation of the crossing time [time]."""

    mean: float
    median: float
    spread: float


def crossing_distribution(times: RealArray, flux: RealArray) -> RealArray:
    r"""Return the density of the crossing time at a plane [1/time].

    .. math:: P(t) = \frac{J(t)}{\int J\,dt}

    a density where the flux is one-way; see [HaugeStovneng1989]_.

    Parameters
    ----------
    times, flux : real, shape (n,)
        A detector's readings [time, 1/time].

    Raises
    ------
    ValueError
        If nothing has crossed on balance.
    """
    crossed = float(np.trapezoid(flux, times))
    if not crossed > 0:
        raise ValueError(f"crossed: need more than 0 on balance, found {crossed:.3g}")
    return flux / crossed


def crossing(times: RealArray, flux: RealArray) -> Crossing:
    r"""Return mean, median and spread of the crossing time.

    .. math:: \bar t = \int t\,P\,dt, \qquad \int_0^{t_{1/2}} P\,dt = \tfrac12, \qquad
              \sigma_t^2 = \int (t-\bar t)^2 P\,dt

    of `crossing_distribution`, by the trapezoidal rule; the median is exact for
    the straight lines between readings.

    Raises
    ------
    ValueError
        If nothing has crossed on balance.
    """
    density = crossing_distribution(times, flux)
    mean = float(np.trapezoid(times * density, times))
    square = float(np.trapezoid((times - mean) ** 2 * density, times))
    return Crossing(mean, _median(times, density), math.sqrt(max(square, 0.0)))


def dwell_time(times: RealArray, probability: RealArray) -> float:
    r"""Return the time spent in a region [time].

    .. math:: \tau_D = \int_0^{t_e} dt \int_\Omega |\psi|^2\,d\mathbf r

    by the trapezoidal rule [Smith1960]_, [Buttiker1983]_, from the probability
    that is on the grid in the region at each time. It is an average over all
    that comes in, whichever side it leaves by.
    """
    return float(np.trapezoid(probability, times))


def free_crossing_time(
    distance: float, density: RealArray, speeds: RealArray
) -> tuple[float | None, str | None]:
    r"""Return when the packet would cross the plane if it moved freely, or why not known.

    .. math:: t_{\rm free} = (x_d-\bar x_0) \int \frac{|g(k)|^2}{v(k)}\,dk
              \Big/ \int |g(k)|^2\,dk

    the distance from the mean initial position over the (harmonic) mean speed of
    what moves towards the plane. It is the mean crossing time of the free packet
    exactly if position and momentum are independent in it, as in a Gaussian one.

    Parameters
    ----------
    distance : float
        From the mean initial position to the plane, along the axis [length].
    density : real, shape (n,)
        The momentum distribution along the axis, at even steps [length].
    speeds : real, shape (n,)
        dE/dk/hbar at these wave numbers, signed like them [length/time].

    Returns
    -------
    float or None, str or None
        The time [time], else a reason.
    """
    towards = speeds * distance > 0
    away = 1 - float(density[towards].sum()) / float(density.sum())
    if away > LEAST_AWAY:
        return None, (
            f"{away:.1e} of the packet starts at rest or moving away from the plane: "
            "free motion has no mean crossing time"
        )
    weight = density[towards]
    return float(np.sum(weight * distance / speeds[towards]) / weight.sum()), None


def phase_times(
    energies: RealArray,
    amplitude: ComplexArray,
    free: ComplexArray,
    weight: RealArray,
    hbar: float,
) -> RealArray:
    r"""Return the phase time by energy [time], NaN where it is not known.

    .. math:: \tau_\phi(E) = \hbar\,\frac{d}{dE}\arg\frac{F(E)}{F_{\rm free}(E)}

    the delay of a narrow packet of energy E against free motion over the same
    way [Wigner1955]_. The phase is followed from energy to energy; central
    differences. Not known are both ends, energies with an incident weight below
    1e-4 of its peak, and those where the phase turns by more than a radian
    from one energy to the next.

    Parameters
    ----------
    energies : real, shape (n,)
        Evenly spaced [energy].
    amplitude, free : complex, shape (n,)
        Amplitude by energy at the plane, and that of free motion; only their
        phases matter.
    weight : real, shape (n,)
        Incident probability by energy [1/energy].
    hbar : float
        [energy time].
    """
    found = np.full(energies.size, np.nan)
    if energies.size < 3:
        return found
    known = _known(amplitude, free, weight)
    ratio = np.where(known, amplitude, 1.0) * np.conj(np.where(known, free, 1.0))
    turns = np.angle(ratio[1:] * np.conj(ratio[:-1]))
    sure = known[1:] & known[:-1] & (np.abs(turns) <= LARGEST_TURN)
    inner = sure[1:] & sure[:-1]
    slope = (turns[1:] + turns[:-1]) / (energies[2:] - energies[:-2])
    found[1:-1] = np.where(inner, hbar * slope, np.nan)
    return found


def crossing_results(
    times: RealArray,
    flux: RealArray,
    mean: float | None,
    free: tuple[float | None, str | None],
    unit: str,
) -> dict[str, Any]:
    """Return the times at one plane as plain values; none without a mean crossing time."""
    seen = None if mean is None else crossing(times, flux)
    known, reason = free
    if mean is None:
        reason = "the flux through the plane is not one-way: its crossing times mean nothing"
    return {
        "median_crossing_time": quantity(None if seen is None else seen.median, unit),
        "crossing_time_spread": quantity(None if seen is None else seen.spread, unit),
        "free_crossing_time": quantity(known, unit),
        "delay": quantity(None if mean is None or known is None else mean - known, unit),
        "delay_reason": reason,
    }


def dwell_results(time: float, absorbed: float, unit: str) -> dict[str, Any]:
    """Return the dwell time of one region as plain values, or why it has none."""
    reason = None
    if absorbed > LEAST_ABSORBED:
        reason = "the region reaches into an absorbing layer, where time spent has no meaning"
    return {
        "dwell_time": quantity(None if reason else time, unit),
        "dwell_reason": reason,
    }


def _known(amplitude: ComplexArray, free: ComplexArray, weight: RealArray) -> Mask:
    enough = weight > LEAST_INCIDENT * float(weight.max(initial=0.0))
    return np.asarray(enough & np.isfinite(free) & (np.abs(free) > 0) & (np.abs(amplitude) > 0))


def _median(times: RealArray, density: RealArray) -> float:
    """Return where the integral of the straight lines between the values is a half."""
    widths = np.diff(times)
    running = np.cumsum((density[1:] + density[:-1]) / 2 * widths)
    place = int(np.argmax(running >= 0.5))
    left = 0.5 - (float(running[place - 1]) if place else 0.0)
    start, stop, width = float(density[place]), float(density[place + 1]), float(widths[place])
    # left = start s + (stop - start) s^2 / 2 width, in the form without cancellation.
    root = math.sqrt(max(start**2 + 2 * left * (stop - start) / width, 0.0))
    return float(times[place] + (2 * left / (start + root) if start + root > 0 else 0.0))

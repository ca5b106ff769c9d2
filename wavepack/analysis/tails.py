r"""Slow tails: the rate at which what is held leaves, and where the rest of it goes.

A long-lived resonance empties like

.. math:: p(t) = p(t_0)\,e^{-\gamma (t-t_0)}, \qquad \tau = 1/\gamma, \qquad
          \Gamma = \hbar\gamma

with the width :math:`\Gamma` of a pole at :math:`E_R - i\Gamma/2`
[BreitWigner1936]_. Once that holds, what is left at the end of a run goes where
it has been going: its share to either side is that of the tail.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from wavepack.analysis.outcome import quantity
from wavepack.arrays import RealArray

#: A probability below this is rounding; its logarithm says nothing.
FLOOR: Final = 1e-12
#: A window must hold this many e-foldings and this many records.
LEAST_FOLDS: Final = 1.0
LEAST_RECORDS: Final = 16
#: Starts tried for the window.
STARTS: Final = 64
#: A window is cut into so many parts, whose slopes must agree with the whole's
#: to this share of it: a power law falling by 1/e does not.
PARTS: Final = 4
LARGEST_SPREAD: Final = 0.05
#: Standard errors, and deviations of the parts, that make up the error of a fit.
#: Twice the deviation also holds what a second, dying decay bends a window by if
#: it is more than 2.3 times as fast.
STANDARD_ERRORS: Final = 2.2
DEVIATIONS: Final = 2.0
#: What the error of a fit is at least, as a share of the rate: rounding.
ROUNDING: Final = 1e-12
#: A window this much worse than the best one, but longer, is taken instead of it.
NEARLY_BEST: Final = 1.5
#: Less than this having left during a tail, its branching is rounding.
LEAST_LEFT: Final = 1e-12


@dataclass(frozen=True)
class Decay:
    r"""An exponential decay, or why there is none.

    Attributes
    ----------
    rate : float or None
        :math:`\gamma` [1/time].
    error : float or None
        Uncertainty of the fit [1/time]: of the straight line, and by how much
        it changes over the window. The propagation's own errors are not in it.
    window : (float, float) or None
        From when to when it was fitted [time].
    reason : str or None
        Why no rate is given.
    """

    rate: float | None = None
    error: float | None = None
    window: tuple[float, float] | None = None
    reason: str | None = None

    @property
    def lifetime(self) -> float | None:
        r""":math:`\tau = 1/\gamma` [time]."""
        return None if self.rate is None else 1 / self.rate


@dataclass(frozen=True)
class Extrapolation:
    """Transmission and reflection once all that is held has left, or why not known.

    ``transmission_error`` and ``reflection_error`` are of the extrapolation alone.
    """

    transmission: float | None = None
    reflection: float | None = None
    transmission_error: float | None = None
    reflection_error: float | None = None
    reason: str | None = None


@dataclass(frozen=True)
class _Line:
    """A straight line through the logarithm over one window."""

    rate: float
    standard_error: float
    deviation: float
    start: float
    stop: float

    @property
    def folds(self) -> float:
        return self.rate * (self.stop - self.start)

    @property
    def error(self) -> float:
        line = STANDARD_ERRORS * self.standard_error
        return math.hypot(line, DEVIATIONS * self.deviation, ROUNDING * self.rate)


def fit_decay(times: RealArray, values: RealArray) -> Decay:
    r"""Return the rate of an exponential decay that lasts to the end of a series.

    .. math:: \min_{a,\gamma} \sum_i w_i\,[\ln p_i - a + \gamma t_i]^2, \qquad
              w_i = \frac{p_i^2}{p_i^2+p_{\rm floor}^2}\,\delta t_i

    The window ends with the series, or where it reaches rounding (1e-12). It
    starts where the uncertainty is least: that of the line, and twice the
    largest deviation of the slopes of its four quarters from the whole's.

    Parameters
    ----------
    times : real, shape (n,)
        Ascending [time].
    values : real, shape (n,)
        A probability at these times.

    Returns
    -------
    Decay
        With a ``reason`` in place of a rate where the series does not fall, falls
        by less than a factor e, or not exponentially.
    """
    first = int(np.argmax(values)) if values.size else 0
    low = np.flatnonzero(~(values[first:] > FLOOR))
    last = first + int(low[0]) if low.size else values.size
    times, values = times[first:last], values[first:last]
    if values.size < LEAST_RECORDS:
        return Decay(reason=f"fewer than {LEAST_RECORDS} records after its largest value")
    lines = _lines(times, np.log(values), values)
    enough = [line for line in lines if line.folds >= LEAST_FOLDS]
    if not enough:
        return Decay(reason="it falls by less than one e-folding before the end")
    straight = [line for line in enough if line.deviation <= LARGEST_SPREAD * line.rate]
    if not straight:
        best = min(enough, key=lambda line: line.deviation / line.rate)
        share = best.deviation / best.rate
        return Decay(
            reason=f"not exponential: from t = {best.start:.5g} on the slope of its logarithm "
            f"still changes by {share:.0%}, need {LARGEST_SPREAD:.0%}"
        )
    limit = NEARLY_BEST * min(line.error / line.rate for line in straight)
    chosen = next(line for line in straight if line.error <= limit * line.rate)
    return Decay(chosen.rate, chosen.error, (chosen.start, chosen.stop))


def extrapolate(
    decay: Decay,
    times: RealArray,
    transmission: RealArray,
    reflection: RealArray,
    lost: RealArray,
    held: float,
) -> Extrapolation:
    r"""Return transmission and reflection once all that is held has left.

    .. math:: P_\infty = P(t_e) + p_{\rm held}(t_e)\,
              \frac{\Delta P}{\Delta T+\Delta R+\Delta L}

    with the changes over the window of the decay of what is held. What is on its
    way between the resonance and the regions' edges falls at the same rate, so
    the shares hold for all of it. The uncertainty is twice the largest deviation
    of the shares of the window's quarters, times what is held.

    Parameters
    ----------
    decay : Decay
        Of ``held``.
    times, transmission, reflection, lost : real, shape (n,)
        The series [time and probabilities].
    held : float
        What is held at the end.
    """
    if decay.window is None:
        return Extrapolation(reason=f"held: {decay.reason}")
    edges = np.linspace(*decay.window, PARTS + 1)
    gains = np.array(
        [np.diff(np.interp(edges, times, part)) for part in (transmission, reflection, lost)]
    )
    if gains.sum() < LEAST_LEFT or np.any(gains.sum(axis=0) <= 0):
        return Extrapolation(reason="held: nothing measurable left during its decay")
    share = gains.sum(axis=1) / gains.sum()
    spread = np.max(np.abs(gains / gains.sum(axis=0) - share[:, None]), axis=1)
    return Extrapolation(
        float(transmission[-1] + held * share[0]),
        float(reflection[-1] + held * share[1]),
        float(DEVIATIONS * held * spread[0]),
        float(DEVIATIONS * held * spread[1]),
    )


def decay_results(decay: Decay, hbar: float, units: Mapping[str, str]) -> dict[str, Any]:
    r"""Return a decay as plain values: rate, lifetime and :math:`\Gamma = \hbar\gamma`."""
    time = units["time"]
    rate, error = decay.rate, decay.error
    relative = None if rate is None or error is None else error / rate
    ends = zip(("start", "stop"), decay.window or (), strict=False)
    return {
        "rate": _fitted(rate, f"1/{time}", relative),
        "lifetime": _fitted(decay.lifetime, time, relative),
        "width": _fitted(None if rate is None else hbar * rate, units["energy"], relative),
        "window": {end: quantity(value, time) for end, value in ends} or None,
        "reason": decay.reason,
    }


def extrapolation_results(found: Extrapolation) -> dict[str, Any]:
    """Return an extrapolation as plain values."""
    return {
        "transmission": quantity(found.transmission) | {"fit_error": found.transmission_error},
        "reflection": quantity(found.reflection) | {"fit_error": found.reflection_error},
        "reason": found.reason,
    }


def _fitted(value: float | None, unit: str, relative: float | None) -> dict[str, Any]:
    fit = None if value is None or relative is None else value * relative
    return quantity(value, unit) | {"fit_error": fit}


def _lines(times: RealArray, logs: RealArray, values: RealArray) -> list[_Line]:
    """Return the lines from evenly spaced starts to the end, the longest first."""
    weights = np.gradient(times) * values**2 / (values**2 + FLOOR**2)
    starts = np.searchsorted(times, np.linspace(times[0], times[-1], STARTS, endpoint=False))
    lines = []
    for start in sorted(set(starts.tolist())):
        if times.size - start < LEAST_RECORDS:
            break
        window = slice(start, None)
        rate, standard_error = _slope(times[window], logs[window], weights[window])
        edges = np.searchsorted(times, np.linspace(times[start], times[-1], PARTS + 1)[1:-1])
        slices = zip([start, *edges], [*edges, times.size], strict=True)
        parts = [slice(int(a), int(b)) for a, b in slices if b - a > 2]
        slopes = [_slope(times[s], logs[s], weights[s])[0] for s in parts]
        if len(slopes) < PARTS:
            continue
        deviation = max(abs(slope - rate) for slope in slopes)
        lines.append(_Line(rate, standard_error, deviation, float(times[start]), float(times[-1])))
    return lines


def _slope(t: RealArray, y: RealArray, w: RealArray) -> tuple[float, float]:
    """Return minus the slope of the weighted straight line, and its standard error."""
    total = w.sum()
    x = t - (w @ t) / total
    z = y - (w @ y) / total
    square = w @ x**2
    slope = float((w @ (x * z)) / square)
    residual = float(w @ (z - slope * x) ** 2) / total
    # Weights of mean one make n records out of the sum of squares.
    variance = residual * t.size / max(t.size - 2, 1) / (square / total * t.size)
    return -slope, math.sqrt(variance)

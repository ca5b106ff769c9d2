"""Round numbers along an axis, never so many that their labels touch."""

import math

from matplotlib.axes import Axes

from wavepack.rendering import style
from wavepack.rendering.scales import number

#: Room that a label takes besides its own letters [heights of text].
_GAP_ALONG = 1.4
_PITCH_UP = 1.7
#: No more labels than this are of use, however long the axis.
_MOST = 10


def set_ticks(axes: Axes, which: str, length: float, em: float) -> None:
    """Label the axis ``which`` ("x" or "y") of ``length`` pixels at round numbers."""
    axis, limits = (axes.xaxis, axes.get_xlim()) if which == "x" else (axes.yaxis, axes.get_ylim())
    values, labels = round_numbers(*limits, length, 0.87 * em, upright=which == "y")
    axis.set_ticks(values, labels)


def round_numbers(
    low: float, high: float, length: float, em: float, *, upright: bool
) -> tuple[list[float], list[str]]:
    """Return the most multiples of 1, 2 or 5 times a power of ten whose labels fit.

    Parameters
    ----------
    low, high : float
        Ends of the axis.
    length : float
        Its length [pixels].
    em : float
        Height of the labels [pixels].
    upright : bool
        Whether the axis stands, so that labels are stacked instead of in a row.
    """
    span = high - low
    decade = math.floor(math.log10(span / _MOST))
    steps = [(m, e) for e in range(decade, decade + 4) for m in (1, 2, 5)]
    found: tuple[list[float], list[str]] = ([], [])
    for m, e in steps:
        step = m * 10.0**e
        values = _multiples(step, low, high)
        if not values:
            break
        found = values, [_label(value, e) for value in values]
        if len(values) <= _MOST and _pitch(found[1], em, upright) <= step / span * length:
            return found
    # Not even two fit: one says where the axis is.
    return found[0][:1], found[1][:1]


def _multiples(step: float, low: float, high: float) -> list[float]:
    slack = 1e-9 * (high - low)
    first, last = math.ceil((low - slack) / step), math.floor((high + slack) / step)
    return [i * step for i in range(first, last + 1)]


def _pitch(labels: list[str], em: float, upright: bool) -> float:  # noqa: FBT001 - as its caller's
    if upright:
        return _PITCH_UP * em
    return max(style.text_width(text, em) for text in labels) + _GAP_ALONG * em


def _label(value: float, exponent: int) -> str:
    """Write a multiple of a step of that power of ten, all with the same decimals."""
    if value and not -4 <= exponent < 5:
        return number(value)
    return f"{value + 0.0:.{max(0, -exponent)}f}".replace("-", style.MINUS)

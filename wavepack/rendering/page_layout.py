"""Where three maps, their colour bar and the curves stand on a page."""

from dataclasses import dataclass

from wavepack.rendering.canvas import Rect
from wavepack.rendering.map_layout import Spans

#: Height of text on a page [pixels]; all margins are multiples of it.
EM = 21
_WIDTH = 1440

#: Left of a map: numbers and name of its y axis. Below: those of x. Above: its time.
_SIDE, _FOOT, _STAMP = round(4.8 * EM), round(3.1 * EM), round(1.7 * EM)
_HEAD = round(2.2 * EM)
#: Right of the last map: the colour bar with its numbers and name.
_BAR, _BAR_GAP, _BAR_LABELS = round(1.0 * EM), round(0.9 * EM), round(6.2 * EM)
_BAR_ROOM = _BAR_GAP + _BAR + _BAR_LABELS
_EDGE, _GAP = round(0.9 * EM), round(1.4 * EM)
_CURVES = round(9.5 * EM)
#: The narrowest column of curves.
_COLUMN = 26 * EM
#: However long a domain is, so many pixels across it can still be seen.
_LEAST = 24


@dataclass(frozen=True)
class PageLayout:
    """Boxes in pixels; maps share the axes of their neighbours to the left and below."""

    size: tuple[int, int]
    maps: tuple[Rect, Rect, Rect]
    bar: Rect
    curves: Rect | None
    names_x: tuple[bool, bool, bool]
    names_y: tuple[bool, bool, bool]


def arrange(spans: Spans, stamp: float, legend: int, *, with_curves: bool) -> PageLayout:
    """Return the arrangement for a domain of these lengths along x and y.

    Long ones are stacked, tall ones stand in a row with the curves beside them;
    in between they stand in a row above the curves, or the curves take the
    fourth place of a square.

    Parameters
    ----------
    spans : (float, float)
        Lengths of the domain along x and y; their ratio counts.
    stamp : float
        Width of a time stamp [pixels].
    legend : int
        Height of the names of the curves [pixels].
    with_curves : bool
        Whether there are curves.
    """
    aspect = spans[0] / spans[1]
    if aspect >= 3.3:
        return _stacked(aspect, legend, with_curves=with_curves)
    if aspect >= 1.7 and with_curves:
        return _square(aspect, legend)
    if aspect >= 0.45:
        return _row(aspect, legend, with_curves=with_curves)
    return _standing(aspect, stamp, legend, with_curves=with_curves)


def _stacked(aspect: float, legend: int, *, with_curves: bool) -> PageLayout:
    width = round(min(_WIDTH - _SIDE - _BAR_ROOM, 300 * aspect))
    height = max(_LEAST, round(width / aspect))
    pitch = height + _STAMP
    maps = _three(_SIDE, _HEAD + _STAMP, width, height, 0, pitch)
    bar = Rect(maps[0].right + _BAR_GAP, maps[0].top, _BAR, maps[2].bottom - maps[0].top)
    size = (maps[0].right + _BAR_ROOM, maps[2].bottom + _FOOT + _EDGE)
    names = (False, False, True), (True, True, True)
    return _with_curves_below(size, maps, bar, names, legend, with_curves=with_curves)


def _square(aspect: float, legend: int) -> PageLayout:
    width = (_WIDTH - 2 * _SIDE - _BAR_ROOM) // 2
    height = round(width / aspect)
    left, top = _SIDE + width + _SIDE, _HEAD + _STAMP
    low = top + height + _FOOT + _STAMP + max(0, legend - _STAMP)
    maps = (
        Rect(_SIDE, top, width, height),
        Rect(left, top, width, height),
        Rect(_SIDE, low, width, height),
    )
    bar = Rect(maps[1].right + _BAR_GAP, top, _BAR, height)
    curves = Rect(left, low, _WIDTH - _EDGE - left, height)
    size = (_WIDTH, low + height + _FOOT + _EDGE)
    return PageLayout(size, maps, bar, curves, (True,) * 3, (True, True, True))


def _row(aspect: float, legend: int, *, with_curves: bool) -> PageLayout:
    width = (_WIDTH - _SIDE - 2 * _GAP - _BAR_ROOM) // 3
    height = round(width / aspect)
    maps = _three(_SIDE, _HEAD + _STAMP, width, height, width + _GAP, 0)
    bar = Rect(maps[2].right + _BAR_GAP, maps[0].top, _BAR, height)
    size = (_WIDTH, maps[0].bottom + _FOOT + _EDGE)
    names = (True, True, True), (True, False, False)
    return _with_curves_below(size, maps, bar, names, legend, with_curves=with_curves)


def _standing(aspect: float, stamp: float, legend: int, *, with_curves: bool) -> PageLayout:
    height = round(min(max(780, 90 / aspect), 1000))
    width = max(_LEAST, round(height * aspect))
    # Each map has its time above it, which may be the wider of the two.
    pitch = max(width + _GAP, round(stamp) + EM)
    maps = _three(_SIDE + (pitch - width) // 4, _HEAD + _STAMP, width, height, pitch, 0)
    bar = Rect(maps[2].right + _BAR_GAP, maps[0].top, _BAR, height)
    if round(stamp) > width:
        bar = Rect(bar.left + (round(stamp) - width) // 2, bar.top, _BAR, height)
    right, tall = bar.right + _BAR_LABELS, maps[0].bottom + _FOOT + _EDGE
    names = (True, True, True), (True, False, False)
    if not with_curves:
        return PageLayout((right, tall), maps, bar, None, *names)
    left = right + _SIDE
    across = max(_COLUMN, _WIDTH - _EDGE - left)
    top = maps[0].top + max(0, legend - _STAMP)
    curves = Rect(left, top, across, maps[0].bottom - top)
    return PageLayout((left + across + _EDGE, tall), maps, bar, curves, *names)


def _with_curves_below(
    size: tuple[int, int],
    maps: tuple[Rect, Rect, Rect],
    bar: Rect,
    names: tuple[tuple[bool, bool, bool], tuple[bool, bool, bool]],
    legend: int,
    *,
    with_curves: bool,
) -> PageLayout:
    width, height = size
    if not with_curves:
        return PageLayout(size, maps, bar, None, *names)
    curves = Rect(_SIDE, height + legend, width - _EDGE - _SIDE, _CURVES)
    return PageLayout((width, curves.bottom + _FOOT + _EDGE), maps, bar, curves, *names)


def _three(
    left: int, top: int, width: int, height: int, right: int, down: int
) -> tuple[Rect, Rect, Rect]:
    """Return three equal boxes, each shifted against the one before."""
    first, second, third = (Rect(left + i * right, top + i * down, width, height) for i in range(3))
    return first, second, third

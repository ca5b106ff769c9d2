"""Where map, colour bar and curves stand in a movie, whatever the map's proportions."""

from dataclasses import dataclass, replace
from typing import TypeAlias

from wavepack.rendering.canvas import Rect, Sheet
from wavepack.rendering.strip import VALUES_WIDTH, values_beside

#: Lengths of the map along x and y.
Spans: TypeAlias = tuple[float, float]

#: Room for numbers and name of an axis below and left of it, in heights of text.
_FOOT, _SIDE = 3.0, 5.0
_HEAD = 2.8
#: What an upright bar takes with its gap, numbers and name, besides its thickness.
_BAR_ROOM = 7.5
#: A map lower than this has its bar below, where the numbers have room.
_FLAT = 15.0


@dataclass(frozen=True)
class MapLayout:
    """Boxes of map, colour bar, strip and its values; ``right`` is where all ends."""

    panel: Rect
    bar: Rect
    right: int
    strip: Rect | None = None
    values: Rect | None = None


def layout_of(sheet: Sheet, spans: Spans, thick: int, *, with_strip: bool) -> MapLayout:
    """Return the arrangement that leaves the map most room.

    The curves stand beside the map or below it; the colour bar stands beside
    the map, or lies below one that is too flat for it.
    """
    em = sheet.em
    room = Rect(
        round(_SIDE * em),
        round(_HEAD * em),
        sheet.width - round((_SIDE + _BAR_ROOM - 1) * em) - thick,
        sheet.height - round((_HEAD + _FOOT + 0.4) * em),
    )
    # A picture of this few letters has no place for curves.
    with_strip = with_strip and min(room.width / 24, room.height / 16) >= em
    flat = _flat(sheet, spans, thick, with_strip=with_strip)
    if not with_strip:
        upright = _alone(room, spans, em, thick)
        return flat if _prefers_flat(flat, upright, em) else upright
    beside = _fitted(replace(room, width=room.width - round(21 * em)), spans)
    low = _fitted(replace(room, height=room.height - round(8.6 * em)), spans)
    if beside.width >= low.width:
        return _beside(sheet, replace(beside, left=room.left), thick)
    below = _below(sheet, low, thick)
    return flat if _prefers_flat(flat, below, em) else below


def _prefers_flat(flat: MapLayout, upright: MapLayout, em: int) -> bool:
    return upright.panel.height < _FLAT * em and flat.panel.width > upright.panel.width


def _alone(room: Rect, spans: Spans, em: int, thick: int) -> MapLayout:
    panel = _fitted(room, spans)
    panel = replace(
        panel,
        left=room.left + (room.width - panel.width) // 2,
        top=room.top + (room.height - panel.height) // 2,
    )
    bar = _bar_beside(panel, em, thick)
    return MapLayout(panel, bar, bar.right + round(4.5 * em))


def _beside(sheet: Sheet, panel: Rect, thick: int) -> MapLayout:
    em = sheet.em
    bar = _bar_beside(panel, em, thick)
    left = bar.right + round(9.5 * em)
    width = sheet.width - left - round(2 * em)
    values_tall = min(round(6.8 * em), panel.height // 3)
    tall = min(panel.height - values_tall - em // 2, round(1.3 * width))
    strip = Rect(left, panel.bottom - tall, width, tall)
    values = Rect(left, strip.top - values_tall - em // 2, width, values_tall)
    return MapLayout(panel, bar, strip.right, strip, values)


def _below(sheet: Sheet, panel: Rect, thick: int) -> MapLayout:
    em = sheet.em
    spare = sheet.height - panel.bottom - round((4.2 + _FOOT) * em)
    tall = max(min(spare, round(0.6 * sheet.width)), round(4.4 * em))
    width = panel.width + round((_BAR_ROOM - 2) * em) + thick
    left = panel.left
    if width < round((16 + VALUES_WIDTH) * em):
        left, width = round(_SIDE * em), sheet.width - round((_SIDE + 1) * em)
    # Map and strip stand together, in the middle of what is left.
    middle = (sheet.width - width - round(_SIDE * em)) // 2 - left + round(_SIDE * em)
    shift_x, shift_y = max(0, middle), max(0, spare - tall) // 2
    panel = replace(panel, left=panel.left + shift_x, top=panel.top + shift_y)
    bar = _bar_beside(panel, em, thick)
    top = panel.bottom + round(4.2 * em)
    strip = Rect(left + shift_x, top, width - round(VALUES_WIDTH * em), tall)
    return MapLayout(
        panel, bar, strip.right + round(VALUES_WIDTH * em), strip, values_beside(strip, em)
    )


def _flat(sheet: Sheet, spans: Spans, thick: int, *, with_strip: bool) -> MapLayout:
    """Stack map, lying bar and strip, each as wide as the picture."""
    em = sheet.em
    thick = thick if thick > 2 * em else round(0.8 * em)
    bar_room = round((_FOOT + 0.4 + _FOOT) * em) + thick
    strip_room = round((1.2 + 4.4 + _FOOT) * em) if with_strip else 0
    room = Rect(
        round(_SIDE * em),
        round(_HEAD * em),
        sheet.width - round((_SIDE + 1.5) * em),
        sheet.height - round(_HEAD * em) - bar_room - strip_room,
    )
    panel = _fitted(room, spans)
    spare = room.height - panel.height
    tall = min(round(4.4 * em) + spare, round(0.4 * sheet.width)) if with_strip else 0
    unused = spare - max(0, tall - round(4.4 * em))
    panel = replace(panel, top=panel.top + unused // 2)
    bar = Rect(panel.left, panel.bottom + round((_FOOT + 0.4) * em), panel.width, thick)
    if not with_strip:
        return MapLayout(panel, bar, panel.right)
    top = bar.bottom + round((_FOOT + 1.2) * em)
    strip = Rect(panel.left, top, panel.width - round(VALUES_WIDTH * em), tall)
    return MapLayout(panel, bar, panel.right, strip, values_beside(strip, em))


def _fitted(room: Rect, spans: Spans) -> Rect:
    """Return the largest box in the upper left of ``room`` with the map's proportions."""
    pixels = min(room.width / spans[0], room.height / spans[1])
    return Rect(room.left, room.top, max(2, int(pixels * spans[0])), max(2, int(pixels * spans[1])))


def _bar_beside(panel: Rect, em: int, thick: int) -> Rect:
    return Rect(panel.right + round(0.9 * em), panel.top, thick, panel.height)

"""The small curve of probabilities against time that runs along with a movie."""

import numpy as np
from matplotlib.axes import Axes

from wavepack.arrays import RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Pixels, Rect, Sheet
from wavepack.rendering.scales import number
from wavepack.rendering.scene import Curves, Units
from wavepack.rendering.ticks import set_ticks

_MOST_POINTS = 2000


class Strip:
    """Draws its axes into the background, then shows the curves up to now.

    The whole curves are drawn once; each frame uncovers them up to its time.
    """

    def __init__(
        self, sheet: Sheet, rect: Rect, values: Rect, curves: Curves, units: Units, end: float
    ) -> None:
        self._rect, self._values, self._curves, self._em = rect, values, curves, sheet.em
        self._looks = style.looks([curve.role for curve in curves.curves])
        self._span = (float(min(curves.times[0], 0.0)), float(max(end, curves.times[-1])) or 1.0)
        self._axes = _axes(sheet, rect, units, self._span)
        self._whole: Pixels | None = None

    def draw_curves(self, sheet: Sheet) -> None:
        """Draw the whole curves and keep their picture; call after the background."""
        draw_curves(self._axes, self._curves, sheet.points(0.12))
        self._whole = sheet.render()

    def paint(self, canvas: Canvas, time: float) -> None:
        """Show what has been recorded up to ``time``, and the values there."""
        if self._whole is None:
            raise ValueError("draw_curves comes before paint")
        rect, (start, stop) = self._rect, self._span
        share = min(max((time - start) / (stop - start), 0.0), 1.0)
        column = rect.left + round(share * rect.width)
        seen = slice(rect.top, rect.bottom), slice(rect.left, column)
        canvas.pixels[seen] = self._whole[seen]
        bar = np.array([[column, rect.top], [column, rect.bottom]], float)
        canvas.line(
            bar, style.FAINT_INK, 1.0, Rect(rect.left, rect.top, rect.width + 1, rect.height)
        )
        self._write_values(canvas, time)

    def _write_values(self, canvas: Canvas, time: float) -> None:
        box = self._values
        shown = self._curves.curves[: max(1, int(box.height / (1.3 * self._em)))]
        pitch = min(box.height / len(shown), 1.7 * self._em)
        for row, curve in enumerate(shown):
            middle = round(box.top + (row + 0.5) * pitch)
            text = f"{curve.name} {_value(self._curves.times, curve.values, time)}"
            size = round(0.87 * self._em)
            canvas.write(text, box.right, middle, size, self._looks[row][0])


#: Room to the right of the strip for names and values, in heights of text.
VALUES_WIDTH = 10.5


def values_beside(strip: Rect, em: int) -> Rect:
    """Return the box right of a strip that holds names and values."""
    return Rect(strip.right, strip.top, round(VALUES_WIDTH * em), strip.height)


def _axes(sheet: Sheet, rect: Rect, units: Units, span: tuple[float, float]) -> Axes:
    axes = sheet.axes(rect)
    axes.set_xlim(*span)
    axes.set_ylim(-0.04, 1.04)
    axes.set_yticks([0, 0.5, 1], ["0", "0.5", "1"])
    set_ticks(axes, "x", rect.width, sheet.em)
    axes.set_xlabel(
        units.label("t", units.time), fontsize=sheet.points(0.87), labelpad=sheet.points(0.1)
    )
    axes.grid(visible=True, color=style.GRID, linewidth=0.6)
    axes.set_axisbelow(True)
    return axes


def draw_curves(axes: Axes, curves: Curves, width: float, *, upright: bool = False) -> None:
    """Draw every curve in the colour of its role, thinned to what can be seen.

    With ``upright`` time runs upward.
    """
    stride = max(1, len(curves.times) // _MOST_POINTS)
    times = curves.times[::stride]
    looks = style.looks([curve.role for curve in curves.curves])
    for curve, (colour, dashes) in zip(curves.curves, looks, strict=True):
        values = curve.values[::stride]
        axes.plot(
            *((values, times) if upright else (times, values)),
            color=colour,
            linestyle=dashes,
            linewidth=width,
            label=curve.name,
        )


def _value(times: RealArray, values: RealArray, time: float) -> str:
    """Return the newest recorded value not after ``time``, rounded for reading."""
    last = int(np.searchsorted(times, time * (1 + 1e-12), side="right")) - 1
    if last < 0 or not np.isfinite(values[last]):
        return "\u2013".rjust(6, "\u2007")
    value = float(values[last])
    # What is less than the rounding of a sum over the grid is nothing.
    plain = abs(value) >= 5e-5 or abs(value) < 1e-12
    return f"{value:.4f}" if plain else number(float(f"{value:.0e}"))

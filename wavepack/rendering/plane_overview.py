"""A whole run in a plane on a page: where it was at three times, and how much of it where."""

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from wavepack.arrays import ComplexArray, RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Rect, Sheet
from wavepack.rendering.colour_bar import draw_bar
from wavepack.rendering.line_structure import shortened
from wavepack.rendering.overview import colour_map
from wavepack.rendering.page_layout import EM, PageLayout, arrange
from wavepack.rendering.plane_structure import draw_structure
from wavepack.rendering.scales import PowerScale
from wavepack.rendering.scene import Curves, Frames, Scene, density_of, time_format
from wavepack.rendering.strip import draw_curves
from wavepack.rendering.ticks import set_ticks

#: A map is drawn from at most so many points an axis.
_MOST_POINTS = 1600
#: Height of a line of the legend [heights of text].
_LINE = 1.7
#: A density below this share of the peak is hardly seen.
_VISIBLE = 0.02


def plane_overview(
    scene: Scene, frames: Frames, curves: Curves | None, scale: PowerScale
) -> Figure:
    """Return the density at start, middle and end, and the curves in time."""
    moments = _moments(frames, scale)
    stamp = time_format(frames.times, scene.units.time)
    stamps = [stamp(float(frames.times[i])).replace("\u2007", "") for i in moments]
    widest = max(style.text_width(text, EM) for text in stamps)
    spans = (scene.extent(0)[1] - scene.extent(0)[0], scene.extent(1)[1] - scene.extent(1)[0])
    rows = _legend_rows(curves, spans)
    legend = round((0.6 + _LINE * len(rows)) * EM)
    layout = arrange(spans, widest, legend, with_curves=curves is not None)
    sheet = Sheet(layout.size, EM)
    room = layout.size[0] - layout.maps[0].left - EM
    sheet.text(layout.maps[0].left, 1.6 * EM, shortened(scene.title, sheet, room), ems=1.15)
    for place, i in enumerate(moments):
        _draw_snapshot(sheet, layout, place, scene, frames.read(i), scale)
        _write_stamp(sheet, layout.maps[place], stamps[place])
    draw_bar(sheet, layout.bar, "density", scale, scene)
    if curves is not None and layout.curves is not None:
        _draw_along(sheet, layout.curves, scene, frames.times, moments, curves)
        _draw_legend(sheet, layout.curves, curves, rows)
    return sheet.figure


def _moments(frames: Frames, scale: PowerScale) -> tuple[int, int, int]:
    """Return start, middle and end of the time in which there is something to see."""
    last = len(frames) - 1
    while last > 0 and np.max(density_of(frames.read(last))) < _VISIBLE * scale.peak:
        last -= 1
    last = last or len(frames) - 1
    return 0, last // 2, last


def _write_stamp(sheet: Sheet, panel: Rect, stamp: str) -> None:
    baseline = panel.top - 0.45 * EM
    if style.text_width(stamp, EM) > panel.width:
        sheet.text(panel.left + panel.width / 2, baseline, stamp, ha="center")
    else:
        sheet.text(panel.right, baseline, stamp, ha="right")


def _draw_snapshot(
    sheet: Sheet,
    layout: PageLayout,
    place: int,
    scene: Scene,
    frame: RealArray | ComplexArray,
    scale: PowerScale,
) -> None:
    panel = layout.maps[place]
    axes = sheet.axes(panel)
    strides = [max(1, len(points) // _MOST_POINTS) for points in scene.coordinates]
    axes.imshow(
        scale(density_of(frame)[:: strides[0], :: strides[1]]).T,
        origin="lower",
        extent=(*scene.extent(0), *scene.extent(1)),
        cmap=colour_map(),
        vmin=0,
        vmax=1,
        interpolation="bilinear",
        aspect="auto",
    )
    # Names once: they stand where they stood before.
    draw_structure(axes, scene, sheet.points(0.9), panel if place == 0 else None)
    axes.set_xlim(*scene.extent(0))
    axes.set_ylim(*scene.extent(1))
    set_ticks(axes, "x", panel.width, EM)
    set_ticks(axes, "y", panel.height, EM)
    axes.tick_params(labelbottom=layout.names_x[place], labelleft=layout.names_y[place])
    size = sheet.points(0.95)
    if layout.names_x[place]:
        axes.set_xlabel(scene.units.label("x", scene.units.length), fontsize=size)
    if layout.names_y[place]:
        text = scene.units.label("y", scene.units.length)
        axes.set_ylabel(text, fontsize=sheet.fitting(text, 1.6 * panel.height, 0.95))


def _draw_along(
    sheet: Sheet,
    rect: Rect,
    scene: Scene,
    times: RealArray,
    moments: tuple[int, ...],
    curves: Curves,
) -> None:
    """Draw probabilities against time, and the moments of the three maps."""
    axes = sheet.axes(rect)
    for i in sorted(set(moments)):
        axes.axvline(float(times[i]), color=style.FAINT_INK, alpha=0.45, linewidth=2.0)
    draw_curves(axes, curves, sheet.points(0.13))
    start, stop = float(times[0]), float(times[-1])
    margin = 0.01 * (stop - start) or 0.5
    axes.set_xlim(start - margin, stop + margin)
    axes.set_ylim(-0.03, 1.03)
    set_ticks(axes, "x", rect.width, EM)
    set_ticks(axes, "y", min(rect.height, 18 * EM), EM)
    axes.grid(visible=True, axis="y", color=style.GRID, linewidth=0.9)
    axes.set_xlabel(scene.units.label("t", scene.units.time), fontsize=sheet.points(0.95))
    axes.set_ylabel("probability", fontsize=sheet.points(0.95))


def _legend_rows(curves: Curves | None, spans: tuple[float, float]) -> list[list[int]]:
    """Return the curves named in each row of the legend."""
    if curves is None:
        return []
    # The narrowest place that this proportion may give the curves.
    room = (50 if spans[0] >= 3.3 * spans[1] or 0.45 <= spans[0] / spans[1] < 1.7 else 25) * EM
    rows: list[list[int]] = [[]]
    left = 0.0
    for i, curve in enumerate(curves.curves):
        width = _entry_width(curve.name)
        if rows[-1] and left + width > room:
            rows.append([])
            left = 0.0
        rows[-1].append(i)
        left += width
    return rows


def _entry_width(name: str) -> float:
    return style.text_width(name, 0.9 * EM) + 4.4 * EM


def _draw_legend(sheet: Sheet, rect: Rect, curves: Curves, rows: list[list[int]]) -> None:
    """Name the curves above their panel, where they can hide nothing."""
    looks = style.looks([curve.role for curve in curves.curves])
    for row, members in enumerate(rows):
        baseline = rect.top - (0.65 + _LINE * (len(rows) - 1 - row)) * EM
        left = float(rect.left)
        for i in members:
            colour, dashes = looks[i]
            _sample(sheet, left, baseline - 0.33 * EM, colour, dashes)
            sheet.text(left + 2.9 * EM, baseline, curves.curves[i].name, ems=0.9)
            left += _entry_width(curves.curves[i].name)


def _sample(sheet: Sheet, left: float, middle: float, colour: str, dashes: style.Dashes) -> None:
    ends = np.array([left, left + 2.4 * EM]) / sheet.width
    height = 1 - middle / sheet.height
    line = Line2D(ends, [height, height], color=colour, linewidth=sheet.points(0.13))
    line.set_linestyle(dashes)
    sheet.figure.add_artist(line)

"""What a colour means: a bar with its scale, or for the phase a table."""

import numpy as np
from matplotlib.axes import Axes

from wavepack.rendering import style
from wavepack.rendering.canvas import Pixels, Rect, Sheet
from wavepack.rendering.line_picture import PictureKind
from wavepack.rendering.scales import PowerScale, numbers
from wavepack.rendering.scene import Scene

_TURNS = ("π", "π/2", "0", "π/2", "π")


def bar_thickness(kind: PictureKind, em: int) -> int:
    """Return how thick a bar must be; that of the phase shows the density across."""
    return round((2.4 if kind == "phase" else 1.2) * em)


def draw_bar(sheet: Sheet, rect: Rect, kind: PictureKind, scale: PowerScale, scene: Scene) -> None:
    """Draw the bar along the longer side of ``rect``."""
    axes = sheet.axes(rect)
    upright = rect.height >= rect.width
    axes.yaxis.tick_right()
    axes.yaxis.set_label_position("right")
    low = 0.0 if kind == "density" else -1.0
    # The table's colours: across the bar and along it.
    colours = _colours(kind)
    axes.imshow(
        colours.transpose(1, 0, 2) if upright else colours,
        aspect="auto",
        origin="lower",
        extent=(0, 1, low, 1) if upright else (low, 1, 0, 1),
        interpolation="bilinear",
    )
    length = rect.height if upright else rect.width
    places, texts, name = (
        _phase_labels(scale)
        if kind == "phase"
        else _labels(kind, scale, scene, _gap(upright, sheet.em, length) * (1 - low))
    )
    _write(axes, sheet, places, texts, name, length, upright=upright)


def _gap(upright: bool, em: int, length: int) -> float:  # noqa: FBT001 - as its caller's
    """Return the least distance of labels as a share of the bar's length."""
    return (1.7 if upright else 4.6) * em / length


def _colours(kind: PictureKind) -> Pixels:
    if kind == "phase":
        table = style.phase_table()
        return style.table_image(np.roll(table, table.shape[1] // 2, axis=1))
    table = style.signed_table() if kind == "real" else style.density_table()
    return style.table_image(table)[None]


def _phase_labels(scale: PowerScale) -> tuple[list[float], list[str], str]:
    signs = (style.MINUS, style.MINUS, "", "", "")
    texts = [sign + turn for sign, turn in zip(signs, _TURNS, strict=True)]
    return [-1, -0.5, 0, 0.5, 1], texts, f"phase of ψ; brightness: |ψ|²{_remark(scale)}"


def _labels(
    kind: PictureKind, scale: PowerScale, scene: Scene, gap: float
) -> tuple[list[float], list[str], str]:
    real = kind == "real"
    ticks = scale.ticks(gap)
    if real:
        ticks = sorted({*ticks, *(-tick for tick in ticks)})
    places = [float(scale(np.array([tick]))[0]) for tick in ticks]
    unit = scene.units.amplitude(2) if real else scene.units.density(2)
    return (
        places,
        numbers(ticks),
        scene.units.label("Re ψ" if real else "|ψ|²", unit) + _remark(scale),
    )


def _remark(scale: PowerScale) -> str:
    return f", {scale.remark} scale" if scale.remark else ""


def _write(
    axes: Axes,
    sheet: Sheet,
    places: list[float],
    texts: list[str],
    name: str,
    length: int,
    *,
    upright: bool,
) -> None:
    along, across = (axes.yaxis, axes.xaxis) if upright else (axes.xaxis, axes.yaxis)
    across.set_ticks([])
    along.set_ticks(places, texts)
    lines = name
    if style.text_width(name, 0.87 * sheet.em) > length:
        lines = name.replace(", ", ",\n").replace("; ", ";\n")
    longest = max(lines.split("\n"), key=len)
    along.set_label_text(lines, fontsize=sheet.fitting(longest, length, 0.87), linespacing=1.15)
    along.labelpad = sheet.points(0.3 if upright else 0.15)

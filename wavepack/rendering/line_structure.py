"""What stands still along one axis: potential, energy, absorbers, regions, detectors."""

from collections.abc import Iterator

import numpy as np
from matplotlib.axes import Axes

from wavepack.arrays import RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Rect, Sheet, round_ticks
from wavepack.rendering.scales import energy_window
from wavepack.rendering.scene import (
    Region,
    Scene,
)


def draw_structure(sheet: Sheet, panel: Rect, scene: Scene, title_room: float) -> None:
    """Draw what stands still: title, potential, energy, absorbers, regions, detectors."""
    sheet.text(panel.left, 1.7 * sheet.em, shortened(scene.title, sheet, title_room), ems=1.1)
    axes = sheet.axes(panel)
    axes.set_xlim(*scene.extent(0))
    window = energy_window(scene.potential, scene.mean_energy)
    axes.set_ylim(*window)
    _draw_layers(axes, sheet, panel, scene)
    beyond = window[1] - window[0]
    visible = np.clip(np.nan_to_num(scene.potential), window[0] - beyond, window[1] + beyond)
    _draw_potential(axes, scene.coordinates[0], visible, window[0], sheet)
    _draw_energy(axes, sheet, scene)
    axes.yaxis.tick_right()
    axes.yaxis.set_label_position("right")
    axes.set_xticks([])
    axes.yaxis.set_major_locator(round_ticks(panel.height / (3 * sheet.em)))
    text = scene.units.label(potential_name(scene), scene.units.energy)
    axes.set_ylabel(
        text,
        color=style.POTENTIAL,
        fontsize=sheet.fitting(text, panel.height, 0.95),
        labelpad=sheet.points(0.4),
    )
    if scene.mean_energy is None and not np.any(scene.potential):
        # Nothing to read off: an axis of energies would only puzzle.
        axes.yaxis.set_visible(False)
    _draw_ruler(sheet, panel, scene)
    _draw_detectors(axes, sheet, panel, scene)


def potential_name(scene: Scene) -> str:
    """Name the potential as it is drawn: as the run sees it, sharp edges smoothed."""
    return "V on the grid at t = 0" if scene.driven else "V on the grid"


def shortened(title: str, sheet: Sheet, room: float) -> str:
    """Cut a title that would run into the time stamp."""
    if room < 4 * sheet.em:
        return ""
    if style.text_width(title, 1.1 * sheet.em) <= room:
        return title
    while title and style.text_width(title + "…", 1.1 * sheet.em) > room:
        title = title[:-1]
    return title.rstrip() + "…"


def _draw_layers(axes: Axes, sheet: Sheet, panel: Rect, scene: Scene) -> None:
    low, high = scene.extent(0)
    for layer in scene.layers:
        axes.axvspan(layer.start, layer.stop, color=style.ABSORBER, linewidth=0, zorder=0.5)
        width = (layer.stop - layer.start) / (high - low) * panel.width
        if style.text_width("absorber", 0.8 * sheet.em) < width:
            axes.annotate(
                "absorber",
                ((layer.start + layer.stop) / 2, 1),
                xycoords=("data", "axes fraction"),
                xytext=(0, -sheet.points(0.5)),
                textcoords="offset points",
                ha="center",
                va="top",
                color=style.ABSORBER_EDGE,
                fontsize=sheet.points(0.8),
            )


def _draw_potential(
    axes: Axes, x: RealArray, potential: RealArray, floor: float, sheet: Sheet
) -> None:
    # Nothing is drawn for a potential that is nowhere: its line would be an axis.
    if not np.any(potential):
        return
    axes.fill_between(x, potential, floor, color=style.POTENTIAL_FILL, linewidth=0, zorder=1)
    axes.plot(x, potential, color=style.POTENTIAL, linewidth=sheet.points(0.09), zorder=2)


def _draw_energy(axes: Axes, sheet: Sheet, scene: Scene) -> None:
    if scene.mean_energy is None:
        return
    axes.axhline(
        scene.mean_energy,
        color=style.ENERGY,
        linewidth=sheet.points(0.07),
        linestyle=(0, (7, 4)),
        zorder=3,
    )
    axes.annotate(
        "⟨E⟩",
        (1, scene.mean_energy),
        xycoords=("axes fraction", "data"),
        xytext=(-sheet.points(0.4), sheet.points(0.18)),
        textcoords="offset points",
        ha="right",
        va="bottom",
        fontsize=sheet.points(0.87),
        color=style.ENERGY,
        zorder=3,
    )


def _draw_ruler(sheet: Sheet, panel: Rect, scene: Scene) -> None:
    """Draw a coloured bar above the panel over each region."""
    low, high = scene.extent(0)
    bars = [
        (max(a, low), min(b, high), region.name, colour)
        for region, (colour, _) in zip(scene.regions, region_looks(scene), strict=True)
        for a, b in intervals(region, scene)
    ]
    thick = max(2, round(0.22 * sheet.em))
    axes = sheet.axes(Rect(panel.left, panel.top - 2 * thick, panel.width, thick))
    axes.set_axis_off()
    axes.set_xlim(low, high)
    axes.set_ylim(0, 1)
    for start, stop, _, colour in bars:
        axes.axvspan(start, stop, color=colour, linewidth=0)
    scale = panel.width / (high - low)
    shown = [
        (panel.left + (start - low) * scale, panel.left + (stop - low) * scale, name, colour)
        for start, stop, name, colour in bars
    ]
    for middle, name, colour in named_bars(shown, sheet.em, panel):
        sheet.text(middle, panel.top - 3.2 * thick, name, ems=0.8, ha="center", color=colour)


def named_bars(
    bars: list[tuple[float, float, str, str]], em: float, panel: Rect
) -> Iterator[tuple[float, str, str]]:
    """Yield where the names of bars go: into wide ones, else over or beside them if there is room.

    Bars are (left, right, name, colour) [pixels].
    """
    taken: list[tuple[float, float]] = []
    for left, right, name, colour in sorted(bars, key=lambda bar: bar[0] - bar[1]):
        width = style.text_width(name, 0.8 * em)
        middle = (left + right) / 2
        # Centred, flush with the bar's left end, flush with its right end.
        for place in (middle, left + width / 2, right - width / 2):
            ends = place - width / 2, place + width / 2
            inside = panel.left <= ends[0] and ends[1] <= panel.right
            if inside and all(ends[1] + em / 2 < a or b + em / 2 < ends[0] for a, b in taken):
                taken.append(ends)
                yield place, name, colour
                break


def region_looks(scene: Scene) -> list[tuple[str, style.Dashes]]:
    """Return colour and dashes of every region, those of its curve."""
    return style.looks([region.role for region in scene.regions])


def intervals(region: Region, scene: Scene) -> list[tuple[float, float]]:
    """Return the parts of the x axis that belong to a region."""
    if region.mask is None:
        span = region.spans.get("x", scene.extent(0))
        low, high = max(span[0], scene.extent(0)[0]), min(span[1], scene.extent(0)[1])
        return [(low, high)] if high > low else []
    edges = np.flatnonzero(np.diff(np.concatenate([[0], region.mask.astype(np.int8), [0]])))
    x = scene.coordinates[0]
    half = scene.extent(0)[1] - x[-1]
    return [
        (float(x[a] - half), float(x[b - 1] + half))
        for a, b in zip(edges[::2], edges[1::2], strict=True)
    ]


def _draw_detectors(axes: Axes, sheet: Sheet, panel: Rect, scene: Scene) -> None:
    taken = -1.0
    low, high = scene.extent(0)
    for detector in sorted(scene.detectors, key=lambda d: d.at):
        axes.axvline(
            detector.at,
            color=style.FAINT_INK,
            linewidth=sheet.points(0.08),
            linestyle=(0, (1, 2)),
            zorder=2.5,
        )
        text = with_arrow(detector.name, detector.toward)
        half = style.text_width(text, 0.8 * sheet.em) / 2
        middle = panel.left + (detector.at - low) / (high - low) * panel.width
        if middle - half > taken:
            taken = middle + half + 0.5 * sheet.em
            sheet.text(
                middle,
                panel.top - 2.2 * sheet.em,
                text,
                ems=0.8,
                ha="center",
                color=style.FAINT_INK,
            )


def with_arrow(name: str, toward: str) -> str:
    """Add the direction that a detector counts as forward."""
    arrows = {"+x": f"{name} →", "-x": f"← {name}", "+y": f"{name} ↑", "-y": f"{name} ↓"}
    return arrows.get(toward, name)

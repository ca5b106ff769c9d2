"""A whole run along one axis on a page: where it was when, and how much of it where."""

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.collections import QuadMesh
from matplotlib.colors import ListedColormap
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine

from wavepack.arrays import RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import round_ticks
from wavepack.rendering.line_structure import (
    intervals,
    potential_name,
    region_looks,
    with_arrow,
)
from wavepack.rendering.scales import PowerScale, energy_window, numbers
from wavepack.rendering.scene import (
    Curves,
    Frames,
    Scene,
    density_of,
)
from wavepack.rendering.strip import draw_curves

#: A space-time map holds no more points along x than a page can show.
_WIDEST = 1600
#: Pixels an inch of every page.
PAGE_DPI = 150


def line_overview(scene: Scene, frames: Frames, curves: Curves | None, scale: PowerScale) -> Figure:
    """Return the density by place and time, the structure above and the curves beside it."""
    figure = Figure(figsize=(9.6, 6.0), dpi=PAGE_DPI, layout=page_layout())
    columns = [1.0, 0.03] if curves is None else [1.0, 0.03, 0.36]
    grid = figure.add_gridspec(2, len(columns), width_ratios=columns, height_ratios=[0.34, 1.0])
    above, map_axes = figure.add_subplot(grid[0, 0]), figure.add_subplot(grid[1, 0])
    _title(above, scene)
    _draw_profile(above, scene)
    image = _draw_space_time(map_axes, scene, frames, scale)
    _colour_bar(figure, figure.add_subplot(grid[1, 1]), image, scale, scene)
    if curves is not None:
        beside = figure.add_subplot(grid[1, 2])
        _draw_sideways(beside, curves, frames.times)
        _legend(beside, figure.add_subplot(grid[0, 2]))
    return figure


def page_layout() -> ConstrainedLayoutEngine:
    """Return the spacing shared by all pages."""
    return ConstrainedLayoutEngine(w_pad=0.07, h_pad=0.06, wspace=0.02, hspace=0.02)


def _title(axes: Axes, scene: Scene) -> None:
    axes.set_title(scene.title, loc="left", fontsize=12, parse_math=False)


def _draw_profile(axes: Axes, scene: Scene) -> None:
    """Draw the potential with energy, regions, detectors and layers along x."""
    x, (low, high) = scene.coordinates[0], energy_window(scene.potential, scene.mean_energy)
    # Room at the top for the bars of the regions and their names.
    top = high + 0.42 * (high - low)
    axes.set_xlim(*scene.extent(0))
    axes.set_ylim(low, top)
    axes.tick_params(labelbottom=False, labelsize=9)
    axes.yaxis.set_major_locator(round_ticks(4))
    for layer in scene.layers:
        axes.axvspan(layer.start, layer.stop, color=style.ABSORBER, linewidth=0)
    visible = np.clip(np.nan_to_num(scene.potential), low, high)
    axes.fill_between(x, visible, low, color=style.POTENTIAL_FILL, linewidth=0)
    axes.plot(x, visible, color=style.POTENTIAL, linewidth=1.1)
    if scene.mean_energy is not None:
        axes.axhline(scene.mean_energy, color=style.ENERGY, linewidth=0.9, linestyle=(0, (7, 4)))
        axes.annotate(
            "⟨E⟩",
            (1, scene.mean_energy),
            xycoords=("axes fraction", "data"),
            xytext=(-4, 2),
            textcoords="offset points",
            ha="right",
            va="bottom",
            fontsize=8,
            color=style.ENERGY,
        )
    for region, (colour, _) in zip(scene.regions, region_looks(scene), strict=True):
        for start, stop in intervals(region, scene):
            axes.axvspan(start, stop, 0.96, 1.0, color=colour, linewidth=0)
            axes.annotate(
                region.name,
                ((start + stop) / 2, 0.94),
                xycoords=("data", "axes fraction"),
                ha="center",
                va="top",
                fontsize=8,
                color=colour,
                parse_math=False,
            )
    # On two lines, since the panel is low.
    name = potential_name(scene)
    name = name.replace(" at", "\nat") if scene.driven else name.replace(" the", "\nthe")
    axes.set_ylabel(scene.units.label(name, scene.units.energy), fontsize=9, color=style.POTENTIAL)


def _draw_space_time(axes: Axes, scene: Scene, frames: Frames, scale: PowerScale) -> QuadMesh:
    x = scene.coordinates[0]
    stride = max(1, len(x) // _WIDEST)
    # One row a frame, thinned along x: small whatever the run's size.
    rows = np.array(
        [np.asarray(scale(density_of(frame)[::stride]), np.float32) for _, frame in frames]
    )
    image = axes.pcolormesh(
        _edges(x[::stride]),
        _edges(frames.times),
        rows,
        cmap=colour_map(),
        vmin=0,
        vmax=1,
        rasterized=True,
    )
    axes.set_xlim(*scene.extent(0))
    axes.set_ylim(float(frames.times[0]), float(frames.times[-1]) or 1.0)
    for layer in scene.layers:
        for at in (layer.start, layer.stop):
            axes.axvline(at, color=style.ABSORBER_EDGE, linewidth=0.8, linestyle=(0, (2, 3)))
    for detector in scene.detectors:
        axes.axvline(detector.at, color=style.INK, linewidth=0.9, linestyle=(0, (1, 2)))
        axes.annotate(
            with_arrow(detector.name, detector.toward),
            (detector.at, 0.985),
            xycoords=("data", "axes fraction"),
            xytext=(3, 0),
            textcoords="offset points",
            va="top",
            fontsize=8,
            parse_math=False,
            bbox=_halo(),
        )
    _outline_potential(axes, scene)
    axes.tick_params(labelsize=9)
    axes.xaxis.set_major_locator(round_ticks(8))
    axes.set_xlabel(scene.units.label("x", scene.units.length), fontsize=10)
    axes.set_ylabel(scene.units.label("t", scene.units.time), fontsize=10)
    return image


def _halo() -> dict[str, Any]:
    return {"boxstyle": "square,pad=0.15", "facecolor": (1, 1, 1, 0.75), "edgecolor": "none"}


def _outline_potential(axes: Axes, scene: Scene) -> None:
    """Mark along all times where the potential passes the packet's mean energy."""
    if scene.mean_energy is None:
        return
    x, above = scene.coordinates[0], scene.potential > scene.mean_energy
    crossings = x[:-1][np.diff(above.astype(np.int8)) != 0]
    if len(crossings) <= 12:
        for at in crossings:
            axes.axvline(at, color=style.POTENTIAL, linewidth=0.9)


def _edges(points: RealArray) -> RealArray:
    if len(points) < 2:
        return np.array([points[0] - 0.5, points[0] + 0.5])
    middles = (points[1:] + points[:-1]) / 2
    return np.concatenate([[2 * points[0] - middles[0]], middles, [2 * points[-1] - middles[-1]]])


def colour_map() -> ListedColormap:
    """Return the colours of the density from nothing to its peak."""
    return ListedColormap(style.table_image(style.density_table()) / 255.0)


def _colour_bar(
    figure: Figure, axes: Axes, image: ScalarMappable, scale: PowerScale, scene: Scene
) -> None:
    ticks = scale.ticks(0.06)
    bar = figure.colorbar(image, cax=axes, ticks=[float(scale(np.array([v]))[0]) for v in ticks])
    bar.ax.set_yticklabels(numbers(ticks), fontsize=8)
    bar.outline.set_linewidth(0.6)
    remark = f", {scale.remark} scale" if scale.remark else ""
    bar.set_label(scene.units.label("|ψ|²", scene.units.density(scene.ndim)) + remark, fontsize=9)


def _draw_sideways(axes: Axes, curves: Curves, times: RealArray) -> None:
    """Draw probabilities along x against the time axis of the map."""
    draw_curves(axes, curves, 1.6, upright=True)
    axes.set_ylim(float(times[0]), float(times[-1]) or 1.0)
    axes.set_xlim(-0.03, 1.03)
    axes.set_xticks([0, 0.5, 1], ["0", "0.5", "1"])
    axes.tick_params(labelleft=False, labelsize=9)
    axes.grid(visible=True, color=style.GRID, linewidth=0.6)
    axes.set_xlabel("probability", fontsize=10)


def _legend(axes: Axes, empty: Axes) -> None:
    """Name the curves in an empty panel, where they can hide nothing."""
    empty.set_axis_off()
    legend = empty.legend(
        handles=axes.get_legend_handles_labels()[0],
        loc="lower left",
        fontsize=9,
        frameon=False,
        handlelength=2.4,
        borderaxespad=0.0,
    )
    for text in legend.get_texts():
        text.set_parse_math(False)

r"""The picture of a run along one axis: the packet over the potential."""

from typing import Literal, TypeAlias

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes

from wavepack.arrays import ComplexArray, RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Pixels, Rect, Sheet, polyline, round_ticks
from wavepack.rendering.scales import HEADROOM, PowerScale, energy_window, number
from wavepack.rendering.scene import (
    Curves,
    Frames,
    Region,
    Scene,
    density_of,
    time_format,
)
from wavepack.rendering.strip import VALUES_WIDTH, Strip, values_beside

PictureKind: TypeAlias = Literal["density", "real", "phase"]


class LinePicture:
    """Paints frames of one axis: density, or real part in its envelope, or phase."""

    def __init__(
        self,
        scene: Scene,
        frames: Frames,
        curves: Curves | None,
        kind: PictureKind,
        size: tuple[int, int],
        peak: float,
        power: float,
    ) -> None:
        self._scene, self._kind = scene, kind
        self._sheet = sheet = Sheet(size)
        self._density = PowerScale(peak, power)
        self._amplitude = PowerScale(peak**0.5, 2 * power)
        self._stamp = time_format(frames.times, scene.units.time)
        self.panel, strip_rect = _layout(sheet, with_strip=curves is not None)
        self._columns = _columns(scene, self.panel)
        window = energy_window(scene.potential, scene.mean_energy)
        heights = np.clip((np.nan_to_num(scene.potential) - window[0]) / np.ptp(window), -1, 2)
        rows = self.panel.bottom - self.panel.height * heights
        self._potential = np.stack([self._columns, rows], axis=1)
        room = self.panel.width - (26 if kind == "phase" else 14) * sheet.em
        draw_structure(sheet, self.panel, scene, room)
        self._draw_left_axis()
        if kind == "phase":
            draw_phase_key(sheet, self.panel)
        self._strip = None
        if curves is not None and strip_rect is not None:
            end = float(frames.times[-1])
            values = values_beside(strip_rect, sheet.em)
            self._strip = Strip(sheet, strip_rect, values, curves, scene.units, end)
        self.canvas = Canvas(sheet.render())
        if self._strip is not None:
            self._strip.draw_curves(sheet)

    def paint(self, time: float, frame: RealArray | ComplexArray) -> Pixels:
        """Return the picture of one state, valid until the next call."""
        self.canvas.clear()
        getattr(self, f"_paint_{self._kind}")(frame)
        if self._strip is not None:
            self._strip.paint(self.canvas, time)
        em = self._sheet.em
        self.canvas.write(self._stamp(time), self.panel.right, round(1.3 * em), round(1.1 * em))
        return self.canvas.pixels

    def _paint_density(self, frame: RealArray | ComplexArray) -> None:
        curve = self._curve(self._density(density_of(frame)), 0.0)
        self.canvas.fill(self._closed(curve), style.PACKET_FILL, 0.75, self.panel)
        self.canvas.line(curve, style.PACKET, 0.13 * self._sheet.em, self.panel)

    def _paint_real(self, frame: RealArray | ComplexArray) -> None:
        envelope = self._amplitude(np.sqrt(density_of(frame)))
        upper, lower = self._curve(envelope, 0.5), self._curve(-envelope, 0.5)
        around = np.concatenate([upper, lower[::-1]])
        self.canvas.fill(around, style.PACKET_FILL, 0.6, self.panel)
        wave = self._curve(self._amplitude(frame.real), 0.5)
        self.canvas.line(wave, style.PACKET, 0.11 * self._sheet.em, self.panel)

    def _paint_phase(self, frame: RealArray | ComplexArray) -> None:
        curve = self._curve(self._density(density_of(frame)), 0.0)
        panel = self.panel
        middles = panel.left + np.arange(panel.width) + 0.5
        heights = panel.bottom - np.interp(middles, curve[:, 0], curve[:, 1])
        nearest = np.clip(
            np.rint(np.interp(middles, self._columns, np.arange(len(self._columns)))).astype(int),
            0,
            len(self._columns) - 1,
        )
        table = style.phase_table()[-1]
        turns = np.angle(frame[nearest]) / (2 * np.pi) % 1.0
        colours = table[np.rint(turns * len(table)).astype(int) % len(table)]
        image = self.canvas.pixels.view(np.uint32)[..., 0][panel.slices]
        covered = np.arange(panel.height, 0, -1)[:, None] - 0.5 < heights
        np.copyto(image, colours[None, :], where=covered)
        # The colours hide the potential, so its line is drawn once more.
        if np.any(self._scene.potential):
            self.canvas.line(self._potential, style.POTENTIAL, 0.1 * self._sheet.em, panel)
        self.canvas.line(curve, style.INK, 0.1 * self._sheet.em, panel)

    def _curve(self, shares: npt.NDArray[np.float32], base: float) -> RealArray:
        """Turn scaled values into pixel positions; ``base`` is where zero stands."""
        across, values = polyline(self._columns - self.panel.left, shares, self.panel.width)
        reach = HEADROOM if base == 0 else HEADROOM / 2
        rows = self.panel.bottom - self.panel.height * (base + reach * values)
        return np.stack([across + self.panel.left, rows], axis=1)

    def _closed(self, curve: RealArray) -> RealArray:
        floor = [[curve[-1, 0], self.panel.bottom], [curve[0, 0], self.panel.bottom]]
        return np.concatenate([curve, floor])

    def _draw_left_axis(self) -> None:
        sheet, units = self._sheet, self._scene.units
        axes = sheet.axes(self.panel)
        axes.set_xlim(*self._scene.extent(0))
        axes.set_ylim(0, 1)
        axes.xaxis.set_major_locator(round_ticks(self.panel.width / (7 * sheet.em)))
        label_x_axis(axes, sheet, self._scene)
        scale = self._amplitude if self._kind == "real" else self._density
        name = "Re ψ" if self._kind == "real" else "|ψ|²"
        unit = units.amplitude(1) if self._kind == "real" else units.density(1)
        real = self._kind == "real"
        ticks = scale.ticks((5 if real else 2.4) * sheet.em / self.panel.height)
        if real:
            ticks = sorted({*ticks, *(-tick for tick in ticks)})
        base, reach = (0.5, HEADROOM / 2) if self._kind == "real" else (0.0, HEADROOM)
        places = [base + reach * float(scale(np.array([tick]))[0]) for tick in ticks]
        axes.set_yticks(places, [number(tick) for tick in ticks])
        remark = f", {scale.remark} scale" if scale.remark else ""
        colour = " coloured by phase" if self._kind == "phase" else ""
        text = units.label(name, unit) + colour + remark
        axes.set_ylabel(
            text,
            fontsize=sheet.fitting(text, self.panel.height, 0.95),
            color=style.PACKET,
            labelpad=sheet.points(0.4),
        )


def draw_phase_key(sheet: Sheet, panel: Rect) -> None:
    """Draw the circle of phase colours, unrolled, beside the time stamp."""
    em = sheet.em
    bar = Rect(panel.right - round(20 * em), round(0.9 * em), round(6 * em), round(0.8 * em))
    if bar.left < panel.left + 12 * em:
        return
    axes = sheet.axes(bar)
    around = np.roll(style.phase_table()[-1], style.phase_table().shape[1] // 2)
    axes.imshow(style.table_image(around)[None], aspect="auto", interpolation="nearest")
    axes.set_xticks([])
    axes.set_yticks([])
    foot = bar.bottom - 0.05 * em
    sheet.text(bar.left - 0.4 * em, foot, f"phase {style.MINUS}π", ems=0.87, ha="right")
    sheet.text(bar.right + 0.4 * em, foot, "π", ems=0.87)


def label_x_axis(axes: Axes, sheet: Sheet, scene: Scene) -> None:
    """Name the horizontal axis."""
    axes.set_xlabel(
        scene.units.label("x", scene.units.length),
        fontsize=sheet.points(0.95),
        labelpad=sheet.points(0.15),
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
    text = scene.units.label("V at t = 0" if scene.driven else "V", scene.units.energy)
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
        (max(a, low), min(b, high), region.name, style.role_colour(region.role))
        for region in scene.regions
        for a, b in intervals(region, scene)
    ]
    thick = max(2, round(0.22 * sheet.em))
    axes = sheet.axes(Rect(panel.left, panel.top - 2 * thick, panel.width, thick))
    axes.set_axis_off()
    axes.set_xlim(low, high)
    axes.set_ylim(0, 1)
    for start, stop, name, colour in bars:
        axes.axvspan(start, stop, color=colour, linewidth=0)
        width = (stop - start) / (high - low) * panel.width
        if style.text_width(name, 0.8 * sheet.em) < width:
            middle = panel.left + ((start + stop) / 2 - low) / (high - low) * panel.width
            sheet.text(middle, panel.top - 3.2 * thick, name, ems=0.8, ha="center", color=colour)


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


def _columns(scene: Scene, panel: Rect) -> RealArray:
    low, high = scene.extent(0)
    return panel.left + (scene.coordinates[0] - low) / (high - low) * panel.width


def _layout(sheet: Sheet, *, with_strip: bool) -> tuple[Rect, Rect | None]:
    em, width, height = sheet.em, sheet.width, sheet.height
    left, right, top = round(5.6 * em), round(5.2 * em), round(5.4 * em)
    across = width - left - right
    with_strip = with_strip and height >= 26 * em
    if not with_strip:
        return Rect(left, top, across, height - top - round(3.4 * em)), None
    strip_height = round(5.2 * em)
    strip_top = height - strip_height - round(3.1 * em)
    strip = Rect(left, strip_top, across - round((VALUES_WIDTH - 3.5) * em), strip_height)
    return Rect(left, top, across, strip_top - top - round(4.0 * em)), strip

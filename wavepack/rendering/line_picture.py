r"""The picture of a run along one axis: the packet over the potential."""

from typing import Literal, TypeAlias

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes

from wavepack.arrays import ComplexArray, RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Pixels, Rect, Sheet, polyline, round_ticks
from wavepack.rendering.line_structure import draw_structure
from wavepack.rendering.scales import HEADROOM, PowerScale, energy_window, numbers
from wavepack.rendering.scene import (
    Curves,
    Frames,
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
        axes.set_yticks(places, numbers(ticks))
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

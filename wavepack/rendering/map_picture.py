r"""The picture of a run in a plane: the packet as colour under the potential's lines."""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt
from PIL import Image

from wavepack.arrays import ComplexArray, RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Overlay, Pixels, Rect, Sheet, round_ticks
from wavepack.rendering.line_picture import PictureKind
from wavepack.rendering.line_structure import shortened
from wavepack.rendering.plane_structure import draw_structure
from wavepack.rendering.scales import PowerScale, number
from wavepack.rendering.scene import (
    Curves,
    Frames,
    Scene,
    density_of,
    time_format,
)
from wavepack.rendering.strip import VALUES_WIDTH, Strip, values_beside


class MapPicture:
    """Paints frames of two axes: density, real part or phase as colour."""

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
        # The amplitude is the root of the density, so twice the power looks alike.
        real = kind == "real"
        self._scale = PowerScale(peak**0.5, 2 * power) if real else PowerScale(peak, power)
        self._stamp = time_format(frames.times, scene.units.time)
        bar_width = round((2.4 if kind == "phase" else 1.2) * sheet.em)
        layout = _layout(sheet, scene, bar_width, with_strip=curves is not None)
        self.panel = layout.panel
        self._right = layout.bar.right + round(4.5 * sheet.em)
        if layout.strip is not None:
            self._right = max(self._right, layout.strip.right)
        self._draw_frame()
        draw_bar(sheet, layout.bar, kind, self._scale, scene)
        self._strip = None
        if curves is not None and layout.strip is not None and layout.values is not None:
            end = float(frames.times[-1])
            self._strip = Strip(sheet, layout.strip, layout.values, curves, scene.units, end)
        self.canvas = Canvas(sheet.render())
        if self._strip is not None:
            self._strip.draw_curves(sheet)
        self._overlay = Overlay(_structure(scene, self.panel, size, sheet))

    def paint(self, time: float, frame: RealArray | ComplexArray) -> Pixels:
        """Return the picture of one state, valid until the next call."""
        self.canvas.clear()
        image = self.canvas.pixels.view(np.uint32)[..., 0][self.panel.slices]
        image[...] = self._colour(frame)
        self._overlay.paint(self.canvas.pixels)
        if self._strip is not None:
            self._strip.paint(self.canvas, time)
        em = self._sheet.em
        self.canvas.write(self._stamp(time), self._right, round(1.3 * em), round(1.1 * em))
        return self.canvas.pixels

    def _colour(self, frame: RealArray | ComplexArray) -> style.ColourTable:
        """Return the panel's colours, shape (height, width)."""
        if self._kind == "real":
            values = self._scale(self._spread(frame.real))
            return style.signed_table()[
                _index((values + np.float32(1)) * np.float32(0.5), style.LEVELS + 1)
            ]
        if self._kind == "density":
            shares = self._scale(self._spread(density_of(frame)))
            return np.asarray(style.density_table().take(_index(shares, style.LEVELS)))
        real, imaginary = self._spread(frame.real), self._spread(frame.imag)
        # Where several points share a pixel their waves may cancel; their densities do not.
        shrunk = frame.shape[0] > self.panel.width or frame.shape[1] > self.panel.height
        density = self._spread(density_of(frame)) if shrunk else real**2 + imaginary**2
        table = style.phase_table()
        turns = np.arctan2(imaginary, real) * np.float32(table.shape[1] / (2 * np.pi))
        # A whole circle and a half step more: positive, so that the cut rounds.
        hues = (turns + np.float32(table.shape[1] + 0.5)).astype(np.int32) % table.shape[1]
        places = _index(self._scale(density), table.shape[0]) * table.shape[1] + hues
        return np.asarray(table.reshape(-1).take(places))

    def _spread(self, values: npt.NDArray[Any]) -> npt.NDArray[np.float32]:
        """Bring values of the grid, x by y, to the pixels of the panel, y upward."""
        image = Image.fromarray(np.ascontiguousarray(values, np.float32))
        # Turned upright after scaling: the grid may hold far more points than the panel.
        size = self.panel.height, self.panel.width
        scaled = image.resize(size, Image.Resampling.BILINEAR, reducing_gap=2.0)
        return np.ascontiguousarray(np.asarray(scaled, np.float32).T[::-1])

    def _draw_frame(self) -> None:
        sheet, scene, panel = self._sheet, self._scene, self.panel
        room = self._right - panel.left - 14 * sheet.em
        sheet.text(panel.left, 1.7 * sheet.em, shortened(scene.title, sheet, room), ems=1.1)
        axes = sheet.axes(panel)
        axes.set_xlim(*scene.extent(0))
        axes.set_ylim(*scene.extent(1))
        axes.xaxis.set_major_locator(round_ticks(panel.width / (5 * sheet.em)))
        axes.yaxis.set_major_locator(round_ticks(panel.height / (4 * sheet.em)))
        for name, label in (("x", axes.set_xlabel), ("y", axes.set_ylabel)):
            text = scene.units.label(name, scene.units.length)
            label(text, fontsize=sheet.points(0.95), labelpad=sheet.points(0.15))


def _index(shares: npt.NDArray[np.float32], levels: int) -> npt.NDArray[np.int32]:
    """Turn 0..1 into places of a table."""
    return (shares * np.float32(levels - 1) + np.float32(0.5)).astype(np.int32)


def draw_bar(sheet: Sheet, rect: Rect, kind: PictureKind, scale: PowerScale, scene: Scene) -> None:
    """Draw the colour bar, or for the phase a table of phase by density."""
    axes = sheet.axes(rect)
    axes.yaxis.tick_right()
    axes.yaxis.set_label_position("right")
    units, remark = scene.units, f", {scale.remark} scale" if scale.remark else ""
    if kind == "phase":
        table = style.phase_table()
        around = np.roll(table, table.shape[1] // 2, axis=1)
        axes.imshow(
            style.table_image(np.ascontiguousarray(around.T)),
            aspect="auto",
            origin="lower",
            extent=(0, 1, -1, 1),
        )
        axes.set_yticks(
            [-1, -0.5, 0, 0.5, 1], [f"{style.MINUS}π", f"{style.MINUS}π/2", "0", "π/2", "π"]
        )
        axes.set_xticks([])
        text = f"phase of ψ; brightness: |ψ|²{remark}"
    else:
        table = style.signed_table() if kind == "real" else style.density_table()
        low = -1 if kind == "real" else 0
        axes.imshow(
            style.table_image(table)[:, None],
            aspect="auto",
            origin="lower",
            extent=(0, 1, low, 1),
            interpolation="bilinear",
        )
        ticks = scale.ticks(1.7 * sheet.em / rect.height * (1 - low))
        ticks = sorted({*ticks, *(low * tick for tick in ticks)}) if low else ticks
        places = [float(scale(np.array([tick]))[0]) for tick in ticks]
        axes.set_yticks(places, [number(tick) for tick in ticks])
        axes.set_xticks([])
        name = "Re ψ" if kind == "real" else "|ψ|²"
        unit = units.amplitude(2) if kind == "real" else units.density(2)
        text = units.label(name, unit) + remark
    axes.set_ylabel(
        text, fontsize=sheet.fitting(text, rect.height, 0.87), labelpad=sheet.points(0.3)
    )


def _structure(scene: Scene, panel: Rect, size: tuple[int, int], sheet: Sheet) -> Pixels:
    """Draw all that lies over the colours on a transparent sheet."""
    over = Sheet(size)
    over.figure.patch.set_alpha(0)
    axes = over.axes(panel)
    axes.set_xlim(*scene.extent(0))
    axes.set_ylim(*scene.extent(1))
    axes.set_xticks([])
    axes.set_yticks([])
    draw_structure(axes, scene, sheet.points(), panel)
    return over.render()


@dataclass(frozen=True)
class _Layout:
    """Where map, colour bar, strip and its values stand."""

    panel: Rect
    bar: Rect
    strip: Rect | None = None
    values: Rect | None = None


def _layout(sheet: Sheet, scene: Scene, bar_width: int, *, with_strip: bool) -> _Layout:
    """Return the boxes; the strip beside the map or below it, as leaves more map."""
    em = sheet.em
    room = Rect(
        round(5 * em),
        round(2.8 * em),
        sheet.width - round(11 * em) - bar_width,
        sheet.height - round(6.2 * em),
    )
    if not with_strip or min(room.width / 24, room.height / 16) < em:
        panel = _fitted(room, scene)
        return _Layout(panel, _bar(panel, em, bar_width))
    beside = Rect(room.left, room.top, room.width - round(21 * em), room.height)
    below = Rect(room.left, room.top, room.width, room.height - round(8.6 * em))
    panel, low_panel = _fitted(beside, scene), _fitted(below, scene)
    if panel.width >= low_panel.width:
        return _beside(sheet, panel, _bar(panel, em, bar_width))
    return _below(sheet, room, low_panel, _bar(low_panel, em, bar_width))


def _beside(sheet: Sheet, panel: Rect, bar: Rect) -> _Layout:
    em = sheet.em
    left = bar.right + round(9.5 * em)
    width = min(sheet.width - left - round(2 * em), round(26 * em))
    tall = min(round(15 * em), panel.height // 2)
    strip = Rect(left, panel.bottom - tall, width, tall)
    values_tall = min(round(6.8 * em), panel.height - tall - em)
    return _Layout(
        panel, bar, strip, Rect(left, strip.top - values_tall - em // 2, width, values_tall)
    )


def _below(sheet: Sheet, room: Rect, panel: Rect, bar: Rect) -> _Layout:
    em = sheet.em
    gap, foot = round(4.2 * em), round(3.0 * em)
    spare = sheet.height - room.top - panel.height - gap - foot
    tall = min(max(spare, round(4.4 * em)), round(13 * em))
    # Map and strip stand together, in the middle of what is left.
    top = room.top + max(0, spare - tall) // 2
    panel, bar = replace(panel, top=top), replace(bar, top=top)
    left, right = panel.left, bar.right + round((4.5 - VALUES_WIDTH) * em)
    if right - left < 16 * em:
        left, right = room.left, sheet.width - round((VALUES_WIDTH + 1) * em)
    strip = Rect(left, panel.bottom + gap, right - left, tall)
    return _Layout(panel, bar, strip, values_beside(strip, em))


def _fitted(room: Rect, scene: Scene) -> Rect:
    """Return the largest box in ``room`` with the scene's proportions."""
    spans = [stop - start for start, stop in (scene.extent(0), scene.extent(1))]
    pixels = min(room.width / spans[0], room.height / spans[1])
    width, height = max(2, int(pixels * spans[0])), max(2, int(pixels * spans[1]))
    left = room.left + (room.width - width) // 2
    return Rect(left, room.top + (room.height - height) // 2, width, height)


def _bar(panel: Rect, em: int, width: int) -> Rect:
    return Rect(panel.right + round(0.9 * em), panel.top, width, panel.height)

r"""The picture of a run in a plane: the packet as colour under the potential's lines."""

from typing import Any

import numpy as np
import numpy.typing as npt
from PIL import Image

from wavepack.arrays import ComplexArray, RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Overlay, Pixels, Rect, Sheet
from wavepack.rendering.colour_bar import bar_thickness, draw_bar
from wavepack.rendering.line_picture import PictureKind
from wavepack.rendering.line_structure import shortened
from wavepack.rendering.map_layout import layout_of
from wavepack.rendering.plane_structure import draw_structure
from wavepack.rendering.scales import PowerScale
from wavepack.rendering.scene import (
    Curves,
    Frames,
    Scene,
    density_of,
    time_format,
)
from wavepack.rendering.strip import Strip
from wavepack.rendering.ticks import set_ticks


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
        spans = (scene.extent(0)[1] - scene.extent(0)[0], scene.extent(1)[1] - scene.extent(1)[0])
        thick = bar_thickness(kind, sheet.em)
        layout = layout_of(sheet, spans, thick, with_strip=curves is not None)
        self.panel, self._right = layout.panel, layout.right
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
        set_ticks(axes, "x", panel.width, sheet.em)
        set_ticks(axes, "y", panel.height, sheet.em)
        for name, label in (("x", axes.set_xlabel), ("y", axes.set_ylabel)):
            text = scene.units.label(name, scene.units.length)
            label(text, fontsize=sheet.points(0.95), labelpad=sheet.points(0.15))


def _index(shares: npt.NDArray[np.float32], levels: int) -> npt.NDArray[np.int32]:
    """Turn 0..1 into places of a table."""
    return (shares * np.float32(levels - 1) + np.float32(0.5)).astype(np.int32)


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

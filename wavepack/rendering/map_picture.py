r"""The picture of a run in a plane: the packet as colour under the potential's lines."""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes
from matplotlib.patheffects import withStroke
from PIL import Image

from wavepack.arrays import ComplexArray, RealArray
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Overlay, Pixels, Rect, Sheet, round_ticks
from wavepack.rendering.line_picture import PictureKind, shortened, with_arrow
from wavepack.rendering.scales import PowerScale, energy_window, number
from wavepack.rendering.scene import (
    Curves,
    Detector,
    Frames,
    Region,
    Scene,
    density_of,
    time_format,
)
from wavepack.rendering.strip import VALUES_WIDTH, Strip, values_beside

#: Lines of equal potential are drawn from at most so many points an axis.
_CONTOUR_POINTS = 1000


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


def draw_structure(axes: Axes, scene: Scene, points: float, panel: Rect | None = None) -> None:
    """Draw potential, absorber edges, regions and detectors; names if a panel is given."""
    _draw_layers(axes, scene, points)
    _draw_potential(axes, scene, points)
    labels = _Labels(axes, scene, points, panel)
    for detector in scene.detectors:
        _draw_detector(axes, scene, detector, points)
        labels.detector(detector)
    for region in scene.regions:
        _draw_region(axes, scene, region, points)
        labels.region(region)


def _draw_potential(axes: Axes, scene: Scene, points: float) -> None:
    """Draw lines of equal potential; hatch where the packet's mean energy is below it."""
    strides = [max(1, len(axis) // _CONTOUR_POINTS) for axis in scene.coordinates]
    # Half a cell more at each end, so that the lines reach the frame.
    x, y = (
        np.concatenate([[ends[0]], axis[::stride], [ends[1]]])
        for axis, stride, ends in zip(
            scene.coordinates, strides, (scene.extent(0), scene.extent(1)), strict=True
        )
    )
    low, high = energy_window(scene.potential, scene.mean_energy)
    potential = np.nan_to_num(scene.potential[:: strides[0], :: strides[1]].T)
    potential = np.pad(np.clip(potential, low, high), 1, mode="edge")
    least, most = float(potential.min()), float(potential.max())
    if most - least <= 1e-9 * (high - low) or min(potential.shape) < 2:
        return
    levels = least + (most - least) * np.array([0.1, 0.3, 0.5, 0.7, 0.9])
    axes.contour(
        x,
        y,
        potential,
        levels=levels,
        colors=style.POTENTIAL,
        linewidths=0.07 * points,
        alpha=0.75,
    )
    mean = scene.mean_energy
    if mean is not None and least < mean < most:
        hatched = axes.contourf(
            x, y, potential, levels=[mean, high + abs(high) + 1], colors="none", hatches=["////"]
        )
        hatched.set(edgecolor=(*_rgb(style.POTENTIAL), 0.55), linewidth=0)
        axes.contour(
            x, y, potential, levels=[mean], colors=style.POTENTIAL, linewidths=0.12 * points
        )


def _rgb(colour: str) -> tuple[float, ...]:
    return tuple(int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5))


def _draw_layers(axes: Axes, scene: Scene, points: float) -> None:
    for layer in scene.layers:
        axis = 0 if layer.axis == "x" else 1
        low, high = scene.extent(axis)
        span = axes.axvspan if axis == 0 else axes.axhspan
        span(layer.start, layer.stop, color=style.ABSORBER_EDGE, alpha=0.13, linewidth=0)
        # The inner edge is where absorption begins; the outer one is the frame's.
        inner = layer.stop if abs(layer.start - low) < abs(high - layer.stop) else layer.start
        line = axes.axvline if axis == 0 else axes.axhline
        line(inner, color=style.ABSORBER_EDGE, linewidth=0.06 * points, linestyle=(0, (2, 3)))


def _draw_detector(axes: Axes, scene: Scene, detector: Detector, points: float) -> None:
    other = 1 if detector.axis == "x" else 0
    low, high = scene.extent(other)
    span = [max(detector.span[0], low), min(detector.span[1], high)]
    at = [detector.at, detector.at]
    across, up = (at, span) if detector.axis == "x" else (span, at)
    axes.plot(across, up, color=style.INK, linewidth=0.09 * points, linestyle=(0, (1, 2)))


def _draw_region(axes: Axes, scene: Scene, region: Region, points: float) -> None:
    colour, width = style.role_colour(region.role), 0.09 * points
    if region.mask is not None:
        x, y = scene.coordinates
        axes.contour(
            x,
            y,
            region.mask.T.astype(float),
            levels=[0.5],
            colors=colour,
            linewidths=width,
            linestyles="dashed",
        )
        return
    (x0, x1), (y0, y1) = box_of(region, scene)
    for axis, ends, (low, high) in ((0, (x0, x1), (y0, y1)), (1, (y0, y1), (x0, x1))):
        for at in ends:
            # An edge on the frame bounds nothing that can be seen.
            if at in scene.extent(axis):
                continue
            line = ([at, at], [low, high]) if axis == 0 else ([low, high], [at, at])
            axes.plot(*line, color=colour, linewidth=width, linestyle=(0, (6, 3)))


def box_of(region: Region, scene: Scene) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return the part of a region inside the frame, or the box around its points."""
    if region.mask is not None and region.mask.any():
        rows, columns = np.nonzero(region.mask)
        x, y = scene.coordinates
        return (
            (float(x[rows.min()]), float(x[rows.max()])),
            (float(y[columns.min()]), float(y[columns.max()])),
        )
    box = []
    for axis, name in enumerate(("x", "y")):
        low, high = scene.extent(axis)
        start, stop = region.spans.get(name, (low, high))
        box.append((min(max(start, low), high), max(min(stop, high), low)))
    return box[0], box[1]


class _Labels:
    """Writes names where they hide no other name."""

    def __init__(self, axes: Axes, scene: Scene, points: float, panel: Rect | None) -> None:
        self._axes, self._scene, self.panel = axes, scene, panel
        self._size = 0.8 * points
        self._em = 0.8 * points * 100 / 72
        self._taken: list[tuple[float, float, float, float]] = []

    def region(self, region: Region) -> None:
        """Write the region's name into a free corner of it."""
        (x0, x1), (y0, y1) = box_of(region, self._scene)
        corners = [(x0, y1, 1, -1), (x1, y1, -1, -1), (x0, y0, 1, 1), (x1, y0, -1, 1)]
        self._write(region.name, corners, style.role_colour(region.role))

    def detector(self, detector: Detector) -> None:
        """Write the detector's name beside one of its ends."""
        other = 1 if detector.axis == "x" else 0
        low, high = self._scene.extent(other)
        ends = max(detector.span[0], low), min(detector.span[1], high)
        if detector.axis == "x":
            places = [(detector.at, ends[e], s, d) for e, d in ((0, 1), (1, -1)) for s in (1, -1)]
        else:
            places = [(ends[e], detector.at, s, d) for e, s in ((1, -1), (0, 1)) for d in (1, -1)]
        self._write(with_arrow(detector.name, detector.toward), places, style.INK)

    def _write(self, text: str, places: list[tuple[float, float, int, int]], colour: str) -> None:
        if self.panel is None:
            return
        for x, y, right, up in places:
            box, across, row = self._box(text, x, y, right, up)
            if self._free(box):
                self._taken.append(box)
                self._axes.text(
                    across,
                    row,
                    text,
                    transform=None,
                    fontsize=self._size,
                    color=colour,
                    ha="left" if right > 0 else "right",
                    va="bottom" if up > 0 else "top",
                    parse_math=False,
                    path_effects=[withStroke(linewidth=2, foreground="white")],
                )
                return

    def _box(
        self, text: str, x: float, y: float, right: int, up: int
    ) -> tuple[tuple[float, float, float, float], float, float]:
        across, row = self._axes.transData.transform((x, y))
        across, row = across + 0.5 * right * self._em, row + 0.4 * up * self._em
        width, height = style.text_width(text, self._em), 1.25 * self._em
        left = across if right > 0 else across - width
        foot = row if up > 0 else row - height
        return (left, foot, left + width, foot + height), across, row

    def _free(self, box: tuple[float, float, float, float]) -> bool:
        inside = self._axes.bbox
        if not (
            inside.x0 <= box[0]
            and box[2] <= inside.x1
            and inside.y0 <= box[1]
            and box[3] <= inside.y1
        ):
            return False
        return all(
            box[2] < other[0] or other[2] < box[0] or box[3] < other[1] or other[3] < box[1]
            for other in self._taken
        )


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

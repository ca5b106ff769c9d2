"""What stands still in a plane: potential, absorbers, detectors, regions and their names."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patheffects import withStroke

from wavepack.rendering import style
from wavepack.rendering.canvas import Rect
from wavepack.rendering.line_structure import region_looks, with_arrow
from wavepack.rendering.scales import energy_window
from wavepack.rendering.scene import (
    Detector,
    Region,
    Scene,
)

#: Lines of equal potential are drawn from at most so many points an axis.
_CONTOUR_POINTS = 1000


def draw_structure(axes: Axes, scene: Scene, points: float, panel: Rect | None = None) -> None:
    """Draw potential, absorber edges, regions and detectors; names if a panel is given."""
    _draw_layers(axes, scene, points)
    _draw_potential(axes, scene, points)
    labels = _Labels(axes, scene, points, panel)
    for detector in scene.detectors:
        _draw_detector(axes, scene, detector, points)
        labels.detector(detector)
    for row, (region, (colour, _)) in enumerate(
        zip(scene.regions, region_looks(scene), strict=True)
    ):
        # Neighbours share an edge: the dashes of one stand in the gaps of the other.
        dashes = (5.0 * (row % 2), (5.0, 5.0))
        _draw_region(axes, scene, region, colour, dashes, 0.09 * points)
        labels.region(region, colour)


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
    potential = np.clip(potential, low, high)
    # Continued straight over half a cell, so that no line bends at the frame.
    onward = np.pad(potential, 1, mode="reflect", reflect_type="odd")
    potential = np.clip((np.pad(potential, 1, mode="edge") + onward) / 2, low, high)
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


def _draw_region(
    axes: Axes,
    scene: Scene,
    region: Region,
    colour: str,
    dashes: tuple[float, tuple[float, float]],
    width: float,
) -> None:
    if region.mask is not None:
        x, y = scene.coordinates
        axes.contour(
            x,
            y,
            region.mask.T.astype(float),
            levels=[0.5],
            colors=colour,
            linewidths=width,
            linestyles=[dashes],
        )
        return
    (x0, x1), (y0, y1) = box_of(region, scene)
    for axis, ends, (low, high) in ((0, (x0, x1), (y0, y1)), (1, (y0, y1), (x0, x1))):
        for at in ends:
            # An edge on the frame bounds nothing that can be seen.
            if at in scene.extent(axis):
                continue
            line = ([at, at], [low, high]) if axis == 0 else ([low, high], [at, at])
            axes.plot(*line, color=colour, linewidth=width, linestyle=dashes)


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

    def region(self, region: Region, colour: str) -> None:
        """Write the region's name into a free corner of it."""
        (x0, x1), (y0, y1) = box_of(region, self._scene)
        corners = [(x0, y1, 1, -1), (x1, y1, -1, -1), (x0, y0, 1, 1), (x1, y0, -1, 1)]
        self._write(region.name, corners, colour)

    def detector(self, detector: Detector) -> None:
        """Write the detector's name beside one of its ends."""
        other = 1 if detector.axis == "x" else 0
        low, high = self._scene.extent(other)
        ends = max(detector.span[0], low), min(detector.span[1], high)
        places: list[tuple[float, float, int, int]]
        if detector.axis == "x":
            places = [(detector.at, ends[e], s, d) for e, d in ((0, 1), (1, -1)) for s in (1, -1)]
        else:
            places = [(ends[e], detector.at, s, d) for e, s in ((1, -1), (0, 1)) for d in (1, -1)]
        if self._short(detector.axis, ends):
            middle = sum(ends) / 2
            beside = [(detector.at, middle, s, 0) for s in (1, -1)]
            above = [(middle, detector.at, 0, d) for d in (1, -1)]
            places = (beside if detector.axis == "x" else above) + places
        self._write(with_arrow(detector.name, detector.toward), places, style.INK)

    def _short(self, axis: str, ends: tuple[float, float]) -> bool:
        """Whether a detector is short enough for its name to stand at its middle."""
        places = [(0.0, end) if axis == "x" else (end, 0.0) for end in ends]
        low, high = self._axes.transData.transform(places)
        return bool(np.abs(high - low).max() < 8 * self._em)

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
                    ha=("center", "left", "right")[right],
                    va=("center", "bottom", "top")[up],
                    parse_math=False,
                    path_effects=[withStroke(linewidth=2, foreground="white")],
                )
                return

    def _box(
        self, text: str, x: float, y: float, right: int, up: int
    ) -> tuple[tuple[float, float, float, float], float, float]:
        across, row = self._axes.transData.transform((x, y))
        across, row = across + 0.35 * right * self._em, row + 0.3 * up * self._em
        width, height = style.text_width(text, self._em), 1.25 * self._em
        left = across - width * (1 - right) / 2
        foot = row - height * (1 - up) / 2
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

"""A picture whose background is drawn once and whose frames are painted over it.

matplotlib draws axes, labels and potential a single time. A frame copies that
background and adds lines with the same rasteriser, colours from tables and a
few letters: milliseconds where drawing the plot anew takes a tenth of a second.
"""

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import numpy.typing as npt
from matplotlib.axes import Axes
from matplotlib.backend_bases import GraphicsContextBase
from matplotlib.backends.backend_agg import FigureCanvasAgg, RendererAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.path import Path
from matplotlib.ticker import MaxNLocator
from matplotlib.transforms import Bbox, IdentityTransform
from PIL import Image, ImageDraw

from wavepack.arrays import RealArray
from wavepack.errors import UsageError
from wavepack.rendering import style

Pixels = npt.NDArray[np.uint8]

_DPI = 100
SMALLEST = (240, 160)
LARGEST = 8192


@dataclass(frozen=True)
class Rect:
    """A box of whole pixels; ``left`` and ``top`` count from the upper left."""

    left: int
    top: int
    width: int
    height: int

    @property
    def right(self) -> int:
        """First column beyond the box."""
        return self.left + self.width

    @property
    def bottom(self) -> int:
        """First row below the box."""
        return self.top + self.height

    @property
    def slices(self) -> tuple[slice, slice]:
        """Rows and columns of the box in an image."""
        return slice(self.top, self.bottom), slice(self.left, self.right)


class Sheet:
    """An empty figure of an exact size in pixels, with its measure of text."""

    def __init__(self, size: tuple[int, int], em: int | None = None) -> None:
        self.width, self.height = check_size(size)
        fitting = max(10, round(15 * min(self.width / 1280, self.height / 720)))
        #: Height of ordinary text [pixels]; all margins are multiples of it.
        self.em = fitting if em is None else em
        self.figure = Figure(figsize=(self.width / _DPI, self.height / _DPI), dpi=_DPI)

    def points(self, ems: float = 1.0) -> float:
        """Size of text or width of a line in matplotlib's points."""
        return ems * self.em * 72 / _DPI

    def axes(self, rect: Rect) -> Axes:
        """Add axes whose inside is exactly ``rect``."""
        axes = self.figure.add_axes(
            (
                rect.left / self.width,
                1 - rect.bottom / self.height,
                rect.width / self.width,
                rect.height / self.height,
            ),
        )
        axes.tick_params(
            labelsize=self.points(0.87), length=self.points(0.28), pad=self.points(0.22)
        )
        return axes

    def text(
        self,
        left: float,
        baseline: float,
        text: str,
        *,
        ems: float = 1.0,
        ha: Literal["left", "center", "right"] = "left",
        color: str = style.INK,
    ) -> None:
        """Write at a pixel position; names of the user are never read as formulas."""
        self.figure.text(
            left / self.width,
            1 - baseline / self.height,
            text,
            fontsize=self.points(ems),
            ha=ha,
            color=color,
            parse_math=False,
        )

    def fitting(self, text: str, room: float, ems: float) -> float:
        """Size in points at which a label is at most ``room`` pixels long."""
        width = style.text_width(text, ems * self.em)
        return self.points(ems * min(1.0, room / max(width, 1.0)))

    def render(self) -> Pixels:
        """Draw the figure, shape (height, width, 4)."""
        canvas: Any = FigureCanvasAgg(self.figure)
        canvas.draw()
        return np.array(canvas.buffer_rgba())


def round_ticks(most: float) -> MaxNLocator:
    """Place at most about ``most`` ticks, at steps of 1, 2 or 5."""
    return MaxNLocator(max(2, int(most)), steps=[1, 2, 5, 10])


def check_size(size: tuple[int, int]) -> tuple[int, int]:
    """Return the size; UsageError if a picture of it would be useless."""
    width, height = size
    if not (SMALLEST[0] <= width <= LARGEST and SMALLEST[1] <= height <= LARGEST):
        raise UsageError(
            f"size: need {SMALLEST[0]}x{SMALLEST[1]} to {LARGEST}x{LARGEST} pixels, "
            f"got {width}x{height}"
        )
    return width, height


class Canvas:
    """The image that each frame is painted into; ``pixels`` is used again and again."""

    def __init__(self, background: Pixels) -> None:
        height, width = background.shape[:2]
        self._background = background
        # matplotlib gives its rasteriser no types.
        make: Any = RendererAgg
        self._renderer = make(width, height, _DPI)
        self.pixels: Pixels = np.asarray(self._renderer.buffer_rgba())

    def clear(self) -> None:
        """Put the background back."""
        self.pixels[...] = self._background

    def line(self, points: RealArray, colour: str, width: float, clip: Rect) -> None:
        """Draw a line through ``points``, shape (n, 2), in pixels from the upper left."""
        gc = self._pen(clip)
        gc.set_foreground(colour)
        gc.set_linewidth(width * 72 / _DPI)
        gc.set_joinstyle("round")
        self._renderer.draw_path(gc, self._path(points), IdentityTransform())
        gc.restore()

    def fill(self, points: RealArray, colour: str, opacity: float, clip: Rect) -> None:
        """Fill the polygon of ``points``, shape (n, 2)."""
        gc = self._pen(clip)
        gc.set_linewidth(0)
        gc.set_alpha(opacity)
        face = (*to_rgb(colour), opacity)
        self._renderer.draw_path(gc, self._path(points), IdentityTransform(), face)
        gc.restore()

    def write(
        self, text: str, right: int, middle: int, pixels: int, colour: str = style.INK
    ) -> None:
        """Write a line of text that ends at ``right``, centred on row ``middle``."""
        font = style.font(pixels)
        left = max(0, right - int(font.getlength(text)) - 2)
        top, bottom = max(0, middle - pixels), middle + pixels
        patch = Image.fromarray(self.pixels[top:bottom, left : right + 2].copy())
        ImageDraw.Draw(patch).text(
            (right - left, middle - top), text, fill=colour, font=font, anchor="rm"
        )
        self.pixels[top:bottom, left : right + 2] = np.asarray(patch)

    def _pen(self, clip: Rect) -> GraphicsContextBase:
        gc: GraphicsContextBase = self._renderer.new_gc()
        height = self.pixels.shape[0]
        gc.set_clip_rectangle(
            Bbox.from_extents(clip.left, height - clip.bottom, clip.right, height - clip.top)
        )
        gc.set_antialiased(True)
        gc.set_snap(False)
        return gc

    def _path(self, points: RealArray) -> Path:
        upward = points.copy()
        upward[:, 1] = self.pixels.shape[0] - points[:, 1]
        path = Path(upward)
        # Many thousand vertices in one column would overfill the rasteriser.
        path.should_simplify = False
        return path


class Overlay:
    """Lines that stay on top of changing colours."""

    def __init__(self, drawing: Pixels) -> None:
        rows, columns = (np.flatnonzero(drawing[..., 3].any(axis=1 - i)) for i in (0, 1))
        self._part = (
            slice(int(rows[0]), int(rows[-1]) + 1),
            slice(int(columns[0]), int(columns[-1]) + 1),
        )
        touched = drawing[self._part].copy()
        self._opacity = Image.fromarray(touched[..., 3].copy())
        touched[..., 3] = 255
        self._ink = Image.fromarray(touched)

    def paint(self, pixels: Pixels) -> None:
        """Lay the lines over the image."""
        below = Image.fromarray(np.ascontiguousarray(pixels[self._part]))
        below.paste(self._ink, (0, 0), self._opacity)
        pixels[self._part] = np.asarray(below)


def polyline(
    points: RealArray, values: npt.NDArray[np.floating], columns: int
) -> tuple[RealArray, npt.NDArray[np.floating]]:
    """Thin a curve to at most a low and a high point a column, keeping every peak.

    ``points`` are positions in columns, rising; returns positions and values.
    """
    if len(points) <= 2 * columns:
        return points, values
    starts = np.searchsorted(points, np.arange(max(int(points[-1]), 1)))
    starts = np.unique(starts[starts < len(points)])
    low, high = np.minimum.reduceat(values, starts), np.maximum.reduceat(values, starts)
    across = np.repeat(points[starts], 2)
    # Low and high in turn, in the order that the curve meets them.
    rising = values[starts] <= np.append(values[starts[1:]], values[-1])
    pairs = np.where(rising[:, None], np.stack([low, high], 1), np.stack([high, low], 1))
    return across, pairs.reshape(-1)

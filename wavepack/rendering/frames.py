"""From a scene and its frames to painted pictures: no clock, no files."""

from collections.abc import Iterator
from typing import Final, Protocol

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.errors import UsageError
from wavepack.rendering import style
from wavepack.rendering.canvas import Pixels, check_size
from wavepack.rendering.line_picture import LinePicture, PictureKind
from wavepack.rendering.map_picture import MapPicture
from wavepack.rendering.scales import highest_density
from wavepack.rendering.scene import Curves, Frames, Scene

KINDS: Final[tuple[PictureKind, ...]] = ("density", "real", "phase")


class Picture(Protocol):
    """Paints one state after another into the same pixels."""

    def paint(self, time: float, frame: RealArray | ComplexArray) -> Pixels:
        """Return the picture, shape (height, width, 4), valid until the next call."""
        ...


def picture_of(
    scene: Scene,
    frames: Frames,
    curves: Curves | None = None,
    *,
    kind: str = "density",
    size: tuple[int, int] = (1280, 720),
    power: float = 0.5,
) -> Picture:
    """Prepare the picture of a scene: background, fixed scale, colour tables.

    The scale is that of the largest density of all frames, which are read once.

    Raises
    ------
    UsageError
        If there are no frames, the kind is unknown or needs a wavefunction where
        only the density was stored, or size or power cannot be drawn.
    """
    check_size(size)
    if kind not in KINDS:
        raise UsageError(f"picture: need one of {', '.join(KINDS)}, got {kind!r}")
    if not 0 < power <= 1:
        raise UsageError(f"power: need more than 0 and at most 1, got {power:g}")
    peak = highest_density(frames)
    if kind != "density" and not np.iscomplexobj(frames.read(0)):
        raise UsageError(
            f"picture: {kind!r} needs the wavefunction, but the run stored only its density; "
            'run with output.store = "wavefunction", or choose "density"'
        )
    drawn: PictureKind = next(known for known in KINDS if known == kind)
    make = LinePicture if scene.ndim == 1 else MapPicture
    with style.applied():
        return make(scene, frames, curves, drawn, size, peak, power)


def paint_all(picture: Picture, frames: Frames) -> Iterator[Pixels]:
    """Paint every frame in turn; each picture is valid until the next one."""
    for time, frame in frames:
        yield picture.paint(time, frame)

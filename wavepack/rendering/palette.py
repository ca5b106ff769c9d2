"""The 256 colours of a GIF, shared by all its frames so that nothing flickers."""

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any, Self

import av
import numpy as np
import numpy.typing as npt
from PIL import Image
from scipy.spatial import cKDTree

from wavepack.rendering.canvas import Pixels

#: Colours are told apart by the upper six bits of each channel.
_BITS = 6


@dataclass(frozen=True)
class Palette:
    """Colours, shape (256, 3), and the nearest of them for every coarse colour."""

    colours: Pixels
    nearest: Pixels

    @classmethod
    def of(cls, pictures: Iterable[Pixels]) -> Self:
        """Choose the colours that serve pictures, shape (height, width, 4), best.

        Most pixels are paper and would take most of the palette. Each colour
        therefore counts with the fourth root of its frequency, so that the
        shades of the packet stay smooth; the paper itself is always kept.
        """
        counts = np.zeros(1 << 3 * _BITS, np.int64)
        for picture in pictures:
            counts += np.bincount(_coarse(picture).reshape(-1), minlength=counts.size)
        seen = np.flatnonzero(counts)
        times = np.ceil(counts[seen] ** 0.25).astype(int)
        sample = Image.fromarray(np.repeat(_fine(seen), times, axis=0)[None])
        shades = sample.quantize(255, method=Image.Quantize.MEDIANCUT, kmeans=2)
        listed = np.array(shades.getpalette(), np.uint8).reshape(-1, 3)[:255]
        colours = np.full((256, 3), 255, np.uint8)
        colours[: len(listed)] = listed
        every = _fine(np.arange(counts.size))
        _, nearest = cKDTree(colours).query(every)
        return cls(colours, np.asarray(nearest, np.uint8))

    def places(self, picture: Pixels) -> Pixels:
        """Return the place in the palette of each pixel, shape (height, width)."""
        return np.asarray(self.nearest[_coarse(picture)])

    def frame(self, picture: Pixels) -> av.VideoFrame:
        """Return a picture as places of the palette."""
        listed = np.full((256, 4), 255, np.uint8)
        listed[:, 1:] = self.colours
        # The library's own types leave out this form, which its docstring describes.
        pair: Any = (self.places(picture), listed)
        return av.VideoFrame.from_ndarray(pair, format="pal8")


def _coarse(picture: Pixels) -> npt.NDArray[np.uint32]:
    """Pack the upper bits of red, green and blue into one number."""
    red, green, blue = ((picture[..., i] >> (8 - _BITS)).astype(np.uint32) for i in range(3))
    return np.asarray(red << 2 * _BITS | green << _BITS | blue, np.uint32)


def _fine(coarse: npt.NDArray[np.integer]) -> Pixels:
    """Return the colour that a coarse number stands for, white staying white."""
    shifts = np.array([2 * _BITS, _BITS, 0])
    channels = (coarse[:, None] >> shifts) & ((1 << _BITS) - 1)
    return np.asarray(np.rint(channels * (255 / ((1 << _BITS) - 1))), np.uint8)

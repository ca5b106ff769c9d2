r"""Palette, fonts and colour tables: the look of every picture, in one place.

Colours are mixed in OKLab [Ottosson2020]_, whose straight lines and circles are
seen as even steps. The packet is blue, the potential sand; transmitted and
reflected differ in hue, in lightness and in line style, so that none of them
rests on telling red from green.
"""

import warnings
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from functools import cache
from pathlib import Path
from types import MappingProxyType
from typing import Any, Final, Literal, TypeAlias

import matplotlib as mpl
import numpy as np
import numpy.typing as npt
from PIL import ImageFont

from wavepack.arrays import RealArray

#: One packed colour a pixel: bytes red, green, blue, opacity.
ColourTable: TypeAlias = npt.NDArray[np.uint32]

#: A line style of matplotlib: whole, or an offset and lengths of strokes and gaps.
Dashes: TypeAlias = Literal["-"] | tuple[int, tuple[float, ...]]

PAPER: Final = "#ffffff"
INK: Final = "#22272e"
MINUS: Final = "\N{MINUS SIGN}"
FAINT_INK: Final = "#6b7480"
GRID: Final = "#d9dde2"
PACKET: Final = "#17509e"
PACKET_FILL: Final = "#a9c6ea"
POTENTIAL: Final = "#9a6a21"
POTENTIAL_FILL: Final = "#efe3cb"
ENERGY: Final = "#7b3f00"
ABSORBER: Final = "#eceaf2"
ABSORBER_EDGE: Final = "#7d769a"

#: Colour and dashes of the probability of each role, and of what is lost.
ROLES: Final[Mapping[str, tuple[str, Dashes]]] = MappingProxyType(
    {
        "transmitted": ("#00796b", "-"),
        "reflected": ("#c2407e", (0, (5, 1.6))),
        "held": ("#8a7a00", (0, (1.2, 1.2))),
        "lost": ("#7d8590", (0, (4, 1.5, 1, 1.5))),
        "none": ("#5d6b7a", (0, (3, 1.2))),
    }
)
#: Colours and dashes of things without a role, which must differ from one another.
SERIES: Final[tuple[tuple[str, Dashes], ...]] = (
    ("#5a4fcf", "-"),
    ("#b5520b", (0, (5, 1.6))),
    ("#4d5866", (0, (1.2, 1.2))),
    ("#00796b", (0, (4, 1.5, 1, 1.5))),
    ("#c2407e", (0, (8, 2))),
    ("#8a7a00", (0, (3, 1.2))),
)

LEVELS: Final = 1024
_PHASE_HUES: Final = 256
_PHASE_SHADES: Final = 128

#: Anchors of the density map, from paper to ink, of falling lightness.
_DENSITY_ANCHORS: Final = (
    "#ffffff",
    "#d8e8f6",
    "#9fcbe6",
    "#57a5cf",
    "#2877b8",
    "#2a4b95",
    "#2c2560",
    "#170f2b",
)
_DIVERGING_ANCHORS: Final = (
    "#5c2a00",
    "#b5651d",
    "#efc08a",
    "#ffffff",
    "#93bfe6",
    "#2f6fb3",
    "#0d2a5c",
)

#: Defaults of every matplotlib figure drawn here.
SETTINGS: Final[Mapping[Any, Any]] = MappingProxyType(
    {
        "font.family": ["DejaVu Sans"],
        "figure.facecolor": PAPER,
        "axes.facecolor": "none",
        "axes.edgecolor": FAINT_INK,
        "axes.labelcolor": INK,
        "axes.titlecolor": INK,
        "text.color": INK,
        "xtick.color": FAINT_INK,
        "ytick.color": FAINT_INK,
        "xtick.labelcolor": INK,
        "ytick.labelcolor": INK,
        "axes.linewidth": 0.8,
        "lines.solid_joinstyle": "round",
        "axes.formatter.useoffset": False,
        "hatch.linewidth": 0.5,
        "svg.fonttype": "path",
    }
)


@contextmanager
def applied() -> Iterator[None]:
    """Draw with these settings alone, whatever matplotlib's own say.

    A title in a script that the font lacks shows boxes; that is no reason to
    warn once a letter.
    """
    with mpl.rc_context(), warnings.catch_warnings():
        mpl.rcdefaults()
        mpl.rcParams.update(dict(SETTINGS))
        warnings.filterwarnings("ignore", message=".*Glyph", category=UserWarning)
        yield


def role_colour(role: str) -> str:
    """Return the colour of a region's role; unknown roles take that of ``none``."""
    return ROLES.get(role, ROLES["none"])[0]


def looks(roles: Sequence[str]) -> list[tuple[str, Dashes]]:
    """Return colour and dashes of each of several: by role, or in turn where it has none."""
    known = ROLES.keys() - {"none"}
    found, others = [], 0
    for role in roles:
        if role in known:
            found.append(ROLES[role])
        else:
            found.append(SERIES[others % len(SERIES)])
            others += 1
    return found


@cache
def font(pixels: int, *, bold: bool = False) -> ImageFont.FreeTypeFont:
    """Return the DejaVu Sans that matplotlib ships, of a given height."""
    file = "DejaVuSans-Bold.ttf" if bold else "DejaVuSans.ttf"
    return ImageFont.truetype(str(Path(mpl.get_data_path()) / "fonts" / "ttf" / file), pixels)


def text_width(text: str, pixels: float) -> float:
    """Width [pixels] of a line of text of a given font height."""
    return font(64).getlength(text) * pixels / 64


@cache
def density_table() -> ColourTable:
    """Colours of a density from 0 to its peak, shape (LEVELS,): white to ink."""
    return _ramp(_DENSITY_ANCHORS, LEVELS)


@cache
def signed_table() -> ColourTable:
    """Colours of a signed value, shape (LEVELS + 1,): brown, white at zero, blue."""
    # An odd count: zero has a colour of its own, exactly that of the paper.
    half = _ramp(_DIVERGING_ANCHORS[3:], LEVELS // 2 + 1)
    other = _ramp(_DIVERGING_ANCHORS[3::-1], LEVELS // 2 + 1)
    return np.concatenate([other[:0:-1], half])


@cache
def phase_table() -> ColourTable:
    r"""Colours by brightness and phase, shape (shades, hues).

    The phase runs round a circle of OKLab, the density fades it into the paper.
    The circle is tilted: its red-green direction carries lightness too. So equal
    steps of phase are equal steps of colour, and an eye without red or green
    still sees a full circle, of blue, yellow and lightness.
    """
    phase = 2 * np.pi * np.arange(_PHASE_HUES) / _PHASE_HUES
    radius, tilt = 0.125, 0.62
    lightness = 0.64 - radius * tilt * np.cos(phase)
    across = radius * np.sqrt(1 - tilt**2) * np.cos(phase)
    circle = np.stack([lightness, across, radius * np.sin(phase)], axis=-1)
    shade = np.linspace(0, 1, _PHASE_SHADES)[:, None, None]
    paper = oklab(PAPER)
    return _pack(_rgb(paper + shade * (circle - paper)))


def packed(colour: str) -> np.uint32:
    """Return one ``#rrggbb`` colour as a packed pixel."""
    return np.uint32(_pack(_rgb(oklab(colour)[None]))[0])


def table_image(table: ColourTable) -> npt.NDArray[np.uint8]:
    """Unpack a table into bytes, shape (..., 4)."""
    return np.ascontiguousarray(table).view(np.uint8).reshape(*table.shape, 4)


def _ramp(anchors: Sequence[str], levels: int) -> ColourTable:
    """Return evenly seen steps through the anchors."""
    points = np.array([oklab(anchor) for anchor in anchors])
    # Spaced by seen distance, not by count: no anchor shows as a band.
    lengths = np.linalg.norm(np.diff(points, axis=0), axis=1)
    along = np.concatenate([[0.0], np.cumsum(lengths)])
    wanted = np.linspace(0, along[-1], levels)
    mixed = np.stack([np.interp(wanted, along, points[:, i]) for i in range(3)], axis=-1)
    return _pack(_rgb(mixed))


def _pack(rgb: RealArray) -> ColourTable:
    """Pack colours in 0..1, shape (..., 3), into pixels."""
    pixels = np.full((*rgb.shape[:-1], 4), 255, np.uint8)
    pixels[..., :3] = np.rint(255 * np.clip(rgb, 0, 1))
    return pixels.view(np.uint32)[..., 0]


_TO_CONES: Final = np.array(
    [
        [0.4122214708, 0.5363325363, 0.0514459929],
        [0.2119034982, 0.6806995451, 0.1073969566],
        [0.0883024619, 0.2817188376, 0.6299787005],
    ]
)
_TO_LAB: Final = np.array(
    [
        [0.2104542553, 0.7936177850, -0.0040720468],
        [1.9779984951, -2.4285922050, 0.4505937099],
        [0.0259040371, 0.7827717662, -0.8086757660],
    ]
)


def oklab(colour: str) -> RealArray:
    """Return the OKLab coordinates of one ``#rrggbb`` colour [Ottosson2020]_."""
    srgb = np.array([int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)])
    linear = np.where(srgb > 0.04045, ((srgb + 0.055) / 1.055) ** 2.4, srgb / 12.92)
    return np.asarray(_TO_LAB @ np.cbrt(_TO_CONES @ linear))


def _rgb(lab: RealArray) -> RealArray:
    """Return sRGB colours in 0..1 of OKLab coordinates, shape (..., 3)."""
    cones = (lab @ np.linalg.inv(_TO_LAB).T) ** 3
    linear = np.clip(cones @ np.linalg.inv(_TO_CONES).T, 0, 1)
    return np.where(linear > 0.0031308, 1.055 * linear ** (1 / 2.4) - 0.055, 12.92 * linear)

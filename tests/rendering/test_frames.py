"""Painted frames: the right thing at the right pixel."""

import dataclasses
import time
from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from wavepack.errors import UsageError
from wavepack.rendering import style
from wavepack.rendering.canvas import Canvas, Rect, polyline
from wavepack.rendering.frames import KINDS, picture_of
from wavepack.rendering.line_picture import LinePicture
from wavepack.rendering.line_structure import intervals, named_bars
from wavepack.rendering.map_picture import MapPicture
from wavepack.rendering.scene import Curves, Frames, Region, Scene, time_format

MakeCase = Callable[..., tuple[Scene, Frames, Curves]]

SMALL = (640, 360)


def blueish(pixels: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """Tell where a pixel is clearly bluer than red."""
    return np.asarray(pixels[..., 2].astype(int) - pixels[..., 0] > 60)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("size", [(240, 160), (501, 333)])
def test_every_kind_paints_at_every_size(
    line: MakeCase, plane: MakeCase, kind: str, size: tuple[int, int]
) -> None:
    """Frames differ from each other and have exactly the size asked for."""
    for scene, frames, curves in (line(256, 3), plane((48, 32), 3)):
        picture = picture_of(scene, frames, curves, kind=kind, size=size)
        first, last = (picture.paint(frames.times[i], frames.read(i)).copy() for i in (0, 2))
        assert first.shape == (size[1], size[0], 4)
        assert np.all(first[..., 3] == 255)
        assert np.any(first != last)


def test_the_same_frame_paints_the_same_pixels(line: MakeCase) -> None:
    """Nothing of an earlier frame stays behind."""
    scene, frames, curves = line(256, 3)
    picture = picture_of(scene, frames, curves, size=SMALL)
    first = picture.paint(0.0, frames.read(0)).copy()
    picture.paint(120.0, frames.read(1))
    assert np.array_equal(picture.paint(0.0, frames.read(0)), first)


def test_the_packet_stands_at_its_place(line: MakeCase) -> None:
    """The column of the curve's top is the packet's centre on the axis."""
    scene, frames, _ = line(512, 3)
    bare = dataclasses.replace(
        scene, regions=(), detectors=(), layers=(), potential=np.zeros(512), mean_energy=None
    )
    x = scene.coordinates[0]
    still = Frames(frames.times, lambda _: np.exp(-((x - 50.0) ** 2) / 200))
    picture = picture_of(bare, still, size=SMALL)
    assert isinstance(picture, LinePicture)
    panel = picture.panel
    painted = blueish(picture.paint(0.0, still.read(0)))[panel.slices]
    top = np.flatnonzero(painted.any(axis=1))[0]
    column = float(np.mean(np.flatnonzero(painted[top])))
    assert abs((column + 0.5) / panel.width * 300 - 150 - 50.0) < 1.0


def test_the_map_shows_x_to_the_right_and_y_upward(plane: MakeCase) -> None:
    """A spot at positive x and y is painted in the upper right quarter."""
    scene, frames, _ = plane((60, 40), 2)
    bare = Scene(scene.coordinates, np.zeros((60, 40)))
    spot = np.zeros((60, 40))
    spot[45, 30] = 1.0
    picture = picture_of(bare, Frames(frames.times, lambda _: spot), size=SMALL)
    assert isinstance(picture, MapPicture)
    panel = picture.panel
    dark = picture.paint(0.0, spot)[panel.slices][2:-2, 2:-2].sum(axis=-1)
    row, column = np.unravel_index(int(dark.argmin()), dark.shape)
    assert abs(column / panel.width - 45.5 / 60) < 0.02
    assert abs(row / panel.height - (1 - 30.5 / 40)) < 0.02


def test_the_map_keeps_proportions(plane: MakeCase) -> None:
    """A length is as long along x as along y, to a pixel, beside and below the strip."""
    scene, frames, curves = plane((60, 40), 2)
    for size in ((1280, 720), (720, 1280), (400, 400)):
        picture = picture_of(scene, frames, curves, size=size)
        assert isinstance(picture, MapPicture)
        panel = picture.panel
        assert abs(panel.width / panel.height - 120 / 90) < 2 / panel.height


def test_phase_turns_the_colours(plane: MakeCase) -> None:
    """A quarter turn of the phase shifts the colour by a quarter of the circle."""
    scene, frames, _ = plane((20, 20), 2)
    bare = Scene(scene.coordinates, np.zeros((20, 20)))
    for quarter in range(4):
        flat = np.full((20, 20), 1j**quarter * np.exp(0.01j))
        picture = picture_of(bare, Frames(frames.times, [flat, flat].__getitem__), kind="phase")
        assert isinstance(picture, MapPicture)
        panel = picture.panel
        painted = picture.paint(0.0, flat).view(np.uint32)[..., 0]
        found = painted[panel.top + panel.height // 2, panel.left + panel.width // 2]
        assert found == style.phase_table()[-1, 64 * quarter]


def test_sharp_peaks_survive_thinning() -> None:
    """A curve of many points keeps its highest and lowest value, and stays short."""
    values = np.zeros(100_000)
    values[51_234], values[70_001] = 1.0, -1.0
    across, thinned = polyline(np.linspace(0, 500, 100_000), values, 500)
    assert len(thinned) <= 1002
    assert thinned.max() == 1.0
    assert thinned.min() == -1.0
    assert np.all(np.diff(across) >= 0)


def test_lines_stay_inside_their_panel() -> None:
    """What is drawn beyond the panel is cut at its edge."""
    canvas = Canvas(np.full((60, 80, 4), 255, np.uint8))
    canvas.clear()
    clip = Rect(20, 10, 40, 30)
    canvas.line(np.array([[0.0, 25.0], [80.0, 25.0]]), "#000000", 4, clip)
    rows, columns = np.nonzero(canvas.pixels[..., 0] < 250)
    assert columns.min() == 20
    assert columns.max() == 59
    assert set(rows) == {23, 24, 25, 26}


def test_painting_is_fast(line: MakeCase, plane: MakeCase) -> None:
    """A full-size frame takes well below the tenth of a second of a plot drawn anew."""
    for scene, frames, curves in (line(2048, 2), plane((256, 192), 2)):
        picture, frame = picture_of(scene, frames, curves), frames.read(1)
        start = time.process_time()
        for _ in range(5):
            picture.paint(0.0, frame)
        assert (time.process_time() - start) / 5 < 0.1


def test_user_text_is_never_read_as_a_formula(line: MakeCase) -> None:
    """Titles and names with dollar signs, backslashes and letters of any script are drawn."""
    scene, frames, curves = line(128, 2)
    odd = dataclasses.replace(
        scene, title=r"$\frac{ 波束", regions=(Region("$a_b", "none", {"x": (0, 100)}),)
    )
    picture_of(odd, frames, curves, size=SMALL)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"kind": "colour"}, "density, real, phase"),
        ({"power": 0.0}, "power: need more than 0"),
        ({"size": (100, 100)}, "size: need 240x160"),
        ({"size": (99999, 400)}, "size: need 240x160"),
    ],
)
def test_bad_options_are_named(line: MakeCase, options: dict[str, object], message: str) -> None:
    """Each bad option is refused with what is wanted."""
    scene, frames, curves = line(64, 2)
    with pytest.raises(UsageError, match=message):
        picture_of(scene, frames, curves, **options)  # type: ignore[arg-type]


@pytest.mark.parametrize("kind", ["real", "phase"])
def test_a_stored_density_has_no_phase(line: MakeCase, kind: str) -> None:
    """Asking for the wave where the density was stored names the key to set."""
    scene, frames, _ = line(64, 2)
    densities = Frames(frames.times, lambda i: np.abs(frames.read(i)) ** 2)
    with pytest.raises(UsageError, match=r"output\.store"):
        picture_of(scene, densities, kind=kind)


def test_a_mask_becomes_intervals() -> None:
    """Points of a region given by an expression join to whole cells."""
    x = np.arange(10.0)
    scene = Scene((x,), np.zeros(10))
    region = Region("two", mask=(x < 2.5) | (x > 7.5))
    assert intervals(region, scene) == [(-0.5, 2.5), (7.5, 9.5)]


def test_time_stamps_keep_their_width() -> None:
    """All stamps of a movie are equally long and show steps apart."""
    stamp = time_format(np.linspace(0, 1200, 200), "fs")
    texts = {stamp(t) for t in np.linspace(0, 1200, 200)}
    assert len({len(text) for text in texts}) == 1
    assert len(texts) == 200
    assert stamp(1200.0) == "t = 1200.0 fs"


def test_a_narrow_bar_is_named_where_there_is_room() -> None:
    """A name wider than its bar is centred over it unless another name stands there."""
    wide = [(0.0, 300.0, "emitter", "red"), (340.0, 640.0, "collector", "blue")]
    narrow = (310.0, 320.0, "well", "green")
    panel = Rect(0, 0, 640, 100)
    assert [name for _, name, _ in named_bars([*wide, narrow], 12, panel)] == [
        "emitter", "collector", "well",
    ]  # fmt: skip
    crowded = (312.0, 322.0, "hut", "brown")
    places = {name: place for place, name, _ in named_bars([*wide, narrow, crowded], 12, panel)}
    assert places["well"] == 315.0
    assert "hut" not in places

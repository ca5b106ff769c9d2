"""Boxes and labels of planes of any proportions: nothing overlaps, nothing is wasted."""

import dataclasses
import itertools
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from wavepack.rendering import style
from wavepack.rendering.canvas import Rect, Sheet
from wavepack.rendering.figures import write_overview
from wavepack.rendering.map_layout import layout_of
from wavepack.rendering.page_layout import EM, arrange
from wavepack.rendering.scales import PowerScale, numbers
from wavepack.rendering.scene import Curves, Frames, Scene
from wavepack.rendering.ticks import round_numbers

MakeCase = Callable[..., tuple[Scene, Frames, Curves]]

ASPECTS = [(12.0, 1.0), (6.0, 1.0), (2.4, 1.0), (1.0, 1.0), (1.0, 2.0), (1.0, 6.0), (1.0, 12.0)]


def apart(boxes: list[Rect], gap: int) -> bool:
    """Tell whether boxes leave so many pixels between each other."""
    return all(
        one.right + gap <= other.left
        or other.right + gap <= one.left
        or one.bottom + gap <= other.top
        or other.bottom + gap <= one.top
        for one, other in itertools.combinations(boxes, 2)
    )


@pytest.mark.parametrize("with_curves", [True, False])
@pytest.mark.parametrize("spans", ASPECTS)
def test_a_page_suits_every_domain(spans: tuple[float, float], with_curves: bool) -> None:  # noqa: FBT001 - parametrised
    """Maps keep their proportions, all boxes stand apart on the page and fill a good part."""
    layout = arrange(spans, 130.0, 2 * EM, with_curves=with_curves)
    width, height = layout.size
    boxes = [*layout.maps, layout.bar, *([layout.curves] if layout.curves else [])]
    assert apart(boxes, round(0.8 * EM))
    assert min(box.left for box in boxes) >= 3 * EM
    assert min(box.top for box in boxes) >= 3 * EM
    assert max(box.right for box in boxes) < width
    assert max(box.bottom for box in boxes) <= height - 3 * EM
    for panel in layout.maps:
        assert panel.width / panel.height == pytest.approx(spans[0] / spans[1], rel=0.02)
    assert sum(box.width * box.height for box in boxes) > 0.3 * width * height


@pytest.mark.parametrize("with_strip", [True, False])
@pytest.mark.parametrize("size", [(1280, 720), (720, 1280), (640, 360)])
@pytest.mark.parametrize("spans", ASPECTS)
def test_a_movie_suits_every_domain(
    spans: tuple[float, float],
    size: tuple[int, int],
    with_strip: bool,  # noqa: FBT001 - parametrised
) -> None:
    """Map, bar and strip stand apart within the picture."""
    sheet = Sheet(size)
    layout = layout_of(sheet, spans, round(1.2 * sheet.em), with_strip=with_strip)
    boxes = [box for box in (layout.panel, layout.bar, layout.strip) if box is not None]
    assert apart(boxes, round(0.8 * sheet.em))
    assert all(box.left > 0 and box.right < size[0] for box in boxes)
    assert all(2 * sheet.em <= box.top and box.bottom < size[1] - 2 * sheet.em for box in boxes)
    assert layout.right <= size[0]
    long = max(layout.panel.width / size[0], layout.panel.height / size[1])
    assert long > (0.45 if with_strip else 0.6)


@pytest.mark.parametrize("length", [30, 90, 300, 1200])
@pytest.mark.parametrize("ends", [(-400.0, 240.0), (0.0, 1.0), (1e5, 1.0002e5), (-3e-7, 8e-7)])
def test_labels_never_touch(ends: tuple[float, float], length: int) -> None:
    """Along and up an axis of any length, labels have room between them."""
    values, texts = round_numbers(*ends, length, 15, upright=False)
    places = [(value - ends[0]) / (ends[1] - ends[0]) * length for value in values]
    halves = [style.text_width(text, 15) / 2 for text in texts]
    assert texts
    assert len(set(texts)) == len(texts)
    for i in range(len(texts) - 1):
        assert places[i + 1] - halves[i + 1] - places[i] - halves[i] >= 15
    upward = round_numbers(*ends, length, 15, upright=True)[0]
    assert np.all(np.diff(upward) / (ends[1] - ends[0]) * length >= 1.6 * 15)


def test_labels_of_one_axis_share_their_decimals() -> None:
    """Multiples of a step are written alike; zero has no sign."""
    assert round_numbers(-1.0, 1.0, 300, 15, upright=False)[1] == [
        f"{style.MINUS}1.0",
        f"{style.MINUS}0.5",
        "0.0",
        "0.5",
        "1.0",
    ]
    assert numbers([0.0, 5e-5, 1e-3]) == ["0", "5·10⁻⁵", "1·10⁻³"]
    assert numbers([0.0, 5e-4, 1e-3]) == ["0", "0.0005", "0.001"]


@pytest.mark.parametrize("gap", [0.04, 0.2, 0.45])
@pytest.mark.parametrize("peak", [1.3e-3, 0.999, 47.0])
def test_bar_labels_stand_apart(peak: float, gap: float) -> None:
    """Labels of a colour bar keep the distance asked for, at any power."""
    for power in (1.0, 0.5, 0.3):
        scale = PowerScale(peak, power)
        places = scale(np.array(scale.ticks(gap)))
        assert np.all(np.diff(places) >= gap * (1 - 1e-4))


@pytest.mark.parametrize("spans", ASPECTS)
def test_overview_of_every_domain_is_whole(
    plane: MakeCase, tmp_path: Path, spans: tuple[float, float]
) -> None:
    """Domains long, square and tall are drawn with nothing cut, on a page not mostly empty."""
    scene, frames, curves = plane((64, 48), 5)
    x, y = (np.linspace(-60, 60, n) * span for n, span in zip((64, 48), spans, strict=True))
    scene = dataclasses.replace(scene, coordinates=(x, y), layers=(), detectors=())
    path = write_overview(scene, frames, curves, tmp_path / "page.png")
    with Image.open(path) as image:
        pixels = np.asarray(image.convert("L"))
    for edge in (pixels[:2], pixels[-2:], pixels[:, :2], pixels[:, -2:]):
        assert np.all(edge == 255)
    # No band of the page is empty for long.
    for axis in (0, 1):
        filled = np.flatnonzero((pixels < 255).any(axis=axis))
        assert np.max(np.diff(filled)) < 5 * EM


def test_the_last_map_shows_something(plane: MakeCase, tmp_path: Path) -> None:
    """After the packet has gone, the page ends with the time when it could still be seen."""
    scene, frames, _ = plane((32, 24), 9)
    faded = Frames(frames.times, lambda i: frames.read(i) * (1.0 if i < 5 else 1e-4))
    cut = Frames(frames.times[:5], frames.read)
    pages = [
        write_overview(scene, shown, None, tmp_path / f"{i}.png").read_bytes()
        for i, shown in enumerate((faded, cut))
    ]
    assert pages[0] == pages[1]


def test_things_without_a_role_differ() -> None:
    """Each has a colour and dashes of its own, also beside others with a role."""
    found = style.looks(["none", "transmitted", "none", "none", "reflected"])
    assert found[1] == style.ROLES["transmitted"]
    assert found[4] == style.ROLES["reflected"]
    assert len(set(found)) == 5
    assert len({colour for colour, _ in found}) == 5

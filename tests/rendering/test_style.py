"""Colour tables: even steps, order of lightness, white where nothing is."""

from typing import Any

import numpy as np
import numpy.typing as npt

from wavepack.rendering import style

WHITE = 0xFFFFFFFF


def lab(pixels: style.ColourTable) -> npt.NDArray[Any]:
    """Convert packed colours to OKLab."""
    flat = style.table_image(pixels).reshape(-1, 4)
    return np.array([style.oklab(f"#{r:02x}{g:02x}{b:02x}") for r, g, b, _ in flat])


def test_every_table_starts_from_the_paper() -> None:
    """No density is white, in every picture."""
    assert style.density_table()[0] == WHITE
    assert style.signed_table()[style.LEVELS // 2] == WHITE
    assert np.all(style.phase_table()[0] == WHITE)


def test_density_darkens_evenly() -> None:
    """Lightness falls all the way, so grey prints and any eye read the order."""
    lightness = lab(style.density_table()[::32])[:, 0]
    assert np.all(np.diff(lightness) < 0)
    assert lightness[-1] < 0.25


def test_phase_steps_are_even_and_close_the_circle() -> None:
    """Equal steps of phase differ by equal steps of colour, the last to the first too."""
    circle = lab(style.phase_table()[-1])[::32]
    steps = np.linalg.norm(np.roll(circle, -1, axis=0) - circle, axis=1)
    assert steps.max() / steps.min() < 1.1


def test_phase_is_a_circle_without_the_red_green_direction() -> None:
    """Lightness and blue-yellow alone still tell opposite phases apart."""
    circle = lab(style.phase_table()[-1])[:, [0, 2]]
    opposite = np.linalg.norm(circle - np.roll(circle, len(circle) // 2, axis=0), axis=1)
    assert opposite.min() > 0.1


def test_oklab_round_trip() -> None:
    """Packing a colour gives back its bytes."""
    for colour in (style.PACKET, style.POTENTIAL, style.PAPER, "#010203"):
        red, green, blue = (int(colour[i : i + 2], 16) for i in (1, 3, 5))
        image = style.table_image(np.array([style.packed(colour)], np.uint32))
        assert image[0].tolist() == [red, green, blue, 255]

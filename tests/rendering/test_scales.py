"""Scales, tick labels and energy windows."""

import numpy as np
import pytest

from wavepack.errors import UsageError
from wavepack.rendering import style
from wavepack.rendering.scales import PowerScale, energy_window, highest_density, number
from wavepack.rendering.scene import Frames


def test_power_scale_is_the_power_of_the_share_of_the_peak() -> None:
    """A sixteenth of the peak stands at a quarter with power 1/2, and signs are kept."""
    scale = PowerScale(4.0, 0.5)
    assert scale(np.array([0.0, 0.25, 4.0, -0.25])).tolist() == [0.0, 0.25, 1.0, -0.25]


def test_power_scale_cuts_at_the_peak_and_blanks_what_is_no_number() -> None:
    """Values beyond the peak stand at 1, not-a-number at an end of the scale, never outside."""
    values = PowerScale(1.0, 0.5)(np.array([7.0, -7.0, np.inf, np.nan]))
    assert np.all(np.abs(values) <= 1)


@pytest.mark.parametrize("power", [0.25, 0.5, 1.0])
@pytest.mark.parametrize("peak", [3e-9, 0.0497, 1.0, 812.0])
def test_ticks_are_apart_and_within_the_scale(power: float, peak: float) -> None:
    """Tick labels have the room asked for and end at or below the peak."""
    scale = PowerScale(peak, power)
    ticks = np.array(scale.ticks(0.1))
    places = (ticks / peak) ** power
    assert ticks[0] == 0
    assert len(ticks) >= 3
    assert places[-1] <= 1 + 1e-9
    assert np.diff(places).min() >= 0.1 - 1e-9


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"),
        (0.05, "0.05"),
        (-20.0, f"{style.MINUS}20"),
        (2e-5, "2·10⁻⁵"),
        (-3e7, f"{style.MINUS}3·10⁷"),
    ],
)
def test_numbers_are_written_shortly(value: float, text: str) -> None:
    """Ticks far from one carry a power of ten."""
    assert number(value) == text


def test_energy_window_cuts_a_confinement_but_not_a_barrier() -> None:
    """A barrier shows whole; a parabola far above the packet's energy does not."""
    barrier = np.where(np.abs(np.linspace(-1, 1, 99)) < 0.1, 0.3, 0.0)
    low, high = energy_window(barrier, 0.15)
    assert low == 0
    assert high > 0.3
    assert energy_window(np.linspace(-10, 10, 99) ** 2, 0.5)[1] < 15


def test_energy_window_of_nothing_is_not_empty() -> None:
    """Without potential and energy there is still an axis to draw."""
    low, high = energy_window(np.zeros(5), None)
    assert high > low


def test_highest_density_is_found_over_all_frames() -> None:
    """The scale is that of the highest frame, whatever is not a number left out."""
    stored = [np.array([1.0, 2.0]), np.array([np.nan, 9.0]), np.array([3.0, 0.0])]
    assert highest_density(Frames(np.arange(3.0), stored.__getitem__)) == 9.0
    assert highest_density(Frames(np.arange(1.0), lambda _: np.zeros(4))) == 1.0


def test_no_frames_is_the_users_fault() -> None:
    """Without frames the message names the key of the scenario."""
    with pytest.raises(UsageError, match=r"output\.frames"):
        highest_density(Frames(np.empty(0), lambda _: np.zeros(4)))

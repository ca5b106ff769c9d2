"""Free packets and simple structures, computed in closed form for the pictures."""

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from wavepack.rendering.scene import (
    Curve,
    Curves,
    Detector,
    Frames,
    Layer,
    Region,
    Scene,
    Units,
)

UNITS = Units("nm", "eV", "fs")


def gaussian(
    x: npt.NDArray[Any], t: float, center: float, sigma: float, k: float
) -> npt.NDArray[Any]:
    """Return a free packet of hbar = m = 1 that starts at ``center`` with width ``sigma``."""
    width = sigma * (1 + 0.5j * t / sigma**2)
    place = x - center - k * t
    phase = k * (x - center) - 0.5 * k**2 * t
    height = (2 * np.pi) ** -0.25 * np.sqrt(sigma / width) / np.sqrt(sigma)
    return np.asarray(height * np.exp(-(place**2) / (4 * sigma * width) + 1j * phase))


def passing(times: npt.NDArray[Any]) -> Curves:
    """Return a transmission that sets in half way, and the rest reflected or held."""
    through = 0.35 / (1 + np.exp(-(times - 0.5 * times[-1]) / (0.06 * times[-1])))
    back = 0.6 / (1 + np.exp(-(times - 0.45 * times[-1]) / (0.05 * times[-1])))
    return Curves(
        times,
        (
            Curve("transmitted", "transmitted", through),
            Curve("reflected", "reflected", back),
            Curve("held", "held", 1 - through - back),
        ),
    )


def line_case(points: int = 1024, frames: int = 60) -> tuple[Scene, Frames, Curves]:
    """Return a packet that runs over a barrier; part of it turns back."""
    x = np.linspace(-150, 150, points, endpoint=False)
    times = np.linspace(0, 240, frames)
    scene = Scene(
        (x,),
        np.where(np.abs(x) < 6, 0.3, 0.0) + np.where(np.abs(x - 40) < 8, -0.08, 0),
        UNITS,
        title="One barrier in a wire",
        regions=(
            Region("source", "reflected", {"x": (-np.inf, -20)}),
            Region("drain", "transmitted", {"x": (60, np.inf)}),
        ),
        detectors=(Detector("exit", "x", 80.0, "+x"), Detector("entry", "x", -15.0, "-x")),
        layers=(Layer("x", -150, -120), Layer("x", 120, 150)),
        mean_energy=0.153,
    )

    def read(i: int) -> npt.NDArray[Any]:
        t = times[i]
        psi = gaussian(x, t, -70, 8, 0.8)
        back = gaussian(-x, t, -70, 8, 0.8)
        return np.where(x < -6, psi + np.where(t > 60, 0.8, 0.0) * back, 0.5 * psi)

    return scene, Frames(times, read), passing(np.linspace(0, 240, 1500))


def map_case(shape: tuple[int, int] = (256, 192), frames: int = 40) -> tuple[Scene, Frames, Curves]:
    """Return a packet in a plane and a screen with two slits."""
    x = np.linspace(-60, 60, shape[0], endpoint=False)
    y = np.linspace(-45, 45, shape[1], endpoint=False)
    times = np.linspace(0, 90, frames)
    wall = np.abs(x)[:, None] < 2
    open_ = (np.abs(np.abs(y) - 10) < 4)[None, :]
    scene = Scene(
        (x, y),
        np.where(wall & ~open_, 0.6, 0.0),
        UNITS,
        title="Two slits",
        regions=(
            Region("left", "reflected", {"x": (-np.inf, -6)}),
            Region("upper", "transmitted", {"x": (6, np.inf), "y": (0, np.inf)}),
            Region("lower", "transmitted", {"x": (6, np.inf), "y": (-np.inf, 0)}),
        ),
        detectors=(Detector("far", "x", 30.0, "+x", (-30, 30)),),
        layers=(
            Layer("x", -60, -48),
            Layer("x", 48, 60),
            Layer("y", -45, -36),
            Layer("y", 36, 45),
        ),
        mean_energy=0.3,
    )

    def read(i: int) -> npt.NDArray[Any]:
        t = times[i]
        along = gaussian(x, t, -35, 6, 0.8)
        sides = gaussian(y, t, -10, 5, 0.0) + gaussian(y, t, 10, 5, 0.0)
        return np.asarray(along[:, None] * sides[None, :])

    return scene, Frames(times, read), passing(np.linspace(0, 90, 800))


Case = tuple[Scene, Frames, Curves]


@pytest.fixture
def line() -> Callable[..., Case]:
    """Return the maker of one-dimensional cases."""
    return line_case


@pytest.fixture
def plane() -> Callable[..., Case]:
    """Return the maker of two-dimensional cases."""
    return map_case

"""A small run to lay out and rows to append to it."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from wavepack.archive.layout import RunPlan
from wavepack.archive.writer import RunWriter
from wavepack.arrays import ComplexArray

UNITS = {"length": "nm", "energy": "eV", "time": "fs", "mass": "m_e"}


def small_plan(**changes: object) -> RunPlan:
    """Return the plan of a run on 6 by 4 points."""
    x, y = np.linspace(-1.0, 1.0, 6), np.linspace(0.0, 3.0, 4)
    settings: dict[str, Any] = {
        "title": "Small",
        "scenario_text": 'title = "Small"\n',
        "wavepack_version": "0.0",
        "units": UNITS,
        "axes": {"x": x, "y": y},
        "potential": np.outer(x, y),
        "series": ("norm", "x", "autocorrelation"),
        "regions": ("drain",),
        "detectors": {"exit": np.linspace(0.1, 0.3, 5), "plain": None},
        "momentum": {"x": np.linspace(-2, 2, 6), "y": np.linspace(-2, 2, 4)},
        "facts": {"drive": False, "absorber": [["x", -1.0, -0.5]]},
    }
    return RunPlan(**(settings | changes))


@pytest.fixture
def make_plan() -> Callable[..., RunPlan]:
    """Give tests the small plan, with changes."""
    return small_plan


def frame_of(row: int) -> ComplexArray:
    """Return the state that belongs to a row."""
    state: ComplexArray = (row + 1) * np.exp(1j * np.arange(24.0).reshape(6, 4))
    return state


def append_row(writer: RunWriter, row: int) -> None:
    """Append one frame and one row everywhere, with values that depend on the row alone."""
    writer.append_series(
        {"time": row, "norm": row + 0.5, "x": -row, "autocorrelation": row + 1 + 2j}
    )
    writer.append_region("drain", row, 1 / (row + 1))
    writer.append_detector("exit", [row, row + 0.5], [row + 1, row + 2])
    writer.append_detector("plain", row, row + 3)
    writer.append_frame(row, frame_of(row))
    writer.flush()


@pytest.fixture
def append() -> Callable[[RunWriter, int], None]:
    """Give tests the appending of one row."""
    return append_row


@pytest.fixture
def frame() -> Callable[[int], ComplexArray]:
    """Give tests the state of a row."""
    return frame_of

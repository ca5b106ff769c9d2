"""Axes: where points stand and which waves they carry."""

import numpy as np
import pytest

from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid


def test_periodic_points_start_at_the_start() -> None:
    """A periodic axis holds its start and not its stop."""
    axis = Axis("x", -1.0, 1.0, 8, ("periodic", "periodic"))
    assert axis.spacing == 0.25
    assert axis.coordinates[0] == -1.0
    assert axis.coordinates[-1] == 0.75


def test_walls_stand_outside_the_points() -> None:
    """With a wall at either end the points are the interior ones."""
    axis = Axis("x", 0.0, 1.0, 9, ("walls", "absorbing"))
    assert axis.basis == "sine"
    assert axis.coordinates == pytest.approx(np.arange(1, 10) / 10)
    assert axis.wavenumbers[0] == pytest.approx(np.pi)


def test_walled_axis_keeps_its_points() -> None:
    """Closing absorbing ends by walls drops the first point and moves no other."""
    axis = Axis("x", -2.0, 3.0, 10)
    walled = axis.walled()
    assert walled.basis == "sine"
    assert walled.coordinates == pytest.approx(axis.coordinates[1:])


@pytest.mark.parametrize(
    ("start", "stop", "points", "ends"),
    [
        (1.0, 1.0, 8, ("walls", "walls")),
        (0.0, 1.0, 0, ("walls", "walls")),
        (0.0, 1.0, 8, ("periodic", "walls")),
    ],
)
def test_senseless_axes_are_refused(
    start: float, stop: float, points: int, ends: tuple[str, str]
) -> None:
    """An empty axis, no points, or a lone periodic end is an error that names the axis."""
    with pytest.raises(ValueError, match="axis x"):
        Axis("x", start, stop, points, ends)  # type: ignore[arg-type]  # pairs come as text here


def test_grid_measures() -> None:
    """Cell volume, names and inner product are those of the product of axes."""
    grid = Grid((Axis("x", 0, 1, 4), Axis("y", 0, 2, 8)))
    assert grid.cell == pytest.approx(0.25 * 0.25)
    assert grid.index("y") == 1
    with pytest.raises(KeyError):
        grid.index("z")
    psi = np.full(grid.shape, 1 + 1j)
    assert grid.norm(psi) == pytest.approx(2 * 2.0)
    assert grid.inner(psi, 1j * psi) == pytest.approx(4j)
    assert grid.walled().shape == (3, 7)

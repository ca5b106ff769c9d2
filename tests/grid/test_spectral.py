"""Transforms: exact on what the grid can carry."""

import numpy as np
import pytest

from tests.tolerances import TRANSFORM
from wavepack.arrays import ComplexArray
from wavepack.grid import spectral
from wavepack.grid.axis import Axis, End
from wavepack.grid.grid import Grid

ENDS: list[tuple[End, End]] = [("periodic", "periodic"), ("walls", "absorbing")]


def packet(x: np.ndarray) -> ComplexArray:
    """Return a Gaussian with a momentum, far from both ends."""
    return np.exp(-((x - 0.5) ** 2) / 0.3 + 2j * x)


def packet_slope(x: np.ndarray) -> ComplexArray:
    """Its derivative."""
    return packet(x) * (2j - 2 * (x - 0.5) / 0.3)


@pytest.mark.parametrize("ends", ENDS)
@pytest.mark.parametrize("points", [64, 65])
def test_round_trip_and_norm(ends: tuple[End, End], points: int) -> None:
    """Forward and backward are inverse to each other and keep the norm."""
    axis = Axis("x", -3.0, 4.0, points, ends)
    psi = packet(axis.coordinates)
    coefficients = spectral.forward(psi, axis)
    assert np.vdot(coefficients, coefficients).real == pytest.approx(
        np.vdot(psi, psi).real, rel=TRANSFORM
    )
    assert np.abs(spectral.backward(coefficients, axis) - psi).max() < TRANSFORM


@pytest.mark.parametrize("ends", ENDS)
@pytest.mark.parametrize("points", [64, 65])
def test_slope_is_spectrally_exact(ends: tuple[End, End], points: int) -> None:
    """The slope of a resolved packet is exact, along either axis of a field."""
    axis = Axis("x", -3.0, 4.0, points, ends)
    psi, exact = packet(axis.coordinates), packet_slope(axis.coordinates)
    assert np.abs(spectral.slope(psi, axis) - exact).max() < 1e3 * TRANSFORM
    field = np.stack([psi, 2j * psi], axis=1)
    assert np.abs(spectral.slope(field, axis, 0)[:, 1] - 2j * exact).max() < 1e3 * TRANSFORM


@pytest.mark.parametrize("ends", ENDS)
@pytest.mark.parametrize("points", [64, 65])
def test_readout_between_points(ends: tuple[End, End], points: int) -> None:
    """Amplitude and slope are read exactly at positions between the points."""
    axis = Axis("x", -3.0, 4.0, points, ends)
    psi = packet(axis.coordinates)
    amplitude, slope = spectral.readout(axis, 0.7231, np.ones(points))
    assert abs(amplitude @ psi - packet(np.array(0.7231))) < 1e3 * TRANSFORM
    assert abs(slope @ psi - packet_slope(np.array(0.7231))) < 1e3 * TRANSFORM


def test_readout_drops_what_is_not_kept() -> None:
    """A plane wave outside the kept band reads as nothing, one inside as itself."""
    axis = Axis("x", 0.0, 2 * np.pi, 32, ("periodic", "periodic"))
    keep = (np.abs(axis.wavenumbers) < 4).astype(float)
    amplitude, _ = spectral.readout(axis, 1.1, keep)
    assert abs(amplitude @ np.exp(3j * axis.coordinates) - np.exp(3.3j)) < TRANSFORM
    assert abs(amplitude @ np.exp(5j * axis.coordinates)) < TRANSFORM


@pytest.mark.parametrize("ends", ENDS)
@pytest.mark.parametrize("other", ENDS)
def test_planned_pair_agrees_with_lines(ends: tuple[End, End], other: tuple[End, End]) -> None:
    """The planned in-place pair is the line transforms but for its constant."""
    grid = Grid((Axis("x", 0, 1, 12, ends), Axis("y", 0, 1, 9, other)))
    field = spectral.empty_field(grid.shape)
    pair = spectral.TransformPair(grid, field)
    rng = np.random.default_rng(1)
    start = rng.normal(size=grid.shape) + 1j * rng.normal(size=grid.shape)
    field[...] = start
    pair.forward()
    lines = spectral.forward(spectral.forward(start, grid.axes[0], 0), grid.axes[1], 1)
    assert np.abs(field - lines * np.sqrt(pair.norm)).max() < TRANSFORM * np.sqrt(pair.norm) * 10
    pair.backward()
    assert np.abs(field / pair.norm - start).max() < TRANSFORM


def test_planner_knowledge_can_be_given_back() -> None:
    """What the planner has measured survives forgetting and learning."""
    axis = Axis("x", 0, 1, 48)
    spectral.TransformPair(Grid((axis,)), spectral.empty_field((48,)))
    known = spectral.remember()
    assert spectral.learn(known, forget=True)
    assert len(spectral.remember().text) >= len(known.text)
    assert not spectral.learn(spectral.Knowledge(b"nonsense"))
    assert not spectral.learn(spectral.Knowledge())

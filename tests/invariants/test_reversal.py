"""Time runs backwards: conjugate, propagate as long again, conjugate."""

import math

import numpy as np
import pytest

from tests.invariants.scenes import IMPLICIT, LINE, METHODS, PLANE, SPLIT_2, SPLIT_4, ready
from tests.tolerances import REVERSED

STEPS = 20_000
HBAR = 0.6582119569509067


def distance_after_return(text: str, overrides: tuple[str, ...], steps: int) -> float:
    """Return how far the state is from its start after steps forth and back."""
    setup, stepper = ready(text, *overrides)
    start = stepper.psi.copy()
    stepper.advance(0, steps)
    away = setup.grid.norm(stepper.psi - start)
    assert away > 0.1, "the state must have gone somewhere"
    np.conj(stepper.psi, out=stepper.psi)
    stepper.advance(0, steps)
    np.conj(stepper.psi, out=stepper.psi)
    return math.sqrt(setup.grid.norm(stepper.psi - start))


@pytest.mark.parametrize("method", METHODS)
def test_a_static_line_returns(method: str) -> None:
    """20,000 steps forth and back in a static potential."""
    assert distance_after_return(LINE, METHODS[method], STEPS) < REVERSED


@pytest.mark.parametrize(
    ("overrides", "steps"),
    [
        pytest.param(SPLIT_2, STEPS, id="split-operator 2"),
        pytest.param(SPLIT_4, STEPS, id="split-operator 4"),
        pytest.param(IMPLICIT, 1000, id="crank-nicolson"),
        pytest.param(IMPLICIT, STEPS, id="crank-nicolson, long", marks=pytest.mark.full),
    ],
)
def test_a_symmetric_drive_returns(overrides: tuple[str, ...], steps: int) -> None:
    """With a drive that is the same backwards: whole periods of a cosine."""
    periods = steps // 100
    photon = 2 * math.pi * HBAR * periods / (steps * 0.5)
    driven = (*overrides, f"potential.hill.drive.photon_energy={photon!r}")
    assert distance_after_return(LINE, driven, steps) < REVERSED


@pytest.mark.parametrize(
    ("overrides", "steps"),
    [
        pytest.param(SPLIT_2, 2000, id="split-operator 2"),
        pytest.param(SPLIT_4, 2000, id="split-operator 4"),
        pytest.param(IMPLICIT, 500, id="crank-nicolson"),
        pytest.param(SPLIT_4, STEPS, id="split-operator 4, long", marks=pytest.mark.full),
        pytest.param(IMPLICIT, STEPS, id="crank-nicolson, long", marks=pytest.mark.full),
    ],
)
def test_the_plane_returns(overrides: tuple[str, ...], steps: int) -> None:
    """The same in two dimensions."""
    assert distance_after_return(PLANE, overrides, steps) < REVERSED

"""The norm stays where nothing absorbs."""

import pytest

from tests.invariants.scenes import IMPLICIT, LINE, METHODS, PLANE, SPLIT_4, ready
from tests.tolerances import norm

STEPS = 100_000
DRIVE = "potential.hill.drive.photon_energy=0.05"


@pytest.mark.parametrize("method", METHODS)
def test_norm_over_many_steps(method: str) -> None:
    """100,000 steps on a line move the norm by rounding alone."""
    setup, stepper = ready(LINE, *METHODS[method])
    stepper.advance(0, STEPS)
    assert setup.grid.norm(stepper.psi) == pytest.approx(1.0, abs=norm(STEPS))


@pytest.mark.parametrize(
    ("text", "overrides", "steps"),
    [
        pytest.param(LINE, (*SPLIT_4, DRIVE), 20_000, id="driven line"),
        pytest.param(PLANE, SPLIT_4, 10_000, id="plane, split operator"),
        pytest.param(PLANE, IMPLICIT, 2_000, id="plane, Crank-Nicolson"),
        pytest.param(LINE, (*IMPLICIT, DRIVE), 1_000, id="driven line, Crank-Nicolson"),
        pytest.param(LINE, (*IMPLICIT, "propagator.space_order=4"), 20_000, id="order 4 in space"),
        pytest.param(PLANE, SPLIT_4, STEPS, id="plane, many steps", marks=pytest.mark.full),
        pytest.param(
            LINE, (*SPLIT_4, DRIVE), STEPS, id="driven, many steps", marks=pytest.mark.full
        ),
    ],
)
def test_norm_in_other_settings(text: str, overrides: tuple[str, ...], steps: int) -> None:
    """So it does in the plane, with a drive, and with differences of order 4."""
    setup, stepper = ready(text, *overrides)
    stepper.advance(0, steps)
    assert setup.grid.norm(stepper.psi) == pytest.approx(1.0, abs=norm(steps))

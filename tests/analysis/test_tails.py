"""Slow tails: rates, refusals, and where the rest goes."""

import numpy as np
import pytest

from wavepack.analysis.tails import (
    Decay,
    decay_results,
    extrapolate,
    extrapolation_results,
    fit_decay,
)
from wavepack.arrays import RealArray

TIMES: RealArray = np.linspace(0.0, 100.0, 1001)
UNITS = {"time": "fs", "energy": "eV"}


def pure(rate: float = 0.05) -> RealArray:
    """Return an exponential decay."""
    decay: RealArray = 0.3 * np.exp(-rate * TIMES)
    return decay


def test_a_pure_decay_is_fitted_to_rounding() -> None:
    """Rate, lifetime and width come out exactly, over all of the run."""
    found = fit_decay(TIMES, pure())
    assert found.rate == pytest.approx(0.05, rel=1e-12)
    assert found.lifetime == pytest.approx(20.0, rel=1e-12)
    assert found.error is not None
    assert 0 < found.error < 1e-12
    results = decay_results(found, 0.6582, UNITS)
    assert results["width"]["value"] == pytest.approx(0.6582 * 0.05)
    assert results["rate"]["unit"] == "1/fs"
    assert results["rate"]["error"] is None
    assert results["lifetime"]["fit_error"] == pytest.approx(20 * found.error / 0.05)
    assert results["window"]["stop"]["value"] == 100.0


@pytest.mark.parametrize(
    "bend",
    [
        0.1 * np.exp(-TIMES / 5),
        0.1 * np.exp(-TIMES / 8),
        -0.2 * np.exp(-TIMES / 4),
        0.02 * pure() * np.cos(2 * TIMES),
        1e-5 * np.ones_like(TIMES),
    ],
    ids=["fast", "less-fast", "filling", "beat", "floor"],
)
def test_the_error_holds_the_truth(bend: RealArray) -> None:
    """Transients, beats and a floor shift the rate by less than its error."""
    found = fit_decay(TIMES, pure() + bend)
    assert found.rate is not None
    assert found.error is not None
    assert abs(found.rate - 0.05) < found.error < 0.1 * 0.05


def test_a_window_starts_where_the_decay_has_set_in() -> None:
    """A series that first fills is fitted after that; one that reaches rounding, before it."""
    filling = pure() * (1 - np.exp(-TIMES / 3))
    found = fit_decay(TIMES, filling)
    assert found.window is not None
    assert found.window[0] > 20
    steep = fit_decay(TIMES, pure(0.5) + 1e-17)
    assert steep.rate == pytest.approx(0.5, rel=1e-6)
    assert steep.window is not None
    assert steep.window[1] < 56


@pytest.mark.parametrize(
    ("values", "reason"),
    [
        (pure(0.005), "less than one e-folding"),
        (1 / (1 + TIMES) ** 3, "not exponential"),
        (1 / (1 + TIMES) ** 6, "not exponential"),
        (pure() + 0.02, "not exponential"),
        (np.ones_like(TIMES), "less than one e-folding"),
        (TIMES, "fewer than 16 records"),
        (np.zeros_like(TIMES), "fewer than 16 records"),
        (np.full_like(TIMES, np.nan), "fewer than 16 records"),
        (np.zeros(0), "fewer than 16 records"),
    ],
)
def test_what_does_not_decay_is_refused(values: RealArray, reason: str) -> None:
    """Power laws, remainders and flat series get a reason in place of a rate."""
    found = fit_decay(TIMES[: values.size], values)
    assert found.rate is None
    assert found.error is None
    assert reason in (found.reason or "")
    assert decay_results(found, 1.0, UNITS)["window"] is None


def test_the_rest_is_shared_like_the_tail() -> None:
    """Prompt parts go elsewhere than the tail; what is held goes where the tail does."""
    left = pure()[0] - pure()
    transmission, reflection, lost = 0.1 + 0.7 * left, 0.6 + 0.2 * left, 0.1 * left
    found = extrapolate(
        fit_decay(TIMES, pure()), TIMES, transmission, reflection, lost, float(pure()[-1])
    )
    assert found.transmission == pytest.approx(0.1 + 0.7 * 0.3, abs=1e-12)
    assert found.reflection == pytest.approx(0.6 + 0.2 * 0.3, abs=1e-12)
    assert found.transmission_error is not None
    assert found.transmission_error < 1e-12


def test_shares_that_change_make_the_error() -> None:
    """A slow drift of the branching stays within the error stated."""
    decay = fit_decay(TIMES, pure())
    change = -np.gradient(pure(), TIMES) * (0.7 + 0.001 * TIMES)
    transmission = np.concatenate(([0.0], np.cumsum((change[1:] + change[:-1]) / 2 * 0.1)))
    reflection = 0.3 - pure() - transmission
    held = float(pure()[-1])
    found = extrapolate(decay, TIMES, transmission, reflection, 0 * TIMES, held)
    assert found.transmission is not None
    assert found.transmission_error is not None
    end = transmission[-1] + held * 0.81
    assert abs(found.transmission - end) < found.transmission_error < 0.2 * held
    assert found.reflection == pytest.approx(0.3 - found.transmission)


def test_no_decay_no_extrapolation() -> None:
    """The reason is passed on; a tail of which nothing leaves has one of its own."""
    found = extrapolate(Decay(reason="flat"), TIMES, TIMES, TIMES, TIMES, 0.1)
    assert extrapolation_results(found)["transmission"]["value"] is None
    assert found.reason == "held: flat"
    still = 0 * TIMES
    nothing = extrapolate(fit_decay(TIMES, pure()), TIMES, still, still, still, 0.1)
    assert "nothing measurable" in (nothing.reason or "")

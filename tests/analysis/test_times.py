"""Times at a plane, in a region and by energy, against closed forms."""

from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.running.conftest import TEXT, small
from wavepack import workflow
from wavepack.analysis.times import (
    crossing,
    crossing_distribution,
    crossing_results,
    dwell_results,
    dwell_time,
    free_crossing_time,
    phase_times,
)
from wavepack.arrays import ComplexArray, RealArray
from wavepack.scenario.load import parse_scenario

HBAR = 0.6582119569509
STIFFNESS = 0.0380998211097 / 0.067


def test_crossing_times_of_a_gaussian_flux() -> None:
    """Mean, median and standard deviation of a Gaussian in time are its own."""
    times = np.linspace(0.0, 100.0, 2001)
    flux = 0.2 * np.exp(-((times - 42.0) ** 2) / (2 * 5.0**2))
    found = crossing(times, flux)
    assert found.mean == pytest.approx(42.0, abs=1e-9)
    assert found.median == pytest.approx(42.0, abs=1e-9)
    assert found.spread == pytest.approx(5.0, abs=1e-9)
    assert np.trapezoid(crossing_distribution(times, flux), times) == pytest.approx(1.0)


def test_median_of_straight_lines_is_exact() -> None:
    """The median of a triangular flux lies where its area is halved."""
    times = np.array([0.0, 1.0, 3.0])
    assert crossing(times, np.array([0.0, 1.0, 0.0])).median == pytest.approx(3 - np.sqrt(3))
    assert crossing(times, np.array([1.0, 1.0, 1.0])).median == pytest.approx(1.5)


def test_nothing_crossing_has_no_times() -> None:
    """Without a net flux there is no distribution."""
    with pytest.raises(ValueError, match="crossed: need more than 0 on balance"):
        crossing(np.array([0.0, 1.0]), np.zeros(2))


def test_dwell_time_of_a_decay_is_its_lifetime() -> None:
    """A probability that decays from 1 stays for its lifetime."""
    times = np.linspace(0.0, 600.0, 6001)
    assert dwell_time(times, np.exp(-times / 20)) == pytest.approx(20.0, rel=1e-5)


def test_dwell_times_that_mean_nothing_are_refused() -> None:
    """In a region that reaches into an absorbing layer there is a reason instead."""
    assert dwell_results(3.0, 0.0, "fs")["dwell_time"]["value"] == 3.0
    absorbing = dwell_results(3.0, 0.5, "fs")
    assert absorbing["dwell_time"]["value"] is None
    assert "absorbing layer" in absorbing["dwell_reason"]


def test_free_motion_takes_the_mean_inverse_speed() -> None:
    """Two equal parts at speeds 1 and 2 take 3/4 of the distance on average."""
    speeds = np.array([-2.0, -1.0, 1.0, 2.0])
    time, reason = free_crossing_time(10.0, np.array([0.0, 0.0, 0.5, 0.5]), speeds)
    assert time == pytest.approx(7.5)
    assert reason is None
    back, _ = free_crossing_time(-10.0, np.array([0.5, 0.5, 0.0, 0.0]), speeds)
    assert back == pytest.approx(7.5)
    none, reason = free_crossing_time(10.0, np.array([0.0, 0.1, 0.5, 0.5]), speeds)
    assert none is None
    assert "moving away" in (reason or "")


def test_phase_time_of_a_line_is_that_of_its_pole() -> None:
    r"""1/(E - E_R + i Gamma/2) delays by 2 hbar/Gamma on the line, half of it at E_R + Gamma/2."""
    energies = np.linspace(0.08, 0.12, 4001)
    width = 0.004
    amplitude = 1 / (energies - 0.1 + 0.5j * width)
    free = np.exp(1j * energies * 300 / HBAR)
    found = phase_times(energies, amplitude * free, free, np.ones(4001), HBAR)
    peak = 2 * HBAR / width
    assert found[2000] == pytest.approx(peak, rel=1e-5)
    assert found[2200] == pytest.approx(peak / 2, rel=1e-4)
    assert np.isnan(found[[0, -1]]).all()


def test_phase_times_are_left_out_where_not_known() -> None:
    """Too little weight, too coarse energies and missing waves are NaN."""
    energies = np.linspace(0.0, 1.0, 11)
    free = np.ones(11, dtype=complex)
    weight = np.where(np.arange(11) < 5, 1.0, 1e-6)
    slow = np.exp(0.5j * np.arange(11))
    found = phase_times(energies, slow, free, weight, HBAR)
    assert np.flatnonzero(np.isfinite(found)).tolist() == [1, 2, 3]
    assert found[1] == pytest.approx(HBAR * 0.5 / 0.1)
    fast = np.exp(1.5j * np.arange(11))
    assert np.isnan(phase_times(energies, fast, free, np.ones(11), HBAR)).all()
    free[0] = np.nan
    assert np.isnan(phase_times(energies, slow, free, np.ones(11), HBAR)[1])
    assert np.isnan(phase_times(energies[:2], slow[:2], free[1:3], weight[:2], HBAR)).all()


def test_no_mean_crossing_time_no_others() -> None:
    """Where waves pass both ways every time is null, with a reason."""
    found = crossing_results(np.zeros(2), np.zeros(2), None, (3.0, None), "fs")
    assert found["delay"]["value"] is None
    assert found["median_crossing_time"]["value"] is None
    assert "not one-way" in found["delay_reason"]


def barrier_amplitude(energies: RealArray, height: float, width: float) -> ComplexArray:
    r"""Return t of a square barrier from 0 to ``width``, against a wave :math:`e^{ikx}`.

    .. math:: t = e^{-ikL}\,/\,[\cos qL - \tfrac{i}{2}(k/q+q/k)\sin qL]
    """
    k = np.sqrt(energies / STIFFNESS)
    q = np.sqrt((energies - height).astype(complex) / STIFFNESS)
    denominator = np.cos(q * width) - 0.5j * (k / q + q / k) * np.sin(q * width)
    amplitude: ComplexArray = np.exp(-1j * k * width) / denominator
    return amplitude


#: Ends so far away that nothing comes back from them before the run is over.
NUMERICS = (
    "grid.x.from=-200",
    "grid.x.to=200",
    "grid.x.points=1600",
    "propagator.step=0.1",
    "time.end=250",
    "detector.exit.energies.points=69",
)


@cache
def barrier_run(folder: Path, *overrides: str) -> dict[str, Any]:
    """Return the results of a square barrier of 2 nm, 0.3 eV high."""
    folder.mkdir()
    return workflow.run(small(*NUMERICS, *overrides), folder)


@pytest.fixture(scope="module")
def runs(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder for the runs of this module."""
    return tmp_path_factory.mktemp("times")


@pytest.mark.parametrize(
    "overrides",
    [(), ("propagator.method=crank-nicolson", "propagator.space_order=4")],
    ids=["split", "differences"],
)
def test_phase_time_of_a_barrier(runs: Path, overrides: tuple[str, ...]) -> None:
    """A run gives the Wigner delay of a square barrier at every energy it holds.

    0.05 fs: a phase good to 2e-4 from one energy to the next, 2.5 meV further.
    """
    results = barrier_run(runs / str(len(overrides)), *overrides)["detectors"]["exit"]
    assert results["phase_time_reason"] is None
    energies = np.array(results["energy"])
    found = np.array(results["phase_time"], dtype=float)
    h = 1e-6
    turns = np.angle(
        barrier_amplitude(energies + h, 0.3, 2.0) / barrier_amplitude(energies - h, 0.3, 2.0)
    )
    exact = HBAR * turns / (2 * h)
    chosen = (energies > 0.1) & (energies < 0.2)
    assert found[chosen] == pytest.approx(exact[chosen], abs=0.05)


def test_mean_crossing_time_is_that_of_its_parts(runs: Path) -> None:
    """The mean crossing time is the flux-weighted mean of free flight and phase time."""
    seen = barrier_run(runs / "0")["detectors"]["exit"]
    energies, flux = np.array(seen["energy"]), np.array(seen["flux"])
    phase = np.nan_to_num(np.array(seen["phase_time"], dtype=float))
    speed = 2 * np.sqrt(STIFFNESS * energies) / HBAR
    mean = np.trapezoid(flux * (50.0 / speed + phase), energies) / np.trapezoid(flux, energies)
    assert seen["mean_crossing_time"]["value"] == pytest.approx(mean, rel=5e-3)


def test_free_motion_is_not_late(runs: Path) -> None:
    """Without a barrier there is no delay, and a region is crossed in its width over the speed."""
    way = '[[region]]\nname = "way"\nrole = "none"\nx = { from = -8.0, to = 4.0 }\n'
    scenario = parse_scenario(TEXT + way, overrides=(*NUMERICS, "potential.barrier.height=0"))
    (runs / "free").mkdir()
    results = workflow.run(scenario, runs / "free")
    seen = results["detectors"]["exit"]
    assert seen["delay"]["value"] == pytest.approx(0.0, abs=0.02)
    assert seen["free_crossing_time"]["error"] is None
    spent = seen["free_crossing_time"]["value"] * 12 / 50
    assert results["regions"]["way"]["dwell_time"]["value"] == pytest.approx(spent, rel=1e-3)

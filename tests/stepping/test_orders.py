"""The order of every propagator, fitted on smooth problems where nothing absorbs."""

from itertools import pairwise

import numpy as np
import pytest

from tests.stepping.smooth_problems import distance, final_state, problem
from tests.tolerances import ORDER

#: name: method, orders, steps per unit of time, steps of the reference, claimed order.
SCHEMES = {
    "split-operator order 2": ("split-operator", "order = 2", (16, 32, 64, 128), 1024, 2),
    "split-operator order 4": ("split-operator", "order = 4", (8, 16, 32), 256, 4),
    "crank-nicolson": ("crank-nicolson", "space_order = 4", (32, 64, 128), 1024, 2),
}


@pytest.mark.parametrize("ends", ["periodic", "walls"])
@pytest.mark.parametrize("axes", [1, 2])
@pytest.mark.parametrize("driven", [False, True])
@pytest.mark.parametrize("name", SCHEMES)
def test_order_in_time(name: str, driven: bool, axes: int, ends: str) -> None:  # noqa: FBT001 - a test's case
    """Halving the step divides the error of the state by two to the claimed order.

    Errors lie between 1e-3 and 1e-10. The reference is the same scheme at a
    step at least eight times finer, whose own error, 8**-order of the finest
    one, moves the fitted order by less than the tolerance.
    """
    method, orders, rates, fine, claimed = SCHEMES[name]
    points = 96 if axes == 1 else (40 if method == "crank-nicolson" else 48)

    def run(rate: int) -> np.ndarray:
        setup = problem(
            method, 1 / rate, axes=axes, driven=driven, orders=orders, points=points, ends=ends
        )
        return final_state(setup)

    setup = problem(method, 1.0, axes=axes, orders=orders, points=points, ends=ends)
    exact = run(fine)
    errors = [distance(setup, run(rate), exact) for rate in rates]
    assert all(1e-10 < error < 2e-3 for error in errors)
    fitted = [np.log2(a / b) for a, b in pairwise(errors)]
    # The reference's own error enters as (rate/fine)**order of each error.
    assert fitted[-1] == pytest.approx(claimed, abs=ORDER)


@pytest.mark.parametrize(("orders", "claimed"), [("space_order = 2", 2), ("space_order = 4", 4)])
def test_order_in_space(orders: str, claimed: int) -> None:
    """Crank-Nicolson's energy of a resolved packet converges with the claimed order."""
    found = []
    for points in (64, 128, 256):
        setup = problem("crank-nicolson", 1.0, orders=orders, points=points)
        psi = setup.start[0]
        found.append(setup.grid.inner(psi, setup.kinetic.apply(psi)).real)
    spectral = problem("split-operator", 1.0, points=256)
    psi = spectral.start[0]
    exact = spectral.grid.inner(psi, spectral.kinetic.apply(psi)).real
    errors = [abs(value - exact) for value in found]
    # Asymptotic to (k dx)^2: about 2 % of the order at the finest pair.
    assert np.log2(errors[1] / errors[2]) == pytest.approx(claimed, abs=2 * ORDER)


@pytest.mark.parametrize("name", SCHEMES)
@pytest.mark.parametrize("axes", [1, 2])
def test_threads_and_stops_leave_the_physics_alone(name: str, axes: int) -> None:
    """Stopping on the way changes rounding only."""
    method, orders, _, _, _ = SCHEMES[name]
    setup = problem(method, 1 / 32, axes=axes, orders=orders, points=32, driven=True)
    once, often = final_state(setup), final_state(setup, stops=8)
    assert distance(setup, once, often) < 1e-12


@pytest.mark.parametrize("name", SCHEMES)
def test_equal_stops_give_equal_bits(name: str) -> None:
    """Two steppers that stop alike agree in every bit."""
    method, orders, _, _, _ = SCHEMES[name]
    setup = problem(method, 1 / 32, axes=2, orders=orders, points=32, driven=True)
    assert np.array_equal(final_state(setup, stops=4), final_state(setup, stops=4))


def test_bound_to_the_wrong_operator() -> None:
    """A scheme refuses a kinetic operator that is not its own."""
    spectral = problem("split-operator", 0.1)
    differences = problem("crank-nicolson", 0.1)
    with pytest.raises(TypeError, match="spectral"):
        spectral.scheme.bind(differences.hamiltonian, 0.1)
    with pytest.raises(TypeError, match="differences"):
        differences.scheme.bind(spectral.hamiltonian, 0.1)

"""Large fields: cut into blocks, shared among threads, the same physics."""

import numpy as np
import pytest

from tests.stepping.smooth_problems import distance, final_state, problem
from wavepack.grid import blocks
from wavepack.grid.blocks import Blocks
from wavepack.scenario.build import Setup

ORDERS = ("order = 2", "order = 4")


def cut(monkeypatch: pytest.MonkeyPatch, setup: Setup, threads: int) -> np.ndarray:
    """Return the final state of a field cut into blocks of at most 256 points."""
    with monkeypatch.context() as patched:
        patched.setattr(blocks, "BLOCK_POINTS", 256)
        stepper = setup.bind(threads, setup.hand_over)
        stepper.advance(0, setup.steps)
    return np.array(stepper.psi)


@pytest.mark.parametrize("orders", ORDERS)
@pytest.mark.parametrize("driven", ["", "wide", "narrow", "both"])
@pytest.mark.parametrize("axes", [1, 2])
def test_blocks_change_rounding_only(
    monkeypatch: pytest.MonkeyPatch, axes: int, driven: str, orders: str
) -> None:
    """One block or many, drives everywhere or in a box: equal to rounding."""
    setup = problem(
        "split-operator",
        1 / 32,
        axes=axes,
        orders=orders,
        points=48 if axes == 2 else 1024,
        drives=driven,
    )
    whole = final_state(setup)
    assert distance(setup, whole, cut(monkeypatch, setup, 1)) < 1e-12


@pytest.mark.parametrize("orders", ORDERS)
def test_threads_change_nothing_but_the_transforms(
    monkeypatch: pytest.MonkeyPatch, orders: str
) -> None:
    """Blocks on two threads give the state of one thread, to rounding of the transforms."""
    setup = problem("split-operator", 1 / 32, axes=2, orders=orders, points=48, drives="both")
    one = cut(monkeypatch, setup, 1)
    assert distance(setup, one, cut(monkeypatch, setup, 2)) < 1e-12


def test_every_row_is_visited_once(monkeypatch: pytest.MonkeyPatch) -> None:
    """The blocks cover all rows without overlap, whatever the threads."""
    monkeypatch.setattr(blocks, "BLOCK_POINTS", 50)
    for threads in (1, 2, 3):
        cutting = Blocks((23, 10), threads)
        assert not cutting.single
        assert cutting.largest == 5
        visits = np.zeros(23, dtype=int)

        def visit(rows: slice, visits: np.ndarray = visits) -> None:
            visits[rows] += 1

        cutting.each(visit)
        assert (visits == 1).all()

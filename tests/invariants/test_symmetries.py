"""Mirror, boost and a shifted zero of energy, for packets of any kind."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.invariants.scenes import IMPLICIT, LINE, METHODS, PLANE, SPLIT_2, SPLIT_4, final, ready
from tests.tolerances import TWIN

few = settings(max_examples=12, deadline=None, derandomize=True)
places = st.floats(-12.0, 12.0)
speeds = st.floats(-0.6, 0.6)
heights = st.floats(-0.2, 0.3)
widths = st.floats(2.5, 6.0)


@pytest.mark.parametrize("method", METHODS)
@given(place=places, speed=speeds, hill=places, height=heights, width=widths)
@few
def test_mirrored_line(
    method: str, place: float, speed: float, hill: float, height: float, width: float
) -> None:
    """A scenario seen in a mirror ends as the mirror image of its end."""

    def end(sign: int) -> np.ndarray:
        return final(
            LINE, *METHODS[method], f"packet.center={sign * place}",
            f"packet.wavenumber.x={sign * speed}", f"potential.hill.center={sign * hill}",
            f"potential.hill.height={height}", f"potential.hill.sigma={width}",
        )  # fmt: skip

    assert np.abs(end(1) - end(-1)[::-1]).max() < TWIN


@pytest.mark.parametrize("method", [SPLIT_4, IMPLICIT], ids=["split-operator", "crank-nicolson"])
@given(y=st.floats(-6.0, 6.0), speed=st.floats(-0.4, 0.4), hill=st.floats(-6.0, 6.0))
@few
def test_mirrored_plane(method: tuple[str, ...], y: float, speed: float, hill: float) -> None:
    """So in the plane, turned over the x axis."""

    def end(sign: int) -> np.ndarray:
        return final(
            PLANE, *method, f"packet.center.y={sign * y}", f"packet.wavenumber.y={sign * speed}",
            f"potential.hill.center.y={sign * hill}", "time.end=30.0",
        )  # fmt: skip

    assert np.abs(end(1) - end(-1)[:, ::-1]).max() < TWIN


@pytest.mark.parametrize("text", [LINE, PLANE], ids=["line", "plane"])
@pytest.mark.parametrize("method", METHODS)
@given(shift=st.floats(-2.0, 2.0), height=heights)
@few
def test_shifted_zero_of_energy(method: str, text: str, shift: float, height: float) -> None:
    """A constant added to V turns the whole state by one phase and changes nothing else."""
    base = (*METHODS[method], f"potential.hill.height={height}", "time.end=50.0")
    floor = f'\n[[potential]]\nname = "floor"\nshape = "formula"\nexpression = "{shift!r}"\n'
    setup, stepper = ready(text, *base)
    stepper.advance(0, setup.steps)
    phase = np.exp(-1j * shift * 50.0 / setup.particle.hbar)
    assert np.abs(final(text + floor, *base) - phase * stepper.psi).max() < TWIN


@pytest.mark.parametrize("method", [SPLIT_2, SPLIT_4], ids=["order 2", "order 4"])
@given(
    boost=st.integers(-12, 12), cells=st.integers(1, 20), sigma=widths, place=places, speed=speeds
)
@few
def test_boosted_packet(
    method: tuple[str, ...], boost: int, cells: int, sigma: float, place: float, speed: float
) -> None:
    r"""A free packet seen from a moving frame (Galilei).

    :math:`\psi'(x,t) = e^{iqx - icq^2t/\hbar}\,\psi(x - 2cqt/\hbar, t)`, for q of the
    periodic box and a time that moves the frame by whole cells.
    """
    free = LINE.replace('points = 63, ends = "walls"', 'points = 128, ends = "periodic"')
    free = free[: free.index("[[potential]]")] + free[free.index("[[packet]]") :]
    packet = (f"packet.center={place}", f"packet.sigma={sigma}")
    q, dx = 2 * np.pi * boost / 60.0, 60.0 / 128
    setup, _ = ready(free, *method)
    c, hbar = setup.particle.stiffness, setup.particle.hbar
    time = cells * dx * hbar / (2 * c * abs(q)) if boost else 10.0
    moved = cells * int(np.sign(boost))
    slow = final(free, *method, *packet, f"packet.wavenumber.x={speed}", f"time.end={time!r}",
                 f"propagator.step={time / 7!r}")  # fmt: skip
    fast = final(free, *method, *packet, f"packet.wavenumber.x={speed + q!r}",
                 f"time.end={time!r}", f"propagator.step={time / 7!r}")  # fmt: skip
    # The packet's own phase is counted from its center.
    x = setup.grid.axes[0].coordinates
    wanted = np.exp(1j * (q * (x - place) - c * q * q * time / hbar)) * np.roll(slow, moved)
    assert np.abs(fast - wanted).max() < TWIN

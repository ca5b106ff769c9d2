"""Bound levels and states against closed forms and published values."""

import numpy as np
import pytest

from wavepack.fields import Span
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.eigenstates import lowest_states, masses_on_links, separated
from wavepack.physics.exact import (
    box_levels,
    finite_well_levels,
    harmonic_levels,
    morse_levels,
    softcore_ground_state,
    triangular_well_levels,
)
from wavepack.physics.kinetic import StaggeredKinetic
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import Field, Harmonic, Morse, Slab, SoftCore, total

C = 0.03809982110968584  # hbar^2/2m_e, eV nm^2
ELECTRON = Particle(0.067, -1.0, 0.6582119569509067, 2 * C, 1.439964547842567)
ATOMIC = Particle(1.0, -1.0, 1.0, 1.0, 1.0)


def walls(*axes: tuple[float, float, int]) -> Grid:
    """Return a walled grid of axes (start, stop, points)."""
    names = ("x", "y")
    return Grid(
        tuple(
            Axis(name, *axis, ("walls", "walls")) for name, axis in zip(names, axes, strict=False)
        )
    )


@pytest.mark.parametrize("points", [60, 700])
def test_box_levels_are_exact(points: int) -> None:
    """Between hard walls the levels are c (pi n/L)^2, by the dense and the iterative way."""
    grid = walls((0.0, 30.0, points))
    energies, states = lowest_states(grid, np.zeros(points), ELECTRON, 4)
    assert energies == pytest.approx(box_levels(4, 30.0, ELECTRON.stiffness), rel=1e-9)
    x = grid.axes[0].coordinates
    assert states[1] == pytest.approx(np.sqrt(2 / 30) * np.sin(2 * np.pi * x / 30), abs=1e-8)


@pytest.mark.parametrize("points", [300, 3000])
def test_harmonic_levels(points: int) -> None:
    """Levels hbar omega (n + 1/2), to rounding [Schiff1968]_."""
    grid = walls((-60.0, 60.0, points))
    trap = Harmonic(quantum={"x": 0.02})
    energies, states = lowest_states(grid, total((trap,), grid, ELECTRON), ELECTRON, 5)
    assert energies == pytest.approx(harmonic_levels(5, 0.02), rel=2e-10)
    overlaps = states @ states.T * grid.cell
    assert overlaps == pytest.approx(np.eye(5), abs=1e-10)


def test_finite_square_well() -> None:
    """34.2084404471, 132.5902275816, 271.5042807022 meV for 10 nm, 0.3 eV [LandauLifshitz1977]_.

    Off by the edges' error alone, which does not depend on the placement and
    falls faster than the spacing squared.
    """
    errors = []
    for points, shift in ((799, 0.0), (799, 0.04), (1599, 0.0)):
        grid = walls((-40.0, 40.0, points))
        well = Slab(height=-0.3, x=Span(-5.0 + shift, 5.0 + shift))
        energies, _ = lowest_states(grid, total((well,), grid, ELECTRON) + 0.3, ELECTRON, 3)
        errors.append(energies - [0.0342084404471, 0.1325902275816, 0.2715042807022])
    coarse, moved, fine = np.array(errors)
    assert np.abs(coarse).max() < 5e-6
    assert moved == pytest.approx(coarse, abs=2e-8)
    assert np.abs(fine).max() < np.abs(coarse).max() / 4
    assert finite_well_levels(0.3, 10.0, ELECTRON.stiffness)[0] == pytest.approx(0.0342084404471)


def test_triangular_well() -> None:
    """56.6405122666, 99.0303309418, 133.7352318643 meV at 5 meV/nm: zeros of Ai [DLMF]_."""
    grid = walls((0.0, 80.0, 400))
    slope = Field(strength={"x": 0.005})
    energies, _ = lowest_states(grid, total((slope,), grid, ELECTRON), ELECTRON, 3)
    assert energies == pytest.approx([0.0566405122666, 0.0990303309418, 0.1337352318643], rel=3e-6)
    fine = walls((0.0, 80.0, 1601))
    energies, _ = lowest_states(fine, total((slope,), fine, ELECTRON), ELECTRON, 3)
    assert energies == pytest.approx(triangular_well_levels(3, 0.005, ELECTRON.stiffness), rel=2e-8)


def test_morse_levels() -> None:
    """E_0 = 0.00933165, E_1 - E_0 = 3966.056 cm^-1 for HF [Morse1929]_ [WalkerPreston1977]_."""
    nucleus = Particle(1744.59, 0.0, 1.0, 1.0, 1.0)
    grid = walls((0.7, 6.7, 500))
    well = Morse(depth=0.2251, stiffness=1.1741, at=1.7329)
    energies, _ = lowest_states(grid, total((well,), grid, nucleus), nucleus, 6)
    exact = morse_levels(0.2251, 1.1741, nucleus.stiffness)[:6]
    assert energies + 0.2251 == pytest.approx(exact, abs=1e-11)
    assert energies[0] + 0.2251 == pytest.approx(0.00933165, abs=5e-9)
    assert (energies[1] - energies[0]) * 219474.6313632 == pytest.approx(3966.056208, abs=1e-5)


def test_softcore_levels() -> None:
    """-0.66977714, -0.27489135, -0.15145467 for softening 1 [JavanainenEberlySu1988]_, a.u.

    The closed form -1/2 for softening sqrt(2) too.
    """
    grid = walls((-60.0, 60.0, 1200))
    core = SoftCore(charge=-1.0, softening=1.0)
    energies, _ = lowest_states(grid, total((core,), grid, ATOMIC), ATOMIC, 3)
    assert energies == pytest.approx([-0.6697771382, -0.27489135, -0.15145467], abs=6e-9)
    softening, level, _ = softcore_ground_state(1.0, 0.5)
    core = SoftCore(charge=-1.0, softening=softening)
    energies, states = lowest_states(grid, total((core,), grid, ATOMIC), ATOMIC, 1)
    assert energies[0] == pytest.approx(level, abs=1e-10)
    exact = softcore_ground_state(1.0, 0.5, grid.axes[0].coordinates)[2]
    exact /= np.sqrt(np.sum(exact**2) * grid.cell)
    assert states[0] == pytest.approx(exact, abs=1e-6)


def test_henon_heiles_levels() -> None:
    """0.9985948, 1.9900768 (twice), 2.9562433, 2.9853265 (twice) [DavisHeller1979]_, a.u.

    The states are resonances narrower than 1e-7; walls stand in the saddles.
    """
    grid = walls((-7.5, 7.5, 44), (-7.5, 7.5, 44))
    x, y = grid.coordinates
    potential = (x**2 + y**2) / 2 + 0.111803 * (x**2 * y - y**3 / 3)
    energies, states = lowest_states(grid, potential, ATOMIC, 6)
    wanted = [0.9985948, 1.9900768, 1.9900768, 2.9562433, 2.9853265, 2.9853265]
    assert energies == pytest.approx(wanted, abs=2e-7)
    flat = states.reshape(6, -1)
    assert flat @ flat.T * grid.cell == pytest.approx(np.eye(6), abs=1e-9)


def test_plane_of_two_traps() -> None:
    """Levels of two independent traps add."""
    grid = walls((-7.0, 7.0, 40), (-8.0, 8.0, 40))
    x, y = grid.coordinates
    energies, _ = lowest_states(grid, x**2 / 2 + 0.81 * y**2 / 2, ATOMIC, 4)
    assert energies == pytest.approx([0.95, 1.85, 1.95, 2.75], abs=1e-9)


def test_periodic_axis() -> None:
    """On a ring the lowest levels are 0 and c (2 pi/L)^2 twice."""
    grid = Grid((Axis("x", 0.0, 10.0, 500, ("periodic", "periodic")),))
    energies, _ = lowest_states(grid, np.zeros(500), ATOMIC, 3)
    first = 0.5 * (2 * np.pi / 10) ** 2
    assert energies == pytest.approx([0.0, first, first], abs=1e-11)


def test_two_masses() -> None:
    """A well of another mass than its barriers, by differences [BenDanielDuke1966]_."""
    exact = finite_well_levels(0.3, 10.0, C / 0.067, C / 0.1)
    errors = []
    for points in (999, 1999):
        grid = walls((-40.0, 40.0, points))
        pieces = (
            Slab(height=0.3, x=Span(upper=-5.0), mass=0.1),
            Slab(height=0.3, x=Span(lower=5.0), mass=0.1),
        )
        kinetic = StaggeredKinetic(grid, ELECTRON, masses_on_links(grid, ELECTRON, pieces))
        potential = total(pieces, grid, ELECTRON)
        energies, _ = lowest_states(grid, potential, ELECTRON, 3, kinetic)
        errors.append(float(np.abs(energies - exact[:3]).max()))
    assert errors[1] < 1.2e-5
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.3)


def test_one_mass_is_a_number() -> None:
    """Without pieces that set one, the mass on links is the particle's."""
    assert masses_on_links(walls((0.0, 1.0, 9)), ELECTRON, (Slab(height=1.0),)) == (0.067,)


def test_signs_and_bits_do_not_vary() -> None:
    """Twice the same call gives the same bits, and the first large value is positive."""
    grid = walls((-60.0, 60.0, 900))
    potential = total((Harmonic(quantum={"x": 0.02}),), grid, ELECTRON)
    first = lowest_states(grid, potential, ELECTRON, 3)[1]
    again = lowest_states(grid, potential, ELECTRON, 3)[1]
    assert np.array_equal(first, again)
    for state in first:
        large = np.flatnonzero(np.abs(state) > 0.5 * np.abs(state).max())
        assert state[large[0]] > 0


def test_separation() -> None:
    """a(x) + b(y) separates into parts that add up; a product does not."""
    x, y = np.linspace(-1, 1, 9)[:, None], np.linspace(-1, 1, 7)[None, :]
    parts = separated(x**2 - 3 * y**4)
    assert parts is not None
    assert parts[0][:, None] + parts[1] == pytest.approx(x**2 - 3 * y**4, abs=1e-14)
    assert separated(x**2 * y**2 + 0.0) is None


def test_impossible_requests_are_refused() -> None:
    """More states than points, or a potential that is not finite, say so."""
    grid = walls((0.0, 1.0, 9))
    with pytest.raises(ValueError, match="at most 9 states"):
        lowest_states(grid, np.zeros(9), ATOMIC, 10)
    with pytest.raises(ValueError, match="finite"):
        lowest_states(grid, np.full(9, np.nan), ATOMIC, 1)

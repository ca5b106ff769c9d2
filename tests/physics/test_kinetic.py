"""The kinetic operators: action, dispersion, currents, masses."""

import math

import numpy as np
import pytest

from wavepack.grid.axis import Axis, End
from wavepack.grid.grid import Grid
from wavepack.physics.kinetic import (
    SpectralKinetic,
    StaggeredKinetic,
    link_positions,
    slope_matrix,
    taper,
)
from wavepack.physics.particle import Particle

PARTICLE = Particle(mass=1.0, charge=-1.0, hbar=1.0, hbar2_per_mass=1.0, coulomb=1.0)
PERIODIC: tuple[End, End] = ("periodic", "periodic")
WALLS: tuple[End, End] = ("walls", "walls")


def line(points: int = 64, ends: tuple[End, End] = PERIODIC) -> Grid:
    """One axis of length 2 pi."""
    return Grid((Axis("x", 0.0, 2 * math.pi, points, ends),))


@pytest.mark.parametrize("order", [2, 4])
def test_plane_waves_have_the_stated_energy(order: int) -> None:
    """A plane wave is an eigenstate of the differences, at the energy of `energy_of`."""
    grid = line()
    kinetic = StaggeredKinetic(grid, PARTICLE, (1.0,), order)
    psi = np.exp(3j * grid.axes[0].coordinates)
    energy = kinetic.energy_of(np.array([3.0]), 0)[0]
    assert np.abs(kinetic.apply(psi) - energy * psi).max() < 1e-12
    assert kinetic.energy(psi) == pytest.approx(energy * grid.norm(psi), rel=1e-12)
    assert kinetic.wavenumber_of(np.array([energy]), 0)[0] == pytest.approx(3.0, rel=1e-12)
    assert np.isnan(kinetic.wavenumber_of(np.array([-1.0, 1e9]), 0)).all()


@pytest.mark.parametrize("order", [2, 4])
def test_standing_waves_between_walls(order: int) -> None:
    """Sines are eigenstates up to the walls: the mirror beyond them is right."""
    grid = line(63, WALLS)
    kinetic = StaggeredKinetic(grid, PARTICLE, (1.0,), order)
    psi = np.sin(2.5 * grid.axes[0].coordinates).astype(complex)
    energy = kinetic.energy_of(np.array([2.5]), 0)[0]
    assert np.abs(kinetic.apply(psi) - energy * psi).max() < 1e-12


@pytest.mark.parametrize("order", [2, 4])
def test_speed_is_the_slope_of_energy(order: int) -> None:
    """`energy_slope` is the derivative of `energy_of`."""
    kinetic = StaggeredKinetic(line(), PARTICLE, (1.0,), order)
    k, h = np.linspace(0.5, 20, 9), 1e-5
    numeric = (kinetic.energy_of(k + h, 0) - kinetic.energy_of(k - h, 0)) / (2 * h)
    assert kinetic.energy_slope(k, 0) == pytest.approx(numeric, rel=1e-7, abs=1e-7)
    spectral = SpectralKinetic(line(), PARTICLE)
    assert spectral.energy_slope(k, 0) == pytest.approx(k)
    assert spectral.wavenumber_of(spectral.energy_of(k, 0), 0) == pytest.approx(k)


def test_spectral_action_in_two_dimensions() -> None:
    """A product of waves has the sum of their energies, on mixed axes."""
    grid = Grid((Axis("x", 0, 2 * math.pi, 32, PERIODIC), Axis("y", 0, math.pi, 31, WALLS)))
    kinetic = SpectralKinetic(grid, PARTICLE)
    x, y = grid.coordinates
    psi = np.exp(3j * x) * np.sin(2 * y)
    assert np.abs(kinetic.apply(psi) - (9 + 4) / 2 * psi).max() < 1e-11
    assert kinetic.largest == pytest.approx((16**2 + 31**2) / 2)


@pytest.mark.parametrize("order", [2, 4])
def test_the_cut_current_is_what_leaves(order: int) -> None:
    """The current through a cut between points is minus the change of what lies before it.

    Exactly, for any state and any masses: that is what makes the books close.
    """
    grid = line(40)
    rng = np.random.default_rng(5)
    masses = rng.uniform(0.5, 2.0, 40)
    kinetic = StaggeredKinetic(grid, PARTICLE, (masses,), order)
    psi = rng.normal(size=40) + 1j * rng.normal(size=40)
    psi[30:] = 0  # nothing at the seam of the periodic axis
    psi[:4] = 0
    axis = grid.axes[0]
    cut = 14
    middle = axis.coordinates[cut] + axis.spacing / 2
    plane = kinetic.plane(0, middle, math.inf)
    current = plane.current(plane.read(psi))[0]
    change = 2 * (np.conj(psi) * -1j * kinetic.apply(psi)).real * grid.cell
    assert current == pytest.approx(-change[: cut + 1].sum(), rel=1e-11)


def test_currents_of_a_plane_wave() -> None:
    """Amplitude squared times speed, for the spectral and, to its order, the other operator."""
    grid = line(256)
    psi = 0.3 * np.exp(5j * grid.axes[0].coordinates)
    exact = 0.09 * 5
    spectral = SpectralKinetic(grid, PARTICLE).plane(0, 1.234, math.inf)
    assert spectral.current(spectral.read(psi))[0] == pytest.approx(exact, rel=1e-12)
    for order, tolerance in ((2, (5 * 2 * math.pi / 256) ** 2), (4, 1e-4)):
        kinetic = StaggeredKinetic(grid, PARTICLE, (1.0,), order)
        plane = kinetic.plane(0, 1.234, math.inf)
        assert plane.current(plane.read(psi))[0] == pytest.approx(exact, rel=tolerance)


def test_planes_across_either_axis() -> None:
    """A plane across y reads what one across x reads of the transposed field."""
    x = Axis("x", 0, 2 * math.pi, 24, PERIODIC)
    y = Axis("y", 0, 2 * math.pi, 20, PERIODIC)
    rng = np.random.default_rng(2)
    psi = rng.normal(size=(24, 20)) + 1j * rng.normal(size=(24, 20))
    turned = np.ascontiguousarray(psi.T)
    for make in (
        lambda grid: SpectralKinetic(grid, PARTICLE),
        lambda grid: StaggeredKinetic(grid, PARTICLE, (1.0, 1.0), 4),
    ):
        across_x = make(Grid((x, y))).plane(0, 2.0, math.inf)
        across_y = make(Grid((y, x))).plane(1, 2.0, math.inf)
        ours = across_x.current(across_x.read(psi))
        assert across_y.current(across_y.read(turned)) == pytest.approx(ours, rel=1e-11, abs=1e-11)
        assert across_x.functionals == len(across_x.read(psi))


def test_links_lie_between_points() -> None:
    """One link a point on a periodic axis, one more between walls."""
    periodic, walls = line(8).axes[0], line(8, WALLS).axes[0]
    assert link_positions(periodic) == pytest.approx(periodic.coordinates + periodic.spacing / 2)
    assert len(link_positions(walls)) == 9
    assert link_positions(walls)[0] == pytest.approx(walls.spacing / 2)
    assert slope_matrix(walls, 4).shape == (9, 8)


def test_the_taper_is_smooth_and_complete() -> None:
    """All of the lower half of a band passes, nothing above its end."""
    assert taper(np.array([0.0, 0.5]), 1.0) == pytest.approx(1.0, abs=2e-5)
    assert taper(np.array([1.0, 2.0]), 1.0) == pytest.approx(0.0, abs=2e-5)
    assert taper(np.array([5.0]), math.inf) == pytest.approx(1.0)

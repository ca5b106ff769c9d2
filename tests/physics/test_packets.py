"""Packets: moments and momenta, combination, cuts, launches, errors."""

import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from wavepack.arrays import ComplexArray
from wavepack.errors import ScenarioError
from wavepack.fields import Span
from wavepack.grid import spectral
from wavepack.grid.axis import Axis, End
from wavepack.grid.grid import Grid
from wavepack.physics.exact import ground_width, harmonic_levels
from wavepack.physics.expressions import Expression, compile_expression
from wavepack.physics.kinetic import StaggeredKinetic
from wavepack.physics.packet_travel import unit_vector
from wavepack.physics.packets import (
    PACKETS,
    ChannelPacket,
    Eigenstate,
    FormulaPacket,
    GaussianPacket,
    Packet,
    TablePacket,
    initial_state,
    launch,
)
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import Field, Formula, Harmonic, Piece, Slab, Step, total

C = 0.03809982110968584  # hbar^2/2m_e, eV nm^2
ELECTRON = Particle(0.067, -1.0, 0.6582119569509067, 2 * C, 1.439964547842567)
WALLS: tuple[End, End] = ("walls", "walls")
RING: tuple[End, End] = ("periodic", "periodic")
LINE = Grid((Axis("x", -80.0, 80.0, 512),))
BOX = Grid((Axis("x", -80.0, 80.0, 511, WALLS),))
PLANE = Grid((Axis("x", -40.0, 40.0, 128), Axis("y", -30.0, 30.0, 100)))
PIPE = Grid((Axis("x", -80.0, 80.0, 256), Axis("y", -50.0, 50.0, 120)))


class Plain:
    """Units in which an angle is in degrees."""

    def convert(self, value: object, dimension: str) -> float:
        """Return the radians of "30 deg"."""
        if dimension == "angle" and isinstance(value, str) and value.endswith(" deg"):
            return math.radians(float(value.removesuffix(" deg")))
        raise ValueError(f"unknown unit in {value!r}")


def expression(text: str) -> Expression:
    """Return a formula in x, y and t."""
    return compile_expression(text, variables=("x", "y", "t"))


def state(packet: Packet, grid: Grid, *pieces: Piece) -> ComplexArray:
    """Return the normalised state of one packet."""
    psi, _ = initial_state((packet,), grid, ELECTRON, pieces)
    return psi


def moments(psi: ComplexArray, grid: Grid, axis: int) -> tuple[float, float, float, float]:
    """Return mean and width of position and of wave number along an axis."""
    x = grid.coordinates[axis]
    density = np.abs(psi) ** 2 * grid.cell
    mean = float(np.sum(density * x))
    width = math.sqrt(float(np.sum(density * (x - mean) ** 2)))
    slope = spectral.slope(psi, grid.axes[axis], axis)
    k = grid.inner(psi, slope).imag
    return mean, width, k, math.sqrt(grid.norm(slope) - k**2)


@pytest.mark.parametrize("grid", [LINE, BOX])
def test_gaussian_moments(grid: Grid) -> None:
    """Mean x0 and k0, widths sigma and 1/(2 sigma), k0 = sqrt(E/c) [CohenTannoudji1977]_.

    k0 = 0.4193493103 for 0.1 eV and 0.067 electron masses.
    """
    packet = GaussianPacket(center={"x": -20.0}, sigma={"x": 5.0}, energy=0.1)
    psi = state(packet, grid)
    assert grid.norm(psi) == pytest.approx(1.0, abs=1e-13)
    assert moments(psi, grid, 0) == pytest.approx((-20.0, 5.0, 0.4193493103, 0.1), abs=1e-9)


def test_mean_energy_exceeds_that_of_the_central_momentum() -> None:
    """The mean kinetic energy is larger by hbar^2/(8 m sigma^2): 0.10568654046 eV."""
    packet = GaussianPacket(center={"x": 0.0}, sigma={"x": 5.0}, energy=0.1)
    slope = spectral.slope(state(packet, LINE), LINE.axes[0], 0)
    assert ELECTRON.stiffness * LINE.norm(slope) == pytest.approx(0.10568654046, abs=1e-10)


@given(center=st.floats(-30, 30), sigma=st.floats(2, 6), k=st.floats(-2, 2), phase=st.floats(-4, 4))
def test_gaussian_with_a_wavenumber(center: float, sigma: float, k: float, phase: float) -> None:
    """Whatever center, width, wave number and phase, the moments are those asked for."""
    packet = GaussianPacket(
        center={"x": center}, sigma={"x": sigma}, wavenumber={"x": k}, amplitude=3.0, phase=phase
    )
    wanted = (center, sigma, k, 1 / (2 * sigma))
    assert moments(state(packet, LINE), LINE, 0) == pytest.approx(wanted, abs=1e-9)


@pytest.mark.parametrize(
    ("direction", "towards"),
    [
        (None, (1, 0)),
        (0.0, (1, 0)),
        (math.pi, (-1, 0)),
        (math.pi / 2, (0, 1)),
        (-math.pi / 2, (0, -1)),
        (math.radians(30), (math.sqrt(0.75), 0.5)),
    ],
)
def test_gaussian_directions(direction: float | None, towards: tuple[float, float]) -> None:
    """In a plane the wave number points along the direction, exactly along an axis."""
    packet = GaussianPacket(
        center={"x": 1.0, "y": 2.0}, sigma={"x": 4.0, "y": 3.0}, energy=0.1, direction=direction
    )
    k0 = math.sqrt(0.1 / ELECTRON.stiffness)
    psi = state(packet, PLANE)
    for axis, (center, sigma) in enumerate(((1.0, 4.0), (2.0, 3.0))):
        wanted = (center, sigma, k0 * towards[axis], 1 / (2 * sigma))
        assert moments(psi, PLANE, axis) == pytest.approx(wanted, abs=1e-8)
    start = launch(packet, PLANE, ELECTRON, ())
    assert start.wavevector == pytest.approx([k0 * part for part in towards])
    assert (start.wavevector[1] == 0.0) == (towards[1] == 0)


def test_gaussian_wraps_a_periodic_axis() -> None:
    """A packet near the end of a ring comes in at the other side."""
    ring = Grid((Axis("x", 0.0, 40.0, 200, RING),))
    edge = GaussianPacket(center={"x": 39.0}, sigma={"x": 3.0}, wavenumber={"x": math.pi / 10})
    middle = GaussianPacket(center={"x": 20.0}, sigma={"x": 3.0}, wavenumber={"x": math.pi / 10})
    turned = np.roll(state(middle, ring), 95)
    assert state(edge, ring) == pytest.approx(turned, abs=1e-12)


def test_total_energy_counts_from_the_scenarios_zero() -> None:
    """On a plateau the kinetic part is what is left above it."""
    plateau = Slab(name="plateau", height=0.05, x=Span(-70.0, 30.0))
    packet = GaussianPacket(center={"x": -20.0}, sigma={"x": 5.0}, total_energy=0.15)
    start = launch(packet, LINE, ELECTRON, (plateau,))
    assert start.potential == pytest.approx(0.05)
    assert start.energy(ELECTRON) == pytest.approx(0.15)
    assert start.wavevector[0] == pytest.approx(0.4193493103)


@pytest.mark.parametrize(
    ("piece", "energy", "message"),
    [
        (Field(strength={"x": 0.01}), 0.15, "uniform"),
        (Step(height=0.1, at=0.0), 0.15, "uniform"),
        (Slab(height=0.3), 0.15, "at least V"),
    ],
)
def test_total_energy_needs_a_uniform_potential(piece: Piece, energy: float, message: str) -> None:
    """Where V varies over the packet, or exceeds the energy, that is said."""
    packet = GaussianPacket(name="wave", center={"x": -10.0}, sigma={"x": 5.0}, total_energy=energy)
    with pytest.raises(ScenarioError, match=rf"packet\.wave\.total_energy.*{message}"):
        state(packet, LINE, piece)


def test_combined_packets_interfere() -> None:
    """Two packets of amplitudes 1 and 2, apart, hold 1/5 and 4/5; phases stay."""
    left = GaussianPacket(center={"x": -40.0}, sigma={"x": 4.0}, wavenumber={"x": 0.0})
    right = GaussianPacket(
        center={"x": 40.0}, sigma={"x": 4.0}, wavenumber={"x": 0.0}, amplitude=2.0, phase=1.2
    )
    psi, found = initial_state((left, right), LINE, ELECTRON, ())
    assert found is None
    half = LINE.coordinates[0] < 0
    assert np.sum(np.abs(psi[half]) ** 2) * LINE.cell == pytest.approx(0.2, abs=1e-12)
    at = [int(np.argmin(np.abs(LINE.coordinates[0] - x))) for x in (-40.0, 40.0)]
    assert np.angle(psi[at[1]] / psi[at[0]]) == pytest.approx(1.2)


def test_opposite_packets_leave_nothing() -> None:
    """A sum that vanishes is refused."""
    one = GaussianPacket(center={"x": 0.0}, sigma={"x": 4.0}, wavenumber={"x": 0.0})
    other = GaussianPacket(
        center={"x": 0.0}, sigma={"x": 4.0}, wavenumber={"x": 0.0}, phase=math.pi
    )
    with pytest.raises(ScenarioError, match="sum is not zero"):
        initial_state((one, other), LINE, ELECTRON, ())


def test_where_keeps_a_part_and_reports_what_was_found() -> None:
    """Half of a centered packet is found beyond its middle; a tail by the error function."""
    for at, wanted in ((0.0, 0.5), (4.0, 0.5 * math.erfc(1 / math.sqrt(2)))):
        packet = GaussianPacket(
            center={"x": 0.0},
            sigma={"x": 4.0},
            wavenumber={"x": 0.3},
            where=expression(f"x > {at}"),
        )
        psi, found = initial_state((packet,), LINE, ELECTRON, ())
        # A cut cell counts by its covered part: off by slope * dx^2/24 of the density.
        assert found == pytest.approx(wanted, abs=2e-4)
        assert LINE.norm(psi) == pytest.approx(1.0)
        assert not psi[LINE.coordinates[0] < at - 0.2].any()
    plain = GaussianPacket(center={"x": -50.0}, sigma={"x": 4.0}, wavenumber={"x": 0.3})
    found = initial_state((packet, plain), LINE, ELECTRON, ())[1]
    assert found == pytest.approx((wanted + 1) / 2, abs=1e-4)


@pytest.mark.parametrize("center", [0.0, 0.0123, 0.0371])
def test_half_of_a_packet_is_found_beyond_its_center(center: float) -> None:
    """Cut at its center, wherever that lies between the points, a packet keeps a half."""
    packet = GaussianPacket(
        center={"x": center},
        sigma={"x": 4.0},
        wavenumber={"x": 0.3},
        where=expression(f"x > {center}"),
    )
    _, found = initial_state((packet,), LINE, ELECTRON, ())
    # The cut cell's density falls by (dx/sigma)^2/8 at most to the cut: a part of its 1 %.
    assert found == pytest.approx(0.5, abs=2e-6)


def test_eigenstate_is_the_traps_ground_state() -> None:
    """The ground state of a trap is the Gaussian of its width; a kick moves it."""
    trap = Harmonic(name="trap", quantum={"x": 0.02})
    width = ground_width(0.02, ELECTRON.stiffness)
    psi = state(Eigenstate(wavenumber={"x": 0.2}), LINE, trap)
    wanted = (0.0, width, 0.2, 1 / (2 * width))
    assert moments(psi, LINE, 0) == pytest.approx(wanted, abs=1e-8)
    assert psi[0] == 0.0


def test_eigenstate_of_named_pieces_before_the_start() -> None:
    """`of` chooses pieces; one that acts only during the run is left out."""
    trap = Harmonic(name="trap", quantum={"x": 0.02}, center={"x": 5.0}, acts="before")
    other = Step(name="step", height=0.5, at=3.0)
    late = Slab(name="late", height=9.0, x=Span(0, 1), acts="during")
    psi = state(Eigenstate(of=("trap",)), LINE, trap, other, late)
    assert moments(psi, LINE, 0)[0] == pytest.approx(5.0, abs=1e-9)
    shifted = state(Eigenstate(), LINE, trap, other, late)
    assert moments(shifted, LINE, 0)[0] < 0.0
    with pytest.raises(ScenarioError, match=r"of: need names of pieces .*late, step, trap"):
        state(Eigenstate(of=("trip",)), LINE, trap, other, late)


def test_eigenstates_by_two_numbers() -> None:
    """In a round trap {x = 1, y = 0} is the product; the number 1 is refused as degenerate."""
    trap = Harmonic(quantum={"x": 0.02, "y": 0.02})
    grid = Grid((Axis("x", -50.0, 50.0, 60), Axis("y", -50.0, 50.0, 60)))
    psi = state(Eigenstate(number={"x": 1, "y": 0}), grid, trap)
    width = ground_width(0.02, ELECTRON.stiffness)
    assert moments(psi, grid, 0)[1] == pytest.approx(math.sqrt(3) * width, rel=1e-6)
    assert moments(psi, grid, 1)[1] == pytest.approx(width, rel=1e-6)
    with pytest.raises(ScenarioError, match=r"1 equal to 2.*give \{ x, y \}"):
        state(Eigenstate(number=1), grid, trap)
    mixed = Formula(expression=expression("1e-9*x*y*(x + y)"))
    with pytest.raises(ScenarioError, match=r"a\(x\) \+ b\(y\)"):
        state(Eigenstate(number={"x": 1, "y": 0}), grid, trap, mixed)


def test_eigenstates_of_differences_are_theirs() -> None:
    """With differences the state is stationary for them, not for the spectral operator."""
    trap = Harmonic(quantum={"x": 0.02})
    coarse = Grid((Axis("x", -60.0, 60.0, 60),))
    walled = coarse.walled()
    kinetic = StaggeredKinetic(walled, ELECTRON, (ELECTRON.mass,), 4)
    residuals = []
    for differences in (4, None):
        psi = initial_state((Eigenstate(),), coarse, ELECTRON, (trap,), differences)[0][1:]
        image = kinetic.apply(psi) + total((trap,), walled, ELECTRON) * psi
        residuals.append(walled.norm(image - walled.inner(psi, image) * psi))
    assert residuals[0] < 1e-24
    assert residuals[1] > 1e-12


def test_channel_packet_rides_on_a_transverse_level() -> None:
    """Across the travel it is the trap's state; its energy adds to the level."""
    trap = Harmonic(quantum={"y": 0.02})
    packet = ChannelPacket(center={"x": -30.0}, sigma={"x": 6.0}, mode=1, total_energy=0.13)
    start = launch(packet, PIPE, ELECTRON, (trap,))
    assert start.level == pytest.approx(harmonic_levels(2, 0.02)[1], abs=1e-9)
    assert start.energy(ELECTRON) == pytest.approx(0.13)
    k = math.sqrt(0.1 / ELECTRON.stiffness)
    psi = state(packet, PIPE, trap)
    width = ground_width(0.02, ELECTRON.stiffness)
    assert moments(psi, PIPE, 0) == pytest.approx((-30.0, 6.0, k, 1 / 12), abs=1e-8)
    assert moments(psi, PIPE, 1)[:3] == pytest.approx((0.0, math.sqrt(3) * width, 0.0), abs=1e-7)


def test_channel_packet_along_y() -> None:
    """The same, travelling towards -y, with a mass that changes nothing."""
    trap = Harmonic(quantum={"x": 0.02})
    uniform = Slab(height=0.0, mass=ELECTRON.mass)
    grid = Grid((PIPE.axes[1].__class__("x", -50.0, 50.0, 120), Axis("y", -80.0, 80.0, 256)))
    packet = ChannelPacket(center={"y": 30.0}, sigma={"y": 6.0}, energy=0.1, direction=-math.pi / 2)
    k = math.sqrt(0.1 / ELECTRON.stiffness)
    psi = state(packet, grid, trap)
    assert moments(psi, grid, 1) == pytest.approx((30.0, 6.0, -k, 1 / 12), abs=1e-8)
    by_differences = launch(packet, grid, ELECTRON, (trap, uniform))
    assert by_differences.level == pytest.approx(0.01, rel=1e-2)
    assert by_differences.level != launch(packet, grid, ELECTRON, (trap,)).level


def test_channel_refuses_what_it_cannot_do() -> None:
    """Too little energy, or a level of two states, is said."""
    trap = Harmonic(quantum={"y": 0.02})
    slow = ChannelPacket(center={"x": 0.0}, sigma={"x": 6.0}, total_energy=0.005)
    with pytest.raises(ScenarioError, match="transverse level"):
        state(slow, PIPE, trap)
    ring = Grid((PIPE.axes[0], Axis("y", 0.0, 30.0, 60, RING)))
    turning = ChannelPacket(center={"x": 0.0}, sigma={"x": 6.0}, mode=1, energy=0.1)
    with pytest.raises(ScenarioError, match="level of one state"):
        state(turning, ring)


def test_formula_packet() -> None:
    """Real and imaginary part make the wave, normalised."""
    packet = FormulaPacket(
        expression=expression("exp(-x**2/64)*cos(0.4*x)"),
        imaginary=expression("exp(-x**2/64)*sin(0.4*x)"),
    )
    wanted = GaussianPacket(center={"x": 0.0}, sigma={"x": 4.0}, wavenumber={"x": 0.4})
    assert state(packet, LINE) == pytest.approx(state(wanted, LINE), abs=1e-13)
    start = launch(packet, LINE, ELECTRON, ())
    assert start.center == pytest.approx((0.0,), abs=1e-9)
    assert start.wavevector == pytest.approx((0.4,))


def test_table_packet_round_trip(tmp_path: Path) -> None:
    """A state written to a file and read back is the same; outside the file it is zero."""
    wanted = state(GaussianPacket(center={"x": 0.0}, sigma={"x": 4.0}, wavenumber={"x": 0.4}), LINE)
    x = LINE.coordinates[0]
    np.savetxt(tmp_path / "psi.csv", np.stack([x, wanted.real, wanted.imag], axis=1))
    packet = TablePacket(file=str(tmp_path / "psi.csv"))
    assert packet.faults(("x",)) == ()
    assert state(packet, LINE) == pytest.approx(wanted, abs=1e-12)
    inner = np.abs(x) < 30
    np.save(tmp_path / "psi.npy", np.stack([x[inner], wanted[inner]], axis=1))
    short = state(TablePacket(file=str(tmp_path / "psi.npy")), LINE)
    assert short[inner] == pytest.approx(wanted[inner], abs=1e-9)
    assert not short[~inner].any()


@pytest.mark.parametrize(
    ("packet", "message"),
    [
        (FormulaPacket(expression=expression("0*x")), "zero everywhere"),
        (FormulaPacket(expression=expression("sqrt(x)")), "not finite"),
        (FormulaPacket(expression=expression("exp(-1e4*(x + 0.1)**2)*0")), "zero everywhere"),
        (
            GaussianPacket(center={"x": 500.0}, sigma={"x": 1.0}, energy=0.1),
            r"center\.x: need a center on the grid, -80\.\.80, got 500",
        ),
        (
            FormulaPacket(expression=expression("exp(-x**2)"), where=expression("x > 99")),
            "where: need a part",
        ),
        (TablePacket(file="missing.csv"), "file: need a readable file"),
        (Eigenstate(number=600), "below"),
    ],
)
def test_packets_that_are_not_there(packet: Packet, message: str) -> None:
    """A packet that is zero, not finite or not on the grid is refused by name."""
    with pytest.raises(ScenarioError, match=message) as caught:
        state(packet, LINE)
    assert caught.value.faults[0].key.startswith(f"packet.{packet.shape}")


@pytest.mark.parametrize(
    ("packet", "axes", "keys"),
    [
        (GaussianPacket(center={"x": 0.0}, sigma={"x": 1.0}), "x", ["energy"]),
        (
            GaussianPacket(center={"x": 0.0}, sigma={"x": 1.0}, energy=1.0, total_energy=1.0),
            "x",
            ["total_energy"],
        ),
        (
            GaussianPacket(center={"x": 0.0}, sigma={"x": 1.0}, energy=1.0),
            "xy",
            ["center.y", "sigma.y"],
        ),
        (
            GaussianPacket(center={"x": 0.0, "y": 0.0}, sigma={"x": 1.0}, energy=1.0),
            "x",
            ["center.y"],
        ),
        (
            GaussianPacket(center={"x": 0.0}, sigma={"x": 1.0}, energy=1.0, direction=0.5),
            "x",
            ["direction"],
        ),
        (
            GaussianPacket(
                center={"x": 0.0}, sigma={"x": 1.0}, wavenumber={"x": 1.0}, direction=0.0
            ),
            "x",
            ["direction"],
        ),
        (ChannelPacket(center={"x": 0.0}, sigma={"x": 1.0}, energy=1.0), "x", ["shape"]),
        (
            ChannelPacket(center={"x": 0.0}, sigma={"x": 1.0}, energy=1.0, direction=0.5),
            "xy",
            ["direction"],
        ),
        (ChannelPacket(center={"x": 0.0}, sigma={}, energy=1.0), "xy", ["sigma.x"]),
        (ChannelPacket(center={"x": 0.0}, sigma={"x": 1.0}), "xy", ["energy"]),
        (Eigenstate(number={"x": 1}), "xy", ["number"]),
        (Eigenstate(wavenumber={"y": 1.0}), "x", ["wavenumber.y"]),
        (
            FormulaPacket(expression=expression("y"), imaginary=expression("t")),
            "x",
            ["expression", "imaginary"],
        ),
        (TablePacket(file="missing.csv"), "x", ["file"]),
    ],
)
def test_contradictions_are_named(packet: Packet, axes: str, keys: list[str]) -> None:
    """What is wrong between the fields of a packet, or for these axes, names its key."""
    assert [key for key, _ in packet.faults(tuple(axes))] == keys


def test_directions_read_and_write() -> None:
    """Names and angles read; what is written names an axis or an angle."""
    units = Plain()
    assert GaussianPacket.read_direction("-y", units) == -math.pi / 2
    assert GaussianPacket.read_direction("30 deg", units) == pytest.approx(math.pi / 6)
    assert GaussianPacket.write_direction(math.pi) == "-x"
    assert ChannelPacket.write_direction(0.5) == "0.5 rad"
    assert GaussianPacket.write_direction(None) is None
    for raw in ("up", 30, "30 nm"):
        with pytest.raises(ValueError, match="need \\+x, \\+y"):
            GaussianPacket.read_direction(raw, units)
    assert unit_vector(5 * math.pi) == (-1.0, 0.0)


def test_numbers_and_names_read_and_write() -> None:
    """Whole numbers, pairs and names read; anything else is refused."""
    units = Plain()
    for number in (0, 7, {"x": 1, "y": 0}):
        assert Eigenstate.write_number(Eigenstate.read_number(number, units)) == number
    for raw in (-1, True, 1.5, {"x": -1}, "one"):
        with pytest.raises(ValueError, match="whole number"):
            Eigenstate.read_number(raw, units)
    assert Eigenstate.read_of("trap", units) == ("trap",)
    assert Eigenstate.write_of(Eigenstate.read_of(["a", "b"], units)) == ["a", "b"]
    with pytest.raises(ValueError, match="list of names"):
        Eigenstate.read_of([1], units)


def test_every_packet_is_registered() -> None:
    """Each shape of the registry has its own name."""
    assert {shape: cls.shape for shape, cls in PACKETS.items()} == {s: s for s in PACKETS}

"""Pieces of the potential: values, edges, masses, slopes, errors."""

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from wavepack.errors import ScenarioError
from wavepack.fields import Span, specs
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.drives import Drive
from wavepack.physics.edges import profile
from wavepack.physics.expressions import Expression, compile_expression
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import (
    SHAPES,
    Aperture,
    Field,
    Formula,
    Gaussian,
    Harmonic,
    Layer,
    Layers,
    Morse,
    Piece,
    Ramp,
    Saddle,
    Screen,
    Sech2,
    Slab,
    SoftCore,
    Step,
    sample,
    sample_gradient,
    total,
)

# eV, nm, fs, electron masses; CODATA 2022.
ELECTRON = Particle(0.067, -1.0, 0.6582119569509067, 2 * 0.03809982110968584, 1.439964547842567)
LINE = Grid((Axis("x", -30.0, 30.0, 400),))
PLANE = Grid((Axis("x", -12.0, 12.0, 64), Axis("y", -9.0, 9.0, 48)))


class Plain:
    """Units that leave numbers as they are."""

    def convert(self, value: object, dimension: str) -> float:
        """Return a number as it is; a text is refused."""
        if not isinstance(value, int | float):
            raise ValueError(f"need {dimension}, got {value!r}")
        return float(value)


def expression(text: str) -> Expression:
    """Return a formula in x, y and t."""
    return compile_expression(text, variables=("x", "y", "t"))


def at(piece: Piece, *position: float, grid: Grid = LINE) -> float:
    """Return V of a piece at one position."""
    spacing = tuple(axis.spacing for axis in grid.axes)
    return float(piece.evaluate(tuple(np.array([x]) for x in position), spacing, ELECTRON)[0])


OMEGA = 0.02
SPRING = OMEGA**2 / (4 * ELECTRON.stiffness)


@pytest.mark.parametrize(
    ("piece", "values"),
    [
        (Slab(height=0.3, x=Span(0.0, 3.37)), {-5.0: 0.0, 1.7: 0.3, 9.0: 0.0}),
        (Slab(height=0.3, x=Span(lower=2.0)), {-5.0: 0.0, 9.0: 0.3}),
        (Slab(height=0.3, x=Span(upper=2.0)), {-5.0: 0.3, 9.0: 0.0}),
        (Slab(height=0.3), {-5.0: 0.3, 9.0: 0.3}),
        (Step(height=0.1, at=1.0), {-5.0: 0.0, 1.0: 0.05, 9.0: 0.1}),
        (Step(height=0.1, at=1.0, width=2.0), {1.0: 0.05, 3.0: 0.1 / (1 + math.exp(-1))}),
        (Ramp(x=Span(0.0, 10.0), heights=(0.2, 0.5)), {-5.0: 0.2, 4.0: 0.32, 25.0: 0.5}),
        (
            Layers(start=-2.0, layers=(Layer(thickness=4.0, height=0.3),) * 2),
            {-4.0: 0.0, 2.0: 0.3, 4.0: 0.3, 8.0: 0.0},
        ),
        (Gaussian(height=2.0, center={"x": 1.0}, sigma={"x": 3.0}), {4.0: 2 * math.exp(-0.5)}),
        (Sech2(height=0.2, at=1.0, width=2.0), {5.0: 0.2 / math.cosh(2.0) ** 2}),
        (Harmonic(quantum={"x": OMEGA}, center={"x": 1.0}), {4.0: 9 * SPRING}),
        (Saddle(height=0.5, quantum={"x": OMEGA}), {3.0: 0.5 - 9 * SPRING}),
        (Morse(depth=2.0, stiffness=0.5, at=1.0), {1.0: -2.0, 3.0: 2 * (1 - 1 / math.e) ** 2 - 2}),
        (
            SoftCore(charge=-2.0, softening=4.0, center={"x": 1.0}),
            {4.0: -2 * 1.439964547842567 / 5},
        ),
        # Charge -1 in a field along +x: energy +F x.
        (Field(strength={"x": 0.02}), {-3.0: -0.06, 5.0: 0.1}),
        (
            Field(strength={"x": 0.02}, start={"x": -5.0}, stop={"x": 10.0}),
            {-20.0: -0.1, 3.0: 0.06, 25.0: 0.2},
        ),
        (Formula(expression=expression("0.1*x**2")), {3.0: 0.9}),
    ],
)
def test_values_along_x(piece: Piece, values: Mapping[float, float]) -> None:
    """Each shape has the value of its formula."""
    for x, wanted in values.items():
        assert at(piece, x) == pytest.approx(wanted, rel=1e-12, abs=1e-15)


@pytest.mark.parametrize(
    ("piece", "position", "wanted"),
    [
        (Slab(height=1.0, x=Span(-4, 4), y=Span(lower=2.0)), (0.0, 6.0), 1.0),
        (Slab(height=1.0, x=Span(-4, 4), y=Span(lower=2.0)), (0.0, -3.0), 0.0),
        (Step(height=1.0, at=1.0, axis="y"), (-9.0, 5.0), 1.0),
        (Ramp(y=Span(0.0, 4.0), heights=(0.0, 1.0)), (-9.0, 2.0), 0.5),
        (Ramp(x=Span(0.0, 4.0), heights=(0.0, 1.0), axis="y"), (-9.0, 2.0), 0.5),
        (Gaussian(height=1.0, sigma={"x": 2.0}), (2.0, 7.0), math.exp(-0.5)),
        (Gaussian(height=1.0, sigma={"x": 2.0, "y": 1.0}), (2.0, 1.0), math.exp(-1.0)),
        (Saddle(height=0.1, quantum={"x": OMEGA, "y": OMEGA}), (3.0, 2.0), 0.1 - 5 * SPRING),
        (Harmonic(quantum={"y": OMEGA}), (3.0, 2.0), 4 * SPRING),
        (SoftCore(charge=1.0, softening=2.0), (4.0, 4.0), 1.439964547842567 / 6),
        (Field(strength={"x": 0.1, "y": 0.2}), (1.0, 2.0), 0.5),
        (Sech2(height=1.0, at=0.0, width=1.0, axis="y"), (5.0, 0.0), 1.0),
        (Morse(depth=1.0, stiffness=1.0, at=0.5, axis="y"), (5.0, 0.5), -1.0),
    ],
)
def test_values_in_a_plane(piece: Piece, position: tuple[float, float], wanted: float) -> None:
    """In two dimensions each shape acts along the axes it is given."""
    assert at(piece, *position, grid=PLANE) == pytest.approx(wanted, rel=1e-12, abs=1e-12)


def test_screen_is_open_at_its_apertures() -> None:
    """A wall with two slits is solid between and beside them and open in them."""
    wall = Screen(
        at=1.0,
        thickness=4.0,
        height=5.0,
        apertures=(Aperture(center=-5.0, width=3.0), Aperture(center=5.0, width=3.0)),
    )
    assert at(wall, 1.0, 0.0, grid=PLANE) == pytest.approx(5.0, abs=1e-3)
    assert at(wall, 1.0, 5.0, grid=PLANE) == pytest.approx(0.0, abs=2e-2)
    assert at(wall, 8.0, 0.0, grid=PLANE) == pytest.approx(0.0, abs=1e-9)
    assert wall.edges(0) == (-1.0, 3.0)
    assert wall.edges(1) == (-6.5, -3.5, 3.5, 6.5)
    opening = 4.0 * (18.0 - 6.0) * 5.0
    assert sample(wall, PLANE, ELECTRON).sum() * PLANE.cell == pytest.approx(opening, rel=1e-2)


def test_far_away_nothing_overflows() -> None:
    """Exponentials far from a piece stay numbers."""
    far = Grid((Axis("x", -1e5, 1e5, 11),))
    for piece in (
        Morse(depth=1.0, stiffness=2.0, at=0.0),
        Sech2(height=1.0, at=0.0, width=0.1),
        Gaussian(height=1.0, sigma={"x": 0.1}),
        Step(height=1.0, at=0.0, width=0.1),
    ):
        assert np.isfinite(sample(piece, far, ELECTRON)).all()


@given(shift=st.floats(0, 1))
def test_area_of_a_slab_does_not_depend_on_its_placement(shift: float) -> None:
    """A slab moved by any part of a spacing keeps its area to 1e-7 and its center."""
    dx = LINE.axes[0].spacing
    start = -1.7 + shift * dx
    values = sample(Slab(height=0.3, x=Span(start, start + 3.37)), LINE, ELECTRON)
    assert values.sum() * dx == pytest.approx(0.3 * 3.37, rel=1e-7)
    mean = np.sum(values * LINE.axes[0].coordinates) / values.sum()
    assert mean == pytest.approx(start + 3.37 / 2, abs=1e-7)


def test_neighbouring_layers_join_without_a_seam() -> None:
    """A stack equals the slabs it is made of."""
    stack = Layers(
        start=-3.0,
        layers=(
            Layer(thickness=2.0, height=0.3),
            Layer(thickness=5.0, height=0.0, mass=0.067),
            Layer(thickness=2.5, height=0.2, mass=0.1),
        ),
    )
    slabs = (Slab(height=0.3, x=Span(-3.0, -1.0)), Slab(height=0.2, x=Span(4.0, 6.5)))
    wanted = sum(sample(slab, LINE, ELECTRON) for slab in slabs)
    assert sample(stack, LINE, ELECTRON) == pytest.approx(wanted, abs=1e-14)
    assert stack.edges(0) == (-3.0, -1.0, 4.0, 6.5)
    assert stack.edges(1) == ()


def test_masses_are_smoothed_like_edges() -> None:
    """Slab, step and layers add their mass inside; others set none."""
    x = LINE.coordinates
    spacing = (LINE.axes[0].spacing,)
    inside = profile((x[0] - 1.0) / spacing[0]) - profile((x[0] - 6.0) / spacing[0])
    slab = Slab(height=0.0, x=Span(1.0, 6.0), mass=0.1)
    stack = Layers(start=1.0, layers=(Layer(thickness=5.0, height=0.3, mass=0.1),))
    for piece in (slab, stack):
        excess = piece.mass_excess(x, spacing, ELECTRON)
        assert excess == pytest.approx(0.033 * inside, abs=1e-15)
    beyond = Step(height=0.0, at=1.0, width=3.0, mass=0.1).mass_excess(x, spacing, ELECTRON)
    assert beyond == pytest.approx(0.033 * profile((x[0] - 1.0) / spacing[0]), abs=1e-15)
    for light in (Slab(height=1.0), Step(height=1.0, at=0.0), Sech2(height=1.0, at=0.0, width=1.0)):
        assert light.mass_excess(x, spacing, ELECTRON) is None


def test_sharp_formula_equals_a_slab() -> None:
    """A barrier written as a comparison is the slab, to the placement of its edges."""
    slab = Slab(height=0.3, x=Span(0.0, 3.37))
    formula = Formula(expression=expression("0.3*(0 < x < 3.37)"))
    assert formula.sharp
    assert sample(formula, LINE, ELECTRON) == pytest.approx(sample(slab, LINE, ELECTRON), abs=3e-5)
    told = Formula(expression=expression("0.3*(1 + tanh(1e9*x))/2"), jumps=True)
    step = Step(height=0.3, at=0.0)
    assert sample(told, LINE, ELECTRON) == pytest.approx(sample(step, LINE, ELECTRON), abs=3e-5)


def test_smooth_formula_is_not_smoothed() -> None:
    """A formula without comparison is V at the points."""
    formula = Formula(expression=expression("0.1*cos(x)"))
    assert not formula.sharp
    assert sample(formula, LINE, ELECTRON) == pytest.approx(0.1 * np.cos(LINE.coordinates[0]))


@pytest.mark.parametrize(
    ("piece", "slopes"),
    [
        (
            Gaussian(height=2.0, sigma={"x": 3.0, "y": 2.0}),
            lambda x, y: (
                -x / 9 * 2 * np.exp(-(x**2) / 18 - y**2 / 8),
                -y / 4 * 2 * np.exp(-(x**2) / 18 - y**2 / 8),
            ),
        ),
        (
            Harmonic(quantum={"x": OMEGA, "y": 2 * OMEGA}),
            lambda x, y: (2 * SPRING * x + 0 * y, 8 * SPRING * y + 0 * x),
        ),
        (
            Sech2(height=0.2, at=0.0, width=2.0),
            lambda x, y: (-0.2 * np.tanh(x / 2) / np.cosh(x / 2) ** 2 + 0 * y, 0 * x + 0 * y),
        ),
        (
            Field(strength={"x": 0.1}),
            lambda x, y: (0.1 + 0 * x + 0 * y, 0 * x + 0 * y),
        ),
        (
            Formula(expression=expression("where(x + y > -99, x*y**2, 0)")),
            lambda x, y: (y**2 + 0 * x, 2 * x * y),
        ),
    ],
)
def test_slopes(piece: Piece, slopes: Any) -> None:  # noqa: ANN401 - a formula in x and y
    """The slope along each axis is the derivative of V."""
    for axis, wanted in enumerate(slopes(*PLANE.coordinates)):
        slope = sample_gradient(piece, PLANE, ELECTRON, axis, slice(5, 40))
        assert slope == pytest.approx(wanted[5:40], abs=1e-8)


def test_slope_of_an_edge() -> None:
    """The slope of a sharp edge is its kernel, also between points."""
    dx = LINE.axes[0].spacing
    slope = sample_gradient(Step(height=1.0, at=0.4), LINE, ELECTRON, 0)
    z = (LINE.coordinates[0] - 0.4) / dx
    kernel = np.exp(-(z**2) / 2) * (3 - z**2) / 2 / math.sqrt(2 * math.pi) / dx
    assert slope == pytest.approx(kernel, abs=1e-6)


@pytest.mark.parametrize(
    "piece",
    [
        Slab(height=1.0, x=Span(-2, 3), y=Span(-1, 2)),
        Formula(expression=expression("x + y > 1")),
        SoftCore(charge=1.0, softening=1.0),
    ],
)
def test_blocks_of_rows_are_parts_of_the_whole(piece: Piece) -> None:
    """A block of rows of axis 0 is that part of the whole."""
    whole = sample(piece, PLANE, ELECTRON)
    assert whole.shape == PLANE.shape
    block = sample(piece, PLANE, ELECTRON, slice(10, 31))
    assert block == pytest.approx(whole[10:31], abs=1e-13)


def test_edges_are_smoothed_across_the_seam_of_a_ring() -> None:
    """On a periodic axis a slab all the way round is constant, and half of one has two edges."""
    ring = Grid((Axis("x", -10.0, 10.0, 100, ("periodic", "periodic")),))
    whole = sample(Slab(height=1.0, x=Span(-10.0, 10.0)), ring, ELECTRON)
    assert whole == pytest.approx(np.ones(100), abs=1e-12)
    for half in (Slab(height=1.0, x=Span(lower=0.0)), Slab(height=1.0, x=Span(0.0, 10.0))):
        values = sample(half, ring, ELECTRON)
        assert values.sum() * ring.cell == pytest.approx(10.0, abs=1e-4)
        assert values[0] == pytest.approx(0.5, abs=1e-3)
        assert values[50] == pytest.approx(0.5, abs=1e-3)
        slope = sample_gradient(half, ring, ELECTRON, 0)
        assert slope[0] == pytest.approx(-slope[50], abs=1e-3)


def test_total_adds_what_acts() -> None:
    """Pieces add up; `before` and `during` choose, and a drive multiplies."""
    pieces = (
        Slab(name="always", height=1.0),
        Slab(name="before", height=10.0, acts="before"),
        Slab(name="during", height=100.0, acts="during", drive=Drive(photon_energy=0.1)),
    )
    period = 4.135667696923859 / 0.1
    assert total(pieces, LINE, ELECTRON, phase="before")[0] == 11.0
    assert total(pieces, LINE, ELECTRON)[0] == 101.0
    assert total(pieces, LINE, ELECTRON, time=period / 2)[0] == pytest.approx(-99.0)
    assert total(pieces, LINE, ELECTRON, rows=slice(3, 9)).shape == (6,)


def test_potential_not_finite_is_refused() -> None:
    """A formula that is not finite at a point names the piece and the place."""
    grid = Grid((Axis("x", -1.0, 1.0, 4),))
    with pytest.raises(ScenarioError, match=r"potential\.pole.*finite.*inf at x = 0"):
        sample(Formula(name="pole", expression=expression("1/x**2")), grid, ELECTRON)
    with pytest.raises(ScenarioError, match=r"potential\.formula.*nan"):
        sample_gradient(Formula(expression=expression("sqrt(x)")), grid, ELECTRON, 0)


@pytest.mark.parametrize(
    ("piece", "key"),
    [
        (Slab(height=1.0, y=Span(0, 1)), "y"),
        (Slab(height=1.0, x=Span(3, 1)), "x"),
        (Step(height=1.0, at=0.0, axis="y"), "axis"),
        (Layers(start=0.0, layers=(Layer(thickness=1.0, height=1.0),), axis="y"), "axis"),
        (Ramp(x=Span(lower=0.0), heights=(0, 1)), "x"),
        (Ramp(x=Span(2, 1), heights=(0, 1)), "x"),
        (Ramp(y=Span(0, 1), heights=(0, 1)), "axis"),
        (Ramp(x=Span(0, 1), y=Span(0, 1), heights=(0, 1)), "y"),
        (Gaussian(height=1.0, sigma={"y": 1.0}), "sigma.y"),
        (Harmonic(quantum={"x": 1.0}, center={"y": 1.0}), "center.y"),
        (Saddle(quantum={"x": 1.0, "y": 1.0}), "quantum.y"),
        (SoftCore(charge=1.0, softening=1.0, center={"y": 1.0}), "center.y"),
        (Field(strength={"y": 1.0}), "strength.y"),
        (Field(strength={"x": 1.0}, start={"x": 2.0}, stop={"x": 1.0}), "to"),
        (Screen(at=0.0, thickness=1.0, height=1.0), "shape"),
        (Morse(depth=1.0, stiffness=1.0, at=0.0, axis="y"), "axis"),
        (Formula(expression=expression("x + t")), "expression"),
        (Formula(expression=expression("y")), "expression"),
    ],
)
def test_contradictions_are_named(piece: Piece, key: str) -> None:
    """What is wrong on a grid of x alone names its key."""
    assert [found for found, _ in piece.faults(("x",))] == [key]


def test_overlapping_apertures_are_refused() -> None:
    """Openings that share a part of y would count twice."""
    openings = (Aperture(center=0.0, width=3.0), Aperture(center=2.0, width=3.0))
    wall = Screen(at=0.0, thickness=1.0, height=1.0, apertures=openings)
    assert [key for key, _ in wall.faults(("x", "y"))] == ["apertures"]


def test_layers_read_from_both_forms() -> None:
    """Tables and lists read alike, and what is written reads back."""
    units = Plain()
    tables = [{"thickness": 2, "height": 0.3, "mass": 0.1}, {"thickness": 5, "height": 0}]
    read = Layers.read_layers(tables, units)
    assert read == Layers.read_layers([[2, 0.3, 0.1], [5, 0.0]], units)
    assert Layers.read_layers(Layers.write_layers(read), units) == read


@pytest.mark.parametrize(
    ("raw", "message"),
    [
        ([], "list of layers"),
        ([[1.0]], "layer 0: need"),
        ([[1.0, 0.3], {"thickness": 1.0}], "layer 1: need"),
        ([{"thickness": 1.0, "height": 1.0, "color": 3}], "layer 0: need"),
        ([[-1.0, 0.3]], "thickness > 0"),
        ([["two", 0.3]], "need length"),
    ],
)
def test_layers_refuse_other_forms(raw: object, message: str) -> None:
    """A stack of another form says what is wanted."""
    with pytest.raises(ValueError, match=message):
        Layers.read_layers(raw, Plain())


def test_heights_of_a_ramp() -> None:
    """A pair reads and writes; anything else is refused."""
    assert Ramp.read_heights([0, 0.5], Plain()) == (0.0, 0.5)
    assert Ramp.write_heights((0.0, 0.5)) == [0.0, 0.5]
    with pytest.raises(ValueError, match="list"):
        Ramp.read_heights(0.5, Plain())


def test_every_shape_declares_its_fields() -> None:
    """Each shape of the registry has its own name and reads name, acts and drive."""
    for shape, cls in SHAPES.items():
        assert cls.shape == shape
        assert {"name", "acts", "drive"} <= set(specs(cls))


def test_sharp_pieces_know_it() -> None:
    """Only pieces with a jump are sharp."""
    assert Slab(height=1.0, x=Span(0, 1)).sharp
    assert not Slab(height=1.0).sharp
    assert Step(height=1.0, at=0.0).edges(0) == (0.0,)
    assert not Step(height=1.0, at=0.0, width=1.0).sharp
    assert not Harmonic(quantum={"x": 1.0}).sharp
    assert Ramp(x=Span(0, 1), heights=(0, 1)).edges(0) == (0, 1)
    assert Field(strength={"x": 1.0}, stop={"x": 1.0}).edges(0) == (1.0,)

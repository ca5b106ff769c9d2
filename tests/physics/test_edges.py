"""Edges: the kernel's moments, windows, covered parts of cells, smoothed formulas."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.polynomial.hermite_e import hermegauss

from wavepack.arrays import RealArray
from wavepack.fields import Span
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.edges import (
    clipped,
    corner,
    covered_by_span,
    covered_fraction,
    density,
    profile,
    window,
)
from wavepack.physics.expressions import compile_expression
from wavepack.physics.smoothing import smoothed

LINE = Grid((Axis("x", -10.0, 10.0, 200),))
#: Halving between samples ends 2^-36 of a cell around a change; shares are rounded to 2^-31.
FINE = 1e-9
PLANE = Grid((Axis("x", -6.0, 6.0, 60), Axis("y", -5.0, 5.0, 40)))


def test_kernel_has_unit_weight_and_no_second_moment() -> None:
    """The slope of the profile integrates to 1, its second moment to 0, its fourth to -3 s^4."""
    z, weight = hermegauss(20)
    kernel = (3 - z**2) / 2 / math.sqrt(2 * math.pi)
    moments = [float(np.sum(weight * kernel * z**n)) for n in (0, 2, 4)]
    assert moments == pytest.approx([1.0, 0.0, -3.0], abs=1e-12)
    x, h = np.linspace(-3, 3, 13), 1e-5
    slope = (profile(x + h) - profile(x - h)) / (2 * h)
    assert slope == pytest.approx(density(x) * (3 - x**2) / 2, abs=1e-10)


def test_corner_is_the_integral_of_the_profile() -> None:
    """The corner's slope is the profile; far away it is 0 and z."""
    x, h = np.linspace(-4, 4, 17), 1e-5
    assert (corner(x + h) - corner(x - h)) / (2 * h) == pytest.approx(profile(x), abs=1e-9)
    assert corner(np.array([-30.0, 30.0])) == pytest.approx([0.0, 30.0], abs=1e-14)


def test_profile_of_infinite_distance() -> None:
    """Infinitely far from an edge the profile is 0 or 1 exactly."""
    assert profile(np.array([-np.inf, np.inf])).tolist() == [0.0, 1.0]


@given(start=st.floats(-3, 3), width=st.floats(1.5, 6))
def test_window_moments_are_those_of_the_interval(start: float, width: float) -> None:
    """Sums over points give the interval's length, center and second moment wherever it lies.

    To 1e-7 relative, what the kernel's spectrum leaves at the first alias.
    """
    axis = LINE.axes[0]
    x, dx = axis.coordinates, axis.spacing
    inside = window(Span(start, start + width), x, dx)
    stop = start + width
    for power in range(3):
        exact = (stop ** (power + 1) - start ** (power + 1)) / (power + 1)
        scale = dx * max(abs(start), abs(stop), 1.0) ** power
        assert abs(float(np.sum(inside * x**power)) * dx - exact) < 5e-7 * scale


def test_clipped_is_linear_inside_and_constant_outside() -> None:
    """Away from its corners the clipped coordinate is x or the nearer end."""
    x = np.array([-9.0, -1.0, 0.0, 2.0, 9.0])
    assert clipped(x, Span(-2.0, 3.0), 0.1) == pytest.approx([-2, -1, 0, 2, 3], abs=1e-14)
    assert clipped(x, Span(), 0.1) is x


@given(lower=st.floats(-12, 12), width=st.floats(0, 15))
def test_covered_parts_add_up_to_the_length(lower: float, width: float) -> None:
    """The covered parts of all cells times the spacing give the length inside, exactly."""
    axis = LINE.axes[0]
    covered = covered_by_span(Span(lower, lower + width), axis)
    half = axis.spacing / 2
    first, last = axis.coordinates[0] - half, axis.coordinates[-1] + half
    length = max(0.0, min(lower + width, last) - max(lower, first))
    assert covered.sum() * axis.spacing == pytest.approx(length, abs=1e-12)
    assert 0.0 <= covered.min() <= covered.max() <= 1.0


def test_half_spaces_cover_each_cell_once() -> None:
    """Two half-spaces that meet cover every cell once, also on a walled axis."""
    axis = Axis("x", 0.0, 1.0, 9, ("walls", "walls"))
    both = covered_by_span(Span(upper=0.33), axis) + covered_by_span(Span(lower=0.33), axis)
    assert both == pytest.approx(np.ones(9), abs=1e-14)


def shares(text: str, grid: Grid) -> RealArray:
    """Return the covered share of each cell."""
    counts, parts = covered_fraction(compile_expression(text, variables=("x", "y", "t")), grid)
    return counts / parts


def test_covered_fraction_of_halves_and_quarters() -> None:
    """A half-plane cut through cells covers a half, a quarter, nothing, everything."""
    assert shares("x > 0", LINE)[98:103] == pytest.approx([0, 0, 0.5, 1, 1], abs=FINE)
    corner_cells = shares("x > 0 and y > 0", PLANE)[29:32, 19:22]
    assert corner_cells == pytest.approx(
        np.array([[0, 0, 0], [0, 0.25, 0.5], [0, 0.5, 1]]), abs=FINE
    )


@pytest.mark.parametrize("edge", [0.0, 0.0371, 0.0499, 0.05, 1.0 / 3.0])
def test_where_covers_what_a_span_covers(edge: float) -> None:
    """A comparison counts each cell as the span with the same edge does, on both axes."""
    span = Span(lower=edge)
    assert shares(f"x > {edge}", LINE) == pytest.approx(
        covered_by_span(span, LINE.axes[0]), abs=FINE
    )
    columns = covered_by_span(span, PLANE.axes[0])[:, None] * np.ones(40)
    assert shares(f"x > {edge}", PLANE) == pytest.approx(columns, abs=FINE)
    rows = covered_by_span(span, PLANE.axes[1])[None, :] * np.ones((60, 1))
    assert shares(f"y > {edge}", PLANE) == pytest.approx(rows, abs=FINE)


def test_covered_areas() -> None:
    """A strip aslant and a disc have their areas; a set and the rest share each cell."""
    aslant = shares("abs(x + 0.37*y) < 1.234", PLANE)[:, 1:]
    assert aslant.sum() * PLANE.cell == pytest.approx(2 * 1.234 * 39 * 0.25, rel=1e-4)
    disc = shares("x**2 + y**2 < 4", PLANE)
    assert disc.sum() * PLANE.cell == pytest.approx(4 * math.pi, rel=1e-4)
    assert (disc + shares("x**2 + y**2 >= 4", PLANE)).max() <= 1 + FINE


def test_covered_fraction_wraps_a_periodic_axis() -> None:
    """The first cell of a periodic axis reaches back across the end."""
    grid = Grid((Axis("x", 0.0, 10.0, 10, ("periodic", "periodic")),))
    wanted = [0.5, 0, 0, 0, 0, 0.5, 1, 1, 1, 1]
    assert shares("x > 5", grid) == pytest.approx(wanted, abs=FINE)
    plane = Grid((*grid.axes, Axis("y", 0.0, 4.0, 4, ("periodic", "periodic"))))
    wide = np.array(wanted)[:, None] * np.ones(4)
    assert shares("x > 5", plane) == pytest.approx(wide, abs=FINE)


@pytest.mark.parametrize("start", [0.0, 0.013, 0.0371])
def test_smoothed_formula_equals_the_window(start: float) -> None:
    """A box written as a comparison is the same as the window, to a 1/4,000 of a spacing."""
    axis = LINE.axes[0]

    def box(mesh: tuple[RealArray, ...]) -> RealArray:
        return ((mesh[0] > start) & (mesh[0] < start + 3.37)).astype(float)

    exact = window(Span(start, start + 3.37), axis.coordinates, axis.spacing)
    # A jump is off by at most 1/8192 of a spacing; the kernel's peak is 0.6.
    assert smoothed(box, LINE) == pytest.approx(exact, abs=0.6 / 8192)


def test_smoothed_slope_is_the_slope_of_the_window() -> None:
    """The slope of a smoothed jump is the kernel at the points."""
    axis = LINE.axes[0]
    slope = smoothed(lambda mesh: (mesh[0] > 0.03).astype(float), LINE, slope=0)
    z = (axis.coordinates - 0.03) / axis.spacing
    assert slope == pytest.approx(density(z) * (3 - z**2) / 2 / axis.spacing, abs=2e-3)


def test_smoothing_keeps_cubic_polynomials() -> None:
    """A kernel without second moment leaves a cubic and its slope unchanged.

    But for what the lattice takes for a jump: a few samples a thousandth of
    their size apart.
    """
    x, y = PLANE.coordinates
    cubic = smoothed(lambda mesh: mesh[0] ** 3 - mesh[0] * mesh[1] ** 2, PLANE)
    slope = smoothed(lambda mesh: mesh[0] ** 3 - mesh[0] * mesh[1] ** 2, PLANE, slope=1)
    assert cubic == pytest.approx(x**3 - x * y**2, abs=1e-8)
    assert slope == pytest.approx(-2 * x * y, abs=1e-7)


def test_smoothed_disc_has_its_area() -> None:
    """A disc written as a comparison keeps its area to 1e-4."""
    disc = smoothed(lambda mesh: (mesh[0] ** 2 + mesh[1] ** 2 < 9).astype(float), PLANE)
    assert disc.sum() * PLANE.cell == pytest.approx(9 * math.pi, rel=1e-4)


def test_smoothing_in_blocks_changes_nothing() -> None:
    """Rows smoothed apart equal the same rows of the whole."""

    def wedge(mesh: tuple[RealArray, ...]) -> RealArray:
        return np.where(mesh[0] > 0.3 * mesh[1], 1.0 + mesh[0], 0.0)

    whole = smoothed(wedge, PLANE)
    parts = [smoothed(wedge, PLANE, slice(0, 23)), smoothed(wedge, PLANE, slice(23, 60))]
    assert np.concatenate(parts) == pytest.approx(whole, abs=1e-12)


def test_smoothing_wraps_a_periodic_axis() -> None:
    """On a periodic axis a jump at the end is smoothed on both sides of it."""
    grid = Grid((Axis("x", 0.0, 10.0, 50, ("periodic", "periodic")),))
    values = smoothed(lambda mesh: (mesh[0] < 5.0).astype(float), grid)
    assert values[0] == pytest.approx(0.5, abs=1e-3)
    assert values[-2] == pytest.approx(float(profile(-2.0)), abs=1e-3)


def test_smoothing_beyond_the_domain_of_a_formula() -> None:
    """Where a formula is not finite beyond the ends, the nearest point's value serves."""
    grid = Grid((Axis("x", 0.0, 5.0, 49, ("walls", "walls")),))
    values = smoothed(lambda mesh: np.sqrt(mesh[0]) * (mesh[0] > 2.0), grid)
    assert np.isfinite(values).all()


def test_a_span_goes_around_a_ring() -> None:
    """A span of a whole periodic axis covers every cell, two halves add up to it."""
    ring = Axis("x", -10.0, 10.0, 40, ("periodic", "periodic"))
    assert covered_by_span(Span(-10.0, 10.0), ring) == pytest.approx(1.0)
    left, right = covered_by_span(Span(-10.0, 0.0), ring), covered_by_span(Span(0.0, 10.0), ring)
    assert left + right == pytest.approx(np.ones(40))
    assert left[0] == pytest.approx(0.5)


def test_a_span_to_an_absorbing_end_goes_on_beyond_it() -> None:
    """Nothing is lost between a region's edge and the end of the axis."""
    open_ended = Axis("x", -10.0, 10.0, 40)
    assert covered_by_span(Span(-10.0, 10.0), open_ended) == pytest.approx(1.0)

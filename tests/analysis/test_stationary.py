"""Stationary scattering along a line against closed forms, and its averages."""

import math

import numpy as np
import pytest

from tests.closed_forms.reference_values import HBAR, HBAR2_PER_2ME, MASS, Row, rows
from tests.tolerances import EPS, INTEGRATED
from wavepack.analysis.quadrature import integral
from wavepack.analysis.stationary import Line
from wavepack.arrays import RealArray
from wavepack.fields import Span
from wavepack.physics import exact
from wavepack.physics.expressions import compile_expression
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import (
    Field,
    Formula,
    Layer,
    Layers,
    Piece,
    Ramp,
    Sech2,
    Slab,
    Step,
)

PARTICLE = Particle(MASS, -1.0, HBAR, 2 * HBAR2_PER_2ME, 1.44)
C = PARTICLE.stiffness
ENERGIES = np.linspace(0.02, 0.49, 25)

#: Nothing at all, but of no constant layers: makes a stack go by integration.
NOTHING = Sech2(height=0.0, at=0.0, width=1.0)

#: The matrices of a stack: rounding of cosines, whose phases are some ten radians.
MATRICES = 1000 * EPS


def line(*pieces: Piece, from_right: bool = False) -> Line:
    """Return a line of 100 nm."""
    return Line(pieces, PARTICLE, -50.0, 50.0, 0.2, from_right)


def stack_of(row: Row) -> Layers:
    """Return the double barrier of a row."""
    p = row.parameters
    barrier = Layer(thickness=p["barrier"], height=p["height"], mass=p["barrier_mass"])
    return Layers(start=0.0, layers=(barrier, Layer(thickness=p["well"], height=0.0), barrier))


def agree(scene: Line, wanted: RealArray, tolerance: float, energies: RealArray = ENERGIES) -> None:
    """Hold transmission against a closed form, and reflection, computed apart, against it too."""
    transmission, reflection = scene.scatter(energies)
    np.testing.assert_allclose(transmission, wanted, rtol=0, atol=tolerance)
    np.testing.assert_allclose(reflection, 1 - wanted, rtol=0, atol=tolerance)


SLAB = Slab(height=0.3, x=Span(0.0, 3.37))
BARRIER = exact.rectangular_barrier(ENERGIES, 0.3, 3.37, C)


def test_slab_by_matrices() -> None:
    """A rectangular barrier is exact."""
    agree(line(SLAB), BARRIER, MATRICES)


def test_slab_by_integration() -> None:
    """The same barrier among smooth pieces keeps its sharp edges."""
    agree(line(SLAB, NOTHING), BARRIER, INTEGRATED)


def test_formula_that_jumps() -> None:
    """Jumps of a formula are found, wherever they lie."""
    text = compile_expression("where((x > 0) and (x < 3.37), 0.3, 0) + 0.001 * exp(-(x**2))")
    smooth = compile_expression("0.001 * exp(-(x**2))")
    wanted, _ = line(SLAB, Formula(expression=smooth)).scatter(ENERGIES)
    jumping = line(Formula(expression=text))
    np.testing.assert_allclose(jumping.cuts, [-50.0, 0.0, 3.37, 50.0], rtol=0, atol=1e-10)
    agree(jumping, wanted, INTEGRATED)


def test_sech2() -> None:
    """A smooth barrier, in front of it and above it."""
    wanted = exact.sech2_barrier(ENERGIES, 0.2, 3.0, C)
    agree(line(Sech2(height=0.2, at=0.0, width=3.0)), wanted, INTEGRATED)


@pytest.mark.parametrize("from_right", [False, True])
def test_smooth_step(*, from_right: bool) -> None:
    """Up or down, a smooth step throws the same back, and all of it where it is closed."""
    wanted = 1 - exact.smooth_step_reflection(ENERGIES, 0.1, 1.5, C)
    opened = ENERGIES > 0.1 if from_right else ENERGIES > 0.0
    step = line(Step(height=0.1, at=0.0, width=1.5), from_right=from_right)
    agree(step, wanted[opened], INTEGRATED, ENERGIES[opened])


def test_sharp_step_of_height_and_mass() -> None:
    """Behind a step of another mass the current, not the slope, is what stays."""
    wanted = exact.sharp_step(ENERGIES, 0.1, C, PARTICLE.stiffness_of(0.1))
    step = Step(height=0.1, at=0.0, mass=0.1)
    agree(line(step), wanted, MATRICES)
    agree(line(step, NOTHING), wanted, INTEGRATED)


@pytest.mark.parametrize("field", [False, True])
def test_tilted_barrier(*, field: bool) -> None:
    """A barrier in a field, given as a field or as a ramp, against Airy functions."""
    half = Slab(height=-0.3, x=Span(upper=0.0))
    tilt: Piece = Ramp(x=Span(0.0, 20.0), heights=(0.3, -0.1))
    if field:
        tilt = Field(strength={"x": -0.02}, start={"x": 0.0}, stop={"x": 20.0})
        half = Slab(height=0.3, x=Span(lower=0.0))
    wanted = exact.triangular_barrier(ENERGIES, 0.3, 0.02, 20.0, C)
    agree(line(half, tilt), wanted, INTEGRATED)


@pytest.mark.parametrize("check", ["P8", "P9"])
def test_double_barriers(check: str) -> None:
    """Both double barriers, without and with masses of their own, reach the tabled values."""
    tabled = [row for row in rows(check) if row.quantity == "double_barrier"]
    energies = np.array([row.parameters["energy"] for row in tabled])
    assert energies.size > 5
    stack = stack_of(tabled[0])
    for pieces in ((stack,), (stack, NOTHING)):
        transmission, _ = line(*pieces).scatter(energies)
        for found, row in zip(transmission, tabled, strict=True):
            assert abs(found - row.value) <= row.uncertainty + INTEGRATED


def test_thick_barrier_does_not_overflow() -> None:
    """Through 80 nm of barrier next to nothing passes, and all is thrown back."""
    thick = Slab(height=2.0, x=Span(-40.0, 40.0))
    for pieces in ((thick,), (thick, NOTHING)):
        transmission, reflection = line(*pieces).scatter(np.array([0.05]))
        assert 0 < transmission[0] < 1e-100
        assert reflection[0] == pytest.approx(1, abs=INTEGRATED)
        # sinh(150) squared is still a number.
        wanted = math.log(exact.rectangular_barrier(0.05, 2.0, 80.0, C))
        assert math.log(transmission[0]) == pytest.approx(wanted, abs=1e-6)


def test_no_wave_grows_out_of_hand() -> None:
    """The way is cut so short that amplitudes stay numbers however thick a barrier is."""
    thick = line(Slab(height=60.0, x=Span(-40.0, 40.0)), NOTHING)
    decay = math.sqrt((60.0 - 0.05) / C)
    parts = thick.short(-40.0, 40.0, 0.05)
    assert all(abs(a - b) * decay < 10 for a, b in parts)
    assert parts[0][0] == 40.0
    assert parts[-1][1] == -40.0


def test_average_finds_a_narrow_line() -> None:
    """The adaptive rule finds a line a thousandth as wide as the packet."""
    width, at = 1e-3, 0.37

    def lorentz(x: RealArray) -> RealArray:
        return np.asarray(width**2 / ((x - at) ** 2 + width**2))[None]

    (found,), error = integral(lorentz, [0.0, 0.25, 0.5, 0.75, 1.0], 1e-10)
    wanted = width * (math.atan((1 - at) / width) + math.atan(at / width))
    assert found == pytest.approx(wanted, abs=1e-10)
    assert abs(found - wanted) <= max(error, 1e-12)


def test_average_says_when_it_gives_up() -> None:
    """With too few values allowed the error says that more were wanted."""
    _, error = integral(lambda x: np.sqrt(np.abs(x - 0.3))[None], [0.0, 1.0], 1e-14, most=40)
    assert error > 1e-6

"""Stacks of layers against the integrated equation, unitarity and limits."""

import math

import numpy as np
import pytest

from tests.physics.exact.by_integration import scatter
from wavepack.physics import exact

C = 0.5686540464132216
HEAVY = 0.4141284903226720


def test_rough_stack_solves_its_equation() -> None:
    """Flat and tilted layers between unequal leads, all energies: T and R alike."""
    layers = (
        exact.Layer(1.5, 0.3, C),
        exact.Layer(2.0, -0.1, C, 0.15),
        exact.Layer(1.0, 0.25, C, -0.2),
        exact.Layer(2.5, 0.05, C),
    )
    stack = exact.Stack(layers, exact.Lead(0.0, C), exact.Lead(-0.05, C))
    edges = np.cumsum([0.0, 1.5, 2.0, 1.0, 2.5])

    def potential(x: float) -> float:
        if x < 0 or x > edges[-1]:
            return 0.0 if x < 0 else -0.05
        index = min(int(np.searchsorted(edges, x, side="right")) - 1, 3)
        layer = layers[index]
        far = layer.height if layer.far_height is None else layer.far_height
        return layer.height + (far - layer.height) * (x - float(edges[index])) / layer.thickness

    for energy in (0.01, 0.05, 0.12, 0.3, 0.7):
        transmitted, reflected = scatter(potential, energy, C, edges.tolist())
        assert float(exact.stack_transmission(stack, energy)) == pytest.approx(
            transmitted, abs=2e-11
        )
        assert float(exact.stack_reflection(stack, energy)) == pytest.approx(reflected, abs=2e-11)


@pytest.mark.parametrize("energy", [0.08, 0.3, 0.5])
def test_heavy_barrier_solves_its_equation(energy: float) -> None:
    """With another mass inside, c psi' and not psi' is continuous."""
    lead = exact.Lead(0.0, C)
    stack = exact.Stack((exact.Layer(3.0, 0.3, HEAVY),), lead, lead)
    transmitted, _ = scatter(
        lambda x: 0.3 if 0 < x < 3 else 0.0, energy, C, (0.0, 3.0), c_inside=HEAVY
    )
    assert float(exact.stack_transmission(stack, energy)) == pytest.approx(transmitted, abs=1e-11)


def test_one_layer_is_the_rectangular_barrier() -> None:
    """One flat layer gives the closed form, at its very top too."""
    stack = exact.uniform_stack([(4.0, 0.3)], C)
    energies = np.array([-0.1, 0.01, 0.15, 0.3, 0.31, 2.0])
    assert exact.stack_transmission(stack, energies) == pytest.approx(
        exact.rectangular_barrier(energies, 0.3, 4.0, C), abs=1e-13
    )


def test_no_layer_is_the_sharp_step() -> None:
    """An empty stack is a step of potential and mass."""
    stack = exact.Stack((), exact.Lead(0.0, C), exact.Lead(0.1, HEAVY))
    energies = np.array([0.05, 0.12, 0.4])
    assert exact.stack_transmission(stack, energies) == pytest.approx(
        exact.sharp_step(energies, 0.1, C, HEAVY), abs=1e-14
    )
    assert stack.thickness == 0


def test_books_balance() -> None:
    """T + R = 1 for a stack of twenty random layers, each with its own mass and tilt."""
    rng = np.random.default_rng(7)
    low, high = (0.1, -0.5, 0.2, -0.5), (3.0, 0.8, 2.0, 0.8)
    layers = tuple(
        exact.Layer(thickness, height, c, far)
        for thickness, height, c, far in rng.uniform(low, high, (20, 4)).tolist()
    )
    stack = exact.Stack(layers, exact.Lead(0.0, C), exact.Lead(0.07, HEAVY))
    energies = np.linspace(0.08, 2.0, 300)
    total = exact.stack_transmission(stack, energies) + exact.stack_reflection(stack, energies)
    assert np.abs(total - 1).max() < 1e-10


def test_direction_does_not_matter() -> None:
    """A stack transmits alike from either side (reciprocity)."""
    layers = (exact.Layer(2.0, 0.3, C), exact.Layer(4.0, 0.0, HEAVY, 0.1), exact.Layer(1.0, 0.5, C))
    turned = (exact.Layer(1.0, 0.5, C), exact.Layer(4.0, 0.1, HEAVY, 0.0), exact.Layer(2.0, 0.3, C))
    left, right = exact.Lead(0.0, C), exact.Lead(-0.1, HEAVY)
    energies = np.array([0.02, 0.1, 0.45])
    there = exact.stack_transmission(exact.Stack(layers, left, right), energies)
    back = exact.stack_transmission(exact.Stack(turned, right, left), energies)
    assert there == pytest.approx(back, rel=1e-12)


def test_stairs_tend_to_the_tilt() -> None:
    """A tilted layer is the limit of ever finer stairs, at second order."""
    tilted = float(exact.triangular_barrier(0.2, 0.5, 0.1, 5.0, C))
    errors = []
    for steps in (50, 100):
        heights = 0.5 - 0.5 * (np.arange(steps) + 0.5) / steps
        stack = exact.uniform_stack([(5.0 / steps, float(h)) for h in heights], C)
        errors.append(float(exact.stack_transmission(stack, 0.2)) - tilted)
    assert errors[0] / errors[1] == pytest.approx(4.0, abs=0.05)


def test_slight_tilt_is_flat() -> None:
    """As the slope goes to nothing the Airy matrix goes over into the flat one."""
    lead = exact.Lead(0.0, C)
    flat = exact.uniform_stack([(4.0, 0.3)], C)
    slight = exact.Stack((exact.Layer(4.0, 0.3, C, 0.3 - 1e-7),), lead, lead)
    energies = np.array([0.1, 0.4])
    assert exact.stack_transmission(slight, energies) == pytest.approx(
        exact.stack_transmission(flat, energies), abs=1e-6
    )


def test_thick_barriers_do_not_overflow() -> None:
    """T of a very thick barrier, flat or tilted, is tiny or zero, and R is 1."""
    for layer in (exact.Layer(2e3, 0.5, C), exact.Layer(2e3, 0.5, C, 0.6)):
        stack = exact.Stack((layer,), exact.Lead(0.0, C), exact.Lead(0.0, C))
        assert float(exact.stack_transmission(stack, 0.1)) == 0.0
        assert float(exact.stack_reflection(stack, 0.1)) == pytest.approx(1.0, abs=1e-12)


def test_closed_leads() -> None:
    """A closed exit reflects everything; a closed entrance lets nothing in."""
    up = exact.Stack((exact.Layer(2.0, -0.2, C),), exact.Lead(0.0, C), exact.Lead(0.3, C))
    assert float(exact.stack_transmission(up, 0.1)) == 0.0
    assert float(exact.stack_reflection(up, 0.1)) == pytest.approx(1.0, abs=1e-13)
    assert float(exact.stack_transmission(up, -0.1)) == 0.0
    assert float(exact.stack_reflection(up, -0.1)) == 1.0


def test_field_emission_follows_its_exponent() -> None:
    """Far below the top ln T changes with the field as -(4/3) phi^1.5 / (F sqrt c)."""
    c, work, energy = 0.0381, 4.5, 5.5
    top = energy + work

    def logarithm(slope: float) -> float:
        length = (top + 1.0) / slope
        return math.log(float(exact.triangular_barrier(energy, top, slope, length, c)))

    strong, weak = 4.0, 2.0
    expected = -4 / 3 * work**1.5 / math.sqrt(c) * (1 / strong - 1 / weak)
    assert logarithm(strong) - logarithm(weak) == pytest.approx(expected, rel=0.01)


@pytest.mark.parametrize("energy", [0.05, 0.25, 0.6])
def test_triangular_barrier_solves_its_equation(energy: float) -> None:
    """Flat, triangle falling below the launch, flat: T of the integrated equation."""
    transmitted, reflected = scatter(
        lambda x: 0.0 if x < 0 else 0.3 - 0.03 * min(x, 20.0), energy, C, (0.0, 20.0)
    )
    found = float(exact.triangular_barrier(energy, 0.3, 0.03, 20.0, C))
    assert found == pytest.approx(transmitted, abs=1e-11)
    assert found == pytest.approx(1 - reflected, abs=1e-11)


def test_incoming_amplitude_is_analytic() -> None:
    """The amplitude obeys the Cauchy-Riemann equations, in a tilted stack too."""
    layers = (exact.Layer(2.0, 0.3, C), exact.Layer(4.0, 0.0, HEAVY, 0.1), exact.Layer(2.0, 0.4, C))
    stack = exact.Stack(layers, exact.Lead(0.0, C), exact.Lead(-0.1, C))

    def amplitude(energy: complex) -> complex:
        mantissa, growth = exact.incoming_amplitude(stack, energy)
        return complex(mantissa * np.exp(growth))

    e, h = 0.12 - 0.01j, 1e-5
    along = (amplitude(e + h) - amplitude(e - h)) / (2 * h)
    across = (amplitude(e + 1j * h) - amplitude(e - 1j * h)) / (2j * h)
    assert across == pytest.approx(along, rel=1e-6)


@pytest.mark.parametrize("bad", [(-1.0, 0.3, C), (1.0, 0.3, 0.0), (math.nan, 0.3, C)])
def test_impossible_layers_are_refused(bad: tuple[float, float, float]) -> None:
    """A negative thickness or mass is named, not computed with."""
    with pytest.raises(ValueError, match="layer: need thickness"):
        exact.Layer(*bad)
    with pytest.raises(ValueError, match="lead: need c > 0"):
        exact.Lead(0.0, -1.0)

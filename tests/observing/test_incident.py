"""What comes in at each energy, and the energies a detector takes by itself."""

import numpy as np
import pytest
from scipy.special import ndtr

from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario

TEXT = """
title = "incident"
[particle]
mass = 0.067
[grid]
x = { from = -100.0, to = 100.0, points = 512, ends = "periodic" }
[[packet]]
shape = "gaussian"
center = { x = -30.0 }
sigma = { x = 6.0 }
energy = 0.15
[propagator]
step = 0.5
[time]
end = 200.0
[[detector]]
name = "exit"
x = 20.0
"""
IMPLICIT = ("propagator.method=crank-nicolson", "propagator.space_order=4", "propagator.step=0.25")
PLANE = (
    TEXT.replace(
        'ends = "periodic" }', 'ends = "periodic" }\ny = { from = -20.0, to = 20.0, points = 32 }'
    )
    .replace("points = 32 }", 'points = 32, ends = "walls" }')
    .replace("sigma = { x = 6.0 }", "sigma = { x = 6.0, y = 4.0 }")
    .replace("center = { x = -30.0 }", "center = { x = -30.0, y = 0.0 }")
)
HEAVY = (
    TEXT
    + """
[[potential]]
shape = "slab"
height = 0.0
mass = 0.134
x = { from = -90.0, to = 90.0 }
"""
)


def setup(*overrides: str, text: str = TEXT) -> Setup:
    """Return a free packet made ready."""
    return Setup(parse_scenario(text, overrides=overrides))


@pytest.mark.parametrize("overrides", [(), IMPLICIT])
@pytest.mark.parametrize("text", [TEXT, PLANE])
def test_all_of_the_packet_comes_in(text: str, overrides: tuple[str, ...]) -> None:
    """Over the default energies the incident weight is the packet's but for what they leave out.

    They leave out 1e-4 at either end; the trapezoidal rule on 251 energies adds
    less than as much again in one dimension. Across a strip each transverse
    state starts at a threshold, which the rule sees as a step: 2 % there.
    """
    made = setup(*overrides, text=text)
    incident = made.incidents()["exit"]
    energies = np.linspace(*made.choices.energies["exit"])
    assert incident.reason is None
    tolerance = 1e-3 if text == TEXT else 2e-2
    assert np.trapezoid(incident.density, energies) == pytest.approx(1.0, abs=tolerance)


@pytest.mark.parametrize("overrides", [(), IMPLICIT])
def test_a_threshold_among_the_energies_does_no_harm(overrides: tuple[str, ...]) -> None:
    """The weight at E = V, where nothing moves, is zero and no other is touched."""
    limits = ("detector.energies.from=0.0", "detector.energies.to=0.3")
    made = setup(*overrides, *limits, "detector.energies.points=31")
    density = made.incidents()["exit"].density
    assert density[0] == 0.0
    assert np.argmax(density) == pytest.approx(15, abs=1)


def test_the_mass_at_the_launch_counts() -> None:
    """A packet that starts in a heavier layer has the energies of that mass."""
    made = setup(*IMPLICIT, text=HEAVY)
    incident = made.incidents()["exit"]
    energies = np.linspace(*made.choices.energies["exit"])
    assert incident.reason is None
    assert np.trapezoid(incident.density, energies) == pytest.approx(1.0, abs=1e-3)
    # The wave number belongs to 0.15 eV at the particle's mass: half of it at twice the mass.
    assert energies[np.argmax(incident.density)] == pytest.approx(0.075, abs=0.01)


def test_a_mass_that_changes_under_the_packet_is_a_reason() -> None:
    """No energy can be given to a packet that starts in two masses."""
    made = setup(*IMPLICIT, "potential.x.from=-30.0", text=HEAVY)
    assert "mass is not uniform" in str(made.incidents()["exit"].reason)


def crossed_by_a_free_packet(place: float, time: float) -> float:
    """Return how much of a free Gaussian has passed a plane of a ring of 200 nm, in closed form.

    Position is normal with mean -30 + v t and the width of [CohenTannoudji1977]_,
    complement G_I; each round past the plane counts.
    """
    particle = parse_scenario(TEXT).particle
    k = np.sqrt(0.15 / particle.stiffness)
    mean = -30 + 2 * particle.stiffness * k / particle.hbar * time
    width = 6 * np.hypot(1, particle.stiffness * time / (particle.hbar * 36))
    plane = place if place > -30 else place + 200
    return float(sum(ndtr((mean - plane - 200 * m) / width) for m in range(3)))


@pytest.mark.parametrize(
    "overrides",
    [(), IMPLICIT, (*IMPLICIT, "propagator.space_order=2", "grid.x.points=4096")],
)
@pytest.mark.parametrize("place", [99.9, -100.0, -99.7, 98.0, 0.0])
def test_flux_through_the_seam_of_a_ring(place: float, overrides: tuple[str, ...]) -> None:
    """A free packet crosses a plane as its closed form says, the seam included."""
    made = setup(*overrides, f"detector.x={place}", "detector.toward=+x")
    stepper = made.bind(1, made.hand_over)
    (detector,) = made.detectors(stepper.clock)
    every = made.choices.read_every
    detector.add(0, stepper.psi)
    for step in range(every, made.steps + 1, every):
        stepper.advance(step - every, step)
        detector.add(step, stepper.psi)
    reached = made.steps // every * every * made.dt
    assert detector.crossed == pytest.approx(crossed_by_a_free_packet(place, reached), abs=1e-3)


def test_two_packets_that_move_apart_have_one_energy() -> None:
    """The central energy of a packet and its mirror image is that of either."""
    second = """
[[packet]]
shape = "gaussian"
center = { x = 30.0 }
sigma = { x = 6.0 }
energy = 0.15
direction = "-x"
"""
    assert setup(text=TEXT + second).central_energy() == pytest.approx(0.15, rel=1e-3)
    assert setup().central_energy() == pytest.approx(0.15, rel=1e-3)
    still = ("packet.energy=0.0",)
    assert setup(*still).central_energy() == pytest.approx(0.0, abs=1e-6)


def test_forward_at_the_packets_own_place_is_where_it_moves() -> None:
    """A plane through the centre counts forward along the mean momentum."""
    assert setup("detector.x=-30.0").choices.signs["exit"] == 1.0
    assert setup("detector.x=-30.0", "packet.direction=-x").choices.signs["exit"] == -1.0

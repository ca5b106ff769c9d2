"""Numerics left out are chosen: they suit, they stay as given, and they meet the target."""

import math

import numpy as np
import pytest

from wavepack.errors import ScenarioError
from wavepack.physics.exact.layers import Layer, Lead, Stack, stack_transmission
from wavepack.scenario.build import Setup
from wavepack.scenario.choose import Choice, choices_text, choose, left_out
from wavepack.scenario.choose_end import Departure
from wavepack.scenario.choose_terms import smooth_length
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.preflight import forecast
from wavepack.scenario.schema import Scenario
from wavepack.scenario.write import to_toml

#: hbar^2/2m of mass 0.067 [eV nm^2].
C = 0.0380998211 / 0.067

LINE = """
[particle]
mass = 0.067
[grid]
x = {}
[[packet]]
shape = "gaussian"
center = -40.0
sigma = 5.0
energy = 0.15
"""
ROLES = """
[[region]]
name = "drain"
role = "transmitted"
x = { above = 12.0 }
[[region]]
name = "source"
role = "reflected"
x = { below = 0.0 }
"""
EXIT = '[[detector]]\nname = "exit"\nx = 16.0\n'
SLAB = (
    '[[potential]]\nname = "barrier"\nshape = "slab"\nheight = 0.3\nx = { from = 0.0, to = 3.37 }\n'
)
SECH2 = '[[potential]]\nshape = "sech2"\nheight = 0.15\nat = 6.0\nwidth = 2.0\n'
RAMP = '[[potential]]\nshape = "ramp"\nx = { from = 0.0, to = 10.0 }\nheights = [0.0, -0.1]\n'
PAIR = """
[propagator]
method = "crank-nicolson"
space_order = 4
[[potential]]
name = "device"
shape = "layers"
start = 0.0
layers = [
    { thickness = 3.0, height = 0.3, mass = 0.092 },
    { thickness = 5.0, height = 0.0 },
    { thickness = 3.0, height = 0.3, mass = 0.092 },
]
"""
VIBRATION = SLAB + (
    '[[potential]]\nname = "vibration"\nshape = "slab"\nheight = 0.05\n'
    "x = { from = 0.0, to = 3.37 }\ndrive = { photon_energy = 0.05 }\n"
)
CONSTRICTION = """
[particle]
mass = 0.067
[grid]
x = {}
y = { ends = "walls" }
[[potential]]
shape = "sech2"
height = 0.02
at = 0.0
width = 10.0
[[potential]]
name = "wire"
shape = "harmonic"
quantum = { y = 0.02 }
[[packet]]
shape = "channel"
center = { x = -90.0 }
sigma = { x = 8.0 }
energy = 0.05
[[region]]
role = "transmitted"
x = { above = 0.0 }
"""

SCENARIOS = {
    "slab": LINE + SLAB + ROLES + EXIT,
    "sech2": LINE + SECH2 + ROLES + EXIT,
    "pair": LINE + PAIR + ROLES,
    "ramp": LINE + RAMP + ROLES + EXIT,
    "driven": LINE + VIBRATION + ROLES,
    "constriction": CONSTRICTION,
}


def chosen(text: str, *overrides: str) -> tuple[Scenario, dict[str, Choice]]:
    """Return the scenario made complete, and its choices by key."""
    scenario, choices = choose(parse_scenario(text, overrides=overrides))
    return scenario, {choice.key: choice for choice in choices}


def transmitted(scenario: Scenario) -> float:
    """Return the probability transmitted at the end of a run."""
    setup = Setup(scenario)
    stepper = setup.bind(1)
    stepper.psi[...] = setup.start[0]
    for first in range(0, setup.steps, 1000):
        stepper.advance(first, min(first + 1000, setup.steps))
    here = np.abs(stepper.psi) ** 2 * setup.grid.cell
    on_grid = setup.book.sums((slice(0, setup.grid.size),), here)[0]
    return float(on_grid + setup.book.of_patches(stepper.tally.patches())[0])


def packet() -> tuple[np.ndarray, np.ndarray]:
    """Return energies [eV] of the packet of the lines above and their weights."""
    central = math.sqrt(0.15 / C)
    k = np.linspace(0.001, central + 0.8, 20_001)
    weight = np.exp(-2 * 5.0**2 * (k - central) ** 2)
    return C * k**2, weight / weight.sum()


@pytest.mark.parametrize("name", SCENARIOS)
def test_physics_alone_is_enough(name: str) -> None:
    """What is chosen for bare physics is complete, quick to transform and forecast not bad."""
    text = SCENARIOS[name]
    scenario, choices = chosen(text)
    assert not left_out(scenario)
    assert set(choices) == set(left_out(parse_scenario(text)))
    found = forecast(Setup(scenario), timing=False)
    assert found.verdict != "bad", found.text()
    assert found.quantities["error"] < 1e-3
    assert all(choice.reason for choice in choices.values())
    for axis in scenario.grid.values():
        length = (axis.points or 0) + ("walls" in axis.ends)
        assert length == smooth_length(length)
    assert to_toml(parse_scenario(to_toml(scenario))) == to_toml(scenario)


def test_a_slab_meets_the_target() -> None:
    """Sharp edges: the run with chosen numbers gives the transmission within 1e-3."""
    energies, weights = packet()
    stack = Stack((Layer(3.37, 0.3, C),), Lead(0.0, C), Lead(0.0, C))
    exact = float(stack_transmission(stack, energies) @ weights)
    assert transmitted(chosen(SCENARIOS["slab"])[0]) == pytest.approx(exact, abs=1e-3)


@pytest.mark.parametrize("target", [1e-3, 1e-4])
def test_a_smooth_barrier_meets_the_target(target: float) -> None:
    """A sech2 barrier narrower than the packet's waves: transmission within the target."""
    energies, weights = packet()
    k = np.sqrt(energies / C)
    over = np.sinh(math.pi * k * 2.0) ** 2
    exact = over / (over + np.cosh(math.pi * math.sqrt(0.15 * 4.0 / C - 0.25)) ** 2)
    scenario, _ = chosen(SCENARIOS["sech2"] + f"[accuracy]\ntarget = {target}\n")
    assert transmitted(scenario) == pytest.approx(float(exact @ weights), abs=target)


def test_what_is_given_stays() -> None:
    """Every number given is kept and is no choice; a coarse one is told by the forecast."""
    given = (
        "grid.x.from=-120",
        "grid.x.points=200",
        "absorber.width=25",
        "propagator.step=0.5",
        "accuracy.target=1e-3",
    )
    scenario, choices = chosen(SCENARIOS["slab"], *given)
    axis = scenario.grid["x"]
    assert (axis.start, axis.points, scenario.propagator.step) == (-120.0, 200, 0.5)
    assert scenario.absorber is not None
    assert scenario.absorber.width == {"x": (25.0, 25.0)}
    assert set(choices) == {"grid.x.to", "time.end"}
    missed = forecast(Setup(scenario), timing=False).shortfalls(1e-3)
    assert "times the target 0.001" in missed[0]
    assert any("grid.x.points" in text for text in missed)


def test_nothing_left_out_is_left_alone() -> None:
    """A complete scenario comes back as it is, without choices."""
    scenario, _ = chosen(SCENARIOS["ramp"])
    assert choose(scenario) == (scenario, ())


def test_a_finer_target_takes_finer_numbers() -> None:
    """A hundredth of the error: smaller step, finer spacing, wider layers, later end."""
    (one, _), (other, _) = (
        chosen(SCENARIOS["sech2"], f"accuracy.target={target}") for target in (1e-3, 1e-5)
    )
    coarse, fine = one.grid["x"], other.grid["x"]
    assert None not in (coarse.points, fine.points)
    spacings = [((a.stop or 0) - (a.start or 0)) / (a.points or 1) for a in (coarse, fine)]
    assert spacings[1] < spacings[0]
    assert (other.propagator.step or 0) < (one.propagator.step or 0)
    assert (other.time.end or 0) > (one.time.end or 0)
    assert one.absorber is not None
    assert other.absorber is not None
    assert other.absorber.width["x"][0] > one.absorber.width["x"][0]


def test_a_resonance_delays_the_end() -> None:
    """The lifetime of a resonant pair, 280 fs by its pole, enters the end of the run."""
    scenario, choices = chosen(SCENARIOS["pair"], "packet.energy=0.09")
    assert "a resonance" in choices["time.end"].reason
    setup = Setup(scenario)
    held = Departure(setup, Estimates(setup)).leaving(1e-4).held
    assert held[0].lifetime == pytest.approx(280.0, rel=0.02)
    bare, _ = chosen(LINE + ROLES, "packet.energy=0.09")
    assert (scenario.time.end or 0) > (bare.time.end or 0) + 3 * 280


def test_the_box_holds_everything() -> None:
    """Packet to 8 sigma, potential, detector and a wavelength lie between the absorbers."""
    scenario, _ = chosen(SCENARIOS["slab"])
    axis = scenario.grid["x"]
    assert scenario.absorber is not None
    lower, upper = scenario.absorber.width["x"]
    wavelength = 2 * math.pi / math.sqrt(0.15 / C)
    assert (axis.start or 0) + lower <= -40 - 8 * 5 - wavelength
    assert (axis.stop or 0) - upper >= 16 + wavelength


def test_a_lone_packet_flies_to_its_end() -> None:
    """With nothing to meet but an end given, the box reaches as far as the packet flies."""
    scenario, choices = chosen(LINE, "time.end=100")
    speed = 2 * C * math.sqrt(0.15 / C) / 0.6582119569
    assert (scenario.grid["x"].stop or 0) > -40 + 100 * speed
    assert "flies" in choices["grid.x.to"].reason


@pytest.mark.parametrize(
    ("text", "overrides", "key", "message"),
    [
        (LINE, (), "grid.x.from", "give time.end"),
        (
            CONSTRICTION.replace("quantum = { y = 0.02 }", "quantum = { x = 0.0 }"),
            (),
            "grid.y.from",
            "walls stand where you put it",
        ),
        (
            LINE + '[[potential]]\nshape = "harmonic"\nquantum = 0.03\n' + ROLES,
            (),
            "time.end",
            "nothing leaves along x: give it",
        ),
        (LINE + SLAB + ROLES, ("packet.energy=0",), "time.end", "no direction"),
        (
            LINE + '[[potential]]\nshape = "field"\nstrength = 0.001\n',
            (),
            "grid.x.from",
            "neither ends nor turns",
        ),
        (
            LINE.partition("[[packet]]")[0] + SLAB + '[[packet]]\nshape = "eigenstate"\n',
            (),
            "grid.x.from",
            "does not say where it starts",
        ),
        (LINE + SLAB + ROLES, ("grid.x.from=-50",), "grid.x.from", "no room for an absorber"),
    ],
)
def test_what_physics_does_not_tell_is_a_fault(
    text: str, overrides: tuple[str, ...], key: str, message: str
) -> None:
    """Each case that cannot be chosen names its key and what to give."""
    with pytest.raises(ScenarioError) as refused:
        chosen(text, *overrides)
    faults = {fault.key: fault.message for fault in refused.value.faults}
    assert message in faults[key]


def test_smooth_lengths() -> None:
    """The next product of 2, 3 and 5 from a number on."""
    assert [smooth_length(n) for n in (1, 7, 11, 121, 1025, 4001)] == [1, 8, 12, 125, 1080, 4050]


def test_choices_are_told_with_their_reasons() -> None:
    """One line a choice: key, value with unit, reason."""
    choices = (
        Choice("absorber.width.x", (20.0, 30.0), "nm", "wide enough"),
        Choice("grid.x.points", 480, "", "fine enough"),
    )
    assert choices_text(choices).splitlines() == [
        "absorber.width.x = [20, 30] nm  wide enough",
        "grid.x.points = 480             fine enough",
    ]

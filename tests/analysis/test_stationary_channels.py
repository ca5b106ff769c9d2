"""Coupled modes along a guide: closed forms, conservation, and where they do not apply."""

import re

import numpy as np
import pytest

from tests.closed_forms.reference_values import Row, rows
from tests.tolerances import GUIDED
from wavepack.analysis import stationary_average
from wavepack.analysis.incoming import NotApplicableError
from wavepack.analysis.passage import passage_of
from wavepack.analysis.stationary_channels import Guide, guide_of
from wavepack.physics.exact import sech2_barrier
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.schema import Scenario

SADDLE = """
[[potential]]
name = "wire"
shape = "harmonic"
quantum = { y = 0.01 }
[[potential]]
name = "hill"
shape = "sech2"
height = 0.02
at = 0.0
width = 20.0
"""
BUMP = """
[[potential]]
shape = "gaussian"
height = 0.05
center = { x = 0.0, y = 5.0 }
sigma = { x = 6.0, y = 6.0 }
"""


#: A packet in a guide; names in capitals stand for what tests choose.
GUIDE = """
[particle]
mass = 0.067
[grid]
x = { from = -320.0, to = 320.0, points = 256, ends = "absorbing" }
y = { from = -48.0, to = 48.0, points = 48, ends = "WALLS" }
POTENTIAL
[[packet]]
shape = "channel"
mode = MODE
center = { x = PLACE }
sigma = { x = 15.0 }
energy = 0.02
direction = "TOWARD"
[absorber]
width = { x = 120.0 }
[propagator]
step = 1.0
[time]
end = 1000.0
"""


def text_of(potential: str, **chosen: object) -> str:
    """Return a scenario of a guide."""
    defaults = {"WALLS": "walls", "MODE": 0, "PLACE": -160.0, "TOWARD": "+x"}
    text = GUIDE.replace("POTENTIAL", potential)
    for name, value in (defaults | chosen).items():
        text = text.replace(name, str(value))
    return text


def scenario(potential: str, **chosen: object) -> Scenario:
    """Return the same, read."""
    return parse_scenario(text_of(potential, **chosen))


@pytest.fixture(scope="module", params=[0, 1])
def saddle(request: pytest.FixtureRequest) -> tuple[int, Guide]:
    """Give tests the saddle for a packet in each of the two lowest modes."""
    return request.param, guide_of(passage_of(scenario(SADDLE, MODE=request.param)))


def test_saddle_mode_by_mode(saddle: tuple[int, Guide]) -> None:
    """Each mode passes the saddle as the line that it is, to the digits of the table."""
    mode, guide = saddle
    wanted = [
        row
        for row in rows("P7")
        if row.quantity == "channel_sech2" and row.parameters["mode"] == mode
    ]
    assert wanted
    opened: list[Row] = [r for r in wanted if r.parameters["energy"] > guide.incoming.levels[mode]]
    energies = np.array([row.parameters["energy"] for row in opened])
    transmission, reflection = guide.scatter(energies)
    values = [row.value for row in opened]
    np.testing.assert_allclose(transmission, values, rtol=0, atol=GUIDED)
    np.testing.assert_allclose(transmission + reflection, 1, rtol=0, atol=1e-10)


@pytest.mark.parametrize("walls", ["walls", "periodic"])
def test_coupled_modes_conserve_the_current(walls: str) -> None:
    """A bump off the middle mixes the modes; what leaves is what came, the error is small."""
    guide = guide_of(passage_of(scenario(BUMP, WALLS=walls)))
    energies = np.array([0.015, 0.03])
    transmission, reflection = guide.scatter(energies)
    np.testing.assert_allclose(transmission + reflection, 1, rtol=0, atol=1e-10)
    assert np.all((transmission > 0.05) & (transmission < 0.99))
    assert guide.doubt(energies).max() < 1e-4


def test_average_from_the_other_side(monkeypatch: pytest.MonkeyPatch) -> None:
    """What comes from the right gets through as the closed form says, within the error stated."""
    monkeypatch.setitem(stationary_average.AVERAGE, 2, (1e-3, 64))
    solved = stationary_average.solve(passage_of(scenario(SADDLE, PLACE=160.0, TOWARD="-x")))
    assert solved.passage.from_upper
    energies = np.linspace(*solved.incoming.energies, 4001)
    level, c = solved.incoming.levels[0], solved.incoming.c
    exactly = solved.incoming.weight(energies) * sech2_barrier(energies - level, 0.02, 20.0, c)
    wanted = float(np.trapezoid(exactly, energies))
    assert 0.4 < wanted < 0.6
    assert solved.through == pytest.approx(wanted, abs=solved.error)
    assert solved.error < 1e-2
    assert solved.through + solved.back == pytest.approx(1, abs=solved.error)


#: The axis across, closed, open and half open.
WIDTH = 'points = 48, ends = "walls" }'
BOTH = 'points = 48, ends = "absorbing" }'
HALF = 'points = 48, ends = ["walls", "absorbing"] }'


@pytest.mark.parametrize(
    ("found", "wanted", "said"),
    [
        (WIDTH, BOTH, "both directions are open: each"),
        ('ends = "absorbing"', 'ends = "walls"', "no axis is open at both ends"),
        (WIDTH, HALF, "y has an absorbing end"),
        ("at = 0.0", "at = -110.0", "not uniform along x"),
        ("at = 0.0", "at = 210.0", "not constant in the layer at the upper end of x"),
        ("width = 20.0\n", "width = 20.0\ndrive = { photon_energy = 0.01 }\n", "is driven (hill)"),
    ],
)
def test_where_it_does_not_apply(found: str, wanted: str, said: str) -> None:
    """What is no scattering along one direction is refused with the reason."""
    base = text_of(SADDLE)
    changed = base.replace(found, wanted, 1)
    if wanted in (BOTH, HALF):
        changed = changed.replace("width = { x = 120.0 }", "width = { x = 120.0, y = 20.0 }")
    if wanted == 'ends = "walls"':
        changed = changed.replace("[absorber]\nwidth = { x = 120.0 }\n", "")
    assert changed != base
    with pytest.raises(NotApplicableError, match=re.escape(said)):
        passage_of(parse_scenario(changed))

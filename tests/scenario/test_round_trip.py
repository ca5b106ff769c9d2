"""What is written out reads back to an equal scenario."""

import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.scenario.conftest import LINE, PLANE
from wavepack.fields import Span
from wavepack.physics.packets import PACKETS
from wavepack.physics.potentials import SHAPES
from wavepack.physics.units import UnitSystem
from wavepack.scenario.load import load_scenario, parse_scenario
from wavepack.scenario.schema import Scenario
from wavepack.scenario.write import to_toml

PIECES = {
    "slab": 'height = 0.3\nx = { from = 0, to = "3.37 nm" }\ny = { below = 1 }\nmass = 0.1',
    "step": 'height = "80 meV"\nat = 0\nwidth = 0.5\naxis = "y"',
    "ramp": "x = { from = 0, to = 20 }\nheights = [0, -0.6]",
    "layers": 'start = -2\nlayers = [{ thickness = 2, height = 0.3, mass = 0.09 }, ["5 nm", 0]]',
    "gaussian": "height = 0.3\ncenter = { x = 1 }\nsigma = { x = 2 }",
    "sech2": "height = 0.3\nat = 0\nwidth = 2",
    "harmonic": 'quantum = { y = "10 meV" }\ncenter = 2',
    "saddle": "height = 0.3\nquantum = { x = 0.01, y = 0.02 }",
    "morse": 'depth = 1\nstiffness = "1.2 1/bohr"\nat = 0',
    "softcore": "charge = -1\nsoftening = 0.5",
    "field": 'strength = { x = "1 MV/cm" }\nfrom = { x = 0 }\nto = { x = 10 }',
    "screen": "at = 0\nthickness = 2\nheight = 1\napertures = [{ center = -5, width = 2 }]",
    "formula": 'expression = "v0*exp(-x**2) + where(y > 0, 0, 0.1)"\nsharp = true',
    "table": 'file = "table.npy"\nx = { from = 0, to = 1 }\ny = { from = 0, to = 1 }',
}
STATES = {
    "gaussian": 'center = { x = -60, y = 0 }\nsigma = 8\nenergy = 0.15\ndirection = "30 deg"',
    "channel": 'center = -60\nsigma = 8\nmode = 1\ntotal_energy = "0.2 eV"\ndirection = "-x"',
    "eigenstate": 'number = { x = 1, y = 0 }\nof = ["piece"]\nwavenumber = { x = "0.5 1/nm" }',
    "formula": 'expression = "exp(-x**2/s)"\nimaginary = "0*x"\nwhere = "x > 0 and y < 1"',
    "table": 'file = "table.npy"\nx = { from = 0, to = 1 }\ny = { from = 0, to = 1 }',
}
GAUSSIAN = f'shape = "gaussian"\n{STATES["gaussian"]}'
DRIVE = (
    'drive = { photon_energy = "100 meV", phase = "90 deg", offset = 1, '
    "envelope = { rise = 10, from = 1, to = 50 } }"
)
CHANGED = """\
[units]
length = "A"
energy = "meV"
time = "ps"
mass = "kg"
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Return a folder that holds a table."""
    np.save(tmp_path / "table.npy", np.ones((4, 5)))
    return tmp_path


def returned(scenario: Scenario) -> Scenario:
    """Return a scenario written out and read back from elsewhere."""
    return parse_scenario(to_toml(scenario), folder=Path("/nonexistent"))


def of_shapes(piece: str, packet: str, head: str = "") -> str:
    """Return a scenario of one piece and one packet on a plane."""
    start, stop = PLANE.index("[[potential]]"), PLANE.index("[absorber]")
    return (
        f'{head}{PLANE[:start]}[parameters]\nv0 = "80 meV"\ns = 3\n'
        f'[[potential]]\nname = "piece"\n{piece}\n[[packet]]\n{packet}\n{PLANE[stop:]}'
    )


@pytest.mark.parametrize("shape", sorted(SHAPES))
def test_every_piece_comes_back(shape: str, folder: Path) -> None:
    """A piece of each shape, driven or not, survives writing and reading."""
    for extra in ("", DRIVE, 'drive = { formula = "cos(t) + v0" }\nacts = "during"'):
        text = of_shapes(f'shape = "{shape}"\n{PIECES[shape]}\n{extra}', GAUSSIAN)
        text = text.replace("[propagator]", '[propagator]\nmethod = "crank-nicolson"')
        scenario = parse_scenario(text, folder=folder)
        assert returned(scenario) == scenario
        assert to_toml(returned(scenario)) == to_toml(scenario)


@pytest.mark.parametrize("shape", sorted(PACKETS))
def test_every_packet_comes_back(shape: str, folder: Path) -> None:
    """A packet of each shape survives writing and reading, with its common keys."""
    packet = f'shape = "{shape}"\n{STATES[shape]}\namplitude = 0.5\nphase = "-45 deg"'
    text = of_shapes(f'shape = "harmonic"\n{PIECES["harmonic"]}', packet)
    scenario = parse_scenario(text, folder=folder)
    assert returned(scenario) == scenario
    assert scenario.packet[0].phase == pytest.approx(-np.pi / 4)


@pytest.mark.parametrize("text", [LINE, PLANE, LINE + CHANGED, 'units.system = "atomic"\n' + LINE])
def test_every_table_comes_back(text: str) -> None:
    """All other tables survive too, in any units."""
    text = text.replace("end = 1200.0", "end = 1200.0\nstop_when_left_below = 1e-6")
    limit = "y = { from = -3, to = 3 }" if "\ny = {" in text else ""
    text = text.replace(
        "x = 30.0",
        f'x = 30.0\n{limit}\ntoward = "-x"\nenergies = {{ from = 0.1, to = 0.2, points = 9 }}',
    )
    text += (
        '[[region]]\nwhere = "x < -20"\nrole = "held"\n[accuracy]\ntarget = 1e-4\n'
        '[output]\nframes = 3\nrecord_every = 0.5\ncheckpoint_every = "2 min"\nthin = 2\n'
    )
    scenario = parse_scenario(text)
    assert returned(scenario) == scenario
    assert scenario.region[1].role == "none"
    assert scenario.output.checkpoint_every == 120.0


def test_what_is_written_is_complete() -> None:
    """Units, names and defaults are written out, numbers bare."""
    text = to_toml(parse_scenario(LINE.replace("energy = 0.15", 'energy = "150 meV"')))
    for line in (
        'length = "nm"',
        'name = "gaussian0"',
        "energy = 0.15",
        "frames = 200",
        "thin = 1",
    ):
        assert line in text.splitlines()


def test_files_are_found_from_the_scenario(folder: Path) -> None:
    """A table is looked for beside the scenario and written with its whole path."""
    text = of_shapes(
        f'shape = "table"\n{PIECES["table"]}', f'shape = "gaussian"\n{STATES["gaussian"]}'
    )
    path = folder / "a.toml"
    path.write_text(text)
    assert f'file = "{folder}/table.npy"' in to_toml(load_scenario(path))


def test_units_mean_the_same_in_any_system() -> None:
    """One scenario in two unit systems has the same ratio of energy to its own scale."""
    units = '\n[units]\nlength = "bohr"\nenergy = "Hartree"\n'
    own = (
        LINE.replace("0.3\n", '"0.3 eV"\n').replace("energy = 0.15", 'energy = "0.15 eV"')
        .replace("3.37", '"3.37 nm"').replace("sigma = 8.0", 'sigma = "8 nm"')
    )  # fmt: skip
    one, two = parse_scenario(own), parse_scenario(own + units)
    for get in ("mass", "charge"):
        assert getattr(one.particle, get) == getattr(two.particle, get)
    packets = [scenario.packet[0] for scenario in (one, two)]
    phases = [
        packet.energy * packet.sigma["x"] ** 2 / scenario.particle.stiffness  # type: ignore[attr-defined] # a Gaussian
        for packet, scenario in zip(packets, (one, two), strict=True)
    ]
    assert phases[0] == pytest.approx(phases[1], rel=1e-13)


POSITIVE = st.floats(min_value=1e-300, max_value=1e300)
ANY = st.floats(allow_nan=False, allow_infinity=False)


@settings(deadline=None)
@given(
    title=st.text(),
    height=ANY,
    charge=ANY,
    mass=POSITIVE,
    edge=st.floats(-1e9, 1e9),
    step=st.floats(1e-6, 1e6),
    parameters=st.dictionaries(st.sampled_from(["a", "b_1", "Omega"]), ANY),
    units=st.builds(
        UnitSystem, st.sampled_from(["nm", "bohr", "A"]), st.sampled_from(["eV", "Hartree"])
    ),
)
def test_any_numbers_come_back(
    title: str, height: float, charge: float, mass: float, edge: float, step: float,
    parameters: dict[str, float], units: UnitSystem,
) -> None:  # fmt: skip
    """Every number and text survives bit for bit."""
    base = parse_scenario(LINE)
    piece = replace(base.potential[0], height=height, x=Span(edge, edge + 1.0))  # type: ignore[call-arg] # a slab
    scenario = replace(
        base,
        title=title,
        units=units,
        particle=units.particle(mass, charge),
        parameters=parameters,
        potential=(piece,),
        propagator=replace(base.propagator, step=step),
    )
    assert returned(scenario) == scenario


def test_errors_are_quick() -> None:
    """Reading a scenario imports none of the slow libraries."""
    code = (
        "import sys, wavepack.scenario.load;"
        "slow = {'scipy', 'h5py', 'pyfftw', 'matplotlib', 'xarray', 'av'};"
        "print(sorted(slow & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"

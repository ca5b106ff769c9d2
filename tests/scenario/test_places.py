"""Faults found while a scenario is made ready have their place in its text."""

from pathlib import Path

import pytest

from tests.scenario.conftest import LINE
from wavepack import workflow
from wavepack.errors import ScenarioError
from wavepack.scenario.build import Setup
from wavepack.scenario.load import parse_scenario

SMALL = LINE.replace("points = 2048", "points = 256")
EIGENSTATE = SMALL.replace(
    'shape = "gaussian"\ncenter = -60.0\nsigma = 8.0\nenergy = 0.15',
    'name = "level"\nshape = "eigenstate"\nnumber = 999',
)
POLE = SMALL.replace(
    "[[packet]]",
    '[[potential]]\nname = "pole"\nshape = "formula"\nexpression = "1/x"\n\n[[packet]]',
)
OVERLAP = SMALL + '\n[[region]]\nname = "source"\nrole = "reflected"\nx = { below = 25.0 }\n'
NOTHING = SMALL.replace("energy = 0.15", 'energy = 0.15\nwhere = "x > 1000"')


def line_of(text: str, part: str) -> int:
    """Return the line of the first place of a part."""
    return text.count("\n", 0, text.index(part)) + 1


@pytest.mark.parametrize(
    ("text", "part", "key", "said"),
    [
        (EIGENSTATE, "number = 999", "packet.0.number", "need a state below"),
        (POLE, '[[potential]]\nname = "pole"', "potential.1", "need a finite potential"),
        (OVERLAP, "[[region]]", "region", "regions with a role overlap"),
        (NOTHING, "where =", "packet.0.where", "need a part that holds some"),
    ],
    ids=["eigenstate", "pole", "overlap", "nothing"],
)
def test_faults_of_building_have_file_and_line(text: str, part: str, key: str, said: str) -> None:
    """They read like those of the loader."""
    scenario = parse_scenario(text, "wire.toml")
    with pytest.raises(ScenarioError) as refused:
        Setup(scenario)
    assert f"wire.toml:{line_of(text, part)}: {key}: {said}" in str(refused.value)


def test_faults_of_building_name_an_override() -> None:
    """A value from the command line is at fault by its own text."""
    text = EIGENSTATE.replace("999", "0")
    scenario = parse_scenario(text, "wire.toml", ["packet.level.number=999"])
    with pytest.raises(ScenarioError, match=r"--set packet\.level\.number=999: packet\.0\.number:"):
        Setup(scenario)


@pytest.mark.parametrize("fresh", [False, True])
def test_a_refused_scenario_leaves_everything_as_it_is(tmp_path: Path, *, fresh: bool) -> None:
    """No folder is made, and none moved aside."""
    with pytest.raises(ScenarioError):
        workflow.run(parse_scenario(EIGENSTATE), tmp_path / "run", fresh=fresh)
    assert not list(tmp_path.iterdir())
    former = tmp_path / "run"
    former.mkdir()
    (former / "scenario.toml").write_text("")
    with pytest.raises(ScenarioError):
        workflow.run(parse_scenario(EIGENSTATE), former, fresh=True)
    assert [path.name for path in tmp_path.rglob("*")] == ["run", "scenario.toml"]

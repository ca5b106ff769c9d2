"""KEY=VALUE on the command line."""

from typing import Any

import pytest

from tests.scenario.conftest import LINE, PLANE
from wavepack.errors import ScenarioError
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.schema import Scenario


def given(*overrides: str, text: str = LINE) -> Scenario:
    """Return the scenario with overrides applied."""
    return parse_scenario(text, "a.toml", overrides)


@pytest.mark.parametrize(
    ("override", "get", "value"),
    [
        ("packet.energy=80 meV", lambda s: s.packet[0].energy, 0.08),
        ('packet.energy="80 meV"', lambda s: s.packet[0].energy, 0.08),
        ("packet.0.energy = 0.2", lambda s: s.packet[0].energy, 0.2),
        ("packet.gaussian0.energy=0.2", lambda s: s.packet[0].energy, 0.2),
        ("potential.0.height=-1", lambda s: s.potential[0].height, -1.0),
        ("potential.barrier.height=-1", lambda s: s.potential[0].height, -1.0),
        ("potential.x.to=2 A", lambda s: s.potential[0].x.upper, 0.2),
        ("grid.x.points=512", lambda s: s.grid["x"].points, 512),
        ("grid.x.points=512.0", lambda s: s.grid["x"].points, 512),
        ("grid.x.ends=absorbing", lambda s: s.grid["x"].ends, ("absorbing", "absorbing")),
        ('grid.x.ends=["walls", "absorbing"]', lambda s: s.grid["x"].ends, ("walls", "absorbing")),
        ("packet.direction=-x", lambda s: s.packet[0].write_direction(s.packet[0].direction), "-x"),
        ("propagator.order=4", lambda s: s.propagator.order, 4),
        ("output.frames=7", lambda s: s.output.frames, 7),
        ("accuracy.target=1e-3", lambda s: s.accuracy.target, 1e-3),
        ("parameters.a=3 nm", lambda s: s.parameters["a"], 3.0),
        ("region.drain={ x = { below = 0 } }", lambda s: s.region[0].x.upper, 0.0),
        ("title=a = b", lambda s: s.title, "a = b"),
        ("title=80 meV", lambda s: s.title, "80 meV"),
    ],
)
def test_a_key_is_set(override: str, get: Any, value: object) -> None:  # noqa: ANN401 - a function
    """An item is meant by number, by name, or alone; a value is TOML or a text."""
    assert get(given(override)) == value


def test_items_of_plain_lists_are_set_by_number() -> None:
    """A number inside a list of numbers can be set too."""
    text = LINE.replace(
        'shape = "slab"\nheight = 0.3\nx = { from = 0.0, to = 3.37 }',
        'shape = "layers"\nstart = 0\nlayers = [[1, 0.3], [5, 0], [1, 0.3]]',
    )
    scenario = given("potential.barrier.layers.1.0=4 nm", "potential.layers.2.1=0.5", text=text)
    layers: Any = scenario.potential[0]
    assert [layer.thickness for layer in layers.layers] == [1.0, 4.0, 1.0]
    assert layers.layers[2].height == 0.5


def test_the_last_override_of_a_key_wins() -> None:
    """Overrides are applied in their order."""
    scenario = given("time.end=100", "time.end=1 ps")
    assert scenario.time.end == 1000.0


@pytest.mark.parametrize(
    ("override", "part"),
    [
        ("packet.energy", "need KEY=VALUE"),
        ("=3", "need KEY=VALUE"),
        ("packet.energy=fast", "packet.0.energy: need an energy, such as 0.08"),
        ("packet.sigma=-1", "packet.0.sigma: need a value > 0, got -1.0"),
        ("packet.enregy=1", "packet.0.enregy: unknown key; did you mean energy?"),
        ("potential.nobody.height=3", "no potential is named nobody; named: barrier"),
        ("packet.centre.x=3", "no packet is named centre; named: gaussian0; did you mean center?"),
        ("potential.1.height=1", "potential has 1 item(s), numbered from 0; got 1"),
        ("grid.x.ends.0=walls", "grid.x.ends"),
        ("title.x=1", "title is no table, it has no x"),
        ("foo.bar=1", "foo: unknown key"),
        ("detector.x=120", "detector.0.x: stands inside an absorber"),
        ("packet=[]", "need at least one [[packet]]"),
        ("packet.0=3", "packet.0: need a table, got 3"),
        ("title=1979-05-27", "title: need a text"),
        ("title=1\nend = 2", "title"),
    ],
)
def test_a_fault_names_its_override(override: str, part: str) -> None:
    """A fault that an override made is reported as its own, without a line."""
    if override.startswith("title=1\n"):
        assert given(override).title == "1\nend = 2"
        return
    with pytest.raises(ScenarioError) as refused:
        given(override)
    fault = refused.value.faults[0]
    assert fault.file == f"--set {override}"
    assert fault.line is None
    assert part in str(fault)


def test_one_of_several_must_be_named() -> None:
    """Without number or name, a key of several items is refused with their names."""
    text = LINE + '\n[[region]]\nname = "source"\nx = { below = 0 }\n'
    with pytest.raises(ScenarioError, match=r"2 items: name one.*drain, source"):
        given("region.x.above=1", text=text)
    assert given("region.source.x.below=-1", text=text).region[1].x.upper == -1.0


def test_lists_are_not_made_by_overrides() -> None:
    """A key of an item in a list that the scenario lacks is refused."""
    text = LINE[: LINE.index("[[detector]]")]
    with pytest.raises(ScenarioError, match=r"has no \[\[detector\]\]"):
        given("detector.x=3", text=text)


def test_several_faults_are_all_reported() -> None:
    """Faults of overrides and of the file come together."""
    with pytest.raises(ScenarioError) as refused:
        given("packet.energy=-1", "nonsense", text=PLANE.replace("0.067", "-1"))
    files = [fault.file for fault in refused.value.faults]
    assert sorted(set(files)) == ["--set nonsense", "--set packet.energy=-1", "a.toml"]

"""Malformed scenarios: each fault names its line, its key, what was found and what is wanted."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.scenario.conftest import LINE, PLANE
from wavepack.errors import Fault, ScenarioError, UsageError
from wavepack.scenario.load import load_scenario, parse_scenario


def faults_of(text: str, *overrides: str) -> tuple[Fault, ...]:
    """Return the faults of a text."""
    with pytest.raises(ScenarioError) as refused:
        parse_scenario(text, "a.toml", overrides)
    return refused.value.faults


def line_of(text: str, start: str) -> int:
    """Return the number of the first line that starts so."""
    return next(i for i, line in enumerate(text.split("\n"), 1) if line.startswith(start))


ABSORBER = "[absorber]\nwidth = 40.0\n"

#: What is replaced by what; where the fault stands; its key; what the message holds.
CASES = [
    # texts and keys
    ("mass = 0.067", "mas = 0.067", "mas =", "particle.mas", "unknown key; did you mean mass?"),
    ("mass = 0.067", "mas = 0.067", "[particle]", "particle.mass", "missing; need mass"),
    ("[absorber]", "[absorbr]", "[absorbr]", "absorbr", "did you mean absorber?"),
    ("energy = 0.15", "enregy = 0.15", "enregy", "packet.0.enregy", "did you mean energy?"),
    ("title = ", "title = 3 #", "title", "title", "need a text, got 3"),
    # numbers and units
    ("0.067", "-1", "mass", "particle.mass", "need a value > 0, got -1.0"),
    ("0.067", "true", "mass", "particle.mass", "need a mass, such as 0.067"),
    ("height = 0.3", 'height = "3 nm"', "height", "potential.0.height", "need an energy"),
    ("height = 0.3", 'height = "3 ev"', "height", "potential.0.height", "did you mean 'eV'?"),
    ("height = 0.3", "height = nan", "height", "potential.0.height", "finite number, got nan"),
    ("height = 0.3", "height = [1]", "height", "potential.0.height", "got [1]"),
    ("step = 0.02", "step = 0", "step", "propagator.step", "need a value > 0, got 0.0"),
    ("points = 2048", "points = 20.5", "x =", "grid.x.points", "need a whole number, got 20.5"),
    ("points = 2048", "points = 2", "x =", "grid.x.points", "need a value >= 8, got 2"),
    ("points = 2048", f"points = {10**30}", "x =", "grid.x.points", "need a value <="),
    # the grid
    ("to = 150.0", "to = -151.0", "x =", "grid.x.to", "need to > from = -150, got -151"),
    ("2048 }", '2048, ends = "open" }', "x =", "grid.x.ends", "absorbing, walls, periodic"),
    ("2048 }", '2048, ends = ["walls", "periodic"] }', "x =", "grid.x.ends", "other end periodic"),
    ("x = { from = -150.0", "z = { from = -150.0", "[grid]", "grid.x", "missing; need x"),
    ("x = { from = -150.0", "z = { from = -150.0", "z =", "grid.z", "unknown key; known: x, y"),
    # shapes
    ('"slab"', '"slap"', "shape", "potential.0.shape", "got 'slap'; did you mean slab?"),
    ('shape = "slab"', "", "[[potential]]", "potential.0.shape", "missing; need one of"),
    ("height = 0.3", "", "[[potential]]", "potential.0.height", "missing; need V inside"),
    ("to = 3.37", "to = -3.37", "x = { from = 0.0", "potential.0.x", "need from < to"),
    ("to = 3.37", "at = 3.37", "x = { from = 0.0", "potential.0.x", "{ above } or { below }"),
    ("height = 0.3", "height = 0.3\nmass = 0.1", "mass = 0.1", "potential.0.mass", "crank-nicol"),
    ('"barrier"', '"3 b"', "name", "potential.0.name", "beginning with a letter, got '3 b'"),
    # packets
    ("energy = 0.15", "", "[[packet]]", "packet.0.energy", "need one of energy"),
    ("sigma = 8.0", "sigma = -8.0", "sigma", "packet.0.sigma", "need a value > 0, got -8.0"),
    ("center = -60.0", "center = -600.0", "center", "packet.0.center.x", "-150 to 150), got -600"),
    ("center = -60.0", "center = { y = 1 }", "center", "packet.0.center", "the grid (x), got y"),
    ("energy = 0.15", 'energy = 0.15\nwhere = "x"', "where", "packet.0.where", "comparison"),
    ("energy = 0.15", 'energy = 0.15\nwhere = "y>0"', "where", "packet.0.where", "found y in"),
    ("energy = 0.15", 'energy = 0.15\nwhere = "x >"', "where", "packet.0.where", "column 3"),
    ("energy = 0.15", "energy = 0.15\nphase = 30", "phase", "packet.0.phase", "need an angle"),
    # absorber, propagator, time
    ("width = 40.0", "width = 150.0", "width", "absorber.width", "narrower than the axis x"),
    ("width = 40.0", "width = [1, 2, 3]", "width", "absorber.width", "one width or a pair"),
    ("width = 40.0", "width = [40, 0]", "width", "absorber.width", "at each absorbing end"),
    ("width = 40.0", "width = { y = 40 }", "width", "absorber.width.y", "need an axis of the grid"),
    ("step =", "order = 3\nstep =", "order", "propagator.order", "2 or 4 for split-operator, got"),
    ("step =", "space_order = 4\nstep =", "space", "propagator.space_order", "crank-nicolson"),
    ("step =", 'method = "euler"\nstep =', "method", "propagator.method", "split-operator, crank"),
    ("end =", "stop_when_left_below = 2\nend =", "stop", "time.stop_when_left_below", "< 1, got"),
    # regions and detectors
    ('"transmitted"', '"passed"', "role", "region.0.role", "need one of transmitted, reflected"),
    ("x = { above = 20.0 }", "", "[[region]]", "region.0", "need its extent"),
    ("above = 20.0", "above = 200.0", "x = { above", "region.0.x", "lies outside axis x"),
    ("x = { above = 20.0 }", 'where = "2*x"', "where", "region.0.where", "need a comparison"),
    ("x = 30.0", "x = 120.0", "x = 120", "detector.0.x", "inside an absorber: need -110 to 110"),
    ("x = 30.0", "x = 300.0", "x = 300", "detector.0.x", "need a place on axis x"),
    ("x = 30.0", "", "[[detector]]", "detector.0", "need one plane"),
    ("x = 30.0", "y = 30.0", "y = 30", "detector.0.y", "need an axis of the grid, got y"),
    ("x = 30.0", 'x = 30.0\ntoward = "+y"', "toward", "detector.0.toward", "need +x or -x"),
    ("x = 30.0", "x = 30.0\nenergies = { from = 2, to = 1, points = 9 }", "energies",
     "detector.0.energies.to", "need to > from = 2, got 1"),
    # output and the rest
    ("[time]", "[output]\nframes = 1\n[time]", "frames", "output.frames", "need a value >= 2, got"),
    ("[time]", "[output]\nthin = 999\n[time]", "thin", "output.thin", "need at most 512"),
    ("[time]", '[output]\nstore = "psi"\n[time]', "store", "output.store", "wavefunction, density"),
    ("[time]", "[accuracy]\ntarget = 0\n[time]", "target", "accuracy.target", "> 0, got 0.0"),
    ("[time]", '[units]\nlength = "eV"\n[time]', "length", "units.length", "need a unit of length"),
    ("[time]", '[units]\nsystem = "cgs"\n[time]', "system", "units.system", 'need "atomic"'),
    ("[time]", "[parameters]\nx = 1\n[time]", "x = 1", "parameters.x", "not taken, got x"),
    ("[time]", '[parameters]\na = "1 q"\n[time]', "a =", "parameters.a", "unknown unit 'q'"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "start", "key", "part"), CASES)
def test_a_fault_names_line_key_found_and_wanted(
    old: str, new: str, start: str, key: str, part: str
) -> None:
    """Each kind of fault is reported at its line and key, with the need and the value."""
    assert old in LINE
    text = LINE.replace(old, new, 1)
    found = [fault for fault in faults_of(text) if fault.key == key]
    assert found, faults_of(text)
    assert found[0].line == line_of(text, start)
    assert found[0].file == "a.toml"
    assert part in found[0].message


@pytest.mark.parametrize(
    ("old", "new", "key", "part"),
    [
        ("[[packet]]", "[[packets]]", "packet", "at least one [[packet]]"),
        ("[particle]", "[particles]", "particle", "missing; need a table [particle]"),
        ("[grid]", "[grids]", "grid", "missing; need [grid]"),
    ],
)
def test_a_missing_table_has_no_line(old: str, new: str, key: str, part: str) -> None:
    """A table that is missing is named without a line."""
    found = [fault for fault in faults_of(LINE.replace(old, new, 1)) if fault.key == key]
    assert part in found[0].message
    assert found[0].line is None


@pytest.mark.parametrize(
    ("old", "new", "key", "part"),
    [
        (", y = 0.0 }", " }", "packet.0.center.y", "need a value along y"),
        ("points = 64, ", "points = 16_000_000, ", "grid", "points in all"),
        ('"periodic"', '["absorbing", "walls"]', "absorber.width", "narrower than the axis y"),
        ("x = 30.0", "x = 30.0\ny = 3.0", "detector.0", "need one plane"),
        ("x = 30.0", "x = 30.0\ny = { above = 3.0 }", "detector.0.y", "limits { from, to }"),
        ('shape = "gaussian"', 'shape = "gaussian"\ndirection = "up"', "packet.0.direction", "+y"),
    ],
)
def test_faults_of_a_plane(old: str, new: str, key: str, part: str) -> None:
    """Faults that only two axes can have."""
    assert old in PLANE
    found = [fault for fault in faults_of(PLANE.replace(old, new, 1)) if fault.key == key]
    assert found
    assert part in found[0].message


def test_all_faults_are_reported_at_once() -> None:
    """Misspelt keys, bad values and broken rules appear together, in order of lines."""
    text = (
        LINE.replace("sigma = 8.0", "sigma = -8.0\nsgima = 3")
        .replace("x = 30.0", "x = 130.0")
        .replace("height = 0.3", 'height = "0.3 nm"')
        .replace("[propagator]", '[propagator]\nmethd = "split-operator"')
        .replace("end = 1200.0", "end = -1.0")
    )
    found = faults_of(text)
    assert [fault.key for fault in found] == [
        "potential.0.height",
        "packet.0.sigma",
        "packet.0.sgima",
        "propagator.methd",
        "time.end",
        "detector.0.x",
    ]
    assert [fault.line for fault in found] == sorted(fault.line or 0 for fault in found)


def test_names_are_unique_within_a_list() -> None:
    """Two regions of one name are both named; a default name counts too."""
    twice = LINE + '[[region]]\nname = "drain"\nx = { below = 0 }\n'
    assert [fault.key for fault in faults_of(twice)] == ["region.0.name", "region.1.name"]
    default = LINE.replace('name = "drain"', 'name = "region1"') + "[[region]]\nx = { below = 0 }\n"
    assert {fault.key for fault in faults_of(default)} == {"region.0.name", "region.1.name"}


def test_an_item_of_a_long_list_has_its_own_line() -> None:
    """A fault in a list over several lines stands where the item does."""
    text = LINE.replace(
        'shape = "slab"\nheight = 0.3\nx = { from = 0.0, to = 3.37 }',
        'shape = "screen"\nat = 0\nthickness = 2\nheight = 1\napertures = [\n'
        "  { center = 0, width = 1 },\n  { center = 3, width = -1 },\n]",
    )
    fault = faults_of(text)[0]
    assert fault.key == "potential.0.apertures.1.width"
    assert fault.line == line_of(text, "  { center = 3")


def test_an_eigenstate_needs_pieces_that_exist() -> None:
    """A name that no piece has is refused with those that are."""
    packet = 'shape = "eigenstate"\nof = ["wall"]\n'
    text = LINE.replace(LINE[LINE.index('shape = "gaussian"') : LINE.index("[absorber]")], packet)
    assert "no potential is named wall; named: barrier" in faults_of(text)[0].message


@pytest.mark.parametrize("ends", ["walls", "periodic"])
def test_an_absorber_needs_an_absorbing_end(ends: str) -> None:
    """Layers where no end absorbs would do nothing; the scenario is refused."""
    text = LINE.replace("2048 }", f'2048, ends = "{ends}" }}')
    (fault,) = faults_of(text)
    assert (fault.key, fault.line) == ("absorber", line_of(text, "[absorber]"))
    assert "no end absorbs; leave [absorber] out or set ends" in fault.message
    assert parse_scenario(text.replace(ABSORBER, "")).absorber is None


def test_an_axis_that_leads_nowhere_is_one_fault() -> None:
    """Rules that need a sound axis wait until it is one."""
    text = LINE.replace("from = -150.0, to = 150.0", "from = 30, to = -30")
    assert [fault.key for fault in faults_of(text)] == ["grid.x.to"]


def test_an_empty_scenario_misses_each_part_once() -> None:
    """Every part that must be given is named, and nothing else."""
    keys = [fault.key for fault in faults_of("")]
    assert keys == ["particle", "grid", "packet"]


@pytest.mark.parametrize("key", ["x", "y", "z"])
def test_stopping_early_needs_an_absorbing_end(key: str) -> None:
    """Where nothing leaves the grid, the run cannot stop once little is left."""
    text = LINE.replace("2048 }", '2048, ends = "walls" }').replace(ABSORBER, "")
    text = text.replace("end = 1200.0", f"end = 1200.0\nstop_when_left_below = 1e-6 # {key}")
    assert [fault.key for fault in faults_of(text)] == ["time.stop_when_left_below"]


@pytest.mark.parametrize(
    ("text", "line", "part"),
    [
        ("a = 1\nb = = 2", 2, "not TOML"),
        ("a = 1\na = 2", 2, "not TOML"),
        ("a = 9" + "9" * 5000, None, "not TOML"),
        ("a = " + "[" * 5000 + "]" * 5000, None, "nested too deeply"),
    ],
)
def test_what_is_no_toml_is_one_fault(text: str, line: int | None, part: str) -> None:
    """A text that the parser refuses is one fault, at the line it names."""
    (fault,) = faults_of(text)
    assert part in fault.message
    assert fault.line == line


def test_files_that_cannot_be_read_are_refused(tmp_path: Path) -> None:
    """A missing file, a folder, and bytes that are no text end in a message."""
    binary = tmp_path / "binary.toml"
    binary.write_bytes(b"\xff\xfe\x00")
    huge = tmp_path / "huge.toml"
    huge.write_bytes(b"#" * 4_000_001)
    for path, part in [
        (tmp_path / "none.toml", "No such file"),
        (tmp_path, "directory"),
        (binary, "UTF-8"),
        (huge, "at most"),
    ]:
        with pytest.raises(UsageError, match=part):
            load_scenario(path)


def test_a_byte_order_mark_is_no_fault(tmp_path: Path) -> None:
    """A file saved with a byte order mark is read like any other."""
    path = tmp_path / "marked.toml"
    path.write_text(LINE, encoding="utf-8-sig")
    assert load_scenario(path) == parse_scenario(LINE)


def test_a_long_value_is_cut_in_its_message() -> None:
    """A fault quotes no more of a value than can be read."""
    values = ", ".join(["1"] * 10_000)
    for fault in faults_of(LINE, f"packet.direction=[{values}]", f"title=[{values}]"):
        assert len(fault.message) <= 500


def test_a_fault_reads_as_one_line() -> None:
    """The message has the form file:line: key: need, got."""
    fault = faults_of(LINE.replace("sigma = 8.0", "sigma = -8.0"))[0]
    assert str(fault) == "a.toml:18: packet.0.sigma: need a value > 0, got -8.0"


LINES = LINE.split("\n")
JUNK = st.sampled_from(
    ["", "x", "= 3", "[", "[[potential]]", "[grid.x]", "nan", '"', "{}", "-1", "1e400", "'''", "[]"]
)


@settings(max_examples=150, deadline=None)
@given(st.integers(0, len(LINES) - 1), JUNK, st.integers(0, 20), st.booleans())
def test_any_damage_ends_in_faults(number: int, junk: str, place: int, whole: bool) -> None:  # noqa: FBT001 - drawn
    """A scenario with one line damaged is read, or refused with faults; nothing else."""
    lines = list(LINES)
    kept = "" if whole else lines[number][:place]
    lines[number] = kept + junk
    try:
        parse_scenario("\n".join(lines))
    except ScenarioError as error:
        assert error.faults  # noqa: PT017 - either outcome will do


VALUES = st.recursive(
    st.one_of(
        st.booleans(),
        st.integers(),
        st.floats(),
        st.text(max_size=8),
        st.sampled_from(["+x", "walls", "1 nm", "x > 0", "slab", "gaussian"]),
    ),
    lambda inner: st.one_of(
        st.lists(inner, max_size=3),
        st.dictionaries(st.sampled_from(["x", "y", "from", "to", "above"]), inner, max_size=3),
    ),
    max_leaves=5,
)
KEYS = [
    "title", "units.length", "units.system", "particle.mass", "particle.charge", "parameters.a",
    "grid.x", "grid.x.ends", "grid.x.points", "potential", "potential.0.height", "potential.0.x",
    "potential.0.drive", "packet", "packet.0.center", "packet.0.direction", "packet.0.where",
    "packet.0.wavenumber", "absorber", "absorber.width", "propagator.order", "time", "region",
    "region.0.x", "region.0.where", "detector.0.x", "detector.0.energies", "output.thin",
    "output.checkpoint_every", "accuracy",
]  # fmt: skip


def _toml(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{k} = {_toml(v)}" for k, v in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(_toml(item) for item in value) + "]"
    return repr(value)


@settings(max_examples=300, deadline=None)
@given(st.sampled_from(KEYS), VALUES)
def test_any_value_anywhere_ends_in_faults(key: str, value: object) -> None:
    """Any value under any key is taken or refused with faults; nothing else."""
    try:
        parse_scenario(LINE, overrides=[f"{key}={_toml(value)}"])
    except ScenarioError as error:
        assert error.faults  # noqa: PT017 - either outcome will do

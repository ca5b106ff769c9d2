"""Lines of keys in a TOML text."""

import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from wavepack.scenario.lines import LineMap, Path, syntax_line

TEXT = r'''# a comment
title = """two
[x]
b = 3 \"""
q""\" """   # more

a.b."c.d" = 1979-05-27 07:32:00
[grid] # [no]
x = { from = 1, to = [1, { q = 2 }] }
[[potential]]
[[potential]]
layers = [  # x
  [1, 2],
  # [3]
  { height = "a#b]", "x y"=3 },
]
[potential.drive]
k = """"quoted""""
[[ potential . apertures ]]
center = 'c:\'
[[potential]]
e = []
'''


@pytest.mark.parametrize(
    ("path", "wanted"),
    [
        (("title",), 2),
        (("a", "b", "c.d"), 7),
        (("grid",), 8),
        (("grid", "x", "from"), 9),
        (("grid", "x", "to", 1, "q"), 9),
        (("potential", 0), 10),
        (("potential", 1, "layers"), 12),
        (("potential", 1, "layers", 0, 1), 13),
        (("potential", 1, "layers", 1, "x y"), 15),
        (("potential", 1, "drive"), 17),
        (("potential", 1, "drive", "k"), 18),
        (("potential", 1, "apertures", 0, "center"), 20),
        (("potential", 2, "e"), 22),
        (("potential", 1, "height"), 11),
        (("grid", "y", "points"), 8),
        (("nothing",), None),
    ],
)
def test_each_key_has_its_line(path: Path, wanted: int | None) -> None:
    """A key has its own line; a missing one that of the nearest table around it."""
    tomllib.loads(TEXT)
    assert LineMap(TEXT).find(path) == wanted


def test_line_ends_of_other_systems_count_once() -> None:
    """Carriage returns and rare separators inside texts start no line."""
    text = 'a = 1\r\nb = "x\u2028y\u0085z"\r\nc = 2\r\n'
    assert LineMap(text).find(("c",)) == 3


def test_a_syntax_error_tells_its_line() -> None:
    """The line is taken from the parser's message."""
    for text in ("a = 1\nb = = 2\n", "a = 1\na = 2", "a = 1\nb = [2,\n"):
        with pytest.raises(tomllib.TOMLDecodeError) as refused:
            tomllib.loads(text)
        assert syntax_line(refused.value, text) == 2


KEYS = st.one_of(st.from_regex(r"[A-Za-z0-9_-]{1,5}", fullmatch=True), st.just('"a.\\u0062 #]"'))
LEAVES = st.one_of(
    st.sampled_from(["1", "-2.5e-3", "true", "inf", "1979-05-27T07:32:00Z", "07:32:00"]),
    st.sampled_from(['"a#]}"', "'b,='", '"""x\n[y]\nz = 1"""', "'''\n#'''", '""', '"\\""']),
)
VALUES = st.recursive(
    LEAVES,
    lambda inner: st.one_of(
        st.lists(inner, max_size=3).map(lambda items: "[ # c]\n" + ",\n".join(items) + "\n]"),
        st.lists(st.tuples(KEYS, inner), max_size=3, unique_by=lambda pair: pair[0]).map(
            lambda pairs: "{ " + ", ".join(f"{k} = {v}" for k, v in pairs) + " }"
        ),
    ),
    max_leaves=6,
)


@given(st.lists(st.tuples(KEYS, VALUES), max_size=6, unique_by=lambda pair: pair[0]))
def test_any_statement_is_passed_over_whole(pairs: list[tuple[str, str]]) -> None:
    """Whatever the values hold, the next key is found on its own line."""
    lines: list[str] = []
    starts = []
    for key, value in pairs:
        starts.append(len(lines) + 1)
        lines += f"{key} = {value} # end".split("\n")
    text = "\n".join(lines)
    found = LineMap(text)
    for key, start in zip(tomllib.loads(text), starts, strict=True):
        assert found.find((key,)) == start

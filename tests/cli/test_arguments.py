"""Help texts, and what is said about a typing error."""

import pytest

from wavepack import __version__
from wavepack.arguments import build
from wavepack.cli import COMMANDS, main

Captured = pytest.CaptureFixture[str]


def test_every_command_is_carried_out() -> None:
    """The parser and the table of commands name the same."""
    assert set(build()[1]) == set(COMMANDS)


@pytest.mark.parametrize("command", [[], *([name] for name in COMMANDS)], ids=str)
def test_help_gives_an_example(command: list[str], capsys: Captured) -> None:
    """Each help goes to stdout, ends with status 0 and shows a command that parses."""
    assert main([*command, "--help"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert f"example:\n  wavepack {' '.join(command)}" in out


def test_version(capsys: Captured) -> None:
    """`--version` prints the version."""
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"wavepack {__version__}\n"


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["rn", "x.toml"], "unknown command 'rn'; did you mean run?"),
        (["zzzz"], "unknown command 'zzzz'; known: check, run, resume"),
        ([], "arguments are required: COMMAND"),
        (["--verson"], "unknown option --verson; did you mean --version?"),
        (["run"], "arguments are required: SCENARIO"),
        (["run", "--ot", "d", "x.toml"], "wavepack run: unknown option --ot; did you mean --out?"),
        (["run", "x.toml", "--outt=d"], "unknown option --outt; did you mean --out?"),
        (["run", "x.toml", "-q"], "unknown option -q; did you mean -h?"),
        (["run", "x.toml", "--fres"], "unknown option --fres; did you mean --fresh?"),
        (["run", "x.toml", "y.toml"], "unrecognized arguments: y.toml"),
        (["run", "x.toml", "--threads", "0"], "need a whole number from 1 to 9999, got '0'"),
        (["run", "x.toml", "--threads", "two"], "need a whole number from 1 to 9999, got 'two'"),
        (["movie", "d", "--size", "1280"], "need WxH in pixels, such as 1280x720, got '1280'"),
        (["movie", "d", "--fps", "fast"], "need a number of frames a second, got 'fast'"),
        (["movie", "d", "--picture", "sketch"], "argument --picture: invalid choice: 'sketch'"),
        (["movie", "d", "--power", "0"], "need a number above 0 and at most 1, got '0'"),
        (["movie", "d", "--power", "half"], "need a number above 0 and at most 1, got 'half'"),
        (["results", "d", "--json", "--csv"], "not allowed with argument --json"),
    ],
)
def test_typing_errors(arguments: list[str], said: str, capsys: Captured) -> None:
    """Each ends with status 2 and says what is wrong, with the nearest known name."""
    assert main(arguments) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert said in err
    assert "--help` tells more" in err


def test_values_may_look_like_options() -> None:
    """Negative numbers and texts with blanks are values; options take them with = too."""
    parser = build()[0]
    assert parser.parse_args(["resume", "d", "--until", "-5"]).until == "-5"
    asked = parser.parse_args(["run", "s", "--set", "a=-1", "--set", "packet.energy=80 meV"])
    assert asked.overrides == ["a=-1", "packet.energy=80 meV"]
    assert parser.parse_args(["movie", "d", "--size=640x360"]).size == (640, 360)

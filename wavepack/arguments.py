"""The commands and options of the command line, and what is said about a typing error."""

import argparse
import difflib
import math
import re
from collections.abc import Sequence
from pathlib import Path
from typing import Final, NoReturn

from wavepack import __version__

PROGRAM: Final = "wavepack"

EPILOG: Final = """\
example:
  wavepack run scenarios/barrier.toml
  wavepack movie runs/barrier

exit status: 0 done, 1 a defect of the program, 2 bad input, 3 accuracy target missed,
4 the machine refused (disk, memory), 5 stopped by a numerical fault, 130 interrupted
"""


class Parser(argparse.ArgumentParser):
    """A parser that says what is wrong in one line and where to read on."""

    def error(self, message: str) -> NoReturn:
        """End with status 2."""
        self.exit(2, f"{self.prog}: {message}\n`{self.prog} --help` tells more\n")


def parse(arguments: Sequence[str]) -> argparse.Namespace:
    """Return what was asked for; a typing error ends the program with status 2.

    Raises
    ------
    SystemExit
        With status 0 after ``--help`` or ``--version``, 2 after an error.
    """
    parser, commands = build()
    name = next((text for text in arguments if not text.startswith("-")), None)
    place = len(arguments) if name is None else list(arguments).index(name)
    _check_options(parser, arguments[:place])
    if name is not None:
        if name not in commands:
            parser.error(f"unknown command {name!r}{_nearest(name, commands)}")
        _check_options(commands[name], arguments[place + 1 :])
    return parser.parse_args(arguments)


def build() -> tuple[Parser, dict[str, Parser]]:
    """Return the parser and those of its commands by name."""
    parser = Parser(
        PROGRAM,
        description="Propagate quantum wavepackets: tunnelling probabilities, fluxes and movies "
        "from one TOML file.",
        epilog=EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"{PROGRAM} {__version__}")
    group = parser.add_subparsers(
        dest="command",
        metavar="COMMAND",
        required=True,
        parser_class=Parser,
        title="commands (each has its own --help)",
    )
    commands: dict[str, Parser] = {}

    def command(name: str, summary: str, more: str, example: str) -> Parser:
        commands[name] = group.add_parser(
            name,
            help=summary,
            description=f"{summary[0].upper()}{summary[1:]}.\n\n{more}",
            epilog=f"example:\n  {PROGRAM} {name} {example}",
            formatter_class=argparse.RawDescriptionHelpFormatter,
            allow_abbrev=False,
        )
        return commands[name]

    _add_check(
        command(
            "check",
            "validate a scenario and forecast accuracy, memory, disk and time",
            "Tells whether grid, step, box and absorbers suit the packet and the potential.\n"
            "Nothing is propagated but a few steps to time them, 5 s at most.",
            "scenarios/barrier.toml",
        )
    )
    _add_run(
        command(
            "run",
            "propagate a scenario into a run folder and print the results",
            "An interrupted run (Ctrl-C) saves a checkpoint and can be resumed.",
            'scenarios/barrier.toml --set packet.energy="80 meV" --out runs/low',
        )
    )
    _add_resume(
        command(
            "resume",
            "go on with a run from its newest checkpoint",
            "The result is the one of an unbroken run.",
            'runs/barrier --until "2 ps"',
        )
    )
    _add_results(
        command(
            "results",
            "print the results of a run",
            "A table by default. --csv gives the columns name,value,error,unit: one line a\n"
            "quantity, the name being its path in results.json, such as\n"
            "quantities.transmission; what is not established is left empty. Spectra are in\n"
            "--json and in run.h5.",
            "runs/barrier --csv",
        )
    )
    _add_movie(
        command(
            "movie",
            "render the stored frames of a run to a movie",
            "The ending of the file chooses H.264 (.mp4), VP9 (.webm) or .gif.",
            "runs/barrier --out barrier.webm --size 1920x1080 --fps 30",
        )
    )
    _folder(
        command(
            "report",
            "write report.html, one self-contained page about a run",
            "Results, figures, numerics, provenance and the scenario. The figures are also\n"
            "kept as files in the run folder's figures/.",
            "runs/barrier",
        )
    )
    _folder(
        command(
            "crosscheck",
            "compare a run's transmission with an independent stationary calculation",
            "For static potentials between two uniform leads, in one dimension or along a\n"
            "guide in two. Prints both and their difference; every energy goes to\n"
            "crosscheck.csv and crosscheck.json in the run folder, curves to its figures/.\n"
            "Ends with 3 if they differ by more than the errors that the run states, with 2\n"
            "and the reason where the calculation does not apply.",
            "runs/barrier",
        )
    )
    return parser, commands


def _add_check(parser: Parser) -> None:
    _scenario(parser)
    parser.add_argument(
        "--no-timing", action="store_true", help="do not time any step, so forecast no duration"
    )


def _add_run(parser: Parser) -> None:
    _scenario(parser)
    parser.add_argument(
        "--out",
        type=Path,
        metavar="DIR",
        help="the run folder (default: runs/ and the stem of the scenario's file)",
    )
    _threads(parser)
    parser.add_argument(
        "--fresh",
        action="store_true",
        help="move a run that is in the folder aside first; nothing is deleted",
    )
    parser.add_argument(
        "--movie", type=Path, metavar="FILE", help="afterwards render a movie: .mp4, .webm or .gif"
    )


def _add_resume(parser: Parser) -> None:
    _folder(parser)
    parser.add_argument(
        "--until",
        metavar="TIME",
        help='a new end, in the scenario\'s unit or with its own, such as "5 ps"',
    )
    _threads(parser)


def _add_results(parser: Parser) -> None:
    _folder(parser)
    form = parser.add_mutually_exclusive_group()
    form.add_argument("--json", action="store_true", help="print results.json")
    form.add_argument("--csv", action="store_true", help="print name,value,error,unit lines")


def _add_movie(parser: Parser) -> None:
    _folder(parser)
    parser.add_argument(
        "--out", type=Path, metavar="FILE", help="the movie (default: movie.mp4 in the run folder)"
    )
    parser.add_argument(
        "--size", type=_size, default=(1280, 720), metavar="WxH", help="pixels (default: 1280x720)"
    )
    parser.add_argument(
        "--fps", type=_rate, default=25.0, metavar="N", help="stored frames a second (default: 25)"
    )
    parser.add_argument(
        "--picture",
        choices=("density", "real", "phase"),
        default="density",
        help="density, real part of the wavefunction, or its phase as colour (default: density)",
    )
    parser.add_argument(
        "--power",
        type=_power,
        default=0.5,
        metavar="P",
        help="draw the density to the power P, above 0 and at most 1 (default: 0.5)",
    )


def _scenario(parser: Parser) -> None:
    parser.add_argument("scenario", type=Path, metavar="SCENARIO", help="a TOML file")
    parser.add_argument(
        "--set",
        action="append",
        default=[],
        metavar="KEY=VALUE",
        dest="overrides",
        help='change one value of the scenario, such as packet.energy="80 meV"; repeatable',
    )


def _folder(parser: Parser) -> None:
    parser.add_argument("folder", type=Path, metavar="DIR", help="a run folder")


def _threads(parser: Parser) -> None:
    parser.add_argument(
        "--threads",
        type=_count,
        metavar="N",
        help="threads of the transforms (default: suited to grid and machine)",
    )


def _count(text: str) -> int:
    if not re.fullmatch(r"[0-9]{1,4}", text) or int(text) < 1:
        raise argparse.ArgumentTypeError(f"need a whole number from 1 to 9999, got {text!r}")
    return int(text)


def _size(text: str) -> tuple[int, int]:
    match = re.fullmatch(r"([0-9]{1,5})[xX]([0-9]{1,5})", text)
    if match is None:
        raise argparse.ArgumentTypeError(f"need WxH in pixels, such as 1280x720, got {text!r}")
    return int(match[1]), int(match[2])


def _rate(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        raise argparse.ArgumentTypeError(
            f"need a number of frames a second, got {text!r}"
        ) from None


def _power(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not 0 < value <= 1:
        raise argparse.ArgumentTypeError(f"need a number above 0 and at most 1, got {text!r}")
    return value


def _check_options(parser: Parser, given: Sequence[str]) -> None:
    """End with an error at the first option that the parser does not know."""
    known = [name for action in parser._actions for name in action.option_strings]  # noqa: SLF001 - its own subclass
    for text in given:
        if text == "--":
            return
        name = text.partition("=")[0]
        # As argparse sees it: a lone dash, a negative number or a text with blanks is a value.
        if re.fullmatch(r"-[^\s\d.][^\s]*", name) and name not in known:
            parser.error(f"unknown option {name}{_nearest(name, known)}")


def _nearest(name: str, known: Sequence[str] | dict[str, Parser]) -> str:
    close = difflib.get_close_matches(name, known, n=1, cutoff=0.5)
    return f"; did you mean {close[0]}?" if close else f"; known: {', '.join(known)}"

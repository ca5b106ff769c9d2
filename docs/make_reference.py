"""Write docs/scenario.md: every table, key, type, unit, default and bound, from the schema.

python docs/make_reference.py
"""

from collections.abc import Iterator, Mapping
from dataclasses import MISSING, fields
from pathlib import Path
from typing import Any

from wavepack.fields import Span, Spec, specs
from wavepack.physics.drives import Drive, Envelope
from wavepack.physics.expressions import DEEPEST, FUNCTIONS, LARGEST_EXPONENT, LONGEST
from wavepack.physics.packet_shapes import Packet
from wavepack.physics.packets import PACKETS
from wavepack.physics.potentials import SHAPES
from wavepack.physics.shapes import Piece
from wavepack.physics.shapes_layers import Layer
from wavepack.physics.shapes_sharp import Aperture
from wavepack.physics.units import ATOMIC, TABLE, UnitSystem
from wavepack.scenario.choose_terms import left_out
from wavepack.scenario.load import parse_scenario
from wavepack.scenario.schema import (
    AbsorberSpec,
    AccuracySpec,
    AxisSpec,
    DetectorSpec,
    EnergyGrid,
    OutputSpec,
    ParticleSpec,
    PropagatorSpec,
    RegionSpec,
    TimeSpec,
)

PAGE = Path(__file__).with_name("scenario.md")

HEAD = """\
# The scenario, key by key

Written by `python docs/make_reference.py` from the classes that read it; do not edit.

A scenario is one TOML file: what moves, where, in which potential, from which state,
how it is propagated and what is recorded. The smallest there is:

```toml
[particle]
mass = 0.067

[grid]
x = { from = -150.0, to = 150.0, points = 2048 }

[[potential]]
shape = "slab"
height = "300 meV"
x = { from = 0.0, to = "3.37 nm" }

[[packet]]
shape = "gaussian"
center = -60.0
sigma = 8.0
energy = 0.15

[absorber]
width = 40.0

[propagator]
step = 0.02

[time]
end = 1200.0
```

**Quantities.** A number is in the units of `[units]`; a text has its own: `"3.37 nm"`,
`"80 meV"`, `"5 ps"`. The tables below give the unit of a bare number by default. Angles are
texts with `deg` or `rad`. Nothing may be infinite or no number.

**Each axis.** Where one value an axis is wanted, `{ x = 1.0, y = 2.0 }`, a bare one serves all.
A *span* is `{ from, to }`, `{ above }` or `{ below }`.

**Names** are unique within a list and match `[A-Za-z][A-Za-z0-9_-]*`. Left out, a name is the
shape and the number of the item from 0, such as `slab0`; `region0` and `detector0`
for those without a shape.

**From the command line**, `--set KEY=VALUE` changes one key: `packet.energy="80 meV"`,
`potential.0.height=0.2`, `potential.barrier.height=0.2`. The number may be left out where a list
has one item.

**Chosen.** What the tables below call *chosen* may be left out: `check` and `run` choose it to meet
`accuracy.target` (1e-3 without one), say what they chose and why, and the run folder's
`scenario.toml` holds it ([choosing_numerics.md](choosing_numerics.md#left-out)).

**Faults** are reported all at once, each with file, line, key, what was found and what is
wanted; a misspelt key names its nearest neighbour.
"""

#: Top-level tables in the order of the page: heading, class, a sentence.
TABLES: tuple[tuple[str, type, str], ...] = (
    ("[particle]", ParticleSpec, "What moves."),
    (
        "[grid]",
        AxisSpec,
        (
            "`x`, or `x` and `y`, each with the keys below. If either end is a wall, points are "
            "the interior ones and the spacing is (to - from)/(points + 1); else "
            "(to - from)/points."
        ),
    ),
    ("[absorber]", AbsorberSpec, "Layers inside the grid, at each absorbing end."),
    ("[propagator]", PropagatorSpec, "How the state is stepped."),
    ("[time]", TimeSpec, "How long."),
    ("[[region]]", RegionSpec, "A part of space whose probability is recorded."),
    (
        "[[detector]]",
        DetectorSpec,
        (
            "A plane whose flux is recorded: a position for one axis, in two dimensions a span "
            "for the other if it is to be limited."
        ),
    ),
    ("Energies of a detector", EnergyGrid, "`energies = { from, to, points }`."),
    ("[output]", OutputSpec, "What is kept."),
    (
        "[accuracy]",
        AccuracySpec,
        (
            "Left out, no result is held against a target. While a run states no numerical error, "
            "a scenario with `[accuracy]` ends with exit status 3."
        ),
    ),
)
#: Nested tables of pieces.
NESTED: tuple[tuple[str, type, str], ...] = (
    ("A layer", Layer, "An item of `layers`, or a list `[thickness, height]`."),
    ("An aperture", Aperture, "An item of `apertures`."),
    ("A drive", Drive, "`drive = { ... }` of any piece: give `photon_energy` or `formula`."),
    ("The envelope of a drive", Envelope, "`envelope = { ... }` inside a drive."),
)


def page() -> str:
    """Return the text of the page."""
    return "\n".join(_lines()).rstrip() + "\n"


def _lines() -> Iterator[str]:
    yield HEAD
    yield from _units()
    yield from _parameters()
    chosen = _chosen()
    for heading, cls, sentence in TABLES[:2]:
        yield from _section(f"## `{heading}`", cls, sentence, chosen)
    yield from _shapes("[[potential]]", Piece, SHAPES, "The pieces add up.")
    for heading, cls, sentence in NESTED:
        yield from _section(f"### {heading}", cls, sentence, chosen)
    several = "At least one; several are each normalised, times amplitude e^(i phase), and added."
    yield from _shapes("[[packet]]", Packet, PACKETS, several)
    for heading, cls, sentence in TABLES[2:]:
        title = f"## `{heading}`" if heading.startswith("[") else f"### {heading}"
        yield from _section(title, cls, sentence, chosen)
    yield from _expressions()


def _units() -> Iterator[str]:
    own = UnitSystem()
    yield "## `[units]`\n"
    yield "| key | default | known |\n|---|---|---|"
    for key in ("length", "energy", "time", "mass"):
        known = ", ".join(f"`{name}`" for name in TABLE[key])
        yield f'| `{key}` | `"{getattr(own, key)}"` | {known} |'
    atomic = ", ".join(f"`{name}`" for name in ATOMIC.values())
    yield f'| `system` | left out | `"atomic"` sets all four to {atomic} |\n'
    yield (
        "Wave numbers are written `1/nm` or `nm^-1` with any length, fields `MV/cm` with any of "
        "V, mV, kV, MV, GV and any length, or `eV/(e nm)`."
    )
    yield ""


def _parameters() -> Iterator[str]:
    yield "## `title` and `[parameters]`\n"
    yield (
        "`title` is a text. Each key of `[parameters]` is a name that expressions may use: a bare "
        "number is a pure number, a text with a unit is converted to the scenario's unit.\n"
    )


def _section(
    title: str, cls: type, sentence: str, chosen: Mapping[str, set[str]] | None = None
) -> Iterator[str]:
    yield f"{title}\n\n{sentence}\n"
    yield from _table(cls, set(specs(cls)), (chosen or {}).get(cls.__name__, set()))


def _shapes(title: str, base: type, classes: Mapping[str, type], sentence: str) -> Iterator[str]:
    yield f"## `{title}`\n\n{sentence} The keys of all shapes:\n"
    common = set(specs(base))
    yield f"| key | value | unit | default | |\n|---|---|---|---|---|\n{_shape_row(classes)}"
    yield from _rows(base, common, set())
    yield ""
    for shape, cls in classes.items():
        yield f'### `shape = "{shape}"`\n\n{_sentence(cls)}\n'
        yield from _table(cls, set(specs(cls)) - common, set())


def _shape_row(classes: Mapping[str, type]) -> str:
    options = ", ".join(f'`"{shape}"`' for shape in classes)
    return f"| `shape` | {options} | | required | what it is |"


def _table(cls: type, names: set[str], chosen: set[str]) -> Iterator[str]:
    yield "| key | value | unit | default | |\n|---|---|---|---|---|"
    yield from _rows(cls, names, chosen)
    yield ""


def _rows(cls: type, names: set[str], chosen: set[str]) -> Iterator[str]:
    for name, spec in specs(cls).items():
        if name in names:
            key = spec.key or name
            default = "chosen" if key in chosen else _default(cls, name, spec)
            doc = spec.doc.replace("|", "\\|")
            yield f"| `{key}` | {_value(spec)} | {_unit(spec)} | {default} | {doc} |"


def _sentence(cls: type) -> str:
    text = (cls.__doc__ or "").split("\n\n")[0].strip()
    return text.replace("``", "`")


def _value(spec: Spec) -> str:
    kinds = {
        "number": "number",
        "whole": "whole number",
        "flag": "`true` or `false`",
        "text": "text",
        "each_axis": "number for each axis",
        "each_axis_whole": "whole number for each axis",
        "span": "span",
        "angle": "angle",
        "expression": "expression",
        "table": "table",
        "tables": "list of tables",
        "custom": "see right",
        "choice": " or ".join(f'`"{option}"`' for option in spec.options),
    }
    return kinds[spec.kind] + _bounds(spec)


def _bounds(spec: Spec) -> str:
    bounds = (
        (spec.above, ">"), (spec.at_least, ">="), (spec.below, "<"), (spec.at_most, "<="),
    )  # fmt: skip
    found = [f"{sign} {bound:,.10g}" for bound, sign in bounds if bound is not None]
    return f" {' and '.join(found)}" if found else ""


def _unit(spec: Spec) -> str:
    return UnitSystem().symbol(spec.dimension) if spec.dimension else ""


def _default(cls: type, name: str, spec: Spec) -> str:
    field = next(f for f in fields(cls) if f.name == name)
    value: Any = field.default
    if field.default_factory is not MISSING:
        value = field.default_factory()
    if value is MISSING:
        return "required"
    if value is None or value == Span() or value in ({}, (), ""):
        return "left out"
    if spec.kind == "custom":
        value = getattr(cls, f"write_{name}")(value)
        value = value[0] if isinstance(value, list) and len(set(value)) == 1 else value
    if spec.kind == "angle":
        value = f"{value:g} rad"
    return f'`"{value}"`' if isinstance(value, str) else f"`{str(value).lower()}`"


def _chosen() -> dict[str, set[str]]:
    """Return the keys that the program chooses where they are left out, by class."""
    smallest = """
[particle]
mass = 1.0
[grid]
x = {}
[[packet]]
shape = "gaussian"
center = 0.0
sigma = 1.0
energy = 1.0
"""
    classes = {"grid": AxisSpec, "absorber": AbsorberSpec, "propagator": PropagatorSpec,
               "time": TimeSpec}  # fmt: skip
    found: dict[str, set[str]] = {}
    for key in left_out(parse_scenario(smallest)):
        parts = [part for part in key.split(".") if part != "x"]
        found.setdefault(classes[parts[0]].__name__, set()).add(parts[-1])
    return found


def _expressions() -> Iterator[str]:
    names = ", ".join(f"`{name}`" for name in FUNCTIONS)
    yield f"""\
## Expressions

In `expression`, `imaginary` and `where`: `x` and `y`; in `formula` of a drive: `t`; everywhere
`pi` and the names of `[parameters]`, all in the scenario's units. Operators: `+ - * / **`,
comparisons, chained too (`0 < x <= 2`), `and or not`. A condition is worth 1 or 0.
Trigonometry is in radians. Functions:
{names}.
`where(c, a, b)` is a where c holds, else b; `min`, `max`, `atan2` and `hypot` take two numbers.

Nothing else is an expression: no dots, brackets, texts, keywords or letters outside ASCII. At most
{LONGEST} characters, {DEEPEST} levels of nesting, exponents up to {LARGEST_EXPONENT:g}.
An expression that holds a comparison, logic, `where`, `sign`, `floor`, `ceil` or `round` counts as
sharp: each cell is sampled many times."""


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8")
    print(f"wrote {PAGE}")

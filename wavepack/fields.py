"""Dataclass fields that know their dimension, their bounds and a sentence.

A scenario is read into frozen dataclasses. What the reader must know about a
field (is it a length? may it be negative? is there a default?) stands on the
field itself, so that the reader, the error messages and the reference page
cannot drift from the classes they describe.
"""

import dataclasses
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

REQUIRED: Final = dataclasses.MISSING

#: Kinds of field the reader understands.
KINDS: Final = (
    "number",  # float; a quantity if `dimension` is not empty
    "whole",  # int
    "flag",  # bool
    "text",  # str
    "choice",  # one of `options`
    "each_axis",  # Mapping axis name -> float; one bare value serves all axes
    "each_axis_whole",  # Mapping axis name -> int, likewise
    "span",  # Span: { from, to }, { above } or { below }
    "angle",  # float, radians, from a string with deg or rad
    "expression",  # physics.expressions.Expression
    "table",  # one nested dataclass, `of`
    "tables",  # a tuple of nested dataclasses, `of`
    "custom",  # read by the class's own `read_<field>` hook in scenario/load.py
)


@dataclass(frozen=True)
class Spec:
    """What the reader knows about one field (kept in the field's metadata)."""

    kind: str
    doc: str
    dimension: str = ""  # "length", "energy", "time", "mass", "wavenumber", "field", "" ...
    key: str = ""  # the TOML key where it differs from the field's name
    above: float | None = None  # strict lower bound
    at_least: float | None = None
    below: float | None = None  # strict upper bound
    at_most: float | None = None
    options: tuple[str, ...] = ()
    of: Any = None


@dataclass(frozen=True)
class Span:
    """An interval of one axis; an unlimited side is infinite."""

    lower: float = -math.inf
    upper: float = math.inf


def declare(  # a field of any type, as in `dataclasses.field`
    kind: str,
    doc: str,
    *,
    default: Any = REQUIRED,  # noqa: ANN401
    **bounds: Any,  # noqa: ANN401
) -> Any:  # noqa: ANN401
    """Declare a dataclass field of a given kind; see `Spec` for the bounds.

    Raises
    ------
    ValueError
        If ``kind`` is not one of `KINDS`.
    """
    if kind not in KINDS:
        raise ValueError(f"unknown kind of field {kind!r}; known: {', '.join(KINDS)}")
    metadata = {"spec": Spec(kind, doc, **bounds)}
    if isinstance(default, Mapping):
        return dataclasses.field(default_factory=lambda: default, metadata=metadata, kw_only=True)
    return dataclasses.field(default=default, metadata=metadata, kw_only=True)


def specs(cls: type) -> dict[str, Spec]:
    """Return the spec of every declared field of a dataclass, by field name."""
    return {f.name: f.metadata["spec"] for f in dataclasses.fields(cls) if "spec" in f.metadata}

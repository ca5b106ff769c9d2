"""A scenario as canonical TOML: complete, in its own units, read back to the same."""

import json
import math
from collections.abc import Iterator, Mapping
from typing import Any

from wavepack.fields import Span, Spec, specs
from wavepack.physics.expressions import Expression
from wavepack.scenario.schema import ParticleSpec, Scenario


def to_toml(scenario: Scenario) -> str:
    """Return the text that `wavepack.scenario.load` reads to an equal scenario."""
    return "\n".join(_document(scenario)) + "\n"


def _document(scenario: Scenario) -> Iterator[str]:
    yield f"title = {_text(scenario.title)}"
    yield from ("", "[units]")
    for key in ("length", "energy", "time", "mass"):
        yield f"{key} = {_text(getattr(scenario.units, key))}"
    if scenario.parameters:
        yield from ("", "[parameters]")
        yield from (f"{name} = {_number(x)}" for name, x in scenario.parameters.items())
    particle = ParticleSpec(mass=scenario.particle.mass, charge=scenario.particle.charge)
    yield from _table("particle", particle)
    yield from ("", "[grid]")
    yield from (f"{name} = {_inline(_entries(axis))}" for name, axis in scenario.grid.items())
    for key in ("potential", "packet"):
        for shaped in getattr(scenario, key):
            yield from _item(key, shaped, shape=shaped.shape)
    for key in ("absorber", "propagator", "time"):
        yield from _table(key, getattr(scenario, key))
    for key in ("region", "detector"):
        for item in getattr(scenario, key):
            yield from _item(key, item)
    for key in ("output", "accuracy"):
        yield from _table(key, getattr(scenario, key))


def _table(key: str, value: Any) -> Iterator[str]:  # noqa: ANN401 - any declared dataclass
    if value is None:
        return
    yield from ("", f"[{key}]")
    for name, text in _entries(value).items():
        yield f"{name} = {text}"


def _item(key: str, value: Any, shape: str | None = None) -> Iterator[str]:  # noqa: ANN401 - any declared dataclass
    yield from ("", f"[[{key}]]")
    if shape is not None:
        yield f"shape = {_text(shape)}"
    for name, text in _entries(value).items():
        yield f"{name} = {text}"


def _entries(value: Any) -> dict[str, str]:  # noqa: ANN401 - any declared dataclass
    """Return key and TOML text of every field that is not left out."""
    found = {}
    for name, spec in specs(type(value)).items():
        text = _value(type(value), name, spec, getattr(value, name))
        if text is not None:
            found[spec.key or name] = text
    return found


def _value(cls: type, name: str, spec: Spec, value: Any) -> str | None:  # noqa: ANN401 - one line a kind
    if value is None or value == Span() or value in ({}, ()):
        return None
    if spec.kind == "custom":
        return _toml(getattr(cls, f"write_{name}")(value))
    if spec.kind == "angle":
        return _text(f"{value!r} rad")
    if spec.kind == "table":
        return _inline(_entries(value))
    if spec.kind == "tables":
        return f"[{', '.join(_inline(_entries(item)) for item in value)}]"
    return _toml(value)


def _toml(value: Any) -> str:  # noqa: ANN401, PLR0911 - one line a type
    match value:
        case bool():
            return "true" if value else "false"
        case int() | float():
            return _number(value)
        case str():
            return _text(value)
        case Expression():
            return _text(value.text)
        case Span():
            return _inline(_span(value))
        case Mapping():
            return _inline({key: _toml(item) for key, item in value.items()})
        case list() | tuple():
            return f"[{', '.join(_toml(item) for item in value)}]"
    raise TypeError(f"TOML has no form for {type(value).__name__}")


def _span(span: Span) -> dict[str, str]:
    if math.isinf(span.lower):
        return {"below": _number(span.upper)}
    if math.isinf(span.upper):
        return {"above": _number(span.lower)}
    return {"from": _number(span.lower), "to": _number(span.upper)}


def _inline(entries: Mapping[str, str]) -> str:
    inner = ", ".join(f"{key} = {text}" for key, text in entries.items())
    return f"{{ {inner} }}" if inner else "{}"


def _number(value: float) -> str:
    return str(value) if isinstance(value, int) else repr(float(value))


def _text(value: str) -> str:
    # JSON's escapes are TOML's; DEL alone must be escaped besides.
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")

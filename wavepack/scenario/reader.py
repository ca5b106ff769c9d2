"""From TOML values to declared dataclasses, gathering every fault on the way."""

import difflib
import operator
import re
from collections.abc import Iterable, Mapping
from dataclasses import MISSING, dataclass, fields
from pathlib import Path as FilePath
from typing import TYPE_CHECKING, Any, Final

from wavepack.fields import Span, Spec, specs
from wavepack.physics.drives import Drive
from wavepack.physics.expressions import Expression, ExpressionError, compile_expression
from wavepack.physics.units import UnitSystem
from wavepack.scenario.lines import Path
from wavepack.scenario.places import Places

if TYPE_CHECKING:
    from wavepack.errors import Fault

NAME: Final = re.compile(r"[A-Za-z][A-Za-z0-9_-]*")
MAX_SHOWN: Final = 60
MOST_TOLD: Final = 500


class _Unreadable:
    """Stands for a value that was refused; the fault is already noted."""


UNREADABLE: Final = _Unreadable()


@dataclass
class Reader:
    """Reads values against specs; faults gather in ``faults``.

    Attributes
    ----------
    places : Places
        Where its keys stand, for messages.
    folder : Path
        Where file names start from.
    """

    places: Places
    folder: FilePath
    units: UnitSystem
    axes: tuple[str, ...] = ()
    parameters: Mapping[str, float] | None = None

    def __post_init__(self) -> None:
        self.faults: list[Fault] = []

    def fault(self, path: Path, message: str) -> None:
        """Note a fault at a key; a message that quotes a long value is cut."""
        if len(message) > MOST_TOLD:
            message = f"{message[: MOST_TOLD - 3]}..."
        self.faults.append(self.places.fault(path, message))

    def known_keys(self, raw: Mapping[str, Any], known: Iterable[str], path: Path) -> None:
        """Note a fault for every key that is not known, naming the nearest."""
        known = list(known)
        for key in raw:
            if key not in known:
                self.fault((*path, key), f"unknown key{nearest(key, known)}")

    def table(self, raw: Any, path: Path) -> dict[str, Any] | None:  # noqa: ANN401 - any TOML value
        """Return a TOML table, or None with a fault."""
        if isinstance(raw, dict):
            return raw
        self.fault(path, f"need a table, got {shown(raw)}")
        return None

    def read(self, cls: type, raw: Any, path: Path, *, extra: tuple[str, ...] = ()) -> Any:  # noqa: ANN401 - any dataclass
        """Return an instance of a declared dataclass, or `UNREADABLE`.

        ``extra`` are keys that are read elsewhere, such as ``shape``.
        """
        table = self.table(raw, path)
        if table is None:
            return UNREADABLE
        wanted = specs(cls)
        keys = {spec.key or name: name for name, spec in wanted.items()}
        self.known_keys(table, [*keys, *extra], path)
        values: dict[str, Any] = {}
        complete = True
        for key, name in keys.items():
            if key in table:
                values[name] = self._value(cls, name, wanted[name], table[key], (*path, key))
                complete &= values[name] is not UNREADABLE
            elif _required(cls, name):
                self.fault((*path, key), f"missing; need {wanted_text(wanted[name])}")
                complete = False
        return cls(**values) if complete else UNREADABLE

    def _value(self, cls: type, name: str, spec: Spec, raw: Any, path: Path) -> Any:  # noqa: ANN401 - as the spec says
        try:
            value = self._convert(cls, name, spec, raw, path)
            if value is not UNREADABLE:
                _check_bounds(spec, value)
        except ValueError as error:
            self.fault(path, str(error))
            return UNREADABLE
        return value

    def _convert(self, cls: type, name: str, spec: Spec, raw: Any, path: Path) -> Any:  # noqa: ANN401, C901, PLR0911, PLR0912 - one line a kind
        match spec.kind:
            case "number":
                return self.units.convert(raw, spec.dimension)
            case "whole":
                return _whole(raw)
            case "flag":
                if not isinstance(raw, bool):
                    raise ValueError(f"need true or false, got {shown(raw)}")
                return raw
            case "text":
                return self._text(raw, name)
            case "choice":
                return _choice(raw, spec.options)
            case "each_axis":
                return self._each_axis(raw, lambda v: self.units.convert(v, spec.dimension))
            case "each_axis_whole":
                return self._each_axis(raw, _whole)
            case "span":
                return self.span(raw, spec.dimension)
            case "angle":
                return self.units.convert(raw, "angle")
            case "expression":
                return self._expression(cls, raw)
            case "table":
                return self.read(spec.of, raw, path)
            case "tables":
                return self._tables(spec.of, raw, path)
        return getattr(cls, f"read_{name}")(raw, self.units)

    def span(self, raw: Any, dimension: str) -> Span:  # noqa: ANN401 - any TOML value
        """Return a span; ValueError if it is none.

        Raises
        ------
        ValueError
            If it is no table of from and to, above, or below, or is empty.
        """
        wanted = "need { from, to }, { above } or { below }"
        if not isinstance(raw, dict):
            raise ValueError(f"{wanted}, got {shown(raw)}")
        if set(raw) not in ({"from", "to"}, {"above"}, {"below"}):
            raise ValueError(f"{wanted}, got {shown(raw)}")
        ends = {key: self.units.convert(value, dimension) for key, value in raw.items()}
        infinity = float("inf")
        lower = ends.get("from", ends.get("above", -infinity))
        upper = ends.get("to", ends.get("below", infinity))
        if not lower < upper:
            raise ValueError(f"need from < to, got {lower:g} and {upper:g}")
        return Span(lower, upper)

    def _text(self, raw: Any, name: str) -> str:  # noqa: ANN401 - any TOML value
        if not isinstance(raw, str):
            raise ValueError(f"need a text, got {shown(raw)}")
        if name == "file":
            return str((self.folder / raw).resolve())
        if name == "name" and not NAME.fullmatch(raw):
            raise ValueError(
                "need a name of letters, digits, _ and -, beginning with a letter, "
                f"got {shown(raw)}"
            )
        return raw

    def _each_axis(self, raw: Any, convert: Any) -> dict[str, Any]:  # noqa: ANN401 - numbers or texts
        if not isinstance(raw, dict):
            value = convert(raw)
            return dict.fromkeys(self.axes, value)
        for key in raw:
            if key not in self.axes:
                raise ValueError(f"need axes of the grid ({', '.join(self.axes)}), got {key}")
        if not raw:
            raise ValueError(f"need a value for {' or '.join(self.axes)}, got an empty table")
        return {axis: convert(raw[axis]) for axis in self.axes if axis in raw}

    def _expression(self, cls: type, raw: Any) -> Expression:  # noqa: ANN401 - any TOML value
        if not isinstance(raw, str):
            raise ValueError(f"need a formula as a text, got {shown(raw)}")
        allowed = ("t",) if issubclass(cls, Drive) else self.axes
        try:
            expression = compile_expression(raw, ("x", "y", "t"), self.parameters)
        except ExpressionError as error:
            raise ValueError(f"{shown(raw)}: {error}") from None
        others = sorted(expression.names - set(allowed))
        if others:
            hint = "; give time to a drive" if others == ["t"] else ""
            wanted = f"need an expression in {' and '.join(allowed)}"
            raise ValueError(f"{wanted}, found {', '.join(others)} in {shown(raw)}{hint}")
        return expression

    def _tables(self, cls: type, raw: Any, path: Path) -> Any:  # noqa: ANN401 - a tuple of instances
        if not isinstance(raw, list):
            raise ValueError(f"need a list of tables, got {shown(raw)}")
        items = [self.read(cls, item, (*path, i)) for i, item in enumerate(raw)]
        return UNREADABLE if UNREADABLE in items else tuple(items)


def nearest(key: str, known: Iterable[str]) -> str:
    """Return a hint that names the nearest known key, or all of them."""
    known = sorted(known)
    close = difflib.get_close_matches(key, known, n=1)
    return f"; did you mean {close[0]}?" if close else f"; known: {', '.join(known)}"


def shown(raw: Any) -> str:  # noqa: ANN401 - any TOML value
    """Return a value as it is shown in a message, long ones cut."""
    text = repr(raw)
    return text if len(text) <= MAX_SHOWN else f"{text[: MAX_SHOWN - 3]}..."


def wanted_text(spec: Spec) -> str:
    """Return what a field wants, in a few words."""
    dimension = f" ({spec.dimension})" if spec.dimension else ""
    return f"{spec.doc}{dimension}"


def _required(cls: type, name: str) -> bool:
    found = next(f for f in fields(cls) if f.name == name)
    return found.default is MISSING and found.default_factory is MISSING


def _whole(raw: Any) -> int:  # noqa: ANN401 - any TOML value
    # A sweep gives 1024.0 where it means 1024.
    if isinstance(raw, float) and raw.is_integer():
        return int(raw)
    if isinstance(raw, bool) or not isinstance(raw, int):
        raise ValueError(f"need a whole number, got {shown(raw)}")
    return raw


def _choice(raw: Any, options: tuple[str, ...]) -> str:  # noqa: ANN401 - any TOML value
    if raw in options:
        return str(raw)
    hint = nearest(raw, options) if isinstance(raw, str) else ""
    raise ValueError(f"need one of {', '.join(options)}, got {shown(raw)}{hint}")


def _check_bounds(spec: Spec, value: Any) -> None:  # noqa: ANN401 - numbers or mappings of them
    numbers = value.values() if isinstance(value, Mapping) else [value]
    for number in numbers:
        if isinstance(number, bool) or not isinstance(number, int | float):
            continue
        for bound, compare, sign in (
            (spec.above, operator.gt, ">"),
            (spec.at_least, operator.ge, ">="),
            (spec.below, operator.lt, "<"),
            (spec.at_most, operator.le, "<="),
        ):
            if bound is not None and not compare(number, bound):
                raise ValueError(f"need a value {sign} {bound:g}, got {shown(number)}")

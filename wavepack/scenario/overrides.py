"""``KEY=VALUE`` on the command line, applied to the parsed TOML before it is read."""

import difflib
import tomllib
from collections.abc import Mapping, Sequence
from typing import Any

from wavepack.errors import Fault
from wavepack.fields import specs
from wavepack.physics.packets import PACKETS
from wavepack.physics.potentials import SHAPES
from wavepack.scenario.lines import Path
from wavepack.scenario.reader import nearest
from wavepack.scenario.schema import DetectorSpec, RegionSpec

#: Lists of tables, which an override does not create, and the classes of their items.
LISTS: Mapping[str, tuple[type, ...]] = {
    "potential": tuple(SHAPES.values()),
    "packet": tuple(PACKETS.values()),
    "region": (RegionSpec,),
    "detector": (DetectorSpec,),
}


def apply_overrides(
    raw: dict[str, Any], overrides: Sequence[str]
) -> tuple[dict[Path, str], list[Fault]]:
    """Change ``raw`` in place; return the paths set, with their text, and faults."""
    applied: dict[Path, str] = {}
    faults: list[Fault] = []
    for text in overrides:
        key, equals, value = text.partition("=")
        key = key.strip()
        if not equals or not key:
            faults.append(Fault(key, "need KEY=VALUE", None, f"--set {text}"))
            continue
        try:
            applied[_set(raw, key, _parse(value.strip()))] = text
        except ValueError as error:
            faults.append(Fault(key, str(error), None, f"--set {text}"))
    return applied, faults


def _parse(text: str) -> Any:  # noqa: ANN401 - any TOML value
    """Return the value of a text: TOML if it is some, else the text itself."""
    if "\n" in text:
        return text
    try:
        return tomllib.loads(f"value = {text}")["value"]
    except (tomllib.TOMLDecodeError, RecursionError):
        return text


def _set(raw: dict[str, Any], key: str, value: Any) -> Path:  # noqa: ANN401 - any TOML value
    """Set a value at a dotted key and return its path.

    Raises
    ------
    ValueError
        If the key leads through something that is no table, or into a list
        without saying which of several items.
    """
    node: Any = raw
    path: Path = ()
    parts = key.split(".")
    if parts[0] in LISTS and parts[0] not in raw:
        raise ValueError(f"the scenario has no [[{parts[0]}]] to set this in")
    for position, part in enumerate(parts):
        if isinstance(node, list):
            items = node
            index, taken = _item(items, part, path, last=position == len(parts) - 1)
            path = (*path, index)
            node = items[index]
            if taken:
                if position == len(parts) - 1:
                    items[index] = value
                continue
        if not isinstance(node, dict):
            raise ValueError(f"{'.'.join(map(str, path))} is no table, it has no {part}")
        path = (*path, part)
        if position == len(parts) - 1:
            node[part] = value
        else:
            node = node.setdefault(part, {})
    return path


def _item(items: list[Any], part: str, path: Path, *, last: bool) -> tuple[int, bool]:
    """Return which item is meant, and whether the part named it."""
    place = ".".join(map(str, path))
    if not items:
        raise ValueError(f"{place} is empty: there is no {part} to set")
    if part.isdecimal():
        if int(part) >= len(items):
            raise ValueError(f"{place} has {len(items)} item(s), numbered from 0; got {part}")
        return int(part), True
    names = [_name(item, i) for i, item in enumerate(items)]
    if part in names:
        return names.index(part), True
    if len(items) == 1:
        keys = _keys(str(path[0])) if len(path) == 1 else []
        if not last and keys and part not in keys:
            close = difflib.get_close_matches(part, keys, n=1)
            hint = f"; did you mean {close[0]}?" if close else ""
            raise ValueError(f"no {place} is named {part}; named: {names[0]}{hint}")
        return 0, False
    raise ValueError(
        f"{place} has {len(items)} items: name one or give its number"
        f"{nearest(part, [n for n in names if n])}"
    )


def _keys(key: str) -> list[str]:
    """Return the keys that an item of a list may have."""
    found = {spec.key or name for cls in LISTS[key] for name, spec in specs(cls).items()}
    return sorted(found | {"shape"})


def _name(item: Any, number: int) -> str:  # noqa: ANN401 - any TOML value
    if not isinstance(item, dict):
        return ""
    name = item.get("name")
    return name if isinstance(name, str) else f"{item.get('shape', '')}{number}"

"""Where in a scenario's text a fault is."""

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from wavepack.errors import Fault, ScenarioError
from wavepack.scenario.lines import LineMap, Path

if TYPE_CHECKING:
    from wavepack.scenario.schema import Scenario


@dataclass(frozen=True)
class Places:
    """Turns keys into places.

    Attributes
    ----------
    file : str
        Name of the scenario's file.
    lines : LineMap or None
        Where its keys stand.
    overridden : mapping
        Paths set on the command line, with their text.
    """

    file: str = "scenario"
    lines: LineMap | None = None
    overridden: Mapping[Path, str] = field(default_factory=dict)

    def fault(self, path: Path, message: str) -> Fault:
        """Return the fault of a key with its file and line, or its override."""
        key = dotted(path)
        text = self._override(path)
        if text is not None:
            return Fault(key, message, None, f"--set {text}")
        return Fault(key, message, self.lines.find(path) if self.lines else None, self.file)

    def _override(self, path: Path) -> str | None:
        """Return the override that set a path, or made the tables around its own."""
        for length in range(len(path), 0, -1):
            if path[:length] in self.overridden:
                return self.overridden[path[:length]]
        if self.lines is not None and path in self.lines:
            return None
        made = (text for own, text in self.overridden.items() if own[: len(path)] == path)
        return next(made, None)


def dotted(path: Path) -> str:
    """Return a path as it is written with ``--set``."""
    return ".".join(str(part) for part in path)


@contextmanager
def placed(scenario: "Scenario") -> Iterator[None]:
    """Give faults that are raised inside, which know names only, their places in the text."""
    try:
        yield
    except ScenarioError as error:
        faults = [
            scenario.places.fault(_path(scenario, fault.key), fault.message)
            for fault in error.faults
        ]
        raise ScenarioError(faults) from error


def _path(scenario: "Scenario", key: str) -> Path:
    """Return the path of a key that may name an item of a list."""
    parts = key.split(".")
    items = getattr(scenario, parts[0], ())
    names = [item.name for item in items] if isinstance(items, tuple) else []
    if len(parts) > 1 and parts[1] in names:
        return (parts[0], names.index(parts[1]), *parts[2:])
    return tuple(parts)

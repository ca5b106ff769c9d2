"""Rows of a forecast, their verdicts, and how they are written."""

import math
import textwrap
from dataclasses import dataclass, field
from typing import Any, Final, Literal

from wavepack.scenario.choose_terms import Choice, choices_text

Verdict = Literal["good", "watch", "bad"]
VERDICTS: Final[tuple[Verdict, ...]] = ("good", "watch", "bad")
DAY: Final = 86_400.0


@dataclass(frozen=True)
class Row:
    """One line of a forecast."""

    topic: str
    found: str
    needed: str
    verdict: Verdict
    advice: str = ""


@dataclass(frozen=True)
class Forecast:
    """What to expect of a run.

    Attributes
    ----------
    rows : tuple of Row
        One for each thing looked at.
    quantities : dict
        The numbers behind them, in run units; costs in bytes and seconds.
    choices : tuple of Choice
        Numbers that the scenario left out and that were chosen for it.
    """

    rows: tuple[Row, ...]
    quantities: dict[str, Any] = field(default_factory=dict)
    choices: tuple[Choice, ...] = ()

    @property
    def verdict(self) -> Verdict:
        """The worst of the rows."""
        return max((row.verdict for row in self.rows), key=VERDICTS.index)

    @property
    def misses_target(self) -> bool:
        """Whether the errors expected exceed the accuracy that was asked for."""
        return any(row.topic == "accuracy" and row.verdict == "bad" for row in self.rows)

    def shortfalls(self, target: float | None) -> tuple[str, ...]:
        """Return what is bad, and by how much the errors foretold miss a target."""
        error = float(self.quantities.get("error", 0.0))
        found = []
        if target is not None and error > target:
            found.append(
                f"the error is about {error:.1g}, {error / target:.2g} times the target {target:g}"
            )
        found += [
            f"{row.topic}: {row.found}, needed: {row.needed}; {row.advice}"
            for row in self.rows
            if row.verdict == "bad"
        ]
        return tuple(found)

    def text(self, width: int = 100) -> str:
        """Return a table in plain text; advice stands below its row, choices above all."""
        head = Row("", "found", "needed", "good")
        columns = [
            max(len(getattr(row, name)) for row in (head, *self.rows))
            for name in ("topic", "found", "needed")
        ]
        lines = [choices_text(self.choices, width), ""] if self.choices else []
        lines.append(_line(head, columns, ""))
        for row in self.rows:
            lines.append(_line(row, columns, row.verdict))
            if row.advice:
                indent = " " * 4
                lines += textwrap.wrap(
                    row.advice, width, initial_indent=indent, subsequent_indent=indent
                )
        return "\n".join(lines)


def _line(row: Row, columns: list[int], verdict: str) -> str:
    cells = (row.topic, row.found, row.needed)
    parts = [cell.ljust(size) for cell, size in zip(cells, columns, strict=True)]
    return "  ".join([*parts, verdict]).rstrip()


def judged(value: float, limits: tuple[float, float]) -> Verdict:
    """Return "good" up to the first limit, bad beyond the second."""
    if value <= limits[0]:
        return "good"
    return "watch" if value <= limits[1] else "bad"


def down(value: float) -> float:
    """Round a positive number down to two digits."""
    unit = 10.0 ** (math.floor(math.log10(value)) - 1)
    return float(f"{math.floor(value / unit * (1 + 1e-9)) * unit:.3g}")


def up(value: float) -> float:
    """Round a positive number up to two digits."""
    unit = 10.0 ** (math.floor(math.log10(value)) - 1)
    return float(f"{math.ceil(value / unit * (1 - 1e-9)) * unit:.3g}")


def size_text(size: float) -> str:
    """Return a number of bytes as text."""
    for unit in ("B", "kB", "MB", "GB"):
        if size < 1000:
            return f"{size:.3g} {unit}"
        size /= 1000
    return f"{size:.3g} TB" if math.isfinite(size) else "unknown"


def duration_text(seconds: float) -> str:
    """Return a time in seconds as text, in a fitting unit."""
    for limit, unit, size in (
        (1e-3, "us", 1e-6),
        (1.0, "ms", 1e-3),
        (120.0, "s", 1.0),
        (7200.0, "min", 60.0),
        (2 * DAY, "h", 3600.0),
    ):
        if seconds < limit:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds / DAY:.3g} d"

"""A crosscheck as a table for a terminal, and its curves as CSV."""

import csv
import io
import textwrap
from collections.abc import Iterator, Mapping
from typing import Any, Final

from wavepack.reporting.tables import NO_ERROR, NO_ERROR_NOTE, WIDTH, significant, title_of

COLUMNS: Final = (
    "detector",
    "kind",
    "energy",
    "run",
    "stationary",
    "difference",
    "run_error",
    "incident",
)


def as_text(found: Mapping[str, Any]) -> str:
    """Return a crosscheck in plain text, in 80 columns."""
    lines = [*_wrapped(title_of(found)), *_wrapped(f"Stationary calculation: {found['method']}.")]
    lines += ["", *_numbers(found)]
    for name, seen in found["detectors"].items():
        kind = f": {seen['kind']} by energy" if "kind" in seen else ""
        lines += ["", f"Detector {name}{kind}", *_curve(seen)]
    lines += ["", *_wrapped(_verdict(found))]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def as_csv(found: Mapping[str, Any]) -> str:
    """Return every energy of every detector as a line; what is not known is left empty."""
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(COLUMNS)
    for name, seen in found["detectors"].items():
        for row in zip(*(seen.get(key) or () for key in COLUMNS[2:]), strict=True):
            cells = ("" if value is None else repr(value) for value in row)
            table.writerow((name, seen["kind"], *cells))
    return text.getvalue()


def _numbers(found: Mapping[str, Any]) -> Iterator[str]:
    heads = ("", "run", "stationary", "difference", "stated error")
    yield _line(heads)
    compared = {name: found[name] for name in ("transmission", "reflection")}
    compared |= {
        f"{name} crossed": seen["crossed"]
        for name, seen in found["detectors"].items()
        if "crossed" in seen
    }
    for name, one in compared.items():
        error = one["run"].get("error")
        yield _line(
            (
                name,
                significant(one["run"]["value"]),
                significant(one["stationary"]["value"]),
                _signed(one["difference"]),
                NO_ERROR if error is None else f"{error:.1e}",
            )
        )
        if one["reason"]:
            yield from _wrapped(f"not compared: {one['reason']}", indent="    ")
    if all(one["run"].get("error") is None for one in compared.values()):
        yield from _wrapped(NO_ERROR_NOTE, indent="  ")


def _curve(seen: Mapping[str, Any]) -> Iterator[str]:
    if "kind" not in seen:
        yield from _wrapped(f"no curves compared: {seen['reason']}", indent="  ")
        return
    unit = f" ({seen['energy_unit']})" if seen["energy_unit"] else ""
    yield _line((f"energy{unit}", "run", "stationary", "difference", ""))
    for i in seen["shown"]:
        both = (significant(seen[name][i]) for name in ("run", "stationary"))
        energy = significant(seen["energy"][i], 6)
        yield _line((energy, *both, _signed(seen["difference"][i]), ""))


def _verdict(found: Mapping[str, Any]) -> str:
    text = f"Run and stationary calculation {found['verdict']}."
    if found["verdict"].startswith("nothing"):
        text = f"Verdict: {found['verdict']}."
    text += (
        f" The run left {found['unfinished']:.1e} unfinished; the stationary result is that of "
        "infinite time."
    )
    if found["run_status"] not in {"finished", "stopped_early"}:
        text += f" The run is {found['run_status']}: it has not come to its end."
    return text


def _line(cells: tuple[str, ...]) -> str:
    name, *rest = cells
    return f"  {name:<27}{rest[0]:<13}{rest[1]:<13}{rest[2]:<12}{rest[3]}"


def _signed(value: float | None) -> str:
    return "" if value is None else f"{value:+.1e}"


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent)

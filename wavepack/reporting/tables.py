"""The results of a run as tables: for a terminal, a page and a spreadsheet."""

import csv
import io
import re
import textwrap
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

LIMITS: Final = (
    "Model: one particle, coherent, in the potential stated: no scattering, no charging and no "
    "interaction with others unless the scenario models it. Errors are numerical, of this model."
)
CAUTION: Final = (
    "Device limits and safety margins are for measured data, applicable codes and qualified "
    "engineers."
)
NO_ERROR: Final = "—"
NO_ERROR_NOTE: Final = f"{NO_ERROR} no numerical error has been established"
TAILS_NOTE: Final = (
    "Errors of tails are of the fit alone; those of step and grid come on top. Extrapolated: "
    "what is still held shared as the tail shares it. It is no part of the probabilities above."
)
NO_VALUE: Final = "none"
NO_ROLE: Final = "no region has this role"
#: What can only be counted where a region has the role.
ROLES: Final = {"transmission": "transmitted", "reflection": "reflected"}

#: Times at a detector that are printed where they are known.
TIMES: Final = {
    "median_crossing_time": "median crossing time",
    "crossing_time_spread": "spread of crossing times",
    "delay": "delay against free motion",
}

WIDTH: Final = 80
_NUMBER: Final = re.compile(r"([+-]?\d+)(\.\d*)?(e[+-]\d+)?")


@dataclass(frozen=True)
class Row:
    """One line of a table: a quantity as it is printed."""

    name: str
    value: str
    error: str = ""
    unit: str = ""


@dataclass(frozen=True)
class Section:
    """Rows under one heading, and sentences below them."""

    title: str
    rows: tuple[Row, ...] = ()
    notes: tuple[str, ...] = ()


def title_of(results: Mapping[str, Any]) -> str:
    """Return the title on one line, free of control characters."""
    text = str(results.get("title") or "untitled")
    return " ".join("".join(c if c.isprintable() else " " for c in text).split()) or "untitled"


def status_line(results: Mapping[str, Any]) -> str:
    """Return in one sentence how far the run came and what that took."""
    status = str(results["status"]).replace("_", " ")
    text = f"{status} at t = {_with_unit(results['time'])}"
    numerics = results.get("numerics", {})
    if "steps" in numerics:
        text += f", {numerics['steps']} steps of {_with_unit(numerics['step'])} to the end"
    seconds = results.get("provenance", {}).get("wall_seconds")
    return text if not seconds else f"{text}, {seconds:.3g} s of computing"


def sections(results: Mapping[str, Any]) -> tuple[Section, ...]:
    """Return all tables of a run's results, empty ones left out."""
    found = [
        _fault(results),
        Section("Probabilities", _probabilities(results)),
        _tails(results.get("tails") or {}, results.get("extrapolated") or {}),
        Section("Regions", _regions(results.get("regions", {}))),
        *(_detector(name, seen) for name, seen in results.get("detectors", {}).items()),
        Section("Expectation values of what remains", _quantities(results.get("expectations", {}))),
        _numerics(results.get("numerics", {}), with_detectors=bool(results.get("detectors"))),
    ]
    return tuple(section for section in found if section.rows or section.notes)


def as_text(results: Mapping[str, Any], *, bold: bool = False) -> str:
    """Return the tables in plain text, in 80 columns; headings bold if asked for."""
    title = title_of(results)
    lines = [*_wrapped(_emphasised(title, bold)), *_wrapped(status_line(results))]
    parts = sections(results)
    cells = aligned(parts)
    for section in parts:
        lines += ["", _emphasised(section.title, bold)]
        lines += [line.rstrip() for line in cells[section.title]]
        for note in section.notes:
            lines += _wrapped(note, indent="  ")
    lines.append("")
    if any(row.error == NO_ERROR for section in parts for row in section.rows):
        lines += _wrapped(NO_ERROR_NOTE)
    return "\n".join([*lines, *_wrapped(LIMITS), *_wrapped(CAUTION)]) + "\n"


def as_csv(results: Mapping[str, Any]) -> str:
    """Return every quantity as a line ``name,value,error,unit``, numbers in full.

    Names are the path in ``results.json`` with dots. What is null is left empty.
    """
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(("name", "value", "error", "unit"))
    groups = ("time", "quantities", "tails", "extrapolated", "regions", "detectors", "expectations")
    for group in groups:
        for name, found in _leaves(group, results.get(group) or {}):
            number = [found["value"], found.get("error")]
            cells = ["" if x is None else repr(x) for x in number]
            table.writerow((name, *cells, found.get("unit", "")))
    return text.getvalue()


def aligned(parts: Sequence[Section]) -> dict[str, list[str]]:
    """Return the rows of each section as lines of one table, decimal points in line."""
    rows = [row for section in parts for row in section.rows]
    names = _padded([f"  {row.name}" for row in rows])
    values, errors = numbers([r.value for r in rows]), numbers([r.error for r in rows])
    lines = iter(
        f"{name}  {value}  {error}  {row.unit}"
        for name, value, error, row in zip(names, values, errors, rows, strict=True)
    )
    return {section.title: [next(lines) for _ in section.rows] for section in parts}


def numbers(cells: Sequence[str]) -> list[str]:
    """Pad cells to one width with the decimal points of the numbers in line."""
    whole = max((len(m[1]) for m in map(_NUMBER.fullmatch, cells) if m), default=0)
    shifted = []
    for cell in cells:
        match = _NUMBER.fullmatch(cell)
        shifted.append(" " * (whole - len(match[1]) if match else 0) + cell)
    # A remark in the place of a number may be longer than the column; nothing follows it.
    width = max((len(cell) for cell in shifted if cell != NO_ROLE), default=0)
    return [cell.ljust(width) for cell in shifted]


def significant(value: float | None, digits: int = 7) -> str:
    """Return a number with so many significant digits, trailing zeros kept."""
    if value is None:
        return NO_VALUE
    return "0" if value == 0 else f"{value:#.{digits}g}".rstrip(".")


def _padded(cells: Sequence[str]) -> list[str]:
    width = max(map(len, cells), default=0)
    return [cell.ljust(width) for cell in cells]


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent)


def _emphasised(text: str, bold: bool) -> str:  # noqa: FBT001 - a private pair with one meaning
    return f"\033[1m{text}\033[0m" if bold else text


def _with_unit(found: Mapping[str, Any]) -> str:
    return f"{found['value']:.10g} {found['unit']}".rstrip()


def _row(name: str, found: Mapping[str, Any]) -> Row:
    error = found.get("error")
    return Row(
        name,
        # By how much the books are open shows far behind the point.
        significant(found["value"], 13 if name == "balance" else 7),
        NO_ERROR if error is None and found["value"] is not None else _error(error),
        found.get("unit", ""),
    )


def _error(error: float | None) -> str:
    return "" if error is None else f"{error:.1e}"


def _quantities(found: Mapping[str, Any]) -> tuple[Row, ...]:
    return tuple(_row(name, one) for name, one in found.items())


def _probabilities(results: Mapping[str, Any]) -> tuple[Row, ...]:
    """Return the rows of the quantities; what no region could count is no 0."""
    regions = results.get("regions", {}).values()
    roles = {one.get("role") for one in regions}
    missing = {name for name, role in ROLES.items() if role not in roles and None not in roles}
    return tuple(
        Row(name, NO_ROLE) if name in missing and not one["value"] else _row(name, one)
        for name, one in results.get("quantities", {}).items()
    )


def _regions(found: Mapping[str, Any]) -> tuple[Row, ...]:
    rows = []
    for name, one in found.items():
        rows.append(_row(name, one["probability"]))
        if one.get("dwell_time", {}).get("value") is not None:
            rows.append(_row("  time spent there", one["dwell_time"]))
    return tuple(rows)


def _tails(tails: Mapping[str, Any], extrapolated: Mapping[str, Any]) -> Section:
    """Return the decays found, and what they make of transmission and reflection."""
    rows = [
        _fitted(f"{kind} of {name}", tail[kind])
        for name, tail in tails.items()
        for kind in ("lifetime", "width")
        if tail[kind]["value"] is not None
    ]
    rows += [
        _fitted(f"extrapolated {kind}", extrapolated[kind])
        for kind in ("transmission", "reflection")
        if extrapolated.get(kind, {}).get("value") is not None
    ]
    return Section("Slow tails", tuple(rows), (TAILS_NOTE,) if rows else ())


def _fitted(name: str, found: Mapping[str, Any]) -> Row:
    return Row(name, significant(found["value"]), _error(found["fit_error"]), found["unit"])


def _fault(results: Mapping[str, Any]) -> Section:
    fault = results.get("fault")
    return Section("Stopped by a numerical fault", (), (str(fault),) if fault else ())


def _detector(name: str, seen: Mapping[str, Any]) -> Section:
    rows = [
        _row(key.replace("_", " "), seen[key])
        for key in ("crossed", "forward", "backward", "mean_crossing_time")
        if key in seen
    ]
    rows += [
        _row(name, seen[key])
        for key, name in TIMES.items()
        if seen.get(key, {}).get("value") is not None
    ]
    rows += [row for kind in ("transmission", "reflection") for row in _peak(kind, seen)]
    for band in seen.get("sidebands") or ():
        at = f"{band['energy']:.5g} {seen.get('energy_unit', '')}".rstrip()
        rows.append(_row(f"sideband n = {band['n']:+d} at {at}", band["flux"]))
    reason = seen.get("reason")
    notes = (f"No transmission by energy: {reason}.",) if reason else ()
    return Section(f"Detector {name}", tuple(rows), notes)


def _peak(kind: str, seen: Mapping[str, Any]) -> tuple[Row, ...]:
    """Return the highest value by energy and where it is."""
    values, energies = seen.get(kind), seen.get("energy")
    known = [i for i, value in enumerate(values or ()) if value is not None]
    if not values or not energies or not known:
        return ()
    top = max(known, key=lambda i: values[i])
    errors = seen.get(f"{kind}_error")
    found = {"value": values[top], "error": errors[top] if errors else None, "unit": ""}
    place = "  at the energy" + (", an end of the range" if top in {known[0], known[-1]} else "")
    where = Row(place, significant(energies[top]), "", seen.get("energy_unit", ""))
    return (_row(f"highest {kind} by energy", found), where)


def _numerics(found: Mapping[str, Any], *, with_detectors: bool) -> Section:
    rows = [Row(f"points along {axis}", str(n)) for axis, n in found.get("points", {}).items()]
    for axis, spacing in found.get("spacing", {}).items():
        rows.append(_fact(f"spacing along {axis}", spacing))
    if "step" in found:
        rows += [_fact("time step", found["step"]), Row("steps to the end", str(found["steps"]))]
    for layer in found.get("absorbers") or ():
        rows.append(_fact(f"absorber at {layer['end']} {layer['axis']}", layer["strength"]))
    beyond = (found.get("detectors") or {}).get("probability_beyond_band")
    if beyond is not None and with_detectors:
        rows.append(Row("probability too fast for detectors", significant(beyond, 3)))
    return Section("Numerics", tuple(rows), tuple(_method(found)))


def _fact(name: str, found: Mapping[str, Any]) -> Row:
    return Row(name, f"{found['value']:.7g}", "", found.get("unit", ""))


def _method(found: Mapping[str, Any]) -> Iterator[str]:
    if "method" in found:
        orders = [("order", found.get("order")), ("order in space", found.get("space_order"))]
        words = [found["method"], *(f"{name} {n}" for name, n in orders if n)]
        if found.get("threads"):
            words.append(f"threads: {found['threads']}")
        yield ", ".join(words)


def _leaves(name: str, found: Mapping[str, Any]) -> Iterator[tuple[str, Mapping[str, Any]]]:
    """Yield every quantity below a branch of the results with its path."""
    if "value" in found:
        yield name, found
        return
    for key, inner in found.items():
        if isinstance(inner, Mapping):
            yield from _leaves(f"{name}.{key}", inner)
        elif key == "sidebands":
            for band in inner or ():
                yield f"{name}.sidebands.{band['n']:+d}", band["flux"]

"""Which line of a TOML text a key stands on; the parser itself does not say."""

import re
import tomllib
from collections.abc import Iterator
from typing import TypeAlias

Path: TypeAlias = tuple[str | int, ...]

_HEADER = re.compile(r"\s*(\[\[?)\s*([^\[\]]+?)\s*\]\]?\s*(?:#.*)?")
_KEY = re.compile(r"""\s*((?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*'))*)\s*=""")
_PART = re.compile(r"""[A-Za-z0-9_-]+|"[^"]*"|'[^']*'""")


class LineMap:
    """Lines of the keys of a text, from 1.

    A key inside a value, such as one of an inline table, is found with the
    statement it belongs to.
    """

    def __init__(self, text: str) -> None:
        self._lines = dict(_statements(text))

    def find(self, path: Path) -> int | None:
        """Return the line of a key, or of the nearest table around it."""
        for length in range(len(path), 0, -1):
            if path[:length] in self._lines:
                return self._lines[path[:length]]
        return None


def syntax_line(error: tomllib.TOMLDecodeError) -> int | None:
    """Return the line that a syntax error names in its message."""
    match = re.search(r"at line (\d+)", str(error))
    return int(match[1]) if match else None


def _statements(text: str) -> Iterator[tuple[Path, int]]:
    """Yield (path, line) of every header and every key of a text that parses."""
    lines = text.splitlines()
    table: Path = ()
    counts: dict[Path, int] = {}
    number = 0
    while number < len(lines):
        line = lines[number]
        header = _HEADER.fullmatch(line)
        key = _KEY.match(line)
        taken = 1
        if header:
            table = _resolve(_parts(header[2]), counts, opens=header[1] == "[[")
            yield table, number + 1
        elif key:
            taken = _extent(lines, number)
            path = table
            for part in _parts(key[1]):
                path = (*path, part)
                yield path, number + 1
        number += taken


def _parts(text: str) -> list[str]:
    return [part.strip("\"'") for part in _PART.findall(text)]


def _resolve(parts: list[str], counts: dict[Path, int], *, opens: bool) -> Path:
    """Return the path of a header; the last table of a list is meant by its name."""
    path: Path = ()
    for i, part in enumerate(parts):
        path = (*path, part)
        last = i == len(parts) - 1
        if last and opens:
            counts[path] = counts.get(path, -1) + 1
        if path in counts:
            path = (*path, counts[path])
    return path


def _extent(lines: list[str], first: int) -> int:
    """Return how many lines the statement takes that begins at a line."""
    for taken in range(1, len(lines) - first + 1):
        try:
            tomllib.loads("\n".join(lines[first : first + taken]))
        except tomllib.TOMLDecodeError:
            continue
        return taken
    return 1

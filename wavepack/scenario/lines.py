"""Which line of a TOML text a key stands on; the parser itself does not say.

A scanner over a text that the parser has accepted: headers, dotted keys, inline
tables, lists item by item, and the four kinds of text, all over several lines.
"""

import re
import tomllib
from typing import TypeAlias

Path: TypeAlias = tuple[str | int, ...]

_BLANK = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_QUOTED = re.compile(
    r'"""(?:[^\\]|\\.)*?"{3,5}(?!")' r"|'''.*?'{3,5}(?!')" r'|"(?:[^"\\\n]|\\.)*"' r"|'[^'\n]*'",
    re.DOTALL,
)
#: Numbers, truth values and dates; a date and its time may be a space apart.
_PLAIN = re.compile(r"[^\s,\]}#]+(?: \d\d:[^\s,\]}#]+)?")


class LineMap:
    """Lines, from 1, of the keys and list items of a text that parses."""

    def __init__(self, text: str) -> None:
        self._text = text
        self._place = 0
        self._line = 1
        self._counted = 0
        self._lists: dict[Path, int] = {}
        self._lines: dict[Path, int] = {}
        self._document()

    def find(self, path: Path) -> int | None:
        """Return the line of a key, or of the nearest table around it."""
        for length in range(len(path), 0, -1):
            if path[:length] in self._lines:
                return self._lines[path[:length]]
        return None

    def __contains__(self, path: Path) -> bool:
        return path in self._lines

    def _document(self) -> None:
        table: Path = ()
        self._take(_BLANK)
        while self._place < len(self._text):
            if self._next("["):
                table = self._header()
            else:
                self._assignment(table)
            self._take(_BLANK)

    def _header(self) -> Path:
        """Read [a.b] or [[a.b]] and return its path, numbered where it is a list's."""
        self._note(())
        opens = self._text.startswith("[[", self._place)
        self._place += 1 + opens
        path: Path = ()
        parts = self._key()
        self._place += 1 + opens
        for i, part in enumerate(parts, start=1):
            path = (*path, part)
            if opens and i == len(parts):
                self._lists[path] = self._lists.get(path, -1) + 1
                self._lines.setdefault(path, self._line)
            if path in self._lists:
                path = (*path, self._lists[path])
            self._lines.setdefault(path, self._line)
        return path

    def _assignment(self, table: Path) -> None:
        """Read key = value inside a table."""
        self._note(table)
        path = table
        for part in self._key():
            path = (*path, part)
            self._note(path)
        self._place += 1  # =
        self._value(path)

    def _key(self) -> list[str]:
        """Read a dotted key."""
        parts = []
        while True:
            self._take(_SPACE)
            quoted = self._text[self._place] in "\"'"
            part = self._take(_QUOTED if quoted else _BARE_KEY)
            # The parser knows the escapes of quoted keys.
            parts.append(next(iter(tomllib.loads(f"{part} = 0"))))
            self._take(_SPACE)
            if not self._next("."):
                return parts
            self._place += 1

    def _value(self, path: Path) -> None:
        """Read a value and note every key and item inside it."""
        self._take(_SPACE)
        if self._next("["):
            self._list(path)
        elif self._next("{"):
            self._inline(path)
        else:
            self._take(_QUOTED if self._text[self._place] in "\"'" else _PLAIN)

    def _list(self, path: Path) -> None:
        self._place += 1
        self._take(_BLANK)
        number = 0
        while not self._next("]"):
            self._note((*path, number))
            self._value((*path, number))
            self._separator()
            number += 1
        self._place += 1

    def _inline(self, path: Path) -> None:
        self._place += 1
        self._take(_BLANK)
        while not self._next("}"):
            self._assignment(path)
            self._separator()
        self._place += 1

    def _separator(self) -> None:
        self._take(_BLANK)
        if self._next(","):
            self._place += 1
        self._take(_BLANK)

    def _take(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self._text, self._place)
        if match is None:
            raise ValueError(f"line {self._line}: not TOML as the parser reads it")
        self._place = match.end()
        return match[0]

    def _next(self, character: str) -> bool:
        return self._text.startswith(character, self._place)

    def _note(self, path: Path) -> None:
        """Note the line of this place as that of a path, unless it has one."""
        self._line += self._text.count("\n", self._counted, self._place)
        self._counted = self._place
        if path:
            self._lines.setdefault(path, self._line)


def syntax_line(error: ValueError, text: str) -> int | None:
    """Return the line of a text that the parser's message names."""
    match = re.search(r"at line (\d+)", str(error))
    if match:
        return int(match[1])
    return text.count("\n", 0, len(text) - 1) + 1 if "end of document" in str(error) else None

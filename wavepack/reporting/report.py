"""A run on one page: `report.html`, which needs no other file and no network."""

import base64
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from html import escape
from pathlib import Path
from typing import Any, Final

from wavepack.archive.disk import machine_errors, write_atomically
from wavepack.reporting.tables import (
    CAUTION,
    LIMITS,
    NO_ERROR,
    NO_ERROR_NOTE,
    Row,
    Section,
    numbers,
    sections,
    status_line,
    title_of,
)

REPORT_FILE: Final = "report.html"

POLICY: Final = "default-src 'none'; img-src data:; style-src 'unsafe-inline'"

STYLE: Final = """
:root { color-scheme: light dark; --ink: #1c2430; --faint: #5b6675; --paper: #fdfdfc;
  --rule: #d9dde3; --accent: #1f5fa8; --block: #f3f4f6; }
@media (prefers-color-scheme: dark) { :root { --ink: #e4e7eb; --faint: #9aa5b4;
  --paper: #14181f; --rule: #323a46; --accent: #7db4f0; --block: #1d232c; } }
body { margin: 0 auto; padding: 2.5rem 1.25rem 4rem; max-width: 60rem; color: var(--ink);
  background: var(--paper); font: 1rem/1.55 system-ui, sans-serif; }
h1 { font-size: 1.9rem; line-height: 1.2; margin: 0 0 .3rem; overflow-wrap: anywhere; }
h2 { font-size: 1.2rem; margin: 2.4rem 0 .6rem; color: var(--accent); overflow-wrap: anywhere; }
.status, .note, figcaption, footer { color: var(--faint); }
.status { margin: 0; }
.note { margin: .4rem 0; font-size: .92rem; }
.tables { display: grid; grid-template-columns: repeat(auto-fit, minmax(min(26rem, 100%), 1fr));
  column-gap: 2.5rem; }
.tables section, figure { break-inside: avoid; }
.scroll { overflow-x: auto; }
table { border-collapse: collapse; width: 100%; font-size: .95rem; }
th, td { padding: .22rem .9rem .22rem 0; border-bottom: 1px solid var(--rule); text-align: left; }
thead th { color: var(--faint); font-weight: 500; }
tbody th { font-weight: 400; overflow-wrap: break-word; max-width: 20rem; }
.facts th { white-space: nowrap; } .facts td { overflow-wrap: anywhere; }
.num { font-family: ui-monospace, monospace; font-size: .9rem; white-space: pre; }
figure { margin: 1.2rem 0; }
figure img { max-width: 100%; min-width: 42rem; height: auto; background: #fff;
  border-radius: 4px; }
pre { background: var(--block); padding: 1rem; border-radius: 4px; overflow-x: auto;
  font-size: .85rem; line-height: 1.45; }
footer { margin-top: 3rem; border-top: 1px solid var(--rule); padding-top: .8rem;
  font-size: .9rem; }
@media print { figure img { min-width: 0; } body { max-width: none; padding: 0; font-size: 10pt; }
  :root { --ink: #000; --faint: #444; --paper: #fff; --rule: #bbb; --accent: #000;
    --block: #fff; }
  pre { white-space: pre-wrap; border: 1px solid var(--rule); } h2 { break-after: avoid; } }
"""


@dataclass(frozen=True)
class Picture:
    """A PNG file and the words below it."""

    path: Path
    caption: str


def write_report(
    folder: Path,
    results: Mapping[str, Any],
    scenario_text: str,
    pictures: Sequence[Picture],
    remarks: Sequence[str] = (),
) -> Path:
    """Write `report.html` into a run folder and return its path.

    Parameters
    ----------
    folder : Path
        The run folder.
    results : mapping
        What ``results.json`` holds.
    scenario_text : str
        The scenario as run.
    pictures : sequence of Picture
        PNG files, embedded in this order.
    remarks : sequence of str
        Why pictures are missing, if any are.

    Raises
    ------
    MachineError
        If a picture cannot be read or the page not be written.
    """
    path = folder / REPORT_FILE
    embedded = []
    for picture in pictures:
        with machine_errors(picture.path, folder):
            embedded.append((picture.path.read_bytes(), picture.caption))
    write_atomically(path, page(results, scenario_text, embedded, remarks).encode())
    return path


def page(
    results: Mapping[str, Any],
    scenario_text: str,
    pictures: Sequence[tuple[bytes, str]],
    remarks: Sequence[str] = (),
) -> str:
    """Return the whole page; pictures are PNG bytes and a caption each."""
    title = escape(title_of(results))
    body = [
        f"<header><h1>{title}</h1>",
        f'<p class="status">{escape(status_line(results))}</p></header>',
        *_tables(sections(results)),
        *(_figure(content, caption) for content, caption in pictures),
        *(f'<p class="note">{escape(remark)}</p>' for remark in remarks),
        *_provenance(results.get("provenance", {})),
        "<h2>Scenario</h2>",
        f"<pre>{escape(scenario_text)}</pre>",
        f"<footer><p>{escape(LIMITS)}</p><p>{escape(CAUTION)}</p></footer>",
    ]
    return "\n".join(
        [
            "<!doctype html>",
            '<html lang="en"><head><meta charset="utf-8">',
            '<meta name="viewport" content="width=device-width, initial-scale=1">',
            # Nothing on this page may be fetched or run, whatever a title or a name holds.
            f'<meta http-equiv="Content-Security-Policy" content="{POLICY}">',
            f"<title>{title}</title><style>{STYLE}</style></head><body>",
            *body,
            "</body></html>",
            "",
        ]
    )


def _tables(parts: Sequence[Section]) -> Iterator[str]:
    yield '<div class="tables">'
    for section in parts:
        yield f"<section><h2>{escape(section.title)}</h2>"
        yield from _table(section.rows)
        yield from (f'<p class="note">{escape(note)}</p>' for note in section.notes)
        yield "</section>"
    yield "</div>"
    if any(row.error == NO_ERROR for section in parts for row in section.rows):
        yield f'<p class="note">{escape(NO_ERROR_NOTE)}</p>'


def _table(rows: Sequence[Row]) -> Iterator[str]:
    if not rows:
        return
    heads = ["", "value", "error", "unit"]
    columns = [
        [row.name.strip() for row in rows],
        numbers([row.value for row in rows]),
        numbers([row.error for row in rows]),
        [row.unit for row in rows],
    ]
    # Columns in which nothing stands are left out.
    kept = [i for i, cells in enumerate(columns) if any(cell.strip() for cell in cells)]
    head = "".join(f'<th scope="col">{heads[i]}</th>' for i in kept)
    yield f'<div class="scroll"><table><thead><tr>{head}</tr></thead><tbody>'
    for cells in zip(*columns, strict=True):
        yield "<tr>" + "".join(_cell(cells[i], i) for i in kept) + "</tr>"
    yield "</tbody></table></div>"


def _cell(text: str, column: int) -> str:
    if column == 0:
        return f'<th scope="row">{escape(text)}</th>'
    mark = ' class="num"' if column in {1, 2} else ""
    return f"<td{mark}>{escape(text.rstrip())}</td>"


def _figure(content: bytes, caption: str) -> str:
    data = base64.b64encode(content).decode("ascii")
    words = escape(caption)
    return (
        # On a narrow screen a picture keeps a width at which it can be read, and scrolls.
        f'<figure><div class="scroll"><img src="data:image/png;base64,{data}" alt="{words}"></div>'
        f"<figcaption>{words}</figcaption></figure>"
    )


#: Words for what a name in ``provenance`` alone does not tell.
WORDS: Final = {
    "planner": "library of the transforms",
    "wall_seconds": "computing time (s)",
    "former_ends": "ends before it was extended",
    "scenario_sha256": "checksum of the scenario (SHA-256)",
}


def _provenance(found: Mapping[str, Any]) -> Iterator[str]:
    if not found:
        return
    yield '<h2>Provenance</h2><div class="scroll"><table class="facts"><tbody>'
    for name, value in found.items():
        words = escape(WORDS.get(name, name.replace("_", " ")))
        yield f'<tr><th scope="row">{words}</th><td>{escape(_words(value))}</td></tr>'
    yield "</tbody></table></div>"


def _words(value: object) -> str:
    match value:
        case None:
            return "—"
        case Mapping():
            return ", ".join(f"{key} {_words(inner)}" for key, inner in value.items())
        case list():
            return ", ".join(map(_words, value)) or "—"
        case float():
            return f"{value:.6g}"
        case _:
            return str(value)

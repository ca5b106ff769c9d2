"""The report page: complete, self-contained, and safe whatever the names hold."""

import re
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pytest

from wavepack.errors import MachineError
from wavepack.reporting.report import Picture, page, write_report
from wavepack.reporting.tables import CAUTION, LIMITS

Results = dict[str, Any]
PNG = b"\x89PNG\r\n\x1a\n not a real picture"


class Page(HTMLParser):
    """Gathers text, tags and sources, and checks that tags are closed."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.open: list[str] = []
        self.sources: list[str] = []
        self.text = ""
        self.feed(html)
        assert self.open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Note a tag and what it points to."""
        self.tags.append(tag)
        self.sources += [value or "" for name, value in attrs if name in {"src", "href"}]
        if tag not in {"meta", "img"}:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        """Check that it closes the last one."""
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        """Gather text."""
        self.text += data


def test_page_is_complete(results: Results) -> None:
    """Title, quantities, numerics, provenance, scenario, limits and caution are there."""
    text = Page(page(results, 'title = "One barrier"\n', [(PNG, "Overview")], ["No frame."])).text
    for words in (
        "One barrier",
        "finished at t = 1200 fs",
        "0.1262346",
        "3.1e-06",
        "Detector exit",
        "crank-nicolson",
        "numpy 2.0",
        'title = "One barrier"',
        "Overview",
        "No frame.",
        "ends before it was extended",
        "600",
        "computing time (s)",
        LIMITS,
        CAUTION,
    ):
        assert words in text, words


def test_page_needs_nothing_else(results: Results) -> None:
    """Pictures are embedded; there is no script and no address of anything outside."""
    html = page(results, "", [(PNG, "Overview")])
    found = Page(html)
    assert all(source.startswith("data:image/png;base64,") for source in found.sources)
    assert len(found.sources) == 1
    assert {"script", "link", "iframe"}.isdisjoint(found.tags)
    assert "http" not in re.sub(r"http-equiv", "", html)
    assert "prefers-color-scheme: dark" in html
    assert "@media print" in html


def test_page_escapes_all_text(results: Results) -> None:
    """No title, name, reason, unit or scenario can put a tag on the page."""
    evil = "<script>alert('&')</script>"
    results["title"] = evil
    results["regions"] = {evil: results["regions"]["drain"]}
    seen = results["detectors"].pop("exit")
    results["detectors"][evil] = seen | {"reason": evil, "energy_unit": evil}
    results["quantities"]["transmission"]["unit"] = evil
    results["provenance"][evil] = evil
    found = Page(page(results, evil, [(PNG, evil)], [evil]))
    assert "script" not in found.tags
    assert found.text.count(evil) >= 8


def test_report_is_written_into_the_folder(results: Results, tmp_path: Path) -> None:
    """The page stands in the run folder with the picture's bytes in it."""
    picture = tmp_path / "overview.png"
    picture.write_bytes(PNG)
    path = write_report(tmp_path, results, "", [Picture(picture, "Overview")])
    assert path == tmp_path / "report.html"
    assert "<figcaption>Overview</figcaption>" in path.read_text("utf-8")


def test_missing_picture_is_the_machine_s_fault(results: Results, tmp_path: Path) -> None:
    """A picture that cannot be read is reported by its name."""
    with pytest.raises(MachineError, match=r"gone\.png"):
        write_report(tmp_path, results, "", [Picture(tmp_path / "gone.png", "Gone")])

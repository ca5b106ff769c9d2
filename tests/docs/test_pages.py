"""What the pages say can be done: links resolve, code runs, commands and scenarios are accepted."""

import re
import shlex
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from tests.docs.conftest import PAGES, ROOT
from wavepack.arguments import parse
from wavepack.physics.potentials import SHAPES
from wavepack.scenario.load import parse_scenario

FENCE = re.compile(r"^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)


def text_of(page: str) -> str:
    """Return the text of a page."""
    return (ROOT / page).read_text("utf-8")


def blocks(page: str, *languages: str) -> list[str]:
    """Return the fenced blocks of a page in some languages, in order."""
    return [body for language, body in FENCE.findall(text_of(page)) if language in languages]


def having(*languages: str) -> list[str]:
    """Return the pages that hold blocks in some languages."""
    return [page for page in PAGES if blocks(page, *languages)]


def anchors(page: Path) -> set[str]:
    """Return the anchors of a page's headings, as they are made from their words."""
    headings = re.findall(r"^#+ (.+)$", page.read_text("utf-8"), re.MULTILINE)
    plain = (re.sub(r"[^\w\- ]", "", heading.lower()) for heading in headings)
    return {words.replace(" ", "-") for words in plain}


def links(page: str) -> Iterator[str]:
    """Yield the targets of links and pictures, code left out."""
    prose = re.sub(r"`[^`\n]*`", "", FENCE.sub("", text_of(page)))
    yield from re.findall(r"\]\(([^)\s]+)\)", prose)


@pytest.mark.parametrize("page", PAGES)
def test_links_resolve(page: str) -> None:
    """Every relative link names a file of the project, and a heading that stands in it."""
    here = (ROOT / page).parent
    for link in links(page):
        if link.startswith(("https://", "http://", "mailto:")):
            continue
        name, _, anchor = link.partition("#")
        target = here / name if name else ROOT / page
        assert target.exists(), link
        assert ROOT in target.resolve().parents, link
        assert not anchor or anchor in anchors(target), link


def test_every_page_can_be_reached() -> None:
    """From README and DEVELOPERS, by links alone."""
    reached, todo = set[str](), ["README.md", "DEVELOPERS.md"]
    while todo:
        page = todo.pop()
        if page in reached:
            continue
        reached.add(page)
        here = (ROOT / page).parent
        targets = ((here / link.partition("#")[0]).resolve() for link in links(page))
        todo += [str(t.relative_to(ROOT)) for t in targets if t.suffix == ".md" and t.exists()]
    assert reached == set(PAGES)


def texts() -> Iterator[str]:
    """Yield the texts of the project by their path from the root."""
    yield from ("README.md", "DEVELOPERS.md", "pyproject.toml", ".ci/run")
    for folder in ("wavepack", "tests", "docs", "scenarios"):
        for path in sorted((ROOT / folder).rglob("*")):
            if path.suffix in {".py", ".md", ".toml"}:
                yield str(path.relative_to(ROOT))


def test_nothing_names_a_machine() -> None:
    """No path of somebody's computer and no host but public ones stands in a text."""
    local = re.compile(r"(?<![\w.])/(?:home|root|work|tmp|Users|mnt|opt)/\S*")
    for name in texts():
        text = text_of(name)
        assert local.findall(text) == [], name
        hosts = set(re.findall(r"https?://([\w.-]+)", text)) - {"127.0.0.1"}
        assert all("." in host and not host[0].isdigit() for host in hosts), (name, hosts)


@pytest.fixture
def shapes() -> Iterator[None]:
    """Take back what a page has added to the shapes of the potential."""
    known = dict(SHAPES)
    yield
    SHAPES.clear()
    SHAPES.update(known)


@pytest.mark.usefixtures("desk", "shapes")
@pytest.mark.parametrize("page", having("python"))
def test_code_runs(page: str) -> None:
    """The Python blocks of a page run, one after the other, beside a small run."""
    names: dict[str, Any] = {"__name__": "page"}
    for number, code in enumerate(blocks(page, "python")):
        exec(compile(code, f"{page}, block {number}", "exec"), names)  # noqa: S102 - our own pages


@pytest.mark.parametrize("page", having("sh"))
def test_commands_are_known(page: str) -> None:
    """The command line accepts every command that a page shows."""
    for line in "\n".join(blocks(page, "sh")).replace("\\\n", " ").splitlines():
        for command in line.split("&&"):
            words = shlex.split(command, comments=True)
            if words and Path(words[0]).name == "wavepack":
                parse(words[1:])


@pytest.mark.parametrize("page", having("toml"))
def test_scenarios_are_accepted(page: str) -> None:
    """Each TOML block is TOML, and a scenario where it claims to be whole."""
    for block in blocks(page, "toml"):
        tables = tomllib.loads(block)
        if {"grid", "packet", "time"} <= set(tables):
            parse_scenario(block)

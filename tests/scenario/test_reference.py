"""The reference page against the classes it is written from."""

import re
import runpy
from pathlib import Path

from wavepack.fields import specs
from wavepack.physics.packets import PACKETS
from wavepack.physics.potentials import SHAPES
from wavepack.scenario.load import parse_scenario

DOCS = Path(__file__).parents[2] / "docs"
PAGE = (DOCS / "scenario.md").read_text(encoding="utf-8")


def test_the_page_has_not_drifted() -> None:
    """The page is what the schema makes of it; `python docs/make_reference.py` renews it."""
    assert runpy.run_path(str(DOCS / "make_reference.py"))["page"]() == PAGE


def test_the_page_holds_every_key_of_every_shape() -> None:
    """Each shape has its section, and each of its keys a row."""
    keys = set(re.findall(r"^\| `(\w+)` \|", PAGE, flags=re.MULTILINE))
    for shape, cls in (SHAPES | PACKETS).items():
        assert f'`shape = "{shape}"`' in PAGE
        assert {spec.key or name for name, spec in specs(cls).items()} <= keys


def test_its_example_is_a_scenario() -> None:
    """The smallest scenario of the page can be read."""
    (example,) = re.findall(r"```toml\n(.*?)```", PAGE, flags=re.DOTALL)
    assert parse_scenario(example).potential[0].name == "slab0"

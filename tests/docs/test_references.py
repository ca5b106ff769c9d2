"""Every source that a docstring or a page names is listed with its citation."""

import re
from pathlib import Path

ROOT = Path(__file__).parents[2]
LISTED = set(
    re.findall(r"^\| `(\w+)` \|", (ROOT / "docs/references.md").read_text("utf-8"), re.MULTILINE)
)


def test_docstrings_name_listed_sources() -> None:
    """Each key such as [Strang1968]_ in the package stands in docs/references.md."""
    texts = [path.read_text("utf-8") for path in (ROOT / "wavepack").rglob("*.py")]
    named = {key for text in texts for key in re.findall(r"\[([A-Za-z]\w+)\]_(?!\w)", text)}
    assert named
    assert named <= LISTED, f"add to docs/references.md: {sorted(named - LISTED)}"


def test_theory_names_listed_sources() -> None:
    """Each key in docs/theory.md stands in docs/references.md."""
    named = set(re.findall(r"\[([A-Z]\w+\d{4})\]", (ROOT / "docs/theory.md").read_text("utf-8")))
    assert named
    assert named <= LISTED

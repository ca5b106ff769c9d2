"""The table of checks itself: each is used, each has a source."""

from pathlib import Path

import pytest

from tests.closed_forms.checks_table import CHECKS, Check

HERE = Path(__file__).parent
#: Checks named by a method or a length of record put together in the test.
COMPOSED = (" by split-operator ", " by crank-nicolson", " record of ")


@pytest.mark.parametrize("check", CHECKS.values(), ids=CHECKS)
def test_each_check_has_a_source_and_a_user(check: Check) -> None:
    """A check names a row with sources, and some test of this folder holds it."""
    assert check.sources
    name = f"{check.row} {check.quantity}"
    for mark in COMPOSED:
        if mark in name:
            name = name[: name.index(mark) + mark.index(" ", 1) + 1]
    texts = (path.read_text(encoding="utf-8") for path in HERE.glob("test_*.py"))
    assert any(f'"{name}' in text for text in texts)

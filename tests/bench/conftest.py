"""All that is timed is left out unless asked for: `pytest -m bench`."""

from pathlib import Path

import pytest

HERE = Path(__file__).parent


@pytest.hookimpl(tryfirst=True)
def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """Mark every test of this folder."""
    for item in items:
        if HERE in item.path.parents:
            item.add_marker("bench")

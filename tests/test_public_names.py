"""What `import wavepack` offers."""

import pytest

import wavepack
from wavepack.archive.reader import open_run
from wavepack.scenario.load import load_scenario
from wavepack.workflow import run


def test_public_names_are_sorted_and_complete() -> None:
    """The public names are these, in order, and each can be had."""
    assert wavepack.__all__ == ["__version__", "load_scenario", "open_run", "run"]
    assert set(wavepack.__all__) <= set(dir(wavepack))


def test_public_names_are_those_of_their_rooms() -> None:
    """Each name is the object of the room it lives in."""
    assert wavepack.load_scenario is load_scenario
    assert wavepack.open_run is open_run
    assert wavepack.run is run


def test_unknown_name_is_an_attribute_error() -> None:
    """A name that is not there is reported as Python does."""
    with pytest.raises(AttributeError, match="'wavepack' has no attribute 'runs'"):
        wavepack.__getattr__("runs")

"""What the course of a run tells: a leaking well, and a packet that waits in it."""

from pathlib import Path

import pytest

from tests.running.conftest import contents
from wavepack import workflow
from wavepack.archive.reader import open_run
from wavepack.reporting.tables import as_text
from wavepack.running.session import Session
from wavepack.scenario.load import parse_scenario

LEAK = """
title = "leak"
[particle]
mass = 0.067
[grid]
x = { from = -100.0, to = 100.0, points = 500, ends = "absorbing" }
[[potential]]
name = "left"
shape = "slab"
height = 0.3
x = { from = -5.5, to = -2.5 }
[[potential]]
name = "right"
shape = "slab"
height = 0.3
x = { from = 2.5, to = 5.0 }
[[potential]]
name = "left-wall"
shape = "slab"
height = 0.3
x = { below = -5.5 }
acts = "before"
[[potential]]
name = "right-wall"
shape = "slab"
height = 0.3
x = { above = 5.0 }
acts = "before"
[[packet]]
shape = "eigenstate"
number = 0
[absorber]
width = 50.0
[propagator]
step = 0.1
[time]
end = 300.0
[[region]]
name = "held"
role = "none"
x = { from = -2.5, to = 2.5 }
[[region]]
name = "far-left"
role = "reflected"
x = { below = -5.5 }
[[region]]
name = "far-right"
role = "transmitted"
x = { above = 5.5 }
[output]
frames = 2
"""


def test_the_rest_goes_where_it_was_foretold(tmp_path: Path) -> None:
    """A run that stops while the well leaks foretells, within its error, what a longer one sees.

    A region that is called like a series keeps a name of its own among the tails.
    """
    early = workflow.run(parse_scenario(LEAK), tmp_path / "run")
    assert set(early["tails"]) == {"held", "norm", "region held"}
    rate = early["tails"]["region held"]["rate"]
    assert early["tails"]["held"]["rate"]["value"] == pytest.approx(
        rate["value"], abs=rate["fit_error"] + early["tails"]["held"]["rate"]["fit_error"]
    )
    assert early["quantities"]["held"]["value"] > 0.01
    late = workflow.resume(tmp_path / "run", until=1200.0)
    assert late["quantities"]["held"]["value"] < 1e-3
    for kind in ("transmission", "reflection"):
        foretold = early["extrapolated"][kind]
        assert foretold["error"] is None
        found = late["quantities"][kind]["value"]
        allowed = foretold["fit_error"] + late["quantities"]["unfinished"]["value"]
        assert abs(foretold["value"] - found) < allowed
        assert abs(early["quantities"][kind]["value"] - found) > 10 * allowed
    assert "lifetime of held" in as_text(early)
    probability = open_run(tmp_path / "run").read("regions/held/probability")
    assert probability[-1] == pytest.approx(late["regions"]["held"]["probability"]["value"])


def test_times_of_a_resumed_run_have_the_same_bits(tmp_path: Path) -> None:
    """Dwell time, tails and all else of a run that was interrupted are those of an unbroken one."""
    whole, broken = tmp_path / "whole", tmp_path / "broken"
    brief = parse_scenario(LEAK, overrides=("time.end=60", "output.record_every=0.2"))
    found = workflow.run(brief, whole)
    broken.mkdir()
    stops = iter(range(10**6))
    with Session.start(brief, broken) as session:
        early = session.propagate(stop_asked=lambda: next(stops) > 100)
    assert early["status"] == "interrupted"
    workflow.resume(broken)
    assert contents(broken) == contents(whole)
    spent = found["regions"]["held"]["dwell_time"]["value"]
    assert 0.5 * 60 < spent < 60

"""The results of a run, as results.json holds them."""

from copy import deepcopy
from typing import Any

import pytest


def _one(value: float | None, unit: str = "", error: float | None = None) -> dict[str, Any]:
    return {"value": value, "error": error, "unit": unit}


RESULTS: dict[str, Any] = {
    "status": "finished",
    "title": "One barrier",
    "time": {"value": 1200.0, "unit": "fs"},
    "quantities": {
        "transmission": _one(0.1262345678, error=3.14e-6),
        "reflection": _one(0.8737654322),
        "held": _one(4.0e-17),
        "lost": _one(0.0),
        "balance": _one(1.0000000000002),
        "unfinished": _one(1e-9),
    },
    "regions": {
        "drain": {"role": "transmitted", "probability": _one(0.1262345678)},
        "source": {"role": "reflected", "probability": _one(0.8737654322)},
    },
    "detectors": {
        "exit": {
            "crossed": _one(0.126),
            "forward": _one(0.127),
            "backward": _one(0.001),
            "mean_crossing_time": _one(None, "fs"),
            "energy": [0.1, 0.15, 0.2],
            "flux": [1.0, 2.0, 1.0],
            "incident": [2.0, 2.0, 2.0],
            "transmission": [None, 0.9, 0.4],
            "transmission_error": None,
            "reason": None,
            "sidebands": [{"n": 1, "energy": 0.25, "flux": _one(0.01)}],
            "energy_unit": "eV",
        }
    },
    "expectations": {"norm": _one(0.5), "x": _one(-116.84768, "nm")},
    "numerics": {
        "points": {"x": 2048},
        "spacing": {"x": {"value": 0.146484375, "unit": "nm"}},
        "step": {"value": 0.02, "unit": "fs"},
        "steps": 60000,
        "method": "crank-nicolson",
        "order": 2,
        "space_order": 4,
        "threads": 1,
        "detectors": {"probability_beyond_band": 1e-9},
        "absorbers": [
            {
                "axis": "x",
                "end": "lower",
                "form": "transmission-free",
                "strength": {"value": 0.0088, "unit": "eV"},
            }
        ],
    },
    "provenance": {
        "wavepack": "0.1.0",
        "packages": {"numpy": "2.0"},
        "planner": None,
        "wall_seconds": 12.34,
        "former_ends": [600.0],
    },
}


@pytest.fixture
def results() -> dict[str, Any]:
    """Give tests results that they may change."""
    return deepcopy(RESULTS)

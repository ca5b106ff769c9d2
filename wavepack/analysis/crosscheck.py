r"""A run's transmission against a stationary calculation on another discretisation.

.. math:: P = \int \frac{dP}{dE}\,T(E)\,dE

with dP/dE of the packet's momenta and T(E) of `wavepack.analysis.stationary` or
`wavepack.analysis.stationary_channels`: what has got through after infinite time.
"""

import math
from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from wavepack.analysis.outcome import quantity
from wavepack.analysis.passage import Passage, passage_of
from wavepack.analysis.stationary_average import Solved, solve
from wavepack.arrays import Mask, RealArray
from wavepack.errors import UsageError
from wavepack.fields import Span
from wavepack.physics.edges import covered_by_span
from wavepack.scenario.schema import DetectorSpec, RegionSpec, Scenario

#: Curves are compared where the incident weight exceeds this share of its peak.
WEIGHTY: Final = 1e-2
#: A plane behind the packet is compared if this little starts towards it.
STARTS_BACK: Final = 1e-6
#: Stated errors are meant to hold 97 times in 100.
MISSES: Final = 0.03
#: Without a stated error, what differs by more is not said to agree.
NEAR: Final = 1e-2
#: In two dimensions so many energies of a detector are solved at most.
MOST_ENERGIES: Final = 48
#: Lines of the table shown for each detector.
SHOWN: Final = 10


def crosscheck(scenario: Scenario, results: Mapping[str, Any]) -> dict[str, Any]:
    """Return the comparison of a run's results with the stationary calculation.

    Parameters
    ----------
    scenario : Scenario
        The run's.
    results : mapping
        What its `results.json` holds.

    Returns
    -------
    dict
        ``method``, ``transmission``, ``reflection``, ``detectors``, ``agrees``
        (None where the run states no error) and ``verdict`` in words.

    Raises
    ------
    NotApplicableError
        If the stationary calculation does not apply; the message says why.
    UsageError
        If the run has no results yet.
    """
    quantities = results.get("quantities")
    if not quantities:
        raise UsageError("the run has no results yet")
    solved = solve(passage_of(scenario))
    left = float(quantities["unfinished"]["value"] or 0.0)
    found: dict[str, Any] = {
        "title": scenario.title,
        "run_status": results["status"],
        "method": solved.method,
        "unfinished": left,
    }
    for role, name in (("transmitted", "transmission"), ("reflected", "reflection")):
        expected, reason = _expected(solved, role)
        found[name] = _comparison(quantities[name], expected, solved.error, left, reason)
    found["detectors"] = {
        spec.name: _detector(solved, spec, results["detectors"][spec.name], left)
        for spec in scenario.detector
        if spec.name in results.get("detectors", {})
    }
    return found | _judged(found)


def _expected(solved: Solved, role: str) -> tuple[float | None, str | None]:
    """Return what the regions of a role hold in the end, or why that is not known."""
    shares = [_claimed(solved.passage, role, far=far) for far in (True, False)]
    if None in shares:
        return None, f"a {role} region holds a part of a layer only"
    far, near = (share or 0.0 for share in shares)
    return far * solved.through + near * solved.back, None


def _claimed(passage: Passage, role: str, *, far: bool) -> float | None:
    """Return 1 if the regions of a role hold a whole layer, 0 if nothing of it, else None."""
    axis, upper = passage.line, far != passage.from_upper
    x = axis.coordinates
    layer = x > passage.inner[1] if upper else x < passage.inner[0]
    total = np.zeros(passage.grid.shape)
    for spec in passage.scenario.region:
        if spec.role == role:
            total += _cover(spec, passage)
    held = np.moveaxis(total, passage.travel, 0)[layer]
    if np.all(held > 1 - 1e-9):
        return 1.0
    return 0.0 if np.all(held < 1e-9) else None


def _cover(spec: RegionSpec, passage: Passage) -> RealArray:
    """Return 1 inside a region and 0 outside, shape of the grid."""
    grid = passage.grid
    if spec.where is not None:
        inside = spec.where.evaluate(**dict(zip(grid.names, grid.coordinates, strict=True)))
        return np.broadcast_to(np.asarray(inside, float) != 0, grid.shape).astype(float)
    cover = np.ones(grid.shape)
    for i, axis in enumerate(grid.axes):
        part = covered_by_span(spec.spans.get(axis.name, Span()), axis)
        cover *= part.reshape([-1 if j == i else 1 for j in range(grid.ndim)])
    return cover


def _comparison(
    seen: Mapping[str, Any],
    expected: float | None,
    own_error: float,
    slack: float,
    reason: str | None = None,
) -> dict[str, Any]:
    """Return one number of the run beside the stationary one."""
    value, error = seen["value"], seen.get("error")
    known = value is not None and expected is not None
    difference = value - expected if known else None
    agrees = None
    if difference is not None and error is not None:
        agrees = abs(difference) <= error + slack + own_error
    return {
        "run": dict(seen),
        "stationary": quantity(expected, seen.get("unit", ""), own_error if known else None),
        "difference": difference,
        "agrees": agrees,
        "reason": reason,
    }


def _detector(
    solved: Solved, spec: DetectorSpec, seen: Mapping[str, Any], left: float
) -> dict[str, Any]:
    """Return what a detector saw beside what it should have seen."""
    passage = solved.passage
    limited = any(span != Span() for span in spec.spans.values())
    if spec.axis != passage.line.name or limited:
        why = "the plane is limited" if limited else "the plane lies along the way"
        return {"reason": f"{why}: its flux is no transmission"}
    beyond = passage.beyond(spec.at)
    sign = _sign(spec, passage)
    amount: float | None = solved.through if beyond else solved.back
    reason = None
    if not beyond and solved.incoming.away > STARTS_BACK:
        # What starts backward and what is thrown back interfere.
        amount, reason = None, "the packet starts on both ways"
    elif abs(spec.at - passage.mean) < _reach(passage):
        amount, reason = None, "the packet starts on the plane"
    found = {
        "crossed": _comparison(
            seen["crossed"], None if amount is None else sign * amount, solved.error, left, reason
        )
    }
    kind = "transmission" if beyond else "reflection"
    curve = seen.get(kind)
    if not curve:
        return found | {"reason": seen.get("reason") or reason or f"the run gives no {kind}"}
    if reason is not None:
        return found | {"reason": reason}
    return found | _curves(solved, seen, kind, sign)


def _curves(solved: Solved, seen: Mapping[str, Any], kind: str, sign: float) -> dict[str, Any]:
    """Return both curves at the detector's energies, and how far they differ."""
    energies, run = (np.array(seen[name], dtype=float) for name in ("energy", kind))
    errors = seen.get(f"{kind}_error") or [None] * len(energies)
    error = np.array([math.nan if e is None else e for e in np.atleast_1d(errors)], dtype=float)
    error = np.broadcast_to(error, energies.shape)
    chosen = _chosen(np.isfinite(run), solved.passage.grid.ndim)
    energies, run, error = energies[chosen], run[chosen], error[chosen]
    both = solved.scatterer.scatter(energies)
    stationary = sign * both[0 if kind == "transmission" else 1]
    difference = run - stationary
    weight = solved.incoming.weight(energies)
    heavy = weight > WEIGHTY * float(weight.max(initial=0.0))
    largest = float(np.abs(difference[heavy]).max()) if heavy.any() else None
    return {
        "kind": kind,
        "reason": None,
        "energy": energies,
        "energy_unit": seen.get("energy_unit", ""),
        "incident": weight,
        "run": run,
        "stationary": stationary,
        "difference": difference,
        "run_error": error,
        "largest_difference": largest,
        "sum_to_one": float(np.abs(both[0] + both[1] - 1).max(initial=0.0)),
        "agrees": _curve_agrees(difference, error, solved.error),
        "shown": _spread(heavy, SHOWN),
    }


def _chosen(known: Mask, ndim: int) -> Mask:
    """Return which energies are compared: all that are known, in 2D some of them."""
    picked = np.zeros_like(known)
    picked[_spread(known, int(known.sum()) if ndim == 1 else MOST_ENERGIES)] = True
    return picked


def _curve_agrees(difference: RealArray, error: RealArray, own: float) -> bool | None:
    """Whether all but a few values in a hundred lie within their stated errors."""
    stated = np.isfinite(error)
    if not stated.any():
        return None
    missed = np.abs(difference[stated]) > error[stated] + own
    return bool(missed.mean() <= MISSES)


def _spread(wanted: Mask, count: int) -> list[int]:
    """Return the places of at most so many of those wanted, evenly spread."""
    places = np.flatnonzero(wanted)
    if not len(places):
        return []
    chosen = np.linspace(0, len(places) - 1, min(count, len(places))).round().astype(int)
    return [int(place) for place in places[chosen]]


def _sign(spec: DetectorSpec, passage: Passage) -> float:
    """Return 1 if forward at the plane is away from where the packet starts, else -1."""
    if spec.toward is None:
        return 1.0
    away = 1.0 if spec.at >= passage.mean else -1.0
    return away if spec.toward.startswith("+") else -away


def _reach(passage: Passage) -> float:
    """Return three standard deviations of the packet along the way [length]."""
    x = passage.line.coordinates
    weight = np.sum(np.abs(passage.psi) ** 2, axis=1)
    return 3 * math.sqrt(float((x - passage.mean) ** 2 @ weight / weight.sum()))


def _judged(found: Mapping[str, Any]) -> dict[str, Any]:
    """Return the verdict, and its words."""
    compared = {name: found[name] for name in ("transmission", "reflection")}
    for name, seen in found["detectors"].items():
        if "crossed" in seen:
            compared[f"{name} crossed"] = seen["crossed"]
        if "kind" in seen:
            curve = {"difference": seen["largest_difference"], "agrees": seen["agrees"]}
            compared[f"{name} by energy"] = curve
    known = {n: c for n, c in compared.items() if c["difference"] is not None}
    if not known:
        return {"agrees": None, "verdict": "nothing of this run could be compared"}
    worst = max(known, key=lambda n: abs(known[n]["difference"]))
    size = f"{abs(known[worst]['difference']):.1e}"
    outside = [n for n, c in known.items() if c["agrees"] is False]
    if outside:
        words = f"differ by more than the stated error: {', '.join(outside)}"
        return {"agrees": False, "verdict": f"{words}; the largest difference is {size} ({worst})"}
    if any(c["agrees"] for c in known.values()):
        words = f"agree within the stated errors; the largest difference is {size} ({worst})"
        return {"agrees": True, "verdict": words}
    near = abs(known[worst]["difference"]) <= NEAR
    words = f"agree within {size}" if near else f"differ by up to {size}"
    return {"agrees": None, "verdict": f"{words} ({worst}); no error was stated by the run"}

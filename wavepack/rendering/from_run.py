"""From an opened run to what a picture needs; the only door to the archive."""

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray
from wavepack.errors import UsageError
from wavepack.physics.expressions import Expression, ExpressionError, compile_expression
from wavepack.rendering.scene import (
    Curve,
    Curves,
    Detector,
    Frames,
    Layer,
    Region,
    Scene,
    Spectrum,
    Units,
)

if TYPE_CHECKING:
    from wavepack.archive.reader import Run

#: Series that are shown, by dataset: name to print and role.
_SHOWN = {
    "transmission": ("transmitted", "transmitted"),
    "reflection": ("reflected", "reflected"),
    "held": ("held", "held"),
    "lost": ("lost", "lost"),
}
_VISIBLE = 5e-4


def scene_of(run: "Run") -> Scene:
    """Return what stands still: axes, potential, units, regions, detectors, layers."""
    facts = run.facts
    coordinates = tuple(np.asarray(points, float) for points in run.axes.values())
    shape = tuple(len(points) for points in coordinates)
    potential = np.zeros(shape) if run.potential is None else np.asarray(run.potential, float)
    return Scene(
        coordinates,
        potential,
        Units(*(run.units.get(name, "") for name in ("length", "energy", "time"))),
        title=run.title,
        regions=_regions(facts, coordinates),
        detectors=tuple(_detector(fact) for fact in facts.get("detectors") or ()),
        layers=tuple(_layer(fact, coordinates) for fact in facts.get("absorbers") or ()),
        mean_energy=facts.get("mean_energy"),
        driven=bool(facts.get("driven", False)),
    )


def frames_of(run: "Run") -> Frames:
    """Return the stored frames, each read from the file when it is asked for.

    Raises
    ------
    UsageError
        If the run has stored none yet.
    """
    if not len(run):
        raise UsageError(f"{run.folder}: no frame has been stored yet, so there is nothing to draw")
    return Frames(np.asarray(run.frame_times, float), run.frame)


def curves_of(run: "Run") -> Curves | None:
    """Return transmission, reflection and what else is seen of the series; None without any."""
    columns = run.columns("series")
    curves = tuple(
        Curve(label, role, run.read(f"series/{name}"))
        for name, (label, role) in _SHOWN.items()
        if name in columns
    )
    seen = tuple(curve for curve in curves if _is_seen(curve))
    times = run.read("series/time")
    return Curves(times, seen) if seen and len(times) else None


def _is_seen(curve: Curve) -> bool:
    """Transmission and reflection always; the others if they ever leave zero."""
    return curve.role in {"transmitted", "reflected"} or bool(
        np.any(np.abs(np.nan_to_num(curve.values)) > _VISIBLE)
    )


def region_curves_of(run: "Run") -> Curves | None:
    """Return the probability of every region against time; None without regions."""
    roles = {fact["name"]: fact.get("role", "none") for fact in run.facts.get("regions") or ()}
    times, curves = np.empty(0), []
    # In the scenario's order; the file keeps its groups by the alphabet.
    for name in [name for name in roles if name in run.region_names]:
        times = run.read(f"regions/{name}/time")
        values = run.read(f"regions/{name}/probability")
        curves.append(Curve(name, roles.get(name, "none"), values))
    return Curves(times, tuple(curves)) if len(times) else None


def shown_curves_of(run: "Run") -> Curves | None:
    """Return what the scenario asks: what passes and returns, or else what each region holds."""
    roles = {fact.get("role", "none") for fact in run.facts.get("regions") or ()}
    if roles and not roles & {"transmitted", "reflected"}:
        return region_curves_of(run) or curves_of(run)
    return curves_of(run) or region_curves_of(run)


def spectrum_of(run: "Run", detector: str) -> Spectrum:
    """Return transmission and incident weight by energy at one detector.

    Raises
    ------
    UsageError
        If there is no such detector, or it records no energies.
    """
    known = [name for name in run.detector_names if run.has(f"detectors/{name}/energy")]
    if detector not in known:
        found = ", ".join(known) or "none"
        raise UsageError(
            f"spectrum: no detector {detector!r} with energies in {run.folder}; it has: {found}"
        )
    columns = ("energy", "transmission", "incident")
    energies, transmission, incident = (
        run.read(f"detectors/{detector}/{name}") for name in columns
    )
    reason = _reason(run, detector)
    return Spectrum(detector, energies, transmission, incident, reason)


def _reason(run: "Run", detector: str) -> str:
    """Why there is no transmission by energy, if the results say so."""
    try:
        results = run.results
    except UsageError:
        return "the run has no results yet"
    reason = results.get("detectors", {}).get(detector, {}).get("reason")
    return str(reason or "")


def _regions(facts: Mapping[str, Any], coordinates: Sequence[RealArray]) -> tuple[Region, ...]:
    regions, parameters = [], facts.get("parameters") or {}
    for fact in facts.get("regions") or ():
        spans = {axis: _span(span) for axis, span in (fact.get("spans") or {}).items()}
        mask = None
        if fact.get("where"):
            try:
                expression = compile_expression(fact["where"], ("x", "y"), parameters)
            except ExpressionError:
                # A picture can do without an outline that it does not understand.
                continue
            mask = _mask(expression, spans, coordinates)
        regions.append(Region(fact["name"], fact.get("role", "none"), spans, mask))
    return tuple(regions)


def _mask(
    where: Expression, spans: Mapping[str, tuple[float, float]], coordinates: Sequence[RealArray]
) -> npt.NDArray[np.bool_]:
    """Return the points of the frames that an expression and the spans both hold."""
    mesh = dict(zip(("x", "y"), np.ix_(*coordinates), strict=False))
    shape = tuple(len(points) for points in coordinates)
    inside = np.broadcast_to(np.asarray(where.evaluate(**mesh)) != 0, shape)
    for axis, (low, high) in spans.items():
        inside = inside & (low <= mesh[axis]) & (mesh[axis] <= high)
    return np.asarray(inside)


def _detector(fact: Mapping[str, Any]) -> Detector:
    other = "y" if fact["axis"] == "x" else "x"
    span = _span((fact.get("spans") or {}).get(other) or (None, None))
    return Detector(fact["name"], fact["axis"], fact["at"], fact.get("toward") or "", span)


def _layer(fact: Mapping[str, Any], coordinates: Sequence[RealArray]) -> Layer:
    start, stop = _span((fact["from"], fact["to"]))
    points = coordinates["xy".index(fact["axis"])]
    return Layer(fact["axis"], max(start, float(points[0])), min(stop, float(points[-1])))


def _span(ends: Sequence[float | None]) -> tuple[float, float]:
    """Return an interval; an end left open is stored as null."""
    lower, upper = ends
    return (-math.inf if lower is None else lower, math.inf if upper is None else upper)

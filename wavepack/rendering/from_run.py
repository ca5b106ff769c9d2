"""From an opened run to what a picture needs; the only door to the archive."""

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from wavepack.errors import UsageError
from wavepack.physics.expressions import compile_expression
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
    import xarray as xr

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
    frames, facts = run.frames, run.facts
    names = [name for name in ("x", "y") if name in frames.dims]
    coordinates = tuple(np.asarray(frames[name].values, float) for name in names)
    shape = tuple(len(points) for points in coordinates)
    potential = np.zeros(shape) if run.potential is None else np.asarray(run.potential, float)
    return Scene(
        coordinates,
        potential,
        Units(*(run.units.get(quantity, "") for quantity in ("length", "energy", "time"))),
        title=run.title,
        regions=tuple(_region(fact, coordinates) for fact in facts.get("regions", ())),
        detectors=tuple(_detector(fact) for fact in facts.get("detectors", ())),
        layers=tuple(_layer(fact, coordinates) for fact in facts.get("absorber") or ()),
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
    stored = run.frames
    times = np.asarray(stored["time"].values, float)
    if not len(times):
        raise UsageError(f"{run.title or 'run'}: no frame has been stored yet; nothing to draw")
    values = stored["psi" if "psi" in stored else "density"]
    return Frames(times, lambda i: np.asarray(values[i].values))


def curves_of(run: "Run") -> Curves | None:
    """Return transmission, reflection and what else is seen of the series; None without any."""
    series = run.series
    curves = tuple(
        Curve(label, role, np.asarray(series[name].values, float))
        for name, (label, role) in _SHOWN.items()
        if name in series and _is_seen(name, series)
    )
    times = np.asarray(series["time"].values, float)
    return Curves(times, curves) if curves and len(times) else None


def _is_seen(name: str, series: "xr.Dataset") -> bool:
    """Transmission and reflection always; the others if they ever leave zero."""
    return name in {"transmission", "reflection"} or bool(
        np.any(np.abs(np.nan_to_num(series[name].values)) > _VISIBLE)
    )


def region_curves_of(run: "Run") -> Curves | None:
    """Return the probability of every region against time; None without regions."""
    roles = {fact["name"]: fact.get("role", "none") for fact in run.facts.get("regions", ())}
    curves, times = [], np.empty(0)
    for name, table in run.regions.items():
        times = np.asarray(table["time"].values, float)
        curves.append(Curve(name, roles.get(name, "none"), np.asarray(table["probability"].values)))
    return Curves(times, tuple(curves)) if curves and len(times) else None


def spectrum_of(run: "Run", detector: str) -> Spectrum:
    """Return transmission and incident weight by energy at one detector.

    Raises
    ------
    UsageError
        If there is no such detector, or it records no energies.
    """
    spectra = run.spectra
    if detector not in spectra:
        known = ", ".join(spectra) or "none"
        raise UsageError(f"spectrum: no detector {detector!r} with energies; this run has: {known}")
    table = spectra[detector]
    reason = run.results.get("detectors", {}).get(detector, {}).get("reason") or ""
    return Spectrum(
        detector,
        *(np.asarray(table[name].values, float) for name in ("energy", "transmission", "incident")),
        reason=reason,
    )


def _region(fact: Mapping[str, Any], coordinates: Sequence[np.ndarray]) -> Region:
    spans = {axis: _span(span) for axis, span in (fact.get("spans") or {}).items()}
    mask = None
    if fact.get("where"):
        expression = compile_expression(fact["where"], parameters=fact.get("parameters", {}))
        mesh = dict(zip(("x", "y"), np.ix_(*coordinates), strict=False))
        shape = tuple(len(points) for points in coordinates)
        mask = np.broadcast_to(np.asarray(expression.evaluate(**mesh)) != 0, shape)
    return Region(fact["name"], fact.get("role", "none"), spans, mask)


def _detector(fact: Mapping[str, Any]) -> Detector:
    other = "y" if fact["axis"] == "x" else "x"
    span = _span((fact.get("spans") or {}).get(other) or (None, None))
    return Detector(fact["name"], fact["axis"], fact["at"], fact.get("toward") or "", span)


def _layer(fact: Mapping[str, Any], coordinates: Sequence[np.ndarray]) -> Layer:
    start, stop = _span((fact["from"], fact["to"]))
    points = coordinates["xy".index(fact["axis"])]
    return Layer(fact["axis"], max(start, float(points[0])), min(stop, float(points[-1])))


def _span(ends: Sequence[float | None]) -> tuple[float, float]:
    """Return an interval; an end left open is stored as null."""
    lower, upper = ends
    return (-math.inf if lower is None else lower, math.inf if upper is None else upper)

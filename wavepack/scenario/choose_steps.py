"""How fine the grid and how short the step must be."""

import math
from dataclasses import replace
from typing import Final

from wavepack.scenario.build import Setup
from wavepack.scenario.choose_terms import Numbers, smooth_length
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.verdicts import down

#: The packet's largest momentum as a share of the grid's; points for each of its
#: shortest waves by order of the differences.
FILLED: Final = 0.8
POINTS_PER_WAVE: Final = {2: 11.0, 4: 7.0}
#: Smoothed edges converge with this order at least.
EDGE_ORDER: Final = 2.4
#: By how much one round may change spacing or step.
CHANGE: Final = 4.0
#: Phase per step of the packet, of the fastest wave that edges kick to.
OWN_PHASE: Final = {True: 0.9, False: 0.4}
KICKED_PHASE: Final = 0.95 * 2 * math.pi
#: The detectors' band is this many times the largest kinetic energy.
BAND: Final = 1.6
#: More points in all than this are not chosen.
MOST_POINTS: Final = 1 << 22


def wanted_spacing(
    setup: Setup, estimates: Estimates, goal: float
) -> tuple[list[float], list[str]]:
    """Return the spacing [length] that each axis should have, and why."""
    spacings, reasons = [], []
    order = setup.scenario.propagator.space_order or 2
    for i, line in enumerate(setup.grid.axes):
        if setup.spectral:
            most = FILLED * math.pi / estimates.steepest[i]
        else:
            most = 2 * math.pi / (POINTS_PER_WAVE[order] * estimates.steepest[i])
        reason = "the packet's shortest waves in the deepest V"
        if not setup.spectral or estimates.jump[i] > 0 or setup.grid.ndim == 1:
            power = EDGE_ORDER if setup.spectral else float(order)
            error = max(estimates.spacing_error, 1e-300)
            fine = line.spacing * min(CHANGE, max(1 / CHANGE, (goal / error) ** (1 / power)))
            if fine < most:
                most = fine
                edges = "smoothed edges" if setup.spectral else "differences"
                reason = f"the error of the {edges}, about {goal:.1g} at this spacing"
        spacings.append(most)
        reasons.append(reason)
    return spacings, reasons


def points_for(length: float, spacing: float, *, walls: bool) -> int:
    """Return points of an axis, quick to transform, at most a spacing apart."""
    return max(8, smooth_length(length / spacing) - walls)


def bounded(numbers: Numbers, free: list[str]) -> tuple[Numbers, bool]:
    """Return numbers with no more points in all than a run may sensibly have, and if so."""
    total = math.prod(numbers.points.values())
    if total <= MOST_POINTS or not free:
        return numbers, False
    share = (MOST_POINTS / total) ** (1 / len(free))
    points = {
        name: max(8, smooth_length(count * share)) if name in free else count
        for name, count in numbers.points.items()
    }
    return replace(numbers, points=points), True


def wanted_step(
    setup: Setup, estimates: Estimates, goal: float, spacings: list[float], for_layers: float
) -> tuple[float, str]:
    """Return the longest step [time] that serves on a grid of given spacings, and why.

    ``for_layers`` is the longest that serves the absorbers.
    """
    dt = setup.dt
    limits = {}
    if math.isfinite(for_layers):
        limits[f"the absorbers, of which a longer step gives back {goal:.1g} more"] = for_layers
    turned = dt * OWN_PHASE[setup.spectral] / estimates.own_phase
    limits["the phase that the packet's fastest part turns in a step"] = turned
    error = estimates.step_error
    if error > 0:
        order = 4 if setup.spectral and setup.scenario.propagator.order == 4 else 2
        factor = min(CHANGE, max(1 / CHANGE, (goal / error) ** (1 / order)))
        limits[f"the local error of the step, about {goal:.1g} in a probability"] = dt * factor
    if setup.spectral and any(estimates.edged):
        fastest = max(
            estimates.c * (math.pi / spacing) ** 2
            for spacing, edged in zip(spacings, estimates.edged, strict=True)
            if edged
        )
        limits["the step resonance of sharp edges, 2 pi hbar/E of the grid's fastest wave"] = (
            KICKED_PHASE * estimates.hbar / fastest
        )
    if setup.scenario.detector and setup.spectral:
        limits["the detectors, which must tell all energies of the packet apart"] = (
            math.pi * estimates.hbar / (BAND * estimates.largest_energy)
        )
    reason = min(limits, key=lambda name: limits[name])
    return down(limits[reason]), reason

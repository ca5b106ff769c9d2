"""The outer kicks shared by all schemes: potential phase times damping."""

import math
from collections.abc import Callable

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.blocks import Blocks
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.stepping.kick import DrivenPhase, Kick, phase_factor
from wavepack.stepping.scheme import Kicks


def outer_kicks(
    psi: ComplexArray,
    hamiltonian: Hamiltonian,
    share: float,
    duration: float,
    damping: tuple[RealArray, ...],
    blocks: Blocks,
) -> Kicks:
    r"""Return the kicks :math:`d\,e^{-i\,\mathrm{share}\,V\,dt/\hbar}` and their squares.

    ``share`` is the part of the potential in one outer factor; zero leaves the
    damping alone, as where an implicit step holds the potential itself.
    """
    scale = share * duration / hamiltonian.particle.hbar
    landscape = hamiltonian.landscape
    single: ComplexArray | RealArray
    if share:
        single = phase_factor(landscape.static * scale, blocks)
        for i, factor in enumerate(damping):
            if np.any(factor < 1):
                single *= hamiltonian.grid.along(factor, i)
    else:
        single = np.ones(hamiltonian.grid.shape)
        for i, factor in enumerate(damping):
            single = single * hamiltonian.grid.along(factor, i)
    driven: list[list[DrivenPhase]] = [[], []]
    if share:
        for part in landscape.driven:
            for times, phases in enumerate(driven, start=1):
                term = (_scaled(part.drive.factor, times), part.values * scale)
                phases.append(DrivenPhase(part.box, (term,)))
    return Kicks(Kick(psi, single, driven[0]), Kick(psi, single * single, driven[1]))


def _scaled(factor: Callable[[float], float], times: int) -> Callable[[float], float]:
    return factor if times == 1 else lambda t: times * factor(t)


def gradient_kick(
    psi: ComplexArray, hamiltonian: Hamiltonian, share: float, duration: float, blocks: Blocks
) -> Kick:
    r"""Return the middle kick of the fourth-order rule, with the corrected potential.

    .. math::
        \tilde V = V - \kappa\,|\nabla V|^2, \qquad
        \kappa = \frac{dt^2}{48 m} = \frac{dt^2}{24\hbar^2}\,\frac{\hbar^2}{2m}

    [Chin1997]_, [ChinChen2001]_. With driven parts, :math:`|\nabla V|^2` is a
    polynomial in their factors whose coefficients are stored where they act.
    """
    particle = hamiltonian.particle
    landscape = hamiltonian.landscape
    kappa = duration**2 / (24 * particle.hbar**2) * particle.stiffness
    scale = share * duration / particle.hbar
    axes = range(hamiltonian.grid.ndim)
    angle = landscape.static.copy()
    for rows in landscape.blocks():
        for axis in axes:
            angle[rows] -= kappa * landscape.static_gradient(axis, rows) ** 2
    angle *= scale
    phases = []
    parts = landscape.driven
    for i, part in enumerate(parts):
        linear = part.values.copy()
        square = np.zeros_like(linear)
        for axis in axes:
            own = landscape.driven_gradient(part, axis)
            rest = landscape.static_gradient(axis, part.box[0])[(slice(None), *part.box[1:])]
            linear -= 2 * kappa * own * rest
            square -= kappa * own**2
        factor = part.drive.factor
        terms = ((factor, scale * linear), (_product(factor, factor), scale * square))
        phases.append(DrivenPhase(part.box, terms))
        for other in parts[:i]:
            box = tuple(
                slice(max(a.start, b.start), min(a.stop, b.stop))
                for a, b in zip(part.box, other.box, strict=True)
            )
            if all(s.start < s.stop for s in box):
                cross = np.zeros([s.stop - s.start for s in box])
                for axis in axes:
                    cross -= (
                        2
                        * kappa
                        * landscape.driven_gradient(part, axis)[_within(box, part.box)]
                        * landscape.driven_gradient(other, axis)[_within(box, other.box)]
                    )
                term = (_product(factor, other.drive.factor), scale * cross)
                phases.append(DrivenPhase(box, (term,)))
    return Kick(psi, phase_factor(angle, blocks), phases)


def _product(a: Callable[[float], float], b: Callable[[float], float]) -> Callable[[float], float]:
    return lambda t: a(t) * b(t)


def _within(box: tuple[slice, ...], outer: tuple[slice, ...]) -> tuple[slice, ...]:
    return tuple(
        slice(a.start - b.start, a.stop - b.start) for a, b in zip(box, outer, strict=True)
    )


def damping_of_half_step(hamiltonian: Hamiltonian, duration: float) -> tuple[RealArray, ...]:
    r"""Return d, the damping before (and after) each step: :math:`e^{-W dt/2\hbar}`."""
    if not math.isfinite(duration):
        raise ValueError(f"time step must be finite, got {duration}")
    return hamiltonian.damping_factors(duration / 2)

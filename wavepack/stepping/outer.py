"""The outer kicks shared by all schemes: potential phase times damping."""

import math
from collections.abc import Sequence

import numpy as np

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.blocks import Blocks
from wavepack.physics.hamiltonian import Hamiltonian
from wavepack.physics.landscape import DrivenPart, Landscape
from wavepack.stepping.kick import DrivenPhase, Factor, Kick, SmallArray, Term, phase_factor
from wavepack.stepping.scheme import Kicks


def outer_kicks(
    psi: ComplexArray,
    hamiltonian: Hamiltonian,
    share: float,
    duration: float,
    damping: tuple[RealArray, ...],
    blocks: Blocks,
    *,
    spare: bool = False,
) -> Kicks:
    r"""Return the kicks :math:`d\,e^{-i\,\mathrm{share}\,V\,dt/\hbar}` and their squares.

    ``share`` is the part of the potential in one outer factor; zero leaves the
    damping alone, as where an implicit step holds the potential itself.
    ``spare`` says that there is memory for one more field.
    """
    scale = share * duration / hamiltonian.particle.hbar
    landscape = hamiltonian.landscape
    parts = landscape.driven if share else ()
    shapes = [hamiltonian.grid.along(d, i) for i, d in enumerate(damping) if np.any(d < 1)]
    single: Sequence[ComplexArray | RealArray]
    fused: Sequence[ComplexArray | RealArray]
    always: list[Term]
    if any(landscape.everywhere(part) for part in parts):
        # The phase is computed anew at every point anyhow: the static part joins it.
        single, fused = shapes, [d * d for d in shapes]
        always = [(_constant(scale), landscape.static)]
    else:
        factor: ComplexArray | RealArray = (
            phase_factor(landscape.static, scale, blocks)
            if share
            else np.ones(hamiltonian.grid.shape)
        )
        for d in shapes:
            factor *= d
        # Squared once where there is room; else multiplied twice while in cache.
        single = [factor]
        fused = [factor * factor] if blocks.single or spare else [factor, factor]
        always = []
    terms = [(part, _scaled(part.drive.factor, scale), part.values) for part in parts]
    twice = [(part, _scaled(factor_in_time, 2), values) for part, factor_in_time, values in terms]
    return Kicks(
        Kick(psi, single, _phases(landscape, always, terms)),
        Kick(psi, fused, _phases(landscape, _twice(always), twice)),
    )


def _phases(
    landscape: Landscape,
    always: Sequence[Term],
    terms: Sequence[tuple[DrivenPart, Factor, RealArray | SmallArray]],
) -> list[DrivenPhase]:
    """Gather terms by the box in which they act; those of the whole grid come first."""
    boxes: dict[tuple[tuple[int, int], ...], list[Term]] = {}
    if always:
        boxes[_corners(landscape.whole)] = list(always)
    for part, factor, values in terms:
        boxes.setdefault(_corners(part.box), []).append((factor, values))
    return [
        DrivenPhase(tuple(slice(*pair) for pair in corners), tuple(found))
        for corners, found in boxes.items()
    ]


def _corners(box: tuple[slice, ...]) -> tuple[tuple[int, int], ...]:
    return tuple((s.start, s.stop) for s in box)


def _constant(value: float) -> Factor:
    return lambda _: value


def _twice(terms: Sequence[Term]) -> list[Term]:
    return [(_scaled(factor, 2), values) for factor, values in terms]


def _scaled(factor: Factor, scale: float) -> Factor:
    return lambda t: scale * factor(t)


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
    parts = landscape.driven
    static: list[ComplexArray] = []
    always: list[Term] = []
    if any(landscape.everywhere(part) for part in parts):
        correction = np.zeros(hamiltonian.grid.shape, dtype=np.float32)
        for rows in landscape.blocks():
            for axis in axes:
                correction[rows] -= kappa * landscape.static_gradient(axis, rows) ** 2
        always = [(_constant(scale), landscape.static), (_constant(scale), correction)]
    else:
        corrected = landscape.static.copy()
        for rows in landscape.blocks():
            for axis in axes:
                corrected[rows] -= kappa * landscape.static_gradient(axis, rows) ** 2
        static = [phase_factor(corrected, scale, blocks)]
        del corrected
    terms: list[tuple[DrivenPart, Factor, RealArray | SmallArray]] = []
    crossed: list[DrivenPhase] = []
    for i, part in enumerate(parts):
        linear, square = _gradient_terms(hamiltonian, part, kappa)
        factor = _scaled(part.drive.factor, scale)
        terms += [
            (part, factor, part.values),
            (part, factor, linear),
            (part, _scaled(_product(part.drive.factor, part.drive.factor), scale), square),
        ]
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
                both = _product(part.drive.factor, other.drive.factor)
                crossed.append(DrivenPhase(box, ((_scaled(both, scale), cross),)))
    return Kick(psi, static, [*_phases(landscape, always, terms), *crossed])


def _gradient_terms(
    hamiltonian: Hamiltonian, part: DrivenPart, kappa: float
) -> tuple[SmallArray, SmallArray]:
    """Return what the correction adds to f(t) and to f(t)^2 [energy], inside the part's box.

    In single precision: the correction is of order dt^2, its rounding far below
    that of the phases it joins.
    """
    landscape = hamiltonian.landscape
    linear = np.zeros(part.values.shape, dtype=np.float32)
    square = np.zeros(part.values.shape, dtype=np.float32)
    first = part.box[0].start
    for rows in landscape.blocks():
        start, stop = max(rows.start, first), min(rows.stop, part.box[0].stop)
        if start >= stop:
            continue
        inside = slice(start - first, stop - first)
        across = (slice(None), *part.box[1:])
        for axis in range(hamiltonian.grid.ndim):
            own = landscape.piece_gradient(part.piece, axis, slice(start, stop))[across]
            rest = landscape.static_gradient(axis, slice(start, stop))[across]
            linear[inside] -= 2 * kappa * own * rest
            square[inside] -= kappa * own**2
    return linear, square


def _product(a: Factor, b: Factor) -> Factor:
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

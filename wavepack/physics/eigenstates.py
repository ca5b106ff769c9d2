r"""The lowest bound states of a potential on a grid.

.. math:: (\hat T + V)\,\psi_n = E_n\,\psi_n

with walls at absorbing ends. A block of trial states is improved by Davidson's
method [Davidson1975]_: in each round the residuals, divided by a sparse
operator close to :math:`\hat H - \sigma` that is factored once, extend the space
in which H is diagonalised. The sparse operator takes second differences for
:math:`\hat T`; its ratio to the spectral one lies between 1 and :math:`\pi^2/4`
whatever the grid, so some twenty rounds reach rounding.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final, TypeAlias

import numpy as np
import scipy.linalg
import scipy.sparse
import scipy.sparse.linalg

from wavepack.arrays import RealArray
from wavepack.grid import spectral
from wavepack.grid.grid import Grid
from wavepack.physics.kinetic import StaggeredKinetic, link_positions
from wavepack.physics.particle import Particle
from wavepack.physics.shapes import Piece

#: Up to so many points all states are found at once,
DENSE_POINTS: Final = 400
#: and up to so many a state: Davidson's method is slow to tell many levels apart.
DENSE_POINTS_A_STATE: Final = 60
#: Trial states beyond those wanted: they keep close levels from being missed.
GUARDS: Final = 3
#: Largest residual of a state, relative to its energy above the lowest V.
TOLERANCE: Final = 1e-11
ROUNDS: Final = 150
INVERSE_ROUNDS: Final = 4
#: Size of the space, in blocks, at which it is cut back to one.
MOST_BLOCKS: Final = 5

#: Applies an operator to states, one a column.
Operator: TypeAlias = Callable[[RealArray], RealArray]


def lowest_states(
    grid: Grid,
    potential: RealArray,
    particle: Particle,
    count: int,
    kinetic: StaggeredKinetic | None = None,
) -> tuple[RealArray, RealArray]:
    """Return the lowest levels and states of a real potential.

    Parameters
    ----------
    grid : Grid
        Axes with walls or periodic.
    potential : real, shape of the grid
        V [energy].
    particle : Particle
        What is bound.
    count : int
        How many states.
    kinetic : StaggeredKinetic or None
        The kinetic operator, such as for a mass that depends on position;
        None for the spectral one.

    Returns
    -------
    energies : real, shape (count,)
        Levels [energy], rising.
    states : real, shape (count, ...)
        Normalised states [length**(-ndim/2)]. The first value in array order
        above half of the largest is positive.

    Raises
    ------
    ValueError
        If the grid has fewer points than states are wanted, V is not finite, or
        the states do not converge.
    """
    if count > grid.size:
        raise ValueError(f"need at most {grid.size} states, the points of the grid, got {count}")
    if not np.isfinite(potential).all():
        raise ValueError("need a finite potential for bound states")
    apply = _hamiltonian(grid, potential, particle, kinetic)
    if grid.size <= max(DENSE_POINTS, DENSE_POINTS_A_STATE * count):
        matrix = apply(np.eye(grid.size))
        energies, vectors = scipy.linalg.eigh(
            (matrix + matrix.T) / 2, subset_by_index=(0, count - 1)
        )
    else:
        sparse = _sparse_hamiltonian(grid, potential, particle, kinetic)
        energies, vectors = _davidson(apply, sparse, _scale(grid, potential, particle), count)
    states = np.array([_oriented(vector) for vector in vectors.T]) / np.sqrt(grid.cell)
    return energies, states.reshape(count, *grid.shape)


def separated(potential: RealArray) -> tuple[RealArray, RealArray] | None:
    """Return a(x) and b(y) if V(x, y) = a(x) + b(y) to rounding, else None."""
    row, column = np.unravel_index(np.argmin(potential), potential.shape)
    along_x = potential[:, column]
    along_y = potential[row, :] - potential[row, column]
    misfit = np.abs(potential - along_x[:, None] - along_y[None, :]).max()
    largest = np.abs(potential).max()
    return (along_x, along_y) if misfit <= 1e-11 * largest else None


def masses_on_links(
    grid: Grid, particle: Particle, pieces: Sequence[Piece]
) -> tuple[float | RealArray, ...]:
    """Return the mass [mass] on the links of each axis, as `StaggeredKinetic` takes it."""
    spacing = tuple(axis.spacing for axis in grid.axes)
    masses: list[float | RealArray] = []
    for i, axis in enumerate(grid.axes):
        lines = [line.coordinates for line in grid.axes]
        lines[i] = link_positions(axis)
        mesh = tuple(np.ix_(*lines))
        excesses = [piece.mass_excess(mesh, spacing, particle) for piece in pieces]
        present = [excess for excess in excesses if excess is not None]
        if not present:
            masses.append(particle.mass)
            continue
        shape = tuple(line.size for line in lines)
        masses.append(np.array(np.broadcast_to(particle.mass + sum(present), shape)))
    return tuple(masses)


@dataclass(frozen=True)
class _Scale:
    """Energies that set tolerances: the lowest V, the smallest kinetic one, the largest."""

    lowest: float
    quantum: float
    largest: float

    def allowed(self, levels: RealArray) -> RealArray:
        """Return the largest residual of a state at each level [energy]."""
        depth = np.maximum(levels - self.lowest, self.quantum)
        return np.maximum(TOLERANCE * depth, 50 * np.finfo(float).eps * self.largest)


def _scale(grid: Grid, potential: RealArray, particle: Particle) -> _Scale:
    c = particle.stiffness
    return _Scale(
        float(potential.min()),
        c * sum((np.pi / axis.length) ** 2 for axis in grid.axes),
        c * sum(axis.largest_wavenumber**2 for axis in grid.axes),
    )


def _hamiltonian(
    grid: Grid, potential: RealArray, particle: Particle, kinetic: StaggeredKinetic | None
) -> Operator:
    """Return H as a function of states, shape (points, states)."""
    if kinetic is not None:
        matrix = _sparse_hamiltonian(grid, potential, particle, kinetic)
        return lambda states: np.asarray(matrix @ states)

    def apply(states: RealArray) -> RealArray:
        fields = states.reshape(*grid.shape, -1)
        result = potential[..., None] * fields
        for i, axis in enumerate(grid.axes):
            coefficients = spectral.forward(fields, axis, i)
            energies = particle.stiffness * axis.wavenumbers**2
            coefficients *= energies.reshape([-1 if j == i else 1 for j in range(fields.ndim)])
            result += spectral.backward(coefficients, axis, i).real
        return result.reshape(states.shape)

    return apply


def _sparse_hamiltonian(
    grid: Grid, potential: RealArray, particle: Particle, kinetic: StaggeredKinetic | None
) -> scipy.sparse.csc_array:
    """Return H with differences for T, those of ``kinetic`` or second ones."""
    if kinetic is None:
        masses = (particle.mass,) * grid.ndim
        kinetic = StaggeredKinetic(grid, particle, masses)
    matrix = scipy.sparse.diags_array(potential.ravel()).tocsr()
    for i, slope in enumerate(kinetic.slopes):
        before, after = (
            scipy.sparse.eye_array(int(np.prod(shape)))
            for shape in (grid.shape[:i], grid.shape[i + 1 :])
        )
        whole = scipy.sparse.kron(scipy.sparse.kron(before, slope), after).tocsr()
        links = (*grid.shape[:i], slope.shape[0], *grid.shape[i + 1 :])
        stiffness = np.broadcast_to(kinetic.stiffness(i), links).ravel()
        matrix = matrix + whole.T @ scipy.sparse.diags_array(stiffness) @ whole
    return matrix.tocsc()


def _solver(matrix: scipy.sparse.csc_array, shift: float) -> Operator:
    """Return the inverse of a matrix less a shift, factored."""
    shifted = matrix - shift * scipy.sparse.eye_array(matrix.shape[0])
    factors = scipy.sparse.linalg.splu(
        shifted.tocsc(),
        permc_spec="MMD_AT_PLUS_A",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True},
    )
    return lambda states: np.asarray(factors.solve(states))


def _davidson(
    apply: Operator, sparse: scipy.sparse.csc_array, scale: _Scale, count: int
) -> tuple[RealArray, RealArray]:
    """Return levels and orthonormal states, shape (points, count)."""
    block = count + GUARDS
    solve, trial = _inverse_iteration(sparse, scale, block)
    nothing = np.empty((len(trial), 0))
    basis, images = _extended(nothing, nothing, trial, apply)
    worst = np.inf
    for _ in range(ROUNDS):
        reduced = basis.T @ images
        levels, turn = scipy.linalg.eigh((reduced + reduced.T) / 2, subset_by_index=(0, block - 1))
        states, image = basis @ turn, images @ turn
        residuals = image - states * levels
        sizes = np.linalg.norm(residuals, axis=0)
        worst = float(np.max(sizes[:count] / scale.allowed(levels[:count])))
        if worst <= 1:
            return levels[:count], states[:, :count]
        if basis.shape[1] > MOST_BLOCKS * block:
            basis, images = states, image
        open_ones = sizes > scale.allowed(levels) / 10
        corrections = solve(residuals[:, open_ones] / sizes[open_ones])
        basis, images = _extended(basis, images, corrections, apply)
    raise ValueError(f"bound states did not converge: residual {worst:.1e} times what is allowed")


def _inverse_iteration(
    sparse: scipy.sparse.csc_array, scale: _Scale, block: int
) -> tuple[Operator, RealArray]:
    """Return an inverse of the sparse operator near its lowest levels, and trial states."""
    # Any start will do, but the same one each time: equal input, equal bits.
    trial = np.random.default_rng(1926).standard_normal((sparse.shape[0], block))
    shift = scale.lowest - scale.quantum / 10
    solve = _solver(sparse, shift)
    for _ in range(INVERSE_ROUNDS):
        trial = np.linalg.qr(solve(trial))[0]
    reduced = trial.T @ (sparse @ trial)
    levels, turn = scipy.linalg.eigh((reduced + reduced.T) / 2)
    spread = levels[-1] - levels[0]
    # Far above the lowest V, as in a narrow and deep dip, the first shift tells
    # the levels poorly apart.
    if levels[0] - shift > 3 * spread:
        solve = _solver(sparse, levels[0] - spread)
    return solve, trial @ turn


def _extended(
    basis: RealArray, images: RealArray, more: RealArray, apply: Operator
) -> tuple[RealArray, RealArray]:
    """Return an orthonormal basis with more directions, and H of each."""
    for _ in range(2):  # once leaves what rounding spoils
        more = more - basis @ (basis.T @ more)
        more, triangle = np.linalg.qr(more)
        size = np.abs(np.diag(triangle))
        more = more[:, size > 1e-10 * size.max(initial=0.0)]
    return np.hstack((basis, more)), np.hstack((images, apply(more)))


def _oriented(vector: RealArray) -> RealArray:
    """Return the vector with the sign that `lowest_states` promises."""
    large = np.flatnonzero(np.abs(vector) > 0.5 * np.abs(vector).max())
    return np.asarray(vector * np.sign(vector[large[0]]))

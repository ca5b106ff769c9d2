"""Whether a scenario is one of scattering between two leads, and where the packet starts."""

from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np

from wavepack.analysis.incoming import NotApplicableError
from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.packets import initial_state
from wavepack.physics.potentials import Piece, total
from wavepack.scenario.build import given
from wavepack.scenario.schema import Scenario

#: V counts as constant in a lead if it changes by less than this share of the kinetic energy.
CONSTANT: Final = 1e-3
#: So much may V change, on average over the packet and at its rim, where the packet starts.
UNDER_PACKET: Final = 1e-4
UNDER_RIM: Final = 0.05
#: The rim leaves out this much probability on either side.
RIM: Final = 5e-4


@dataclass(frozen=True)
class Passage:
    """A packet between two leads: where it starts and which way it can go.

    Attributes
    ----------
    scenario : Scenario
        What was run.
    grid : Grid
        Its grid.
    travel : int
        The axis whose two ends absorb.
    from_upper : bool
        Whether the near lead, between which and the obstacle the packet starts,
        is the one of large coordinates.
    inner : (float, float)
        Inner edges of the two layers, where the leads begin [length].
    psi : complex array
        Initial state, shape (points along travel, points across).
    """

    scenario: Scenario
    grid: Grid
    travel: int
    from_upper: bool
    inner: tuple[float, float]
    psi: ComplexArray

    @property
    def line(self) -> Axis:
        """The axis of travel."""
        return self.grid.axes[self.travel]

    @property
    def across(self) -> Axis | None:
        """The other axis, if there is one."""
        return self.grid.axes[1 - self.travel] if self.grid.ndim == 2 else None

    @property
    def pieces(self) -> tuple[Piece, ...]:
        """The potential during the run."""
        return acting(self.scenario)

    @cached_property
    def mean(self) -> float:
        """Mean position of the packet along the travel [length]."""
        weight = np.sum(np.abs(self.psi) ** 2, axis=1)
        return float(self.line.coordinates @ weight / weight.sum())

    @cached_property
    def way(self) -> tuple[RealArray, ComplexArray]:
        """Positions s along the way to the obstacle, rising, and the state at them."""
        if self.from_upper:
            return -self.line.coordinates[::-1], self.psi[::-1]
        return self.line.coordinates, self.psi

    def beyond(self, at: float) -> bool:
        """Whether a plane lies on the far side of the packet."""
        return (at < self.mean) if self.from_upper else (at > self.mean)


def passage_of(scenario: Scenario) -> Passage:
    """Return the passage of a scenario.

    Raises
    ------
    NotApplicableError
        If the potential is driven, no single direction is open at both ends, or
        the potential is not uniform in the leads or where the packet starts.
    """
    pieces = acting(scenario)
    driven = [piece.name or piece.shape for piece in pieces if piece.drive is not None]
    if driven:
        raise NotApplicableError(
            f"the potential is driven ({', '.join(driven)}): energy is not conserved"
        )
    travel = _travel(scenario)
    grid = grid_of(scenario)
    if grid.ndim == 2:
        heavy = [p.name for p in pieces if getattr(p, "mass", None) or _layer_masses(p)]
        if heavy:
            raise NotApplicableError(
                f"masses of their own ({', '.join(heavy)}) are carried in one dimension only"
            )
    order = scenario.propagator.space_order or 2
    differences = None if scenario.propagator.method == "split-operator" else order
    psi, _ = initial_state(
        scenario.packet, grid, scenario.particle, scenario.potential, differences
    )
    axis = grid.axes[travel]
    state = np.moveaxis(psi, travel, 0).reshape(axis.points, -1)
    if scenario.absorber is None:
        raise NotApplicableError("there is no absorber")
    widths = scenario.absorber.width[axis.name]
    inner = (axis.start + widths[0], axis.stop - widths[1])
    potential = total(pieces, grid, scenario.particle)
    lines = np.moveaxis(potential, travel, 0).reshape(axis.points, -1)
    from_upper = _side(state, lines, axis, inner, scenario.particle.stiffness)
    return Passage(scenario, grid, travel, from_upper, inner, state)


def acting(scenario: Scenario) -> tuple[Piece, ...]:
    """Return the pieces of the potential that act during the run."""
    return tuple(piece for piece in scenario.potential if piece.acts != "before")


def grid_of(scenario: Scenario) -> Grid:
    """Return the grid of a scenario."""
    return Grid(
        tuple(
            Axis(
                name,
                given(spec.start, f"grid.{name}.from"),
                given(spec.stop, f"grid.{name}.to"),
                given(spec.points, f"grid.{name}.points"),
                spec.ends,
            )
            for name, spec in scenario.grid.items()
        )
    )


def _travel(scenario: Scenario) -> int:
    """Return the one axis along which the packet can leave at both ends."""
    ends = {name: spec.ends for name, spec in scenario.grid.items()}
    along = [i for i, pair in enumerate(ends.values()) if set(pair) == {"absorbing"}]
    if len(along) > 1:
        raise NotApplicableError("both directions are open: each has absorbing ends")
    if not along:
        shown = "; ".join(f"{name}: {' and '.join(pair)}" for name, pair in ends.items())
        raise NotApplicableError(f"no axis is open at both ends ({shown})")
    others = [name for i, (name, pair) in enumerate(ends.items()) if i != along[0]]
    for name in others:
        if "absorbing" in ends[name]:
            raise NotApplicableError(f"both directions are open: {name} has an absorbing end")
    return along[0]


def _layer_masses(piece: Piece) -> bool:
    layers = getattr(piece, "layers", ())
    return any(layer.mass is not None for layer in layers)


def _side(
    psi: ComplexArray,
    potential: RealArray,
    axis: Axis,
    inner: tuple[float, float],
    stiffness: float,
) -> bool:
    """Return whether the upper lead is the near one, all that must be uniform being so."""
    x = axis.coordinates
    weight = np.sum(np.abs(psi) ** 2, axis=1)
    across = np.sum(np.abs(psi) ** 2, axis=0)
    weight, across = weight / weight.sum(), across / across.sum()
    k = 2 * np.pi * np.fft.fftfreq(axis.points, axis.spacing)
    momenta = np.sum(np.abs(np.fft.fft(psi, axis=0)) ** 2, axis=1)
    momenta /= momenta.sum()
    kinetic = stiffness * float(k**2 @ momenta)
    share = np.cumsum(weight)
    rim = slice(int(np.searchsorted(share, RIM)), int(np.searchsorted(share, 1 - RIM)) + 1)
    mean = float(x @ weight)
    fitting, worst = [], []
    for upper in (False, True):
        edge = int(np.argmin(np.abs(x - inner[upper])))
        change = np.abs(potential - potential[edge]) @ across / kinetic
        name = f"{'upper' if upper else 'lower'} end of {axis.name}"
        layer = x >= inner[upper] if upper else x <= inner[upper]
        if not layer.any() or float(change[layer].max()) > CONSTANT:
            found = float(change[layer].max(initial=0.0))
            raise NotApplicableError(
                f"the potential is not constant in the layer at the {name}: it changes by "
                f"{found:.2%} of the packet's kinetic energy"
            )
        way = slice(int(np.searchsorted(x, mean)), None) if upper else x <= mean
        measures = (
            float(change[way].max(initial=0.0)) / CONSTANT,
            float(change @ weight) / UNDER_PACKET,
            float(change[rim].max()) / UNDER_RIM,
        )
        worst.append(float(change[way].max(initial=float(change @ weight))))
        if max(measures) <= 1:
            fitting.append(upper)
    if not fitting:
        raise NotApplicableError(
            f"the potential is not uniform along {axis.name} from either layer to where the "
            f"packet starts (at {axis.name} = {mean:.6g}): it changes by {min(worst):.2g} of the "
            "packet's kinetic energy"
        )
    return fitting[0] if len(fitting) == 1 else float(k @ momenta) < 0

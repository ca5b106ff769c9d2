"""What a picture needs to know of a run, independent of any file."""

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from wavepack.arrays import ComplexArray, RealArray


@dataclass(frozen=True)
class Units:
    """Symbols of the run's units; an empty one is left out of labels."""

    length: str = ""
    energy: str = ""
    time: str = ""

    def label(self, quantity: str, unit: str) -> str:
        """Return ``quantity (unit)``."""
        return f"{quantity} ({unit})" if unit else quantity

    def density(self, dimensions: int) -> str:
        """Return the unit of a density: one over length, or over its square."""
        if not self.length:
            return ""
        return f"{self.length}⁻¹" if dimensions == 1 else f"{self.length}⁻²"

    def amplitude(self, dimensions: int) -> str:
        """Return the unit of the wavefunction, the square root of that of the density."""
        if not self.length:
            return ""
        return f"{self.length}⁻¹ᐟ²" if dimensions == 1 else f"{self.length}⁻¹"


@dataclass(frozen=True)
class Region:
    """A named part of space: one span an axis, or points of the frame's grid."""

    name: str
    role: str = "none"
    spans: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    mask: npt.NDArray[np.bool_] | None = None


@dataclass(frozen=True)
class Detector:
    """A plane ``axis = at``, in 2D limited to ``span`` along the other axis."""

    name: str
    axis: str
    at: float
    toward: str = ""
    span: tuple[float, float] = (-math.inf, math.inf)


@dataclass(frozen=True)
class Layer:
    """An absorbing layer at one end of an axis."""

    axis: str
    start: float
    stop: float


@dataclass(frozen=True)
class Scene:
    """All that does not change while the movie runs.

    ``coordinates`` holds the positions [length] of the frames' points, x then
    y; ``potential`` [energy] has the frames' shape.
    """

    coordinates: tuple[RealArray, ...]
    potential: RealArray
    units: Units = Units()
    title: str = ""
    regions: tuple[Region, ...] = ()
    detectors: tuple[Detector, ...] = ()
    layers: tuple[Layer, ...] = ()
    mean_energy: float | None = None
    driven: bool = False

    def __post_init__(self) -> None:
        shape = tuple(len(axis) for axis in self.coordinates)
        if len(shape) not in {1, 2}:
            raise ValueError(f"a scene has one or two axes, got {len(shape)}")
        if self.potential.shape != shape:
            raise ValueError(f"potential: need shape {shape}, got {self.potential.shape}")

    @property
    def ndim(self) -> int:
        """Number of axes."""
        return len(self.coordinates)

    def extent(self, axis: int) -> tuple[float, float]:
        """Return the ends of the cells along one axis: half a spacing beyond the points."""
        points = self.coordinates[axis]
        half = (points[-1] - points[0]) / max(len(points) - 1, 1) / 2 or 0.5
        return float(points[0] - half), float(points[-1] + half)


@dataclass(frozen=True)
class Frames:
    """Stored states, read one at a time.

    ``read(i)`` returns frame i: a real density, or complex psi, of the scene's shape.
    """

    times: RealArray
    read: Callable[[int], RealArray | ComplexArray]

    def __len__(self) -> int:
        return len(self.times)

    def __iter__(self) -> Iterator[tuple[float, RealArray | ComplexArray]]:
        for i, time in enumerate(self.times):
            yield float(time), self.read(i)


@dataclass(frozen=True)
class Curve:
    """One probability against time: a name to print and the role it plays."""

    name: str
    role: str
    values: RealArray


@dataclass(frozen=True)
class Curves:
    """Probabilities recorded against time."""

    times: RealArray
    curves: tuple[Curve, ...]


@dataclass(frozen=True)
class Spectrum:
    """What passed one detector, by total energy; NaN where not established."""

    detector: str
    energies: RealArray
    transmission: RealArray
    incident: RealArray
    reason: str = ""


def density_of(frame: RealArray | ComplexArray) -> RealArray:
    r"""Return :math:`|\psi|^2` of a frame, whichever way it was stored."""
    if np.iscomplexobj(frame):
        return np.asarray(frame.real**2 + frame.imag**2)
    return np.asarray(frame.real)


def time_format(times: RealArray, unit: str) -> Callable[[float], str]:
    """Return a writer of time stamps whose width does not jump from frame to frame."""
    span = float(np.max(np.abs(times), initial=0.0))
    tail = f" {unit}" if unit else ""
    if span and not 1e-3 <= span < 1e7:
        return lambda time: f"t = {time:.3e}{tail}"
    steps = np.diff(times)
    step = float(np.median(steps)) if len(steps) else span
    digits = 0 if step <= 0 else min(max(1 - math.floor(math.log10(step)), 0), 6)
    width = len(f"{span:.{digits}f}")

    def stamp(time: float) -> str:
        number = f"{time:.{digits}f}"
        # A figure space is as wide as a digit: all stamps are equally long.
        return f"{chr(0x2007) * (width - len(number))}t = {number}{tail}"

    return stamp

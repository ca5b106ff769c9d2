"""What stands where in a run folder: one table of names, units and shapes.

::

    run.h5
    ├── attributes: title, schema_version, wavepack_version, scenario_sha256,
    │               length_unit, energy_unit, time_unit, mass_unit, facts (JSON)
    ├── scenario                         the TOML text
    ├── x, y, potential                  V at t = 0 on the points of the frames
    ├── frames/      time, x, y, psi | density
    ├── series/      time, norm, energy, ...
    ├── regions/NAME/    time, probability
    ├── detectors/NAME/  time, flux; energy, flux_by_energy, incident, transmission
    └── momentum/    kx, ky, before, after

Datasets along ``time`` grow; all others have their size from the start and
hold NaN until they are known. The last rows of a live or killed file may not
be whole: a row counts once its ``time`` is a number.
"""

import hashlib
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any, Final, Literal, TypeAlias

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray

SCHEMA_VERSION: Final = 1

RUN_FILE: Final = "run.h5"
SCENARIO_FILE: Final = "scenario.toml"
RESULTS_FILE: Final = "results.json"
LOG_FILE: Final = "run.log"
CHECKPOINT_FILE: Final = "checkpoint.h5"
PREVIOUS_CHECKPOINT_FILE: Final = "checkpoint.previous.h5"

FrameKind: TypeAlias = Literal["psi", "density"]
Precision: TypeAlias = Literal["single", "double"]


@dataclass(frozen=True)
class Column:
    """One dataset: its name, what it is, its dimension, real or complex."""

    name: str
    long_name: str
    dimension: str = ""
    complex: bool = False

    @property
    def dtype(self) -> np.dtype[Any]:
        """Type of the values on disk; complex ones are a compound of r and i."""
        return np.dtype(np.complex128 if self.complex else np.float64)


def _table(*columns: Column) -> Mapping[str, Column]:
    return MappingProxyType({column.name: column for column in columns})


TIME: Final = Column("time", "time", "time")

SERIES: Final = _table(
    Column("norm", "probability on the grid"),
    Column("energy", "mean energy", "energy"),
    Column("kinetic", "mean kinetic energy", "energy"),
    Column("potential", "mean potential energy", "energy"),
    Column("x", "mean position along x", "length"),
    Column("y", "mean position along y", "length"),
    Column("px", "mean momentum along x, in hbar per length", "momentum"),
    Column("py", "mean momentum along y, in hbar per length", "momentum"),
    Column("sigma_x", "standard deviation of x", "length"),
    Column("sigma_y", "standard deviation of y", "length"),
    Column("sigma_px", "standard deviation of px, in hbar per length", "momentum"),
    Column("sigma_py", "standard deviation of py, in hbar per length", "momentum"),
    Column("transmission", "probability transmitted"),
    Column("reflection", "probability reflected"),
    Column("held", "probability on the grid in no region with a role"),
    Column("lost", "probability absorbed in no region with a role"),
    Column("autocorrelation", "overlap with the initial state", complex=True),
)

FRAMES: Final = _table(
    Column("psi", "wavefunction", "amplitude", complex=True),
    Column("density", "probability density", "density"),
)

PROBABILITY: Final = Column("probability", "probability of the region, absorbed part included")
FLUX: Final = Column("flux", "probability current through the detector", "rate")
ENERGY: Final = Column("energy", "total energy", "energy")

SPECTRUM: Final = _table(
    Column("flux_by_energy", "probability through the detector by energy", "per_energy"),
    Column("incident", "incident probability by energy", "per_energy"),
    Column("transmission", "transmission probability at this energy"),
)

POSITIONS: Final = _table(Column("x", "x", "length"), Column("y", "y", "length"))
POTENTIAL: Final = Column("potential", "potential energy at t = 0", "energy")

WAVENUMBERS: Final = _table(
    Column("kx", "momentum along x, in hbar per length", "momentum"),
    Column("ky", "momentum along y, in hbar per length", "momentum"),
)
MOMENTUM: Final = _table(
    Column("before", "momentum distribution at the start", "per_momentum"),
    Column("after", "momentum distribution at the end", "per_momentum"),
)


def unit(dimension: str, units: Mapping[str, str], axes: int = 1) -> str:
    """Return the unit symbol of a dimension on a grid of one or two axes.

    Parameters
    ----------
    dimension : str
        ``""``, ``"length"``, ``"energy"``, ``"time"``, ``"mass"``,
        ``"momentum"`` (1/length), ``"rate"`` (1/time), ``"per_energy"``,
        ``"density"``, ``"amplitude"`` or ``"per_momentum"``.
    units : mapping
        Symbols of length, energy, time and mass.

    Raises
    ------
    KeyError
        If the dimension is not known.
    """
    length, square = units["length"], axes == 2
    derived = {
        "": "",
        "momentum": f"1/{length}",
        "rate": f"1/{units['time']}",
        "per_energy": f"1/{units['energy']}",
        "density": f"1/{length}^2" if square else f"1/{length}",
        "amplitude": f"1/{length}" if square else f"{length}^-1/2",
        "per_momentum": f"{length}^2" if square else length,
    }
    return derived[dimension] if dimension in derived else units[dimension]


@dataclass(frozen=True, kw_only=True)
class RunPlan:
    """All that the archive must know to lay out the file of one run.

    Parameters
    ----------
    title, scenario_text, wavepack_version : str
        Text written into the file as it is.
    units : mapping
        Symbols of ``length``, ``energy``, ``time`` and ``mass``.
    axes : mapping of axis name to array
        Positions [length] of the stored points, ``x`` or ``x`` and ``y``.
    potential : array, shape of the frames, optional
        Potential energy at t = 0 on the stored points [energy].
    frame_kind, precision
        What a frame holds and how precisely.
    series : tuple of str
        Names out of `SERIES`.
    regions : tuple of str
        Names of the regions.
    detectors : mapping of name to array or None
        Energies [energy] of each detector's spectrum; None for no spectrum.
    frames, records, samples : int
        How many frames, rows of the series and of each detector are expected.
        More may come; fewer do no harm.
    momentum : mapping of axis name to array
        Wave numbers [1/length], ascending, of the momentum distributions;
        empty for none.
    facts : mapping
        What a reader of the file alone must know (regions, detectors, layers),
        as JSON can hold it.

    Raises
    ------
    ValueError
        If a series is not in the table or an array does not fit.
    """

    title: str
    scenario_text: str
    wavepack_version: str
    units: Mapping[str, str]
    axes: Mapping[str, RealArray]
    potential: RealArray | None = None
    frame_kind: FrameKind = "psi"
    precision: Precision = "double"
    series: tuple[str, ...] = ()
    regions: tuple[str, ...] = ()
    detectors: Mapping[str, RealArray | None] = field(default_factory=dict)
    frames: int = 200
    records: int = 2000
    samples: int = 10000
    momentum: Mapping[str, RealArray] = field(default_factory=dict)
    facts: Mapping[str, Any] = field(default_factory=dict)

    def __post_init__(self) -> None:
        unknown = [name for name in self.series if name not in SERIES]
        if unknown:
            raise ValueError(f"series {', '.join(unknown)}: not in the table of the layout")
        if tuple(self.axes) not in {("x",), ("x", "y")}:
            raise ValueError(f"axes {', '.join(self.axes)}: need x, or x and y")
        if self.potential is not None and self.potential.shape != self.frame_shape:
            raise ValueError(f"potential: shape {self.potential.shape}, need {self.frame_shape}")

    @property
    def frame_shape(self) -> tuple[int, ...]:
        """Stored points along each axis."""
        return tuple(len(points) for points in self.axes.values())

    @property
    def frame_dtype(self) -> np.dtype[Any]:
        """Type of the values of a frame."""
        types: dict[tuple[FrameKind, Precision], npt.DTypeLike] = {
            ("psi", "double"): np.complex128,
            ("psi", "single"): np.complex64,
            ("density", "double"): np.float64,
            ("density", "single"): np.float32,
        }
        return np.dtype(types[self.frame_kind, self.precision])

    @property
    def frame_bytes(self) -> int:
        """Size of one frame on disk."""
        return math.prod(self.frame_shape) * self.frame_dtype.itemsize

    @property
    def disk_bytes(self) -> int:
        """Size of the whole file when all that is expected has been written."""
        columns = sum(SERIES[name].dtype.itemsize for name in self.series) + 8
        records = self.records * (columns + 16 * len(self.regions))
        samples = self.samples * 16 * len(self.detectors)
        return self.frames * self.frame_bytes + records + samples + 100_000

    @property
    def scenario_sha256(self) -> str:
        """Checksum of the scenario's text."""
        return text_sha256(self.scenario_text)

    def unit(self, column: Column) -> str:
        """Return the unit of a column on this run's grid."""
        return unit(column.dimension, self.units, len(self.axes))


def text_sha256(text: str) -> str:
    """Return the SHA-256 of a text in UTF-8, in hexadecimal."""
    return hashlib.sha256(text.encode()).hexdigest()


#: A dataset of HDF5's oldest format is indexed by a tree whose first node holds
#: 64 chunks. Splitting a node takes several writes, and a kill between them
#: costs earlier chunks (measured: every split lost half of them). Datasets are
#: therefore cut into so few chunks that a node never splits, with room to grow.
EXPECTED_CHUNKS: Final = 16
LARGEST_CHUNK: Final = 2**31


def rows_per_chunk(expected: int, row_bytes: int) -> int:
    """Return how many rows along time share one chunk.

    A sixteenth of what is expected, so that four times as much can be appended
    before the 64 chunks of one index node are used up; at least 4 kB and at
    most 2 GB. Chunks are not compressed: a row is written in place, and the
    part of a chunk not yet written takes no room on most file systems.
    """
    sixteenth = math.ceil(expected / EXPECTED_CHUNKS)
    smallest = math.ceil(4096 / row_bytes)
    largest = max(1, LARGEST_CHUNK // row_bytes)
    return min(max(sixteenth, smallest, 1), largest)

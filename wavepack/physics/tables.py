"""Functions given by a file of numbers, interpolated by cubic splines.

Three forms, told apart by the file's ending:

``.csv``, ``.txt``, ``.dat``
    Columns x, [y,] value (for a packet: real part and, optionally, imaginary
    part), parted by commas, semicolons or blanks; ``#`` begins a comment, one
    line of titles may come first. In 2D the rows hold a full rectangle of
    positions, in any order.
``.npy``
    An array of such columns; or, with the first and last position along each
    axis given beside it, bare values on evenly spaced points, x first.
``.h5``, ``.hdf5``
    Datasets ``x``, [``y``,] and ``values`` (or one more of any name), x first.
"""

import os
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property, lru_cache
from pathlib import Path
from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt

from wavepack.arrays import RealArray
from wavepack.fields import Span
from wavepack.physics.lattice import size

#: Most values a table may hold, and most bytes of a text file.
MOST_VALUES: Final = 1 << 26
MOST_BYTES: Final = 1 << 29

#: Values of either kind.
Values: TypeAlias = npt.NDArray[np.inexact[Any]]

#: A function of positions, an open mesh or of equal shape.
Spline: TypeAlias = Callable[[tuple[RealArray, ...]], RealArray]


@dataclass(frozen=True)
class Samples:
    """Values on a rectangle of positions.

    Attributes
    ----------
    positions : tuple of real arrays
        Rising positions along each axis [length].
    values : array
        One value for each combination; axis 0 is x.
    """

    positions: tuple[RealArray, ...]
    values: Values

    @property
    def ndim(self) -> int:
        """Number of axes."""
        return len(self.positions)

    @cached_property
    def splines(self) -> tuple[Spline, ...]:
        """A spline of the real part, and of the imaginary part if there is one."""
        make = _line_spline if self.ndim == 1 else _plane_spline
        parts = (self.values.real, self.values.imag)[: 1 + np.iscomplexobj(self.values)]
        return tuple(make(self.positions, part) for part in parts)


def read_samples(file: str, ndim: int, spans: tuple[Span, ...], *, wave: bool = False) -> Samples:
    """Read a file of values; the same file is read once.

    Parameters
    ----------
    file : str
        Path of the file.
    ndim : int
        Most axes it may have; a packet's columns must have exactly as many.
    spans : tuple of Span
        First and last position along each axis for bare values; else unlimited.
    wave : bool
        Whether values may be complex.

    Raises
    ------
    ValueError
        If the file is missing, too big, of another form, not finite, or its
        positions do not rise or make no rectangle.
    """
    try:
        status = os.stat(file)  # noqa: PTH116 - one look gives time and size
    except OSError as error:
        raise ValueError(f"need a readable file, got {file}: {error.strerror}") from None
    # Copying may carry the time of the last change along, but not the other two.
    changed = (status.st_mtime_ns, status.st_ctime_ns, status.st_ino)
    return _read(file, ndim, spans, wave=wave, changed=changed, length=status.st_size)


def interpolated(samples: Samples, coordinates: tuple[RealArray, ...]) -> Values:
    """Return the cubic spline through samples; constant outside their range.

    Coordinates may be an open mesh or of equal shape; what is returned
    broadcasts over them.
    """
    inside = tuple(
        np.clip(x, own[0], own[-1]) for x, own in zip(coordinates, samples.positions, strict=False)
    )
    real, *imaginary = (spline(inside) for spline in samples.splines)
    return np.asarray(real + 1j * imaginary[0]) if imaginary else real


def outside(samples: Samples, coordinates: tuple[RealArray, ...]) -> npt.NDArray[np.bool_]:
    """Return where positions lie beyond the samples; broadcasts over them."""
    beyond = np.zeros([1] * coordinates[0].ndim, dtype=bool)
    for x, own in zip(coordinates, samples.positions, strict=False):
        beyond = beyond | (x < own[0]) | (x > own[-1])
    return beyond


@lru_cache(maxsize=8)
def _read(
    file: str,
    ndim: int,
    spans: tuple[Span, ...],
    *,
    wave: bool,
    changed: tuple[int, ...],
    length: int,
) -> Samples:
    del changed
    name = Path(file).name
    try:
        samples = _read_form(Path(file), ndim, spans, wave=wave, length=length)
        return _checked(samples, ndim, wave=wave)
    except ValueError as error:
        raise ValueError(f"{name}: {error}") from None


def _read_form(
    path: Path, ndim: int, spans: tuple[Span, ...], *, wave: bool, length: int
) -> Samples:
    ending = path.suffix.lower()
    bare = tuple(span for span in spans if span != Span())
    if ending == ".npy":
        array = _numpy_array(path)
        return _evenly_spaced(array, bare) if bare else _from_columns(array, ndim, wave=wave)
    if bare:
        raise ValueError("need positions in the file or, for NPY alone, beside it, got both")
    if ending in (".h5", ".hdf5"):
        return _from_hdf5(path)
    if ending in (".csv", ".txt", ".dat"):
        return _from_columns(_text_columns(path, length), ndim, wave=wave)
    raise ValueError(f"need a file .csv, .txt, .dat, .npy, .h5 or .hdf5, got {ending or 'none'}")


def _checked(samples: Samples, ndim: int, *, wave: bool) -> Samples:
    """Return the samples as numbers of one kind; ValueError if they make no function."""
    if samples.ndim > ndim or (wave and samples.ndim < ndim):
        raise ValueError(f"need {ndim} axes of positions, got {samples.ndim}")
    if np.iscomplexobj(samples.values) and not wave:
        raise ValueError("need real values, got complex ones")
    for label, x in zip("xy", samples.positions, strict=False):
        if x.size < 2:
            raise ValueError(f"need at least 2 positions along {label}, got {x.size}")
        if not np.isfinite(x).all():
            raise ValueError(f"need finite positions along {label}")
        wrong = np.flatnonzero(np.diff(x) <= 0)
        if wrong.size:
            i = int(wrong[0])
            raise ValueError(f"need rising {label}, got {x[i]:g} before {x[i + 1]:g}")
    shape = tuple(x.size for x in samples.positions)
    if samples.values.shape != shape:
        raise ValueError(f"need values of shape {shape}, got {samples.values.shape}")
    bad = np.argwhere(~np.isfinite(samples.values))
    if bad.size:
        at = ", ".join(f"{x[i]:g}" for x, i in zip(samples.positions, bad[0], strict=True))
        raise ValueError(f"need finite values, got {samples.values[tuple(bad[0])]} at {at}")
    return samples


def _text_columns(path: Path, length: int) -> RealArray:
    if length > MOST_BYTES:
        raise ValueError(f"need at most {MOST_BYTES >> 20} MB of text, got {length >> 20} MB")
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise ValueError(f"need a text of numbers: {error}") from None
    rows = []
    for number, line in enumerate(text.splitlines(), start=1):
        words = line.partition("#")[0].replace(",", " ").replace(";", " ").split()
        if not words:
            continue
        try:
            rows.append([float(word) for word in words])
        except ValueError:
            if rows:
                raise ValueError(f"line {number}: need numbers, got {line.strip()!r}") from None
            continue  # titles
        if len(rows[-1]) != len(rows[0]):
            wanted, got = len(rows[0]), len(rows[-1])
            raise ValueError(f"line {number}: need {wanted} columns as before, got {got}")
    if not rows:
        raise ValueError("need rows of numbers, got none")
    return np.array(rows)


def _numpy_array(path: Path) -> Values:
    try:
        array = np.load(path, mmap_mode="r", allow_pickle=False)
        return _numbers(array, array.size)
    except (OSError, EOFError, ValueError) as error:
        raise ValueError(f"need an array of numbers: {error}") from None


def _numbers(array: Any, values: int) -> Values:  # noqa: ANN401 - an array or a dataset
    """Return an array of doubles; ValueError if it is too big or holds no numbers."""
    if values > MOST_VALUES:
        raise ValueError(f"need at most {MOST_VALUES} values, got {values}")
    kind = array.dtype.kind
    if kind not in "iufc":
        raise ValueError(f"need numbers, got {array.dtype}")
    return np.array(array[...], dtype=complex if kind == "c" else float)


def _evenly_spaced(values: Values, spans: tuple[Span, ...]) -> Samples:
    if values.ndim != len(spans):
        raise ValueError(f"need {len(spans)} axes as given by from and to, got {values.ndim}")
    if not all(np.isfinite([span.lower, span.upper]).all() for span in spans):
        raise ValueError("need { from, to } for the positions of bare values")
    positions = tuple(
        np.linspace(span.lower, span.upper, n) for span, n in zip(spans, values.shape, strict=True)
    )
    return Samples(positions, values)


def _from_columns(columns: Values, ndim: int, *, wave: bool) -> Samples:
    if columns.ndim != 2:
        raise ValueError(f"need rows and columns, got {columns.ndim} axes")
    found = columns.shape[1]
    axes = ndim if wave else found - 1
    if not 1 <= axes <= ndim or found not in ((axes + 1, axes + 2) if wave else (axes + 1,)):
        wanted = "x, [y,] real, [imaginary]" if wave else ("x, V" if ndim == 1 else "x, [y,] V")
        raise ValueError(f"need columns {wanted} on {ndim} axes, got {found} columns")
    places, rest = np.real(columns[:, :axes]), columns[:, axes:]
    values: Values = rest[:, 0] if rest.shape[1] == 1 else rest[:, 0] + 1j * rest[:, 1]
    if axes == 1:
        return Samples((places[:, 0],), values)
    if not np.isfinite(places).all():
        raise ValueError("need finite positions")
    x, row = np.unique(places[:, 0], return_inverse=True)
    y, column = np.unique(places[:, 1], return_inverse=True)
    order = row * y.size + column
    if len(values) != x.size * y.size or np.unique(order).size != order.size:
        raise ValueError(
            f"need each of {x.size} x with each of {y.size} y once, got {len(values)} rows"
        )
    filled = np.empty(x.size * y.size, dtype=values.dtype)
    filled[order] = values
    return Samples((x, y), filled.reshape(x.size, y.size))


def _from_hdf5(path: Path) -> Samples:
    import h5py  # noqa: PLC0415 - slow to import, needed here alone

    try:
        with h5py.File(path, "r") as file:
            names = [name for name, item in file.items() if isinstance(item, h5py.Dataset)]
            axes = [name for name in ("x", "y") if name in names]
            others = [name for name in names if name not in axes]
            if "values" in others:
                others = ["values"]
            if "x" not in axes or len(others) != 1:
                raise ValueError(f"need datasets x, [y,] and values, got {', '.join(names)}")
            x, *y = (np.ravel(np.real(_numbers(file[a], file[a].size))) for a in axes)
            return Samples((x, *y), _numbers(file[others[0]], file[others[0]].size))
    except OSError as error:
        raise ValueError(f"need an HDF5 file: {error}") from None


def _line_spline(positions: tuple[RealArray, ...], values: RealArray) -> Spline:
    from scipy.interpolate import make_interp_spline  # noqa: PLC0415 - slow to import

    (x,) = positions
    spline = make_interp_spline(x, values, k=min(3, x.size - 1))
    return lambda coordinates: np.asarray(spline(coordinates[0]))


def _plane_spline(positions: tuple[RealArray, ...], values: RealArray) -> Spline:
    from scipy.interpolate import RectBivariateSpline  # noqa: PLC0415 - slow to import

    x, y = positions
    spline = RectBivariateSpline(x, y, values, s=0, kx=min(3, x.size - 1), ky=min(3, y.size - 1))

    def evaluate(coordinates: tuple[RealArray, ...]) -> RealArray:
        a, b = coordinates
        rising = all(np.all(np.diff(line.ravel()) >= 0) for line in coordinates)
        if size(coordinates) == (a.size, b.size) and rising:
            return np.asarray(spline(a.ravel(), b.ravel()))
        a, b = np.broadcast_arrays(a, b)
        return np.asarray(spline.ev(a, b))

    return evaluate

"""Transforms between position and wave number; the only import of an FFT.

Two ways, for two needs. `forward`/`backward` transform whole lines of any
array and allocate what they return: they serve set-up and recording.
`TransformPair` is planned once for one array and works in place: it serves the
step loop. A Fourier axis uses the complex transform, a sine axis the type-1
sine transform, which is exact for a wavefunction held at zero by two walls.
"""

import os
import sys
import types
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.fft

from wavepack.arrays import ComplexArray, RealArray
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid

#: Fields below this many points are not worth a second thread.
THREADED_POINTS = 1 << 16


def forward(psi: ComplexArray | RealArray, axis: Axis, array_axis: int = -1) -> ComplexArray:
    r"""Return the coefficients of every line along one axis.

    .. math::
        \hat\psi_j = \frac{1}{\sqrt n}\sum_i \psi_i e^{-i k_j (x_i - x_0)},
        \qquad
        \hat\psi_j = \sqrt{\tfrac{2}{n+1}} \sum_i \psi_i \sin k_j (x_i - a)

    for a Fourier and a sine axis: both unitary, so
    :math:`\sum|\hat\psi|^2 = \sum|\psi|^2`.
    """
    if axis.basis == "sine":
        return np.asarray(scipy.fft.dst(psi, type=1, axis=array_axis, norm="ortho"))
    return np.asarray(scipy.fft.fft(psi, axis=array_axis, norm="ortho"))


def forward_all(psi: ComplexArray, grid: Grid) -> ComplexArray:
    """Return the coefficients over all axes at once, where all are Fourier axes.

    On two threads where that is worth it; their number changes no bit.
    """
    workers = min(2, len(os.sched_getaffinity(0))) if psi.size >= THREADED_POINTS else 1
    return np.asarray(scipy.fft.fftn(psi, axes=range(grid.ndim), norm="ortho", workers=workers))


def backward(coefficients: ComplexArray, axis: Axis, array_axis: int = -1) -> ComplexArray:
    """Return the wavefunction of given coefficients; the inverse of `forward`."""
    if axis.basis == "sine":
        return np.asarray(scipy.fft.dst(coefficients, type=1, axis=array_axis, norm="ortho"))
    return np.asarray(scipy.fft.ifft(coefficients, axis=array_axis, norm="ortho"))


def slope(psi: ComplexArray, axis: Axis, array_axis: int = -1) -> ComplexArray:
    r"""Return :math:`\partial_x\psi` [psi/length] at the points of one axis.

    Exact for every wave number below the last; see [Trefethen2000]_, chapter 3.
    """
    coefficients = forward(psi, axis, array_axis)
    shape = [1] * psi.ndim
    shape[array_axis] = axis.points
    k = signed_wavenumbers(axis).reshape(shape)
    if axis.basis == "fourier":
        return backward(1j * k * coefficients, axis, array_axis)
    # The derivative of sines is a cosine series, whose first term is zero and
    # whose values at both walls are dropped.
    cosines = np.moveaxis(k * coefficients, array_axis, -1)
    padded = np.pad(cosines, [(0, 0)] * (psi.ndim - 1) + [(1, 1)])
    # dct1 without norm: y_i = x_0 + (-1)^i x_{n+1} + 2 sum x_j cos(pi i j/(n+1)).
    values = scipy.fft.dct(padded, type=1, axis=-1)[..., 1:-1] / 2
    return np.moveaxis(values * np.sqrt(2 / (axis.points + 1)), -1, array_axis)


def signed_wavenumbers(axis: Axis) -> RealArray:
    """Wave numbers for odd powers of k [1/length].

    The Nyquist sample of an even Fourier axis stands for +k and -k alike. Kept,
    it would give a real wavefunction, which is at rest, a probability current.
    """
    k = axis.wavenumbers.copy()
    if axis.basis == "fourier" and axis.points % 2 == 0:
        k[axis.points // 2] = 0.0
    return k


def readout(axis: Axis, position: float, keep: RealArray) -> tuple[RealArray, RealArray]:
    r"""Return the rows that read amplitude and slope at any position of an axis.

    .. math:: \psi(x_d) = \sum_j A_j \psi_j, \qquad \psi'(x_d) = \sum_j S_j \psi_j

    evaluated from the coefficients whose weight in ``keep`` (one a wave
    number, 0 or 1) is not zero. Both rows are real, shape (points,).
    """
    if axis.basis == "sine":
        angle = axis.wavenumbers * (position - axis.start)
        norm = np.sqrt(2 / (axis.points + 1))
        amplitude = backward(keep * np.sin(angle) * norm, axis)
        derivative = backward(keep * axis.wavenumbers * np.cos(angle) * norm, axis)
        return amplitude.real.copy(), derivative.real.copy()
    k = axis.wavenumbers
    wave = keep * np.exp(-1j * k * (position - axis.coordinates[0])) / np.sqrt(axis.points)
    amplitude = backward(wave, axis)
    derivative = backward(-1j * signed_wavenumbers(axis) * wave, axis)
    return _mirrored(amplitude), _mirrored(derivative)


def _mirrored(row: ComplexArray) -> RealArray:
    # ifft pairs exp(+i k x_j) with exp(-i k x_d): the row as needed, conjugated;
    # the sum over +k and -k leaves it real but for the lone Nyquist term.
    return row.real.copy()


@dataclass(frozen=True)
class Knowledge:
    """What the planner has measured on this machine, to plan alike again.

    Equal knowledge gives equal plans and so equal bits; measured afresh, plans
    may differ in the last bit from one process to the next.
    """

    text: bytes = b""


class TransformPair:
    """In-place transforms of one array over all axes of a grid, planned once.

    Neither direction is normalised; ``norm`` is the factor that a round trip
    leaves. The array's contents are lost while planning.
    """

    def __init__(self, grid: Grid, array: ComplexArray, threads: int = 1) -> None:
        fftw = _fftw()
        self.norm = 1.0
        self._forward: list[Any] = []
        self._backward: list[Any] = []
        fourier = tuple(i for i, axis in enumerate(grid.axes) if axis.basis == "fourier")
        flags = ("FFTW_MEASURE",)
        if fourier:
            self.norm *= float(np.prod([grid.shape[i] for i in fourier]))
            for plans, direction in (
                (self._forward, "FFTW_FORWARD"),
                (self._backward, "FFTW_BACKWARD"),
            ):
                plans.append(
                    fftw.FFTW(
                        array,
                        array,
                        axes=fourier,
                        direction=direction,
                        flags=flags,
                        threads=threads,
                    )
                )
        # Real and imaginary parts are transformed as a trailing axis of two.
        pairs = array.view(np.float64).reshape(*array.shape, 2)
        for i, axis in enumerate(grid.axes):
            if axis.basis == "sine":
                plan = fftw.FFTW(
                    pairs,
                    pairs,
                    axes=(i,),
                    direction="FFTW_RODFT00",
                    flags=flags,
                    threads=threads,
                )
                self._forward.append(plan)
                self._backward.append(plan)
                self.norm *= 2 * (axis.points + 1)

    def forward(self) -> None:
        """Replace the wavefunction by its coefficients times a constant."""
        for plan in self._forward:
            plan.execute()

    def backward(self) -> None:
        """Replace coefficients by the wavefunction times a constant."""
        for plan in self._backward:
            plan.execute()


def empty_field(shape: tuple[int, ...]) -> ComplexArray:
    """Return an uninitialised complex array aligned for the transforms."""
    return np.asarray(_fftw().empty_aligned(shape, dtype=np.complex128))


def remember() -> Knowledge:
    """Return all that the planner knows now."""
    return Knowledge(_fftw().export_wisdom()[0])


def learn(knowledge: Knowledge, *, forget: bool = False) -> bool:
    """Give the planner what was measured before; False if it cannot use it."""
    fftw = _fftw()
    if forget:
        fftw.forget_wisdom()
    if not knowledge.text:
        return False
    return bool(fftw.import_wisdom((knowledge.text, b"", b""))[0])


def planner_version() -> str:
    """Name and version of the transform library, for provenance."""
    return f"pyfftw {_fftw().__version__}"


def _fftw() -> Any:  # noqa: ANN401 - a module without type information
    """Import pyfftw without its drop-in interfaces, which take a second to load."""
    if "pyfftw" in sys.modules:
        return sys.modules["pyfftw"]
    name = "pyfftw.interfaces"
    sys.modules[name] = types.ModuleType(name)
    try:
        import pyfftw  # noqa: PLC0415 - loaded only where a run is propagated
    finally:
        del sys.modules[name]
    return pyfftw

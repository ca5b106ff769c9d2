r"""Integrals of functions that are dear to evaluate and may have narrow lines."""

from collections.abc import Callable, Sequence
from itertools import pairwise
from typing import Final

import numpy as np

from wavepack.arrays import RealArray

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(8)
#: An interval is halved at most so often.
DEEPEST: Final = 40


def integral(
    function: Callable[[RealArray], RealArray],
    edges: Sequence[float],
    tolerance: float,
    most: int = 1 << 15,
) -> tuple[RealArray, float]:
    r"""Return :math:`\int f\,dx` from the first edge to the last, and its error.

    Gauss-Legendre rules of eight points; each interval is compared with its two
    halves, and halved until the difference is below its share of the tolerance.

    Parameters
    ----------
    function : callable
        Vector x to values, shape (components, x); all intervals of one depth are
        asked for at once.
    edges : sequence of float
        Ends, and places between them at which f has a kink.
    tolerance : float
        Absolute error wanted.
    most : int
        Values of x that may be asked for.

    Returns
    -------
    integral : real, shape (components,)
        Its value.
    error : float
        Sum of the last differences.
    """
    spans = np.array(list(pairwise(edges)))
    coarse = _rules(function, spans)
    asked, total, error = 8 * len(spans), np.zeros(coarse.shape[1]), 0.0
    for depth in range(DEEPEST):
        middle = spans.mean(axis=1)
        halves = np.stack([spans[:, 0], middle, middle, spans[:, 1]], axis=1).reshape(-1, 2)
        fine = _rules(function, halves)
        asked += 8 * len(halves)
        both = fine.reshape(len(spans), 2, -1)
        doubt = np.abs(both.sum(axis=1) - coarse).max(axis=1)
        share = tolerance / 8 ** min(depth, 1) * 0.5 ** max(depth - 1, 0)
        open_ = doubt > max(share, 1e-15)
        if not open_.any() or asked + 32 * int(open_.sum()) > most or depth == DEEPEST - 1:
            return total + both.sum(axis=(0, 1)), error + float(doubt.sum())
        total += both[~open_].sum(axis=(0, 1))
        error += float(doubt[~open_].sum())
        spans, coarse = halves[np.repeat(open_, 2)], fine[np.repeat(open_, 2)]
    raise AssertionError


def _rules(function: Callable[[RealArray], RealArray], spans: RealArray) -> RealArray:
    """Return the eight-point rule of each interval, shape (intervals, components)."""
    half = (spans[:, 1] - spans[:, 0]) / 2
    x = spans.mean(axis=1)[:, None] + half[:, None] * _NODES
    values = np.asarray(function(x.ravel()))
    values = values.reshape(-1, *x.shape)
    return np.asarray(np.einsum("cij,j,i->ic", values, _WEIGHTS, half))

"""Banded complex systems: factored once, solved for many right-hand sides."""

import numpy as np
import scipy.sparse
from scipy.linalg import lapack

from wavepack.arrays import ComplexArray, IndexArray


class BandedFactor:
    r"""The factors of a banded matrix, with corners where an axis is periodic.

    The band is factored by LAPACK; the corners, a matrix of low rank
    :math:`U V^T`, are put back by the Sherman-Morrison-Woodbury formula
    [GolubVanLoan2013]_, section 2.1.4:

    .. math:: (A + U V^T)^{-1} b = y - Z\,(1 + V^T Z)^{-1}\,V^T y,
        \qquad A y = b,\ A Z = U

    Parameters
    ----------
    matrix : sparse array, shape (n, n)
        Entries outside the band of half-width ``width`` must lie in the corners.
    width : int
        Half-width of the band: 1 is tridiagonal.

    Raises
    ------
    ValueError
        If the matrix is singular.
    """

    def __init__(self, matrix: scipy.sparse.sparray, width: int) -> None:
        entries = matrix.tocoo()
        rows, columns, values = entries.row, entries.col, entries.data.astype(complex)
        inside = np.abs(rows - columns) <= width
        self._n = matrix.shape[0]
        self._width = width
        self._factor(rows[inside], columns[inside], values[inside])
        self._corner_columns = np.unique(columns[~inside])
        if self._corner_columns.size:
            self._set_corners(rows[~inside], columns[~inside], values[~inside])

    def solve(self, right: ComplexArray) -> ComplexArray:
        """Return the solutions; ``right`` has shape (n,) or (n, many) and is kept."""
        y = self._solve_band(right)
        if self._corner_columns.size:
            # Column by column: a threaded product would wait for its threads longer.
            for z, share in zip(self._z.T, self._corner_shares(y), strict=True):
                y -= np.multiply.outer(z, share) if y.ndim > 1 else z * share
        return y

    def _corner_shares(self, y: ComplexArray) -> list[ComplexArray]:
        ends = y[self._corner_columns]
        return [
            sum(weight * end for weight, end in zip(row, ends, strict=True)) for row in self._small
        ]

    def _factor(self, rows: IndexArray, columns: IndexArray, values: ComplexArray) -> None:
        n, width = self._n, self._width
        if width == 1 and n > 2:
            lower, diagonal, upper = (
                np.zeros(n - 1, complex),
                np.zeros(n, complex),
                np.zeros(n - 1, complex),
            )
            for offset, vector in ((-1, lower), (0, diagonal), (1, upper)):
                chosen = columns - rows == offset
                np.add.at(vector, np.minimum(rows, columns)[chosen], values[chosen])
            *self._tridiagonal, info = lapack.zgttrf(lower, diagonal, upper)
            self._band = None
        else:
            band = np.zeros((3 * width + 1, n), complex, order="F")
            np.add.at(band, (2 * width + rows - columns, columns), values)
            self._band, self._pivots, info = lapack.zgbtrf(band, width, width)
        if info != 0:
            raise ValueError(f"banded matrix of {n} rows is singular at row {info}")

    def _solve_band(self, right: ComplexArray) -> ComplexArray:
        if self._band is None:
            solution, info = lapack.zgttrs(*self._tridiagonal, right)
        else:
            solution, info = lapack.zgbtrs(
                self._band, self._width, self._width, right, self._pivots
            )
        if info != 0:
            raise ValueError(f"banded solve refused argument {-info}")
        return np.asarray(solution).reshape(right.shape, order="F")

    def _set_corners(self, rows: IndexArray, columns: IndexArray, values: ComplexArray) -> None:
        rank = self._corner_columns.size
        u = np.zeros((self._n, rank), complex, order="F")
        np.add.at(u, (rows, np.searchsorted(self._corner_columns, columns)), values)
        self._z = self._solve_band(u)
        self._small = np.linalg.inv(np.eye(rank) + self._z[self._corner_columns])

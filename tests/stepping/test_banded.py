"""Banded solves against dense ones."""

import numpy as np
import pytest
import scipy.sparse

from tests.tolerances import TRANSFORM
from wavepack.stepping.banded import BandedFactor


@pytest.mark.parametrize("width", [1, 3])
@pytest.mark.parametrize("corners", [False, True])
def test_solutions_fulfil_the_system(width: int, *, corners: bool) -> None:
    """One and many right-hand sides, with and without periodic corners."""
    rng = np.random.default_rng(3)
    n = 20
    dense = np.zeros((n, n), complex)
    for i in range(n):
        for offset in range(-width, width + 1):
            if corners or 0 <= i + offset < n:
                dense[i, (i + offset) % n] = rng.normal() + 1j * rng.normal()
    dense += 5 * np.eye(n)
    factor = BandedFactor(scipy.sparse.csr_array(dense), width)
    one = rng.normal(size=n).astype(complex)
    many = rng.normal(size=(n, 4)).astype(complex) + 1j
    kept = many.copy()
    assert np.abs(dense @ factor.solve(one) - one).max() < 10 * TRANSFORM
    assert np.abs(dense @ factor.solve(many) - many).max() < 10 * TRANSFORM
    assert np.array_equal(many, kept)


def test_a_singular_matrix_is_refused() -> None:
    """A row of zeros is an error that names the row."""
    matrix = scipy.sparse.csr_array(np.diag([1.0, 0.0, 1.0, 1.0]))
    with pytest.raises(ValueError, match="singular at row 2"):
        BandedFactor(matrix, 1)

"""Time spent in regions, added up record by record."""

import numpy as np
import pytest

from wavepack.analysis.times import dwell_time
from wavepack.observing.dwell import Dwell

TIMES = np.array([0.0, 1.0, 2.5, 3.0])
VALUES = np.array([[1.0, 0.0], [0.5, 0.25], [0.25, 0.5], [0.0, 1.0]])


def test_sums_are_trapezoids() -> None:
    """Each region's time is the trapezoidal integral of its probability."""
    dwell = Dwell(2)
    for time, values in zip(TIMES, VALUES, strict=True):
        dwell.add(float(time), values)
    expected = [dwell_time(TIMES, column) for column in VALUES.T]
    assert dwell.times == pytest.approx(expected, rel=1e-15)


def test_sums_go_on_where_they_stopped() -> None:
    """Saved and restored in the middle, the sums have the same bits."""
    whole, first, second = Dwell(2), Dwell(2), Dwell(2)
    for time, values in zip(TIMES, VALUES, strict=True):
        whole.add(float(time), values)
    for i in (0, 1):
        first.add(float(TIMES[i]), VALUES[i])
    second.restore(first.save())
    for i in (2, 3):
        second.add(float(TIMES[i]), VALUES[i])
    assert np.array_equal(second.times, whole.times)

r"""Time spent in regions, added up as the run goes.

.. math:: \tau_D = \int dt \int_\Omega |\psi|^2\,d\mathbf r

by the trapezoidal rule over the records, from the probability on the grid alone:
what an absorber has taken is nowhere [Smith1960]_, [Buttiker1983]_.
"""

from collections.abc import Mapping

import numpy as np

from wavepack.arrays import RealArray


class Dwell:
    """Accumulates the time integral of the probability of some regions.

    Parameters
    ----------
    count : int
        How many regions.
    """

    def __init__(self, count: int) -> None:
        self._time = np.nan
        self._last = np.zeros(count)
        self._sums = np.zeros(count)

    @property
    def times(self) -> RealArray:
        """Dwell time of each region [time]."""
        return self._sums.copy()

    def add(self, time: float, probability: RealArray) -> None:
        """Add a record: the probability of each region on the grid at a time."""
        if not np.isnan(self._time):
            self._sums += (time - self._time) / 2 * (self._last + probability)
        self._time = time
        self._last = np.array(probability, dtype=float)

    def save(self) -> dict[str, np.ndarray]:
        """Return all that was gathered."""
        return {"time": np.array(self._time), "last": self._last, "sums": self._sums.copy()}

    def restore(self, saved: Mapping[str, np.ndarray]) -> None:
        """Take up what was saved."""
        self._time = float(saved["time"])
        self._last = np.array(saved["last"])
        self._sums[:] = saved["sums"]

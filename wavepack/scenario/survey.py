"""What all parts of a forecast share: the run, its estimates, the limits of its errors."""

import math
from typing import Any, Final

import numpy as np
import scipy.fft

from wavepack.grid.axis import Axis
from wavepack.physics.packets import Eigenstate
from wavepack.scenario.build import Setup
from wavepack.scenario.estimates import Estimates, LayerForecast
from wavepack.scenario.verdicts import Row, Verdict, judged

#: Without a target, errors up to the first are good and beyond the second bad.
UNASKED: Final = (1e-3, 1e-2)


class Survey:
    """A run that is looked over before it starts.

    Attributes
    ----------
    limits : (float, float)
        Errors up to the first are good, beyond the second bad.
    quantities : dict
        The numbers found so far.
    density : real array
        Probability of each cell at the start.
    """

    def __init__(self, setup: Setup, estimates: Estimates) -> None:
        self.setup = setup
        self.estimates = estimates
        self.units = setup.scenario.units
        target = setup.scenario.accuracy.target if setup.scenario.accuracy else None
        self.target = target
        self.limits = UNASKED if target is None else (target / 3, target)
        self.quantities: dict[str, Any] = {}
        self.density = np.abs(setup.start[0]) ** 2 * setup.grid.cell

    @property
    def hbar(self) -> float:
        """The constant [energy time]."""
        return self.setup.particle.hbar

    @property
    def scatters(self) -> bool:
        """Whether it is asked what gets where."""
        roles = any(spec.role != "none" for spec in self.setup.scenario.region)
        return roles or bool(self.setup.scenario.detector)

    @property
    def prepared(self) -> bool:
        """Whether the state is made to sit in the potential."""
        return any(
            isinstance(packet, Eigenstate) or packet.where is not None
            for packet in self.setup.scenario.packet
        )

    def points(self, line: Axis, factor: float) -> int:
        """Return points that refine an axis by at least a factor, quick to transform."""
        wall = int(line.basis == "sine")
        return int(scipy.fft.next_fast_len(math.ceil((line.points + wall) * factor))) - wall

    def layer_name(self, forecast: LayerForecast) -> str:
        """Return the axis and the end of a layer."""
        end = "upper" if forecast.layer.upper else "lower"
        return f"{self.setup.grid.names[forecast.layer.axis]} {end}"

    def verdict(self, error: float) -> Verdict:
        """Return the verdict on an error of a probability."""
        return judged(error, self.limits)

    def error_row(self, topic: str, error: float, verdict: Verdict, advice: str) -> Row:
        """Return the row of an error of a probability."""
        return Row(topic, f"about {error:.1g}", f"{self.limits[0]:.1g}", verdict, advice)

    def keep(self, kind: str, name: str, value: float) -> None:
        """Keep a number found for one axis, layer or detector."""
        self.quantities.setdefault(kind, {})[name] = value

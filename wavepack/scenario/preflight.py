"""A forecast: whether grid, step, box and absorbers suit a packet and a potential.

Nothing is propagated but a few steps that are timed, and nothing is written.
"""

import math
import shutil
from collections.abc import Iterator
from pathlib import Path

from wavepack.scenario.build import Setup
from wavepack.scenario.costs import disk, free_memory, memory, time_run
from wavepack.scenario.estimates import Estimates
from wavepack.scenario.survey import Survey
from wavepack.scenario.survey_box import BoxSurvey
from wavepack.scenario.survey_numerics import NumericsSurvey
from wavepack.scenario.verdicts import DAY, Forecast, Row, duration_text, judged, size_text

__all__ = ["Forecast", "Row", "forecast"]


def forecast(setup: Setup, *, timing: bool, folder: Path | str = ".") -> Forecast:
    """Look a run over before it starts.

    Parameters
    ----------
    setup : Setup
        The run, not started.
    timing : bool
        Whether to time a few steps (5 s at most) for the duration.
    folder : path
        Where it would be written, for the free space.

    Returns
    -------
    Forecast
        Every row says what was found and needed and, if that is not good, what
        to change.
    """
    estimates = Estimates(setup)
    numerics, box = NumericsSurvey(setup, estimates), BoxSurvey(setup, estimates)
    costs = CostSurvey(setup, estimates)
    rows = (*numerics.rows(), *box.rows(), *costs.rows(folder, timing=timing))
    return Forecast(rows, numerics.quantities | box.quantities | costs.quantities)


class CostSurvey(Survey):
    """Looks at memory, disk, duration and at the accuracy asked for."""

    def rows(self, folder: Path | str, *, timing: bool) -> Iterator[Row]:
        """Yield one row a topic."""
        yield self._memory()
        yield self._disk(folder)
        if timing:
            yield self._duration()
        yield from self._accuracy()

    def _memory(self) -> Row:
        start, running = memory(self.setup)
        free = free_memory()
        self.quantities |= {"memory_start": start, "memory_running": running}
        verdict = judged(start / free, (0.6, 1.0))
        return Row(
            "memory",
            f"{size_text(start)} at the start, then {size_text(running)}",
            f"free {size_text(free)}",
            verdict,
            f"take fewer points along {self._longest}, or another machine"
            if verdict != "good"
            else "",
        )

    def _disk(self, folder: Path | str) -> Row:
        size = disk(self.setup)
        free = float(shutil.disk_usage(_existing(folder)).free)
        self.quantities["disk"] = size.total
        verdict = judged(size.total / free, (0.5, 1.0))
        frames = max(2, int(self.setup.scenario.output.frames * 0.4 * free / size.total))
        return Row(
            "disk",
            f"{size_text(size.total)}, frames {size_text(size.frames)}",
            f"free {size_text(free)}",
            verdict,
            f'take output.frames = {frames} or fewer, output.thin, or output.store = "density"'
            if verdict != "good"
            else "",
        )

    def _duration(self) -> Row:
        measured = time_run(self.setup)
        self.quantities |= {"step_seconds": measured.step, "seconds": measured.total}
        verdict = judged(measured.total, (2 * DAY, math.inf))
        return Row(
            "duration",
            f"about {duration_text(measured.total)}",
            f"{self.setup.steps} steps of {duration_text(measured.step)}",
            verdict,
            "long; a smaller grid or a longer propagator.step saves time"
            if verdict != "good"
            else "",
        )

    def _accuracy(self) -> Iterator[Row]:
        """Sum of the errors against the accuracy asked for."""
        parts = {
            "the step": max(self.estimates.step_error, self.estimates.resonance),
            "the spacing": self.estimates.spacing_error,
            "the absorbers": max((layer.mean for layer in self.estimates.layers), default=0.0),
            "the start in an absorber": self.estimates.start_in_layers,
        }
        total = sum(parts.values())
        self.quantities["error"] = total
        if self.target is None:
            return
        worst = max(parts, key=lambda name: parts[name])
        verdict = judged(total, (self.target / 2, self.target))
        advice = f"most of it is from {worst}; see there" if verdict != "good" else ""
        yield Row("accuracy", f"about {total:.1g}", f"{self.target:.1g}", verdict, advice)

    @property
    def _longest(self) -> str:
        axis = max(self.setup.grid.axes, key=lambda line: line.points)
        return f"grid.{axis.name}.points"


def _existing(folder: Path | str) -> Path:
    """Return the folder or the nearest one above it that exists."""
    path = Path(folder).absolute()
    while not path.exists():
        path = path.parent
    return path

"""Which integer step reads, records, saves a frame or may pause.

Stops depend on step numbers alone, never on the clock: a run that was
interrupted stops, and fuses its half steps, exactly where an unbroken one does.
"""

import math
from bisect import bisect_right
from collections.abc import Iterator
from dataclasses import dataclass


@dataclass(frozen=True)
class Schedule:
    """The stops of a run, t = n dt.

    Attributes
    ----------
    dt : float
        Time step.
    steps : int
        The last step.
    read_every, record_every, pause_every : int
        Strides of detector readings, of series records, and of stops at which
        a checkpoint may be written or a signal obeyed.
    frame_steps : tuple of int
        Steps at which a frame is saved, ascending, 0 included.
    """

    dt: float
    steps: int
    read_every: int
    record_every: int
    pause_every: int
    frame_steps: tuple[int, ...]

    def reads(self, step: int) -> bool:
        """Whether detectors are read at a step."""
        return step % self.read_every == 0

    def records(self, step: int) -> bool:
        """Whether the series gets a row at a step; the last step always does."""
        return step % self.record_every == 0 or step == self.steps

    def frames(self, step: int) -> bool:
        """Whether a frame is saved at a step."""
        place = bisect_right(self.frame_steps, step) - 1
        return place >= 0 and self.frame_steps[place] == step

    def after(self, step: int) -> int:
        """Return the next stop after a step."""
        candidates = [
            (step // stride + 1) * stride
            for stride in (self.read_every, self.record_every, self.pause_every)
        ]
        place = bisect_right(self.frame_steps, step)
        if place < len(self.frame_steps):
            candidates.append(self.frame_steps[place])
        return min(*candidates, self.steps)

    def stops(self, start: int) -> Iterator[int]:
        """Yield every stop after ``start`` up to the last step."""
        step = start
        while step < self.steps:
            step = self.after(step)
            yield step


def frame_steps(frames: int, end: float, dt: float, last: float) -> tuple[int, ...]:
    """Return the steps nearest to evenly spaced times, both ends included.

    ``frames`` of them span 0 to ``end``; the same spacing goes on to ``last``
    where a run is extended beyond its first end. Times closer than a step
    share one frame.
    """
    spacing = end / (frames - 1)
    count = math.floor(last / spacing * (1 + 1e-12)) + 1
    return tuple(sorted({round(i * spacing / dt) for i in range(count)}))

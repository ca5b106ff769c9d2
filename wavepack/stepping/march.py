"""The loop: from stop to stop, yielding snapshots."""

from collections.abc import Iterator
from dataclasses import dataclass

from wavepack.arrays import ComplexArray
from wavepack.stepping.schedule import Schedule
from wavepack.stepping.scheme import Stepper


@dataclass(frozen=True)
class Snapshot:
    """The state at one stop; its array is a read-only view of the working field."""

    step: int
    time: float
    psi: ComplexArray


def march(stepper: Stepper, schedule: Schedule, start: int = 0) -> Iterator[Snapshot]:
    """Yield the state at ``start`` and at every stop up to the last step.

    The caller may leave at any snapshot; nothing is held between two of them.
    """
    view = stepper.psi.view()
    view.flags.writeable = False
    yield Snapshot(start, start * schedule.dt, view)
    step = start
    for stop in schedule.stops(start):
        stepper.advance(step, stop)
        step = stop
        yield Snapshot(step, step * schedule.dt, view)

"""Every error the program raises on purpose.

::

    WavepackError            exit status
    ├── ScenarioError        2   a fault of the scenario; carries all faults found
    ├── UsageError           2   arguments, or a folder that holds no run
    ├── MachineError         4   disk full, not writable, out of memory: resumable
    └── NumericalFault       5   not finite, norm growing, books open

Anything else that escapes is a defect of the program (exit status 1).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar


class WavepackError(Exception):
    """An error with a message for the user and an exit status."""

    exit_status: ClassVar[int] = 1


@dataclass(frozen=True)
class Fault:
    """One fault of a scenario: where it is, what was found, what is wanted."""

    key: str
    message: str
    line: int | None = None
    file: str = "scenario"

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        return f"{place}: {self.key}: {self.message}" if self.key else f"{place}: {self.message}"


class ScenarioError(WavepackError):
    """A scenario that cannot be run; ``faults`` holds every fault found."""

    exit_status = 2

    def __init__(self, faults: Sequence[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class UsageError(WavepackError):
    """Arguments that make no sense, or a folder that holds no run."""

    exit_status = 2


class MachineError(WavepackError):
    """The machine refused: disk full, not writable, out of memory."""

    exit_status = 4


class NumericalFault(WavepackError):  # noqa: N818 - the word users read
    """The numbers cannot be trusted from here on; the run stops."""

    exit_status = 5

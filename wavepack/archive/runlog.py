"""``run.log``: what happened to a run, one JSON object a line."""

import json
import os
from datetime import UTC, datetime
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from wavepack.archive.disk import machine_errors, require_folder
from wavepack.archive.layout import LOG_FILE
from wavepack.archive.results import jsonable


class RunLog:
    """Appends events to ``run.log``; each line is written at once.

    Raises
    ------
    MachineError
        If the folder is missing, or the file cannot be written.
    """

    def __init__(self, folder: Path | str) -> None:
        self.path = Path(folder) / LOG_FILE
        require_folder(self.path.parent)
        with machine_errors(self.path, self.path.parent):
            flags = os.O_RDWR | os.O_CREAT | os.O_APPEND
            self._descriptor = os.open(self.path, flags, 0o644)
            self._end_torn_line()

    def write(self, event: str, **fields: Any) -> None:  # noqa: ANN401 - whatever JSON can hold
        """Append one event with the time and its fields.

        Raises
        ------
        MachineError
            If the file cannot be written.
        """
        moment = datetime.now(UTC).astimezone().isoformat(timespec="milliseconds")
        line = {"time": moment, "event": event, **jsonable(fields)}
        with machine_errors(self.path, self.path.parent):
            os.write(self._descriptor, json.dumps(line, ensure_ascii=False).encode() + b"\n")

    def close(self) -> None:
        """Close the file."""
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _end_torn_line(self) -> None:
        """End the half line that a killed process may have left, so that the next starts afresh."""
        size = os.fstat(self._descriptor).st_size
        if size and os.pread(self._descriptor, 1, size - 1) != b"\n":
            os.write(self._descriptor, b"\n")


def read_log(folder: Path | str) -> list[dict[str, Any]]:
    """Return all whole events of a run, oldest first; none if there is no log.

    Raises
    ------
    MachineError
        If the file cannot be read.
    """
    path = Path(folder) / LOG_FILE
    if not path.is_file():
        return []
    with machine_errors(path, path.parent):
        lines = path.read_bytes().splitlines()
    events = []
    for line in lines:
        try:
            event = json.loads(line)
        except ValueError:
            continue
        if isinstance(event, dict):
            events.append(event)
    return events

"""What a person sees of a run at work: one line, redrawn or repeated."""

import os
import shutil
import time
from collections.abc import Callable
from contextlib import suppress
from typing import Final, Protocol, TextIO

#: Where lines cannot be redrawn, the first comes after so many seconds, the next ones after more.
FIRST_LINE: Final = 2.0
NEXT_LINES: Final = 10.0


class Moments(Protocol):
    """Averages over the state, as far as they are shown."""

    @property
    def norm(self) -> float:
        """Probability on the grid."""


class Standing(Protocol):
    """Where the probability is, as far as it is shown."""

    @property
    def time(self) -> float:
        """Time of the state."""

    @property
    def transmission(self) -> float:
        """Probability transmitted so far."""

    @property
    def moments(self) -> Moments:
        """Averages over the state."""


class News(Protocol):
    """How far a run has come: step of steps, this process's first, its seconds."""

    @property
    def step(self) -> int:
        """The step of the state."""

    @property
    def steps(self) -> int:
        """The last step."""

    @property
    def first(self) -> int:
        """The step at which this process began."""

    @property
    def seconds(self) -> float:
        """How long this process has been at work."""

    @property
    def standing(self) -> Standing:
        """Where the probability is."""


def decorated(stream: TextIO) -> bool:
    """Tell whether bold type is welcome: a terminal, and NO_COLOR not set."""
    return stream.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"


class Line:
    """One line about what is going on.

    On a terminal it is redrawn in place, elsewhere repeated every ten seconds.
    A stream that nobody reads any more is let be: the work is worth more.
    """

    def __init__(self, stream: TextIO, clock: Callable[[], float] = time.monotonic) -> None:
        self._stream = stream
        self._clock = clock
        self._redrawn = stream.isatty()
        self._due = clock() + FIRST_LINE
        self._shown = False

    def draw(self, text: str) -> None:
        """Show a text in place of the former one, or on a new line if one is due."""
        if self._redrawn:
            room = shutil.get_terminal_size().columns - 1
            self._write(f"\r{text[:room].ljust(room)}")
            self._shown = True
        elif self._clock() >= self._due:
            self._due = self._clock() + NEXT_LINES
            self._write(f"{text}\n")

    def close(self) -> None:
        """Clear the line so that the next message starts at the left."""
        if self._shown:
            self._write("\r" + " " * (shutil.get_terminal_size().columns - 1) + "\r")
            self._shown = False

    def _write(self, text: str) -> None:
        with suppress(OSError):
            self._stream.write(text)
            self._stream.flush()


def progress_text(news: News, unit: str) -> str:
    """Return time done, share, speed, time to go, norm left and transmission in 80 columns."""
    share = news.step / news.steps if news.steps else 1.0
    end = news.standing.time / share if share else 0.0
    parts = [
        f"{news.standing.time:.5g} of {end:.5g} {unit}",
        f"{100 * share:.0f} %",
        *_pace(news),
        f"norm {news.standing.moments.norm:.4f}",
        f"T {news.standing.transmission:.4f}",
    ]
    return "  ".join(parts)


def _pace(news: News) -> tuple[str, ...]:
    done = news.step - news.first
    if done <= 0 or news.seconds <= 0:
        return ()
    rate = done / news.seconds
    speed = f"{rate:.0f}" if rate >= 100 else f"{rate:.3g}"
    return (f"{speed} steps/s", f"{duration((news.steps - news.step) / rate)} left")


def duration(seconds: float) -> str:
    """Return a span of wall-clock time, in the largest units that matter."""
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60}:{whole % 60:02d} min"
    return f"{whole // 3600}:{whole % 3600 // 60:02d} h"

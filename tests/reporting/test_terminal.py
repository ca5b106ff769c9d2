"""Progress: redrawn on a terminal, repeated elsewhere, never in the way of the run."""

import io
from dataclasses import dataclass, field

import pytest

from wavepack.reporting.terminal import Line, decorated, duration, progress_text


class Terminal(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self) -> bool:
        """Say so."""
        return True


class Clock:
    """A clock that tests move by hand."""

    now = 0.0

    def __call__(self) -> float:
        """Return the time it is."""
        return self.now


@dataclass
class Moments:
    """Averages, as far as they are shown."""

    norm: float = 0.75


@dataclass
class Standing:
    """A state, as far as it is shown."""

    time: float = 300.0
    transmission: float = 0.125
    moments: Moments = field(default_factory=Moments)


@dataclass
class News:
    """A run of 1200 fs at a quarter, after 20 s at work since the tenth of it."""

    step: int = 2500
    steps: int = 10000
    first: int = 1000
    seconds: float = 20.0
    standing: Standing = field(default_factory=Standing)


def test_progress_tells_all() -> None:
    """Time, share, speed, time to go, norm and transmission stand in one line."""
    assert progress_text(News(), "fs") == (
        "300 of 1200 fs  25 %  75 steps/s  1:40 min left  norm 0.7500  T 0.1250"
    )


def test_progress_at_the_first_step_has_no_speed() -> None:
    """Before anything is done no speed and no time to go are made up."""
    text = progress_text(News(step=0, first=0, seconds=0.0, standing=Standing(time=0.0)), "fs")
    assert "steps/s" not in text
    assert "0 %" in text


def test_progress_fits_eighty_columns() -> None:
    """Nothing is cut off a usual terminal, however long the run."""
    news = News(10_000_000, 100_000_000, 0, 20_000.0, Standing(time=12345.678))
    text = progress_text(news, "atomic_time")
    assert text.startswith("12346 of 1.2346e+05 atomic_time  10 %  500 steps/s  50:00 h left")
    assert len(text) < 90
    assert len(progress_text(news, "fs")) < 80


def test_redrawn_in_place_on_a_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    """Each text covers the former one, fits the width, and is cleared at the end."""
    monkeypatch.setenv("COLUMNS", "20")
    stream = Terminal()
    line = Line(stream)
    line.draw("a much longer text than fits")
    line.draw("short")
    line.close()
    _, first, second, cleared, rest = stream.getvalue().split("\r")
    assert first == "a much longer text "
    assert second == "short".ljust(19)
    assert (cleared, rest) == (" " * 19, "")


def test_repeated_elsewhere() -> None:
    """Without a terminal: plain lines, the first after 2 s, then one every 10 s."""
    stream, clock = io.StringIO(), Clock()
    line = Line(stream, clock)
    for now in range(25):
        clock.now = now
        line.draw(f"{now} s")
    line.close()
    assert stream.getvalue() == "2 s\n12 s\n22 s\n"


def test_a_closed_stream_stops_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """When nobody reads the progress any more the run goes on."""

    def broken(_: str) -> int:
        raise BrokenPipeError

    stream = Terminal()
    monkeypatch.setattr(stream, "write", broken)
    Line(stream).draw("text")


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.4, "0 s"), (59, "59 s"), (61, "1:01 min"), (3600, "1:00 h"), (90061, "25:01 h")],
)
def test_duration(seconds: float, text: str) -> None:
    """Wall-clock time is told in the units that matter."""
    assert duration(seconds) == text


def test_bold_only_where_welcome(monkeypatch: pytest.MonkeyPatch) -> None:
    """Files and NO_COLOR get plain text."""
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setenv("TERM", "xterm")
    assert decorated(Terminal())
    assert not decorated(io.StringIO())
    monkeypatch.setenv("NO_COLOR", "1")
    assert not decorated(Terminal())

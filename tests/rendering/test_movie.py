"""Movie files: what a player needs, and nothing left behind."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import av
import numpy as np
import numpy.typing as npt
import pytest
from PIL import Image

from wavepack.errors import MachineError, UsageError
from wavepack.rendering import movie
from wavepack.rendering.frames import picture_of
from wavepack.rendering.movie import write_movie
from wavepack.rendering.scene import Curves, Frames, Scene

MakeCase = Callable[..., tuple[Scene, Frames, Curves]]

SIZE = (320, 180)


def decoded(path: Path) -> tuple[av.VideoFrame, ...]:
    """Read every picture of a movie back."""
    with av.open(str(path)) as container:
        return tuple(container.decode(video=0))


@pytest.mark.parametrize(("ending", "codec"), [(".mp4", "h264"), (".webm", "vp9")])
def test_video_suits_browsers(line: MakeCase, tmp_path: Path, ending: str, codec: str) -> None:
    """Codec, pixel format, size, count, duration, colours and title are as promised."""
    scene, frames, curves = line(256, 12)
    out = write_movie(scene, frames, tmp_path / f"m{ending}", curves=curves, size=SIZE, fps=25)
    with av.open(str(out)) as container:
        stream = container.streams.video[0]
        assert stream.codec_context.name == codec
        assert stream.codec_context.pix_fmt == "yuv420p"
        assert (stream.width, stream.height) == SIZE
        assert stream.average_rate == 25
        assert (container.duration or 0) / 1e6 == pytest.approx(12 / 25, abs=0.005)
        assert container.metadata["title"] == scene.title
        assert stream.codec_context.colorspace == 1
    assert len(decoded(out)) == 12


def test_mp4_can_start_before_all_is_loaded(line: MakeCase, tmp_path: Path) -> None:
    """The index stands before the pictures in the file."""
    scene, frames, _ = line(128, 3)
    data = write_movie(scene, frames, tmp_path / "m.mp4", size=SIZE).read_bytes()
    assert 0 < data.index(b"moov") < data.index(b"mdat")


@pytest.mark.parametrize("ending", [".mp4", ".webm", ".gif"])
def test_decoded_pictures_are_those_painted(plane: MakeCase, tmp_path: Path, ending: str) -> None:
    """Each picture read back looks like the one painted, paper, colours and all."""
    scene, frames, curves = plane((64, 48), 5)
    out = write_movie(scene, frames, tmp_path / f"m{ending}", curves=curves, size=SIZE)
    picture = picture_of(scene, frames, curves, size=SIZE)
    read = decoded(out)
    assert len(read) == 5
    for i, frame in enumerate(read):
        painted = picture.paint(float(frames.times[i]), frames.read(i))[..., :3].astype(int)
        found = frame.to_ndarray(format="rgb24").astype(int)
        assert np.abs(found - painted).mean() < 5
        assert np.abs(found[:4] - 255).max() <= 3


@pytest.mark.parametrize("ending", [".mp4", ".webm", ".gif"])
def test_colours_are_kept(plane: MakeCase, tmp_path: Path, ending: str) -> None:
    """A full colour comes back within a few levels, decoded as the file says it should be."""
    scene, frames, _ = plane((20, 20), 2)
    bare = Scene(scene.coordinates, np.zeros((20, 20)))
    for turn in (1, -1, 1j, -1j):
        still = Frames(frames.times, ([np.full((20, 20), complex(turn))] * 2).__getitem__)
        out = write_movie(bare, still, tmp_path / f"m{ending}", size=SIZE, picture="phase")
        picture = picture_of(bare, still, kind="phase", size=SIZE)
        painted, middle = picture.paint(0.0, still.read(0)), (SIZE[1] // 2, SIZE[0] // 2)
        found = decoded(out)[0].to_ndarray(format="rgb24")[middle].astype(int)
        assert np.abs(found - painted[middle][:3]).max() <= 6


def test_gif_loops_at_the_rate_asked_for(line: MakeCase, tmp_path: Path) -> None:
    """A GIF repeats for ever and shows each frame for one over the rate."""
    scene, frames, _ = line(128, 4)
    out = write_movie(scene, frames, tmp_path / "m.GIF", size=(321, 181), fps=20)
    with Image.open(out) as image:
        assert image.size == (321, 181)
        assert len(decoded(out)) == 4
        assert image.info["loop"] == 0
        assert image.info["duration"] == 50


def test_one_frame_makes_a_movie(line: MakeCase, tmp_path: Path) -> None:
    """A run stopped after its first frame can be shown."""
    scene, frames, _ = line(128, 1)
    for ending in (".mp4", ".webm", ".gif"):
        out = write_movie(scene, frames, tmp_path / f"m{ending}", size=SIZE)
        assert len(decoded(out)) == 1


def test_progress_counts_every_frame(line: MakeCase, tmp_path: Path) -> None:
    """The callback hears of each frame once, in order."""
    scene, frames, _ = line(128, 3)
    heard: list[tuple[int, int]] = []
    write_movie(
        scene, frames, tmp_path / "m.mp4", size=SIZE, progress=lambda *count: heard.append(count)
    )
    assert heard == [(1, 3), (2, 3), (3, 3)]


def test_frames_are_read_one_at_a_time(line: MakeCase, tmp_path: Path) -> None:
    """No frame is kept: each is read once for the scale and once to paint."""
    scene, frames, _ = line(128, 6)
    asked: list[int] = []

    def read(i: int) -> npt.NDArray[Any]:
        asked.append(i)
        return frames.read(i)

    write_movie(scene, Frames(frames.times, read), tmp_path / "m.mp4", size=SIZE)
    assert asked == [*range(6), *range(6)]


@pytest.mark.parametrize("ending", [".mp4", ".webm", ".gif"])
def test_a_failing_frame_leaves_nothing_behind(line: MakeCase, tmp_path: Path, ending: str) -> None:
    """The old movie stays, the temporary one goes, the error comes through."""
    # Encoders hold back some forty frames before they write the first.
    scene, frames, _ = line(128, 60)
    out = tmp_path / f"m{ending}"
    out.write_text("the old one")
    asked: list[int] = []

    def read(i: int) -> npt.NDArray[Any]:
        asked.append(i)
        if i == 57 and asked.count(57) > 1:
            raise ArithmeticError("frame 57")
        return frames.read(i)

    with pytest.raises(ArithmeticError, match="frame 57"):
        write_movie(scene, Frames(frames.times, read), out, size=SIZE)
    assert out.read_text() == "the old one"
    assert list(tmp_path.iterdir()) == [out]


@pytest.mark.parametrize("ending", [".mp4", ".webm", ".gif"])
def test_a_movie_cut_short_is_not_published(
    line: MakeCase, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, ending: str
) -> None:
    """What an encoder calls done is read back, and goes if half of it is missing."""
    scene, frames, _ = line(128, 12)
    encode = movie._encode  # noqa: SLF001 - no file system loses writes on demand

    def lose_half(path: Path, *rest: Any) -> None:  # noqa: ANN401 - passed on
        encode(path, *rest)
        with path.open("r+b") as file:
            file.truncate(path.stat().st_size // 2)

    monkeypatch.setattr(movie, "_encode", lose_half)
    with pytest.raises(MachineError, match="of 12 frames could be read back"):
        write_movie(scene, frames, tmp_path / f"m{ending}", size=SIZE)
    assert list(tmp_path.iterdir()) == []


def test_a_full_disk_is_the_machines_fault(line: MakeCase, tmp_path: Path) -> None:
    """An error of the file system names the movie and leaves nothing behind."""
    scene, frames, _ = line(128, 3)

    def read(i: int) -> npt.NDArray[Any]:
        if i == 2:
            raise OSError(28, "No space left on device")
        return frames.read(i)

    with pytest.raises((MachineError, OSError), match="No space left"):
        write_movie(scene, Frames(frames.times, read), tmp_path / "m.mp4", size=SIZE)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("name", "options", "message"),
    [
        ("m.avi", {}, r"\.mp4, \.webm or \.gif, got '\.avi'"),
        ("m", {}, "got no ending"),
        ("none/m.mp4", {}, "folder .* does not exist"),
        ("m.mp4", {"size": (13, 7)}, "size: need 240x160 to 8192x8192 pixels, got 13x7"),
        ("m.mp4", {"size": (641, 361)}, "even width and height, got 641x361; try 642x362"),
        ("m.mp4", {"fps": 0.0}, "fps: need more than 0"),
        ("m.gif", {"fps": 60.0}, "at most 50"),
    ],
)
def test_what_cannot_be_met_is_said_before_work_starts(
    line: MakeCase, tmp_path: Path, name: str, options: dict[str, object], message: str
) -> None:
    """Bad endings, sizes and rates are refused with what is wanted."""
    scene, frames, _ = line(64, 2)
    with pytest.raises(UsageError, match=message):
        write_movie(scene, frames, tmp_path / name, **options)  # type: ignore[arg-type]
    assert list(tmp_path.iterdir()) == []

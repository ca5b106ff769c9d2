"""Frames of a run to one movie file, read and written one at a time."""

import contextlib
import secrets
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Final, TypeAlias, cast

import av
import imageio.v3 as imageio
from av.container import OutputContainer
from av.video.stream import VideoStream

from wavepack.errors import MachineError, UsageError
from wavepack.rendering.canvas import Pixels, check_size
from wavepack.rendering.frames import Picture, picture_of
from wavepack.rendering.from_run import frames_of, scene_of, shown_curves_of
from wavepack.rendering.palette import Palette
from wavepack.rendering.scene import Curves, Frames, Scene

if TYPE_CHECKING:
    from wavepack.archive.reader import Run

#: Called with the number of frames written so far and the number in all.
Progress: TypeAlias = Callable[[int, int], None]


@dataclass(frozen=True)
class Format:
    """How one kind of file is encoded."""

    container: str
    codec: str
    pixels: str
    options: dict[str, str] = field(default_factory=dict)
    container_options: dict[str, str] = field(default_factory=dict)

    @property
    def halves_colour(self) -> bool:
        """Whether colour is kept for blocks of 2 x 2 pixels, so that sides must be even."""
        return self.pixels == "yuv420p"


FORMATS: Final[dict[str, Format]] = {
    # Browsers and slides play H.264 in this form, and begin before all is loaded.
    ".mp4": Format(
        "mp4",
        "libx264",
        "yuv420p",
        {"crf": "18", "preset": "veryfast"},
        {"movflags": "+faststart"},
    ),
    ".webm": Format(
        "webm",
        "libvpx-vp9",
        "yuv420p",
        {"crf": "28", "b": "0", "deadline": "realtime", "cpu-used": "6", "row-mt": "1"},
    ),
    ".gif": Format("gif", "gif", "pal8"),
}


def render_movie(
    run: "Run",
    out: Path,
    *,
    size: tuple[int, int] = (1280, 720),
    fps: float = 25,
    picture: str = "density",
    power: float = 0.5,
    progress: Progress | None = None,
) -> Path:
    """Render the stored frames of a run, finished or not, to a movie.

    Parameters
    ----------
    run : Run
        An opened run; only its file is read.
    out : Path
        File to write; its ending chooses .mp4 (H.264), .webm (VP9) or .gif.
    size : (int, int)
        Width and height [pixels]; even for .mp4 and .webm.
    fps : float
        Stored frames shown a second.
    picture : {"density", "real", "phase"}
        What is painted.
    power : float
        Exponent of the density's scale; below 1 it lifts what is faint.
    progress : callable, optional
        Told how many frames of how many are written.

    Raises
    ------
    UsageError
        If ending, size, picture, power or frame rate cannot be met, or the run
        holds no frames yet.
    MachineError
        If the file cannot be written.
    """
    return write_movie(
        scene_of(run),
        frames_of(run),
        out,
        curves=shown_curves_of(run),
        size=size,
        fps=fps,
        picture=picture,
        power=power,
        progress=progress,
    )


def write_movie(
    scene: Scene,
    frames: Frames,
    out: Path,
    *,
    curves: Curves | None = None,
    size: tuple[int, int] = (1280, 720),
    fps: float = 25,
    picture: str = "density",
    power: float = 0.5,
    progress: Progress | None = None,
) -> Path:
    """Render frames of a scene; see `render_movie`, which reads them from a run."""
    out = Path(out)
    form = format_of(out)
    _check(form, size, fps, out)
    drawn = picture_of(scene, frames, curves, kind=picture, size=size, power=power)
    palette = _palette_of(drawn, frames) if form.codec == "gif" else None
    with _temporary(out) as partial:
        _encode(partial, form, drawn, frames, size, _rate(fps), scene.title, palette, progress)
        found = _readable_frames(partial, form, size)
        if found != len(frames):
            raise MachineError(
                f"{out}: only {found} of {len(frames)} frames could be read back; see that the "
                "disk is neither full nor failing, and render it again"
            )
    return out


def format_of(out: Path) -> Format:
    """Return the format of a file by its ending; UsageError if it has none of the three."""
    form = FORMATS.get(out.suffix.lower())
    if form is None:
        found = f"{out.suffix!r}" if out.suffix else "no ending"
        raise UsageError(f"{out}: need a file ending in .mp4, .webm or .gif, got {found}")
    return form


def _check(form: Format, size: tuple[int, int], fps: float, out: Path) -> None:
    width, height = check_size(size)
    if form.halves_colour and (width % 2 or height % 2):
        raise UsageError(
            f"size: {out.suffix} needs an even width and height, got {width}x{height}; "
            f"try {width + width % 2}x{height + height % 2}"
        )
    if not 0 < fps <= 240:
        raise UsageError(f"fps: need more than 0 and at most 240 frames a second, got {fps:g}")
    if form.codec == "gif" and fps > 50:
        raise UsageError(f"fps: .gif can show at most 50 frames a second, got {fps:g}")
    if not out.parent.is_dir():
        raise UsageError(f"{out}: the folder {out.parent} does not exist")
    if out.is_dir():
        raise UsageError(f"{out}: is a folder, need the name of a file")


def _rate(fps: float) -> Fraction:
    return Fraction(fps).limit_denominator(1001)


@contextlib.contextmanager
def _temporary(out: Path) -> Iterator[Path]:
    """Give a name beside ``out``; renamed when all went well, else removed."""
    partial = out.with_name(f".{out.stem}.{secrets.token_hex(4)}.partial{out.suffix}")
    try:
        yield partial
        partial.replace(out)
    except OSError as error:
        raise MachineError(
            f"{out}: the movie could not be written: {error.strerror or error}"
        ) from error
    finally:
        partial.unlink(missing_ok=True)


def _encode(
    path: Path,
    form: Format,
    picture: Picture,
    frames: Frames,
    size: tuple[int, int],
    rate: Fraction,
    title: str,
    palette: Palette | None,
    progress: Progress | None,
) -> None:
    with av.open(
        str(path), "w", format=form.container, container_options=form.container_options
    ) as container:
        container.metadata["title"] = title
        stream = _stream(container, form, size, rate)
        for i, (time, frame) in enumerate(frames):
            pixels = picture.paint(time, frame)
            video = _video_frame(pixels) if palette is None else palette.frame(pixels)
            video.pts, video.time_base = i, 1 / rate
            container.mux(stream.encode(video))
            if progress is not None:
                progress(i + 1, len(frames))
        container.mux(stream.encode())


def _readable_frames(path: Path, form: Format, size: tuple[int, int]) -> int:
    """Return how many pictures of the right size another reader finds in a movie.

    An encoder may report success on a file that was cut short; no movie takes
    its name before it has been read whole.
    """
    found = 0
    pictures = imageio.imiter(path, plugin="pillow" if form.codec == "gif" else "pyav")
    with contextlib.suppress(OSError, SyntaxError, av.FFmpegError):
        for pixels in pictures:
            found += pixels.shape[:2] == size[::-1]
    return found


#: BT.709 primaries, transfer and matrix with limited range, in the codec's numbers.
_BT709: Final = 1
_LIMITED: Final = 1


def _stream(
    container: OutputContainer, form: Format, size: tuple[int, int], rate: Fraction
) -> VideoStream:
    # The library's types offer every kind of stream; these codecs make videos.
    stream = cast("VideoStream", container.add_stream(form.codec, rate=rate, options=form.options))
    stream.width, stream.height = size
    stream.pix_fmt = form.pixels
    stream.time_base = stream.codec_context.time_base = 1 / rate
    if form.halves_colour:
        # Untold, players guess the matrix by the size, and colours shift.
        context = stream.codec_context
        context.color_primaries = context.color_trc = context.colorspace = _BT709
        context.color_range = _LIMITED
    return stream


def _video_frame(pixels: Pixels) -> av.VideoFrame:
    frame = av.VideoFrame.from_ndarray(pixels, format="rgba")
    return frame.reformat(
        format="yuv420p",
        dst_colorspace="ITU709",
        dst_color_range="MPEG",
        interpolation="AREA",
    )


def _palette_of(picture: Picture, frames: Frames) -> Palette:
    """Choose the colours that serve frames spread over the whole movie."""
    chosen = sorted({round(share * (len(frames) - 1)) for share in (0, 0.25, 0.5, 0.75, 1)})
    painted = (picture.paint(float(frames.times[i]), frames.read(i)) for i in chosen)
    return Palette.of(painted)

"""Still pictures of a whole run, for pages and papers."""

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from wavepack.errors import MachineError
from wavepack.rendering import style
from wavepack.rendering.from_run import (
    frames_of,
    scene_of,
    shown_curves_of,
    spectrum_of,
)
from wavepack.rendering.overview import PAGE_DPI, line_overview, page_layout
from wavepack.rendering.plane_overview import plane_overview
from wavepack.rendering.scales import PowerScale, highest_density
from wavepack.rendering.scene import (
    Curves,
    Frames,
    Scene,
    Spectrum,
)

if TYPE_CHECKING:
    from wavepack.archive.reader import Run


def draw_overview(run: "Run", path: Path, *, power: float = 0.5) -> Path:
    """Draw a run on one page, as PNG (or as the ending of ``path`` asks).

    One axis: the density by place and time, the structure above it and the
    probabilities in time beside it. Two axes: the density at start, middle and
    end, and the probabilities in time.

    Raises
    ------
    UsageError
        If the run has stored no frames.
    MachineError
        If the file cannot be written.
    """
    return write_overview(scene_of(run), frames_of(run), shown_curves_of(run), path, power=power)


def draw_spectrum(run: "Run", detector: str, path: Path) -> Path:
    """Draw transmission by energy at a detector over the packet's own energies.

    Raises
    ------
    UsageError
        If there is no such detector, or it records no energies.
    MachineError
        If the file cannot be written.
    """
    scene = scene_of(run)
    return write_spectrum(scene, spectrum_of(run, detector), path)


def write_overview(
    scene: Scene, frames: Frames, curves: Curves | None, path: Path, *, power: float = 0.5
) -> Path:
    """Draw the overview of a scene; see `draw_overview`, which reads it from a run."""
    scale = PowerScale(highest_density(frames), power)
    with style.applied():
        draw = line_overview if scene.ndim == 1 else plane_overview
        return _save(draw(scene, frames, curves, scale), path)


def write_spectrum(scene: Scene, spectrum: Spectrum, path: Path) -> Path:
    """Draw a spectrum; see `draw_spectrum`, which reads it from a run."""
    with style.applied():
        return _save(_spectrum(scene, spectrum), path)


def _save(figure: Figure, path: Path) -> Path:
    path = Path(path)
    FigureCanvasAgg(figure)
    try:
        figure.savefig(path, dpi=figure.dpi)
    except OSError as error:
        raise MachineError(
            f"{path}: the figure could not be written: {error.strerror or error}"
        ) from error
    return path


def _spectrum(scene: Scene, spectrum: Spectrum) -> Figure:
    figure = Figure(figsize=(7.6, 4.6), dpi=PAGE_DPI, layout=page_layout())
    axes = figure.add_subplot()
    weight = axes.twinx()
    weight.fill_between(
        spectrum.energies, spectrum.incident, color=style.PACKET_FILL, linewidth=0, alpha=0.6
    )
    weight.set_ylim(0, 1.12 * (float(np.nanmax(spectrum.incident, initial=0.0)) or 1.0))
    unit = f"{scene.units.energy}⁻¹" if scene.units.energy else ""
    weight.set_ylabel(
        scene.units.label("incident probability by energy", unit), color=style.PACKET, fontsize=10
    )
    weight.tick_params(labelsize=9)
    # The curve belongs in front of the packet's weight, whose axes came second.
    axes.set_zorder(weight.get_zorder() + 1)
    axes.plot(
        spectrum.energies,
        spectrum.transmission,
        color=style.role_colour("transmitted"),
        linewidth=1.8,
    )
    if not np.any(np.isfinite(spectrum.transmission)):
        axes.text(
            0.5,
            0.5,
            spectrum.reason or "no transmission by energy",
            ha="center",
            va="center",
            transform=axes.transAxes,
            fontsize=9,
            wrap=True,
            parse_math=False,
        )
    axes.set_xlim(float(spectrum.energies[0]), float(spectrum.energies[-1]))
    largest = float(np.nanmax(spectrum.transmission, initial=1.0))
    axes.set_ylim(0, 1.05 * largest)
    axes.tick_params(labelsize=9)
    axes.grid(visible=True, color=style.GRID, linewidth=0.6)
    axes.set_xlabel(scene.units.label("total energy", scene.units.energy), fontsize=10)
    axes.set_ylabel("transmission", color=style.role_colour("transmitted"), fontsize=10)
    title = f"{scene.title}: detector {spectrum.detector}" if scene.title else spectrum.detector
    axes.set_title(title, loc="left", fontsize=11, parse_math=False, wrap=True)
    return figure

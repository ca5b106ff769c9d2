"""A run's transmission by energy beside that of the stationary calculation."""

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from wavepack.errors import MachineError
from wavepack.rendering import style
from wavepack.rendering.overview import PAGE_DPI, page_layout


def draw_crosscheck(detector: str, seen: Mapping[str, Any], title: str, path: Path) -> Path:
    """Draw both curves of a detector and, below, their difference.

    Parameters
    ----------
    detector : str
        Its name.
    seen : mapping
        What `wavepack.analysis.crosscheck` found for it, with curves.
    title : str
        The run's title.
    path : Path
        The picture; its ending says of which kind.

    Raises
    ------
    MachineError
        If the file cannot be written.
    """
    with style.applied():
        figure = _figure(detector, seen, title)
        FigureCanvasAgg(figure)
        try:
            figure.savefig(path, dpi=figure.dpi)
        except OSError as error:
            raise MachineError(
                f"{path}: the figure could not be written: {error.strerror or error}"
            ) from error
    return path


def _figure(detector: str, seen: Mapping[str, Any], title: str) -> Figure:
    figure = Figure(figsize=(7.6, 5.6), dpi=PAGE_DPI, layout=page_layout())
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3, 1))
    energy, unit = np.asarray(seen["energy"]), seen["energy_unit"]
    shown, dashes = style.SERIES[1]
    upper.plot(
        energy, seen["run"], color=style.role_colour("transmitted"), linewidth=2.2, label="run"
    )
    upper.plot(
        energy,
        seen["stationary"],
        color=shown,
        linestyle=dashes,
        linewidth=1.4,
        label="stationary calculation",
    )
    upper.legend(fontsize=9, frameon=False)
    upper.set_ylabel(seen["kind"], fontsize=10)
    lower.axhline(0, color=style.FAINT_INK, linewidth=0.8)
    lower.plot(energy, seen["difference"], color=style.SERIES[0][0], linewidth=1.4)
    error = np.asarray(seen["run_error"], dtype=float)
    if np.isfinite(error).any():
        lower.fill_between(energy, -error, error, color=style.PACKET_FILL, alpha=0.6, linewidth=0)
    lower.set_ylabel("difference", fontsize=10)
    lower.set_xlabel(f"total energy ({unit})" if unit else "total energy", fontsize=10)
    lower.ticklabel_format(axis="y", style="sci", scilimits=(-2, 2))
    for axes in (upper, lower):
        axes.tick_params(labelsize=9)
        axes.grid(visible=True, color=style.GRID, linewidth=0.6)
    words = f"{title}: detector {detector}" if title else detector
    upper.set_title(words, loc="left", fontsize=11, parse_math=False, wrap=True)
    return figure

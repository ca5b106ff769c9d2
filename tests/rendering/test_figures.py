"""Still figures: drawn whole, with nothing cut."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from wavepack.errors import MachineError
from wavepack.rendering.figures import write_overview, write_spectrum
from wavepack.rendering.scene import Curves, Frames, Scene, Spectrum

MakeCase = Callable[..., tuple[Scene, Frames, Curves]]


def margins_are_empty(path: Path) -> bool:
    """Tell whether the outermost pixels are paper: nothing runs off the page."""
    with Image.open(path) as image:
        pixels = np.asarray(image.convert("RGB"))
    edges = (pixels[:2], pixels[-2:], pixels[:, :2], pixels[:, -2:])
    return all(np.all(edge == 255) for edge in edges) and bool(np.any(pixels < 100))


@pytest.mark.parametrize("count", [8, 1])
def test_overview_is_whole(line: MakeCase, plane: MakeCase, tmp_path: Path, count: int) -> None:
    """Both overviews are drawn, from one frame and without curves too, and nothing is cut."""
    for i, (scene, frames, curves) in enumerate((line(256, count), plane((48, 32), count))):
        shown = curves if count > 1 else None
        path = write_overview(scene, frames, shown, tmp_path / f"{i}.png")
        assert margins_are_empty(path)


def test_spectrum_is_whole(line: MakeCase, tmp_path: Path) -> None:
    """A spectrum with gaps is drawn, and one without any value gives its reason."""
    scene, _, _ = line(64, 1)
    energies = np.linspace(0.05, 0.3, 51)
    weight = np.exp(-((energies - 0.15) ** 2) / 0.002)
    transmission = np.where(weight > 1e-4, energies, np.nan)
    for i, values in enumerate((transmission, np.full(51, np.nan))):
        spectrum = Spectrum("exit", energies, values, weight, reason="the potential is driven")
        assert margins_are_empty(write_spectrum(scene, spectrum, tmp_path / f"{i}.png"))


def test_a_figure_that_cannot_be_written_is_the_machines_fault(
    line: MakeCase, tmp_path: Path
) -> None:
    """The error names the file."""
    scene, frames, curves = line(64, 2)
    with pytest.raises(MachineError, match=r"over\.png"):
        write_overview(scene, frames, curves, tmp_path / "missing" / "over.png")

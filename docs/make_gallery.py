"""Run every shipped scenario and write docs/gallery.md with its figures.

python docs/make_gallery.py [NAME ...]

With names, only those scenarios are run anew; the others are taken from the
last call. Runs go to ``runs/gallery/<name>``.
"""

import os
import sys
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

# Before NumPy is imported: the matrix products of a run are too small to share.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np
from PIL import Image

from wavepack import workflow
from wavepack.archive.reader import Run, open_run
from wavepack.rendering.figures import draw_spectrum, write_overview
from wavepack.rendering.from_run import frames_of, scene_of, shown_curves_of
from wavepack.rendering.palette import Palette
from wavepack.rendering.scene import Frames
from wavepack.scenario.load import load_scenario

ROOT = Path(__file__).resolve().parent.parent
PAGE = ROOT / "docs" / "gallery.md"
PICTURES = ROOT / "docs" / "gallery"
RUNS = ROOT / "runs" / "gallery"
#: Every scenario, in the order of the page, and the detector whose spectrum is shown.
SHOWN = {
    "barrier": "exit",
    "resonant_pair": "collector-contact",
    "field_emission": "anode",
    "driven_barrier": None,
    "quasi_bound_decay": None,
    "constriction": "exit",
    "two_apertures": None,
    "bowl": None,
    "cut_in_half": None,
    "box": None,
}
#: How much of a run its figure shows, where that is not all of it.
UNTIL = {"resonant_pair": 1400.0, "two_apertures": 520.0, "constriction": 1250.0, "box": 930.0}
#: Energies at which the scenario's file promises a T(E) [its unit].
PROMISED = {"constriction": (0.020, 0.025, 0.030)}
WIDTH = 960
#: Bytes that a picture of the gallery may have.
LARGEST = 150_000

HEAD = """\
# Gallery

Every scenario that comes with the program: its question, what to expect, and what one run of the
file as it is gives. Written by `python docs/make_gallery.py`, which runs them all; no number here
carries a numerical error, because a single run does not establish one. On one core each takes
between a second and half a minute.

V is drawn as it is on the grid. A sharp edge is smoothed over a spacing by a kernel without a
second moment, so that the result does not depend on where the edge falls between points; the
price is the small horn on either side of each edge
([design/edges.md](design/edges.md)). They are no part of the structure.
"""


def main(names: Sequence[str]) -> None:
    """Run the scenarios of these names, or all, and write the page."""
    PICTURES.mkdir(exist_ok=True)
    for name in names or SHOWN:
        print(name, flush=True)
        scenario = load_scenario(ROOT / "scenarios" / f"{name}.toml")
        workflow.run(scenario, RUNS / name, fresh=True)
        draw(name)
    PAGE.write_text("\n".join([HEAD, *map(chapter, SHOWN)]), encoding="utf-8")


def draw(name: str) -> None:
    """Draw the figures of a run, small enough to travel with the source."""
    run = open_run(RUNS / name)
    frames = frames_of(run)
    times = frames.times[frames.times <= UNTIL.get(name, np.inf)]
    curves = shown_curves_of(run)
    target = PICTURES / f"{name}.png"
    shrink(write_overview(scene_of(run), Frames(times, frames.read), curves, target))
    if (detector := SHOWN[name]) is not None:
        shrink(draw_spectrum(run, detector, PICTURES / f"{name}-spectrum.png"))


def shrink(path: Path) -> None:
    """Bring a picture to the page's width, and to 256 colours if it is large even then."""
    with Image.open(path) as whole:
        size = (WIDTH, round(whole.height * WIDTH / whole.width))
        small = whole.convert("RGB").resize(size, Image.Resampling.LANCZOS)
    small.save(path, optimize=True)
    if path.stat().st_size <= LARGEST:
        return
    pixels = np.asarray(small.convert("RGBA"))
    palette = Palette.of([pixels])
    few = Image.fromarray(palette.places(pixels)).convert("P")
    few.putpalette(palette.colours.reshape(-1).tolist())
    few.save(path, optimize=True)


def chapter(name: str) -> str:
    """Return the part of the page about one scenario."""
    run = open_run(RUNS / name)
    question, expected = heading(ROOT / "scenarios" / f"{name}.toml")
    pictures = [f"![{run.title}](gallery/{name}.png)"]
    if SHOWN[name] is not None:
        pictures.append(f"![Spectrum: {run.title}](gallery/{name}-spectrum.png)")
    rows = [f"| {what} | {value} |" for what, value in numbers(run)]
    parts = [
        f"## {run.title}",
        f"*{question}*",
        expected,
        *pictures,
        "\n".join(["| found | |", "|---|---|", *rows]),
        f"The file: [scenarios/{name}.toml](../scenarios/{name}.toml)",
        "",
    ]
    return "\n\n".join(parts)


def heading(path: Path) -> tuple[str, str]:
    """Return the question and the expectation that open a scenario's file."""
    lines = []
    for line in path.read_text(encoding="utf-8").splitlines():
        if not line.startswith("#"):
            break
        lines.append(line.removeprefix("#").strip())
    question, _, expected = "\n".join(lines).partition("\n\n")
    return question.replace("\n", " "), expected


def numbers(run: Run) -> Iterator[tuple[str, str]]:
    """Yield the key numbers of a run, each with what it is."""
    found = run.results
    for name, quantity in found["quantities"].items():
        if name in {"transmission", "reflection", "unfinished"} and leaves(run):
            yield name, shown(quantity)
    for name, seen in found["detectors"].items():
        yield f"crossed at {name}", shown(seen["crossed"])
        if seen["mean_crossing_time"]["value"] is not None:
            yield f"mean crossing time at {name}", shown(seen["mean_crossing_time"])
        yield from spectral(name, seen, line=name == SHOWN[run.folder.name])
        for energy in PROMISED.get(run.folder.name, ()):
            yield at_energy(name, seen, energy)
    if not leaves(run):
        if "found" in found:
            yield "found there at the start", shown(found["found"])
        yield "mean energy at the end", shown(found["expectations"]["energy"])
        overlap = abs(complex(run.series.autocorrelation.values[-1])) ** 2
        yield "overlap with the start, at the end", f"{overlap:.6f}"
    if leaves(run):
        yield from decays(run)
    yield "time steps", f"{found['numerics']['steps']:,}"


def decays(run: Run) -> Iterator[tuple[str, str]]:
    """Yield the decay time of each region that has no role, from 30 % to 1 % of its peak."""
    for region in load_scenario(run.folder / "scenario.toml").region:
        if region.role != "none":
            continue
        time = run.regions[region.name].time.values
        held = run.regions[region.name].probability.values
        falling = (time > time[np.argmax(held)]) & (held < 0.3 * held.max())
        falling &= held > 0.01 * held.max()
        if falling.sum() > 10:
            rate = -np.polyfit(time[falling], np.log(held[falling]), 1)[0]
            yield f"decay time of the probability in {region.name}", f"{1 / rate:.1f} fs"


def leaves(run: Run) -> bool:
    """Tell whether the scenario asks what leaves."""
    return any(run.results["quantities"][x]["value"] for x in ("transmission", "reflection"))


def spectral(name: str, seen: dict[str, Any], *, line: bool) -> Iterator[tuple[str, str]]:
    """Yield what a detector's spectrum says: a line's place and width, or the sidebands."""
    unit = seen["energy_unit"]
    for band in seen["sidebands"] or ():
        if band["flux"]["value"] > 1e-4:
            yield f"sideband {band['n']:+d} at {band['energy']:g} {unit}", shown(band["flux"])
    if seen["transmission"] is None or not line:
        return
    energies = np.array(seen["energy"])
    curve = np.array(seen["transmission"], dtype=float)
    top = int(np.nanargmax(curve))
    above = energies[np.nan_to_num(curve) >= curve[top] / 2]
    if above[0] > energies[0] and above[-1] < energies[-1] - 0.1 * np.ptp(energies):
        width = 1e3 * (half(energies, curve, top, -1) + half(energies, curve, top, 1))
        yield f"peak of T(E) at {name}", f"{curve[top]:.4f} at {1e3 * energies[top]:.2f} m{unit}"
        yield "its full width at half maximum", f"{width:.2f} m{unit}"


def at_energy(name: str, seen: dict[str, Any], energy: float) -> tuple[str, str]:
    """Return T(E) at one energy, and what it is."""
    known = np.array(seen["transmission"], dtype=float)
    value = np.interp(energy, np.array(seen["energy"]), known)
    return f"T(E) at {name}, {1e3 * energy:g} m{seen['energy_unit']}", f"{value:.4f}"


def half(energies: np.ndarray, curve: np.ndarray, top: int, way: int) -> float:
    """Return how far from its top a line has fallen to one half."""
    i = top
    while curve[i] > curve[top] / 2:
        i += way
    share = (curve[i - way] - curve[top] / 2) / (curve[i - way] - curve[i])
    return float(abs(energies[i - way] + share * (energies[i] - energies[i - way]) - energies[top]))


def shown(quantity: dict[str, Any]) -> str:
    """Return a value of the results as text."""
    return f"{quantity['value']:.5g} {quantity['unit']}".strip()


if __name__ == "__main__":
    main(sys.argv[1:])

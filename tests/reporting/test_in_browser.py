"""What a browser makes of a report and a movie."""

import re
import subprocess
from pathlib import Path

import pytest

import wavepack
from wavepack import workflow
from wavepack.scenario.load import parse_scenario

pytestmark = pytest.mark.browser

SCENARIO = """
title = "A packet on its way"
[particle]
mass = 0.067
[grid]
x = { from = -60.0, to = 60.0, points = 128 }
[[packet]]
shape = "gaussian"
center = -20.0
sigma = 6.0
energy = 0.1
direction = "+x"
[absorber]
width = 15.0
[propagator]
step = 0.5
[time]
end = 50.0
[output]
frames = 5
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the folder of a small run with its report and its movies."""
    folder = tmp_path_factory.mktemp("browser") / "run"
    wavepack.run(parse_scenario(SCENARIO), out=folder)
    workflow.report(folder)
    workflow.movie(folder, folder / "movie.mp4", size=(320, 180))
    workflow.movie(folder, folder / "movie.webm", size=(320, 180))
    return folder


def opened(page: Path) -> str:
    """Return a page as a browser without network shows it, scripts run."""
    command = [
        "/usr/bin/chromium",
        "--headless",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-dev-shm-usage",
        "--host-resolver-rules=MAP * ~NOTFOUND",
        f"--user-data-dir={page.parent / 'profile'}",
        "--virtual-time-budget=5000",
        "--dump-dom",
        page.as_uri(),
    ]
    done = subprocess.run(command, capture_output=True, text=True, check=True, timeout=60)
    return done.stdout


def test_a_report_shows_all_its_pictures(folder: Path, tmp_path: Path) -> None:
    """Every picture decodes, and nothing is fetched from outside of the file."""
    script = """<script>
      const pictures = [...document.images];
      const seen = pictures.filter(p => p.complete && p.naturalWidth > 0).length;
      const fetched = performance.getEntriesByType("resource")
        .filter(entry => !entry.name.startsWith("data:")).length;
      document.title = `${pictures.length} pictures, ${seen} seen, ${fetched} fetched`;
    </script>"""
    page = tmp_path / "report.html"
    report = (folder / "report.html").read_text("utf-8")
    # The report's own policy forbids scripts; ours takes a look at it without.
    bare, policies = re.subn(r'<meta http-equiv="Content-Security-Policy"[^>]*>', "", report)
    assert policies == 1
    page.write_text(bare + script, "utf-8")
    assert "<title>1 pictures, 1 seen, 0 fetched</title>" in opened(page)


@pytest.mark.parametrize("name", ["movie.mp4", "movie.webm"])
def test_a_movie_plays(folder: Path, tmp_path: Path, name: str) -> None:
    """A browser finds size and duration of a movie."""
    page = tmp_path / "movie.html"
    page.write_text(
        f"""<video src="{(folder / name).as_uri()}" onloadeddata="document.title =
        `${{this.videoWidth}}x${{this.videoHeight}} ${{this.duration.toFixed(1)}} s`"></video>""",
        "utf-8",
    )
    assert "<title>320x180 0.2 s</title>" in opened(page)

"""What a browser makes of a report and a movie."""

import re
import subprocess
import threading
from collections.abc import Iterator
from functools import partial
from http.server import SimpleHTTPRequestHandler, ThreadingHTTPServer
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
    workflow.movie(folder, folder / "movie.mp4", size=(320, 180), fps=5)
    workflow.movie(folder, folder / "movie.webm", size=(320, 180), fps=5)
    return folder


def opened(address: str, profile: Path, *options: str) -> str:
    """Return a page as a browser without network shows it once loaded, scripts run."""
    command = [
        "/usr/bin/chromium",
        "--headless",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-dev-shm-usage",
        "--host-resolver-rules=MAP * ~NOTFOUND, EXCLUDE 127.0.0.1",
        f"--user-data-dir={profile}",
        *options,
        "--dump-dom",
        address,
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
    assert "<title>1 pictures, 1 seen, 0 fetched</title>" in opened(
        page.as_uri(), tmp_path / "profile", "--virtual-time-budget=5000"
    )


class Cinema(SimpleHTTPRequestHandler):
    """Serves a page and its movie; the page is loaded once the movie has ended."""

    ended = threading.Event()

    def do_GET(self) -> None:
        """Answer one request; that for `end.gif` waits for that for `ended`."""
        if self.path == "/ended":
            self.ended.set()
        elif self.path == "/end.gif":
            self.ended.wait(30)
        else:
            super().do_GET()
            return
        self.send_response(204)
        self.end_headers()

    def log_message(self, format: str, *args: object) -> None:  # noqa: A002 - the parent's name
        """Say nothing."""


@pytest.fixture
def address(folder: Path) -> Iterator[str]:
    """Return the address under which the folder is served."""
    Cinema.ended.clear()
    with ThreadingHTTPServer(("127.0.0.1", 0), partial(Cinema, directory=str(folder))) as server:
        thread = threading.Thread(target=server.serve_forever)
        thread.start()
        yield f"http://127.0.0.1:{server.server_port}"
        server.shutdown()
        thread.join()


@pytest.mark.parametrize("name", ["movie.mp4", "movie.webm"])
def test_a_movie_plays(folder: Path, tmp_path: Path, address: str, name: str) -> None:
    """A browser finds size and duration of a movie, and plays it from start to end."""
    (folder / "movie.html").write_text(
        f"""<title>nothing was played</title>
        <video muted autoplay src="{name}"></video><img src="end.gif">
        <script>
          const video = document.querySelector("video");
          const times = new Set();
          function finish(text) {{ document.title = text; fetch("ended"); }}
          video.onerror = () => finish(video.error.message);
          video.ontimeupdate = () => times.add(video.currentTime);
          video.onended = () => finish(
            `${{video.videoWidth}}x${{video.videoHeight}}, ${{video.duration.toFixed(1)}} s, ` +
            `played to ${{video.currentTime.toFixed(1)}} s, on the way: ${{times.size > 2}}`);
        </script>""",
        "utf-8",
    )
    shown = opened(f"{address}/movie.html", tmp_path / "profile")
    assert "<title>320x180, 1.0 s, played to 1.0 s, on the way: true</title>" in shown

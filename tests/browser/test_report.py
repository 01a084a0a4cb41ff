"""The report in a browser: it shows at every width, in both colour schemes, and prints on A4."""

from __future__ import annotations

import io
import json
import re
import shutil
import subprocess

import pytest
from PIL import Image

from spheru.config.read import settings_from_mapping
from spheru.output.folder import save_run
from spheru.run.grow import grow

CHROMIUM = next(filter(None, map(shutil.which, ("chromium", "chromium-browser"))), None)
FLAGS = [
    "--headless=new",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-dev-shm-usage",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--hide-scrollbars",
    "--host-resolver-rules=MAP * ~NOTFOUND",  # what the browser asks for itself gets no answer
]
DOCUMENT = {
    "title": "Polypropylene at 10 K/min",
    "material": {"name": "isotactic-polypropylene-alpha"},
    "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "60 degC"}]},
    "sample": {"view": "section", "size": ["400 um", "400 um"], "pixel": "2 um"},
}

pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no Chromium is installed")


@pytest.fixture(scope="module")
def report(tmp_path_factory):
    folder = tmp_path_factory.mktemp("browser") / "run"
    return save_run(grow(settings_from_mapping(DOCUMENT)), folder) / "report.html"


@pytest.fixture
def browse(tmp_path):
    """Open a page with flags; return the standard output and what stands in the log."""

    def call(page, *flags):
        profile = f"--user-data-dir={tmp_path / 'profile'}"
        log = ["--enable-logging=stderr", "--log-level=0"]
        words = [CHROMIUM, *FLAGS, profile, *log, *flags, page.as_uri()]
        done = subprocess.run(words, capture_output=True, text=True, timeout=90, check=True)
        return done.stdout, done.stderr

    return call


def shot(browse, tmp_path, page, width, *flags):
    path = tmp_path / "shot.png"
    browse(page, f"--window-size={width},1600", f"--screenshot={path}", *flags)
    with Image.open(path) as picture:
        return picture.convert("RGB")


@pytest.mark.parametrize("width", [500, 1200])
def test_it_shows_in_light_and_dark(browse, tmp_path, report, width):
    light = shot(browse, tmp_path, report, width)
    dark = shot(browse, tmp_path, report, width, "--blink-settings=preferredColorScheme=0")
    for picture, ground in ((light, "light"), (dark, "dark")):
        assert picture.size == (width, 1600)
        assert len(picture.getcolors(picture.width * picture.height)) > 100  # text, map, charts
        assert (min(picture.getpixel((5, 5))) > 200) == (ground == "light")


def test_it_fits_a_width_of_400_pixels(browse, tmp_path, report):
    # a window of Chromium is at least 500 wide, so a frame of 400 stands in it
    page = json.dumps(report.read_text(encoding="utf-8")).replace("</", r"<\/")
    frame = tmp_path / "frame.html"
    frame.write_text(
        "<!DOCTYPE html><iframe width=400 height=1500 style='border:0'></iframe><p id=found></p>"
        "<script>const frame = document.querySelector('iframe'); frame.onload = () => {"
        "const root = frame.contentDocument.documentElement;"
        "found.textContent = `${root.clientWidth} ${root.scrollWidth}`; };"
        f"frame.srcdoc = {page};</script>",
        encoding="utf-8",
    )
    out, _ = browse(frame, "--dump-dom", "--virtual-time-budget=2000")
    found = re.search(r'<p id="found">(\d+) (\d+)</p>', out)
    assert found
    assert found.groups() == ("400", "400")


def test_it_asks_nothing_of_anybody_and_says_nothing_on_the_console(browse, tmp_path, report):
    def seen(page):
        """Return the DOM, the log, and what the page (not the browser itself) asked for."""
        record = tmp_path / "net.json"
        out, log = browse(page, "--dump-dom", f"--log-net-log={record}")
        asked = r'"initiator":"(?!not an origin")[^"]*".*"url":"((?:http|ws)[^"]*)"'
        return out, log, set(re.findall(asked, record.read_text(encoding="utf-8")))

    leaky = tmp_path / "leaky.html"
    leaky.write_text("<img src='http://asked.invalid/x.png'><script>console.log('said')</script>")
    _, log, asked = seen(leaky)
    assert asked == {"http://asked.invalid/x.png"}
    assert "CONSOLE" in log
    out, log, asked = seen(report)
    assert "How sure is that?" in out
    assert "CONSOLE" not in log
    assert asked == set()


def test_it_prints_on_a_few_pages_of_a4(browse, tmp_path, report):
    path = tmp_path / "report.pdf"
    browse(report, "--no-pdf-header-footer", f"--print-to-pdf={path}")
    content = path.read_bytes()
    pages = re.findall(rb"/Type\s*/Page\b", content)
    assert 2 <= len(pages) <= 7
    boxes = {
        tuple(map(float, box.split())) for box in re.findall(rb"/MediaBox\s*\[([^]]*)\]", content)
    }
    for _, _, width, height in boxes:  # points of 1/72 inch
        assert (width, height) == pytest.approx((210 / 25.4 * 72, 297 / 25.4 * 72), abs=1.5)
    assert io.BytesIO(content).read(4) == b"%PDF"

"""The page that is read first, opened in a browser where there is one."""

import base64
import html
import json
import re
import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from matplotlib.image import imread

from fogline.summary import read_summary
from fogline.summary_page import html_page
from small_results import SmallResults

BROWSER = shutil.which("chromium") or shutil.which("chromium-browser")
pytestmark = pytest.mark.skipif(BROWSER is None, reason="no chromium on PATH to open the page with")

# Only in the copy that is measured: the page itself has no script.
MEASURE = """<script>addEventListener("load", () => {
  document.title = JSON.stringify({
    natural: [...document.images].map((image) => image.naturalWidth),
    shown: [...document.images].map((image) => image.getBoundingClientRect().width),
    overflow: document.documentElement.scrollWidth - document.documentElement.clientWidth,
  });
});</script></body>"""


def browse(page: Path, *arguments: str, width: int = 500, height: int = 800) -> str:
    """Open a page without a window; return what the browser prints."""
    fixed = ("--headless", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage")
    profile = f"--user-data-dir={page.parent / 'profile'}"
    size = f"--window-size={width},{height}"
    done = subprocess.run(
        [str(BROWSER), *fixed, profile, size, "--hide-scrollbars", *arguments, page.as_uri()],
        capture_output=True,
        text=True,
        timeout=120,
        check=True,
    )
    return done.stdout


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The page alone in a folder: what it does not hold it can't show."""
    results = SmallResults(row_flags=("", "outside", "")).write(
        tmp_path_factory.mktemp("r") / "toy"
    )
    path = tmp_path_factory.mktemp("page") / "summary.html"
    path.write_text(html_page(read_summary(results), results), encoding="utf-8")
    return path


def test_verdict_and_figures_are_rendered(page: Path) -> None:
    copy = page.with_name("measured.html")
    copy.write_text(page.read_text(encoding="utf-8").replace("</body>", MEASURE), encoding="utf-8")
    dom = browse(copy, "--dump-dom")
    assert "<strong>Converged? Yes.</strong>" in dom
    assert "<strong>Consistent? No.</strong>" in dom
    found = json.loads(html.unescape(re.search("<title>(.*?)</title>", dom).group(1)))
    assert found["natural"] == [300] * 10
    assert found["shown"] == [300] * 10
    # At a phone's width tables scroll by themselves: the page as a whole does not.
    assert found["overflow"] == 0


def figure_pixels(page: Path) -> int:
    """Return how many pixels of a tall screenshot have the figures' colour."""
    shot = page.with_suffix(".png")
    browse(page, f"--screenshot={shot}", height=6000)
    image = imread(shot)[..., :3]
    assert np.ptp(image) == 1.0, "the screenshot is blank"
    return int(np.count_nonzero((image == [1.0, 0.0, 1.0]).all(axis=-1)))


def test_screenshot_shows_every_figure_and_none_of_broken_ones(page: Path) -> None:
    assert figure_pixels(page) == 10 * 300 * 200
    broken = page.with_name("broken.html")
    nothing = base64.b64encode(b"no picture").decode()
    text = re.sub(r"base64,[^\"]+", f"base64,{nothing}", page.read_text(encoding="utf-8"))
    broken.write_text(text, encoding="utf-8")
    assert figure_pixels(broken) == 0

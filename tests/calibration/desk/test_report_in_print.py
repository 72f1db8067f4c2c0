"""The report in a browser and on paper: whole, on pages of the right size, nothing from outside."""

import json
import re
import shutil
import subprocess
from base64 import b64decode
from urllib.parse import urlsplit

import pytest
from live_page import open_browser

from metro.commandline import run

pytestmark = pytest.mark.slow
pytest.importorskip("matplotlib")

# ISO 216:2007: A4 is 210 mm x 297 mm; ANSI/ASME Y14.1: A is 8.5 in x 11 in, here "letter".
PAPERS = {"A4": (210 / 25.4, 297 / 25.4), "letter": (8.5, 11.0)}
POINTS = 72  # per inch, ISO 32000-1:2008, 8.3.2.3
MARGIN_IN = 10 / 25.4  # the page asks for 13 mm at the sides


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    """A report of a rehearsal, moved away from all it was made from."""
    folder = tmp_path_factory.mktemp("report")
    assert run(["rehearse", "--seed", "1", "--out", str(folder / "r"), "--quiet"]) in (0, 1)
    sources = [str(folder / "r" / name) for name in ("calibration.json", "bench.toml")]
    out = tmp_path_factory.mktemp("alone") / "report.html"
    assert run(["report", sources[0], "--bench", sources[1], "--out", str(out)]) == 0
    shutil.rmtree(folder)
    return out


@pytest.fixture(scope="module")
def browser(page, tmp_path_factory):
    """The report opened; what it asked for is in the log."""
    browser = open_browser(tmp_path_factory.mktemp("browser"))
    browser.get("about:blank")
    for kind in ("browser", "performance"):
        browser.get_log(kind)  # of the page that a browser opens with
    browser.get(page.as_uri())
    yield browser
    browser.quit()


def test_the_report_asks_for_nothing_but_itself(browser, page):
    asked = [json.loads(entry["message"])["message"] for entry in browser.get_log("performance")]
    addresses = {
        event["params"]["request"]["url"]
        for event in asked
        if event["method"] == "Network.requestWillBeSent"
    }
    assert {url for url in addresses if urlsplit(url).scheme != "data"} == {page.as_uri()}
    assert not any(event["method"] == "Network.webSocketCreated" for event in asked)
    assert [entry["message"] for entry in browser.get_log("browser")] == []
    widths = browser.execute_script("return [...document.images].map(i => i.naturalWidth)")
    assert len(widths) == 5
    assert all(widths)


@pytest.mark.parametrize("paper", PAPERS)
def test_the_report_prints_whole_on_pages_of_the_right_size(browser, tmp_path, paper):
    if shutil.which("pdftotext") is None:
        pytest.skip("pdftotext (Debian: poppler-utils) is not installed")
    width_in, height_in = PAPERS[paper]
    size = {"paperWidth": width_in, "paperHeight": height_in}
    path = tmp_path / f"{paper}.pdf"
    printed = browser.execute_cdp_cmd("Page.printToPDF", size)
    path.write_bytes(b64decode(printed["data"]))

    boxes = subprocess.run(
        ["pdftotext", "-bbox", path, "-"], capture_output=True, text=True, check=True
    ).stdout
    pages = re.findall(r'<page width="(.+?)" height="(.+?)">', boxes)
    assert 4 <= len(pages) <= 10
    for width, height in pages:  # whole pixels of 1/96 inch
        assert float(width) == pytest.approx(POINTS * width_in, abs=0.75)
        assert float(height) == pytest.approx(POINTS * height_in, abs=0.75)
    words = re.findall(r'<word xMin="(.+?)" yMin=".+?" xMax="(.+?)" yMax=".+?">', boxes)
    assert min(float(left) for left, _ in words) >= POINTS * MARGIN_IN
    assert max(float(right) for _, right in words) <= POINTS * (width_in - MARGIN_IN)

    text = subprocess.run(
        ["pdftotext", "-raw", path, "-"], capture_output=True, text=True, check=True
    ).stdout
    whole = "".join(text.split())
    shown = browser.execute_script("return document.body.innerText").split()
    assert len(shown) > 500
    assert [word for word in shown if word not in whole] == []

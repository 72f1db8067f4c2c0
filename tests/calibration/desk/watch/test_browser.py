"""The live page in headless Chromium, on the simulated board behind a pseudo-terminal."""

import time
from urllib.parse import urlsplit

import numpy as np
import pytest
from live_page import Board, Page, Program, open_browser, until
from scipy.special import j1
from selenium.webdriver.common.keys import Keys
from sessions import BENCH_FILE

from firmware_bridge.opening import open_recording

pytestmark = pytest.mark.slow

SIZES = [(1280, 800), (1024, 768), (768, 1024)]


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    browser = open_browser(tmp_path_factory.mktemp("browser"))
    yield browser
    browser.quit()


@pytest.fixture
def board(tmp_path):
    board = Board(tmp_path / "board")
    yield board
    board.unplug()


@pytest.fixture
def folder(tmp_path):
    folder = tmp_path / "recordings"
    folder.mkdir()
    return folder


@pytest.fixture
def program(board, folder):
    program = Program(board.port, "--bench", BENCH_FILE, "--folder", folder, "--block", "2s")
    yield program
    code, said = program.end()
    assert code == 0, said


@pytest.fixture
def page(browser, program):
    return Page(browser, program.url)


def drive_rms(path, from_s):
    """Return the rms of the drive channel [V] from some time on."""
    return float(np.std(open_recording(path).trace("drive", from_s).values))


def test_the_page_moves_and_asks_nobody_else(page, program):
    assert page.text("simulated") == "simulated"
    first = page.data("trace_data")
    before = page.element("trace").screenshot_as_png
    until(lambda: page.data("trace_data")["high"] != first["high"], 2.0, "trace")
    time.sleep(0.5)
    assert page.element("trace").screenshot_as_png != before
    until(lambda: page.data("spectrum_data")["x"], 10.0, "spectrum")
    until(lambda: page.text("rest") != "–", 5.0, "working point")
    until(lambda: page.data("phase_data")["x"] or page.data("amplitude_data")["x"], 20.0, "lines")
    for address in page.requested():
        parts = urlsplit(address)
        if parts.scheme in ("http", "https", "ws", "wss", "ftp"):
            assert f"http://{parts.netloc}/" == program.url
    assert page.complaints() == []


def test_a_line_set_in_the_page_appears_in_spectrum_and_amplitude(page, board):
    until(lambda: page.data("spectrum_data")["x"], 10.0, "spectrum")
    page.set_line(233.9, 0.5)
    page.has("drive-answer", "233.9 Hz, 0.5 V")
    page.has("drive", "0.5 V")
    # 0.5 V through the drawn actuator into metres, radians and, by J1, into volts.
    truth = board.bench.truth
    depth_rad = truth.phase_per_metre * abs(truth.actuator(233.9)) * 0.5
    expected_v = 2 * truth.swing_v * j1(depth_rad)

    def fitted():
        table = page.data("amplitude_data")
        last = [(x, y) for x, y, c in zip(table["x"], table["y"], table["colour"], strict=True)
                if c == "#f0e442"]  # fmt: skip  # the fourth line by frequency
        return last and last[-1][1] > 0.9 * expected_v and last[-1][1]

    # The readout's poles take 1.5 % at 234 Hz, the way off mid-fringe up to some percent.
    assert until(fitted, 15.0, "fitted amplitude") == pytest.approx(expected_v, rel=0.08)
    time.sleep(3.0)
    spectrum = page.data("spectrum_data")
    x, highest = np.array(spectrum["x"]), np.array(spectrum["highest"])
    near = np.abs(x / 233.9 - 1) < 0.02
    beside = (np.abs(x / 233.9 - 1) > 0.05) & (np.abs(x / 233.9 - 1) < 0.15)
    assert highest[near].max() > 20 * np.median(highest[beside])
    assert "233.9 Hz" in page.text("lines")
    assert "233.9 Hz" in page.data("spectrum_lines")["label"]


def test_more_than_the_drive_limit_is_refused_with_the_reason(page):
    page.set_line(87.1, 39)
    page.has("drive", "39 V")
    page.set_line(141.3, 1.5)
    assert "beyond the drive limit of 40 V" in page.has("drive-answer", "limit")
    assert page.text("drive") == "39 V"


@pytest.mark.parametrize("how", ["button", "escape", "escape in a field"])
def test_stop_zeroes_the_drive(page, folder, how):
    page.set_line(87.1, 0.4)
    page.has("drive", "0.4 V")
    page.type("name", "stop")
    page.element("record").click()
    page.has("recording-more", "stop.mfr")
    time.sleep(1.5)
    if how == "button":
        page.element("stop").click()
    elif how == "escape":
        page.press(Keys.ESCAPE)
    else:
        page.element("frequency").send_keys("12" + Keys.ESCAPE)
    page.has("drive-answer", "drive stopped", 2.0)
    page.has("drive", "at rest", 2.0)
    time.sleep(1.5)
    page.press("r")
    page.has("recording", "off")
    path = folder / "stop.mfr"
    # behind a 10:1 divider: 0.4 V are 28 mV rms as read; the converter's noise is 0.2 mV
    assert float(np.std(open_recording(path).trace("drive", 0.1, 1.0).values)) > 0.02
    end_s = open_recording(path).duration_s
    assert drive_rms(path, end_s - 0.8) < 4e-4


def test_recording_starts_and_stops_by_key_and_by_button(page, folder):
    page.type("name", "first")
    page.element("name").send_keys(Keys.ENTER)
    page.has("recording-more", "first.mfr")
    assert page.text("record") == "■ end"
    until(lambda: page.text("recording") >= "00:02", 10.0, "two seconds")
    page.press("r")
    page.has("recording", "off")
    recording = open_recording(folder / "first.mfr")
    assert recording.duration_s > 1.5
    assert recording.gaps == []
    page.type("name", "first")
    page.element("record").click()
    page.has("answer", "exists already")
    page.type("name", "../outside")
    page.element("record").click()
    page.has("answer", "must be a plain file name")
    assert [path.name for path in folder.iterdir()] == ["first.mfr"]


def test_unplugging_shows_within_a_second_and_recovers(page, board):
    page.set_line(87.1, 0.2)
    page.has("drive", "0.2 V")
    board.unplug()
    begun_s = time.monotonic()
    until(lambda: "PORT GONE" in page.text("alarm"), 5.0, "alarm")
    assert time.monotonic() - begun_s < 1.0
    assert page.text("port") == "✕ PORT GONE"
    assert page.text("drive") == "unknown"  # whether it rests cannot be known
    board.plug_in()
    page.has("port", "connected", 10.0)
    until(lambda: not page.element("alarm").is_displayed(), 2.0, "no alarm")
    assert page.has("drive", "at rest") == "at rest"  # and it stays so
    first = page.data("trace_data")["high"]
    until(lambda: page.data("trace_data")["high"] != first, 2.0, "trace")


def test_a_wrong_token_is_refused_and_the_right_one_leaves_the_address(browser, board, folder):
    program = Program(board.port, "--bench", BENCH_FILE, "--folder", folder, "--host", "0.0.0.0")  # noqa: S104
    try:
        parts = urlsplit(program.url)
        local = f"http://127.0.0.1:{parts.port}"
        assert len(parts.query) > len("token=") + 24
        for wrong in ("/", "/?token=wrong", f"/?{parts.query[:-1]}"):
            browser.get(local + wrong)
            assert browser.find_element("tag name", "body").text.startswith("403")
        page = Page(browser, f"{local}/?{parts.query}")
        assert browser.current_url == f"{local}/"
        first = page.data("trace_data")["high"]
        until(lambda: page.data("trace_data")["high"] != first, 2.0, "trace")
    finally:
        assert program.end()[0] == 0


def test_the_end_of_the_program_shows_and_leaves_a_closed_recording(page, program, board, folder):
    page.set_line(87.1, 0.2)
    page.type("name", "last")
    page.element("record").click()
    page.has("recording-more", "last.mfr")
    time.sleep(1.0)
    assert board.drive_v() == pytest.approx(0.2, rel=0.01)
    code, said = program.end()
    assert code == 0
    assert board.drive_v() == 0.0
    assert "drive at rest, recording closed" in said
    until(lambda: "NO CONNECTION" in page.text("alarm"), 2.0, "alarm")
    recording = open_recording(folder / "last.mfr")
    assert recording.duration_s > 0.5
    assert not any("cut" in remark for remark in recording.remarks)
    page.element("stop").click()
    assert "no connection" in page.text("drive-answer")


def test_everything_can_be_reached_by_keyboard(page):
    reached = []
    for _ in range(24):
        page.browser.switch_to.active_element.send_keys(Keys.TAB)
        reached.append(page.script("return document.activeElement.id"))
    for name in ("zoom", "freeze", "average", "change", "name", "record", "frequency", "amplitude-v",
                 "phase-deg", "set", "stop"):  # fmt: skip
        assert name in reached
    page.press(" ")
    assert page.element("freeze").get_attribute("aria-pressed") == "true"
    first = page.data("trace_data")["high"]
    time.sleep(0.5)
    assert page.data("trace_data")["high"] == first
    page.press(" ")
    until(lambda: page.data("trace_data")["high"] != first, 2.0, "trace")
    page.press("w")
    until(lambda: min(page.data("trace_data")["x"]) < -10.5, 15.0, "the longer stretch")
    page.press("c")
    assert page.element("relative").is_displayed()
    page.press("d")
    assert page.script("return document.body.className") == "dim"
    page.press("d")
    page.type("name", "wrzcd")  # typed into a field letters are letters
    assert page.text("recording") == "off"


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_everything_fits_and_the_stop_is_in_view(page, width, height):
    page.set_line(87.1, 0.2)
    page.size(width, height)
    time.sleep(0.5)
    inside = page.script("""
      const box = (id) => document.getElementById(id).getBoundingClientRect();
      const hit = document.elementFromPoint(box("stop").x + 9 + 20, box("stop").y + 20).id;
      const sizes = ["trace", "fringe", "spectrum", "amplitude", "phase"].map((id) => [box(id).width, box(id).height]);
      return [document.documentElement.scrollWidth, document.documentElement.scrollHeight,
              box("stop").right, box("stop").bottom, hit, sizes, parseFloat(getComputedStyle(document.getElementById("rest")).fontSize)];
    """)
    assert inside[0] <= width
    assert inside[1] <= height
    assert inside[2] <= width
    assert inside[3] <= height
    assert inside[4] == "stop"
    assert all(w > 150 and h > 60 for w, h in inside[5])
    assert (
        inside[6] >= 32
    )  # read from two metres: 32 px are 8 mm on such a screen, 1/250 of the way


def test_the_browser_draws_as_often_as_it_is_told(page):
    begun_s = time.monotonic()
    seen = set()
    while time.monotonic() - begun_s < 3.0:
        seen.add(tuple(page.data("trace_data")["x"][-3:]))
    assert len(seen) > 15  # of 30

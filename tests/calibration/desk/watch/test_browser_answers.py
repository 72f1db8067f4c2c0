"""What the live page says to orders, where it says it, and that all of it can be read."""

import contextlib
import threading
import time
from pathlib import Path

import numpy as np
import pytest
from live_page import Page, Program, open_browser, until
from sessions import BENCH_FILE, built_in_bench
from wire_board import PtyLink

from calibration.rehearsal_script import session_steps
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.playing import record_in_memory

pytestmark = pytest.mark.slow

PICTURES = None  # a folder, to look at the pages


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    browser = open_browser(tmp_path_factory.mktemp("browser"))
    yield browser
    browser.quit()


@contextlib.contextmanager
def shown(browser, *words):
    program = Program(*words, "--bench", BENCH_FILE)
    try:
        yield Page(browser, program.url)
    finally:
        program.end()


def is_pending(page):
    return "pending" in page.element("stop").get_attribute("class")


def keep_picture(page, name):
    if PICTURES is not None:
        for width, height in ((1280, 800), (1024, 768), (768, 1024)):
            page.size(width, height)
            time.sleep(0.5)
            page.browser.save_screenshot(str(Path(PICTURES) / f"{name}-{width}.png"))
        page.size(1280, 800)


@pytest.fixture(scope="module")
def recording(tmp_path_factory):
    """Twenty seconds on the rising slope."""
    path = tmp_path_factory.mktemp("replay") / "rising.mfr"
    steps = session_steps(built_in_bench(), 20.0)
    setup = next(step.setup for step in steps if step.role == "lines-rising")
    list(record_in_memory(SimulatedBench(built_in_bench(), 1), [(setup, path)]))
    return path


def test_a_stop_on_a_replay_is_over_at_once(browser, recording):
    with shown(browser, "--replay", recording) as page:
        page.element("stop").click()
        page.has("drive-answer", "a recording is replayed: there is no drive")
        assert not is_pending(page)
        assert page.text("answer") == ""


def test_all_reasons_for_distrust_can_be_read(browser, recording):
    """Some lines are not there, and one is the mains."""
    lines = [f"--line={f}Hz" for f in (17.3, 31.7, 50.0, 87.1, 100.0, 120.0)]
    with shown(browser, "--replay", recording, "--block=2s", *lines) as page:
        until(lambda: len(page.text("doubts")) > 200, 20.0, "reasons")
        box = page.element("box-lines")
        until(lambda: page.element("reasons").is_displayed(), 5.0, "button")
        keep_picture(page, "shut")
        for way in (lambda: page.element("reasons").click(), lambda: page.press("q")):
            way()
            assert page.element("reasons").get_attribute("aria-expanded") == "true"
            tall, high = page.script(
                "return [arguments[0].scrollHeight, arguments[0].clientHeight]", box
            )
            assert tall <= high + 2
            keep_picture(page, "open")
            stop, open_box = page.element("stop").rect, box.rect
            assert open_box["x"] + open_box["width"] <= stop["x"]
            way()
            assert page.element("reasons").get_attribute("aria-expanded") == "false"


def test_a_stop_to_a_board_that_prints_text_says_that_it_cannot_be_told(browser, tmp_path):
    over = threading.Event()

    def print_lines():
        rng = np.random.default_rng(1)
        with contextlib.suppress(OSError):
            while not over.wait(0.01):
                link.send(b"".join(b"%.4f\n" % x for x in rng.normal(2.0, 0.1, 5)))

    with contextlib.closing(PtyLink()) as link:
        sender = threading.Thread(target=print_lines, daemon=True)
        sender.start()
        with shown(browser, link.port, "--text", "--folder", tmp_path) as page:
            page.press("\ue00c")  # Escape
            page.has("drive-answer", "a board that prints text cannot be told to stop")
            assert not is_pending(page)
            assert page.text("drive") == "none"
            assert page.text("drive-note") == "a board that prints text takes no orders"
            page.type("name", "../no")
            page.element("record").click()
            page.has("answer", "must be a plain file name")
            assert "plain file name" not in page.text("drive-answer")
            keep_picture(page, "text")
        over.set()
        link.give_up()
        sender.join()

"""For tests of the live page: the program, a simulated board that can be unplugged, a browser."""

import json
import os
import shutil
import signal
import subprocess
import sys
import time
from math import inf
from pathlib import Path

import numpy as np
import pytest
from sessions import built_in_bench

from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard
from firmware_bridge.simulated.setup import Setup

__all__ = ["Board", "Page", "Program", "open_browser", "until"]

BROWSERS = ("chromium", "chromium-browser")


def until(is_so, seconds=10.0, what=""):
    """Return the first true value of a function; fail if there is none within some seconds."""
    end_s = time.monotonic() + seconds
    while time.monotonic() < end_s:
        found = is_so()
        if found:
            return found
        time.sleep(0.02)
    raise AssertionError(f"not within {seconds:g} s: {what or is_so}")


def open_browser(folder):
    """Return a headless Chromium of its own; skip where there is none."""
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    binary = next(filter(None, map(shutil.which, BROWSERS)), None)
    driver = shutil.which("chromedriver")
    if binary is None or driver is None:
        pytest.skip(
            "chromium and chromedriver (Debian: chromium, chromium-driver) are not installed"
        )
    options = webdriver.ChromeOptions()
    options.binary_location = binary
    for flag in (
        "--headless=new", "--no-sandbox", "--disable-gpu", "--no-first-run",
        "--disable-background-networking", "--disable-component-update", "--disable-sync",
        "--force-device-scale-factor=1", f"--user-data-dir={folder}",
    ):  # fmt: skip
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    return webdriver.Chrome(options=options, service=Service(driver))


class Board:
    """A simulated board in real time behind a link that stays when the board is unplugged."""

    def __init__(self, link, seed=1):
        self.port, self._board, self._starts = str(link), None, 0
        self.bench = SimulatedBench(built_in_bench(), seed)
        self.plug_in()

    def plug_in(self):
        self._board = SimulatedBoard(self.bench, Setup(inf, slope="rising"), speed=1.0)
        self._board._stream = 100 * self._starts  # a board that starts has a stream id of its own
        self._starts += 1
        self._board.__enter__()
        Path(self.port).unlink(missing_ok=True)
        Path(self.port).symlink_to(self._board.port)

    def drive_v(self):
        """Return the largest voltage that the drive will reach, as it has been told so far."""
        drive = self._board._wired.drive
        time_s = drive.now_s + 0.5 + np.arange(4000) / 4000
        return float(np.abs(drive.volts(time_s, lambda _frequency_hz: 1.0 + 0.0j)).max())

    def unplug(self):
        if self._board is not None:
            self._board.__exit__(None, None, None)
            self._board = None


class Program:
    """``midfringe watch`` as a process."""

    def __init__(self, *arguments):
        self.process = subprocess.Popen(
            [sys.executable, "-m", "metro", "watch", "--port-number", "0", *map(str, arguments)],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            env=os.environ | {"MIDFRINGE_BENCH": "", "OPENBLAS_NUM_THREADS": "1"},
        )
        self.url = self.process.stdout.readline().strip()
        if not self.url:
            raise RuntimeError(f"watch {arguments} did not start: {self.process.stderr.read()}")

    def end(self, by=signal.SIGINT):
        """End it as Ctrl-C does; return its exit code and what it said on stderr."""
        if self.process.poll() is None:
            self.process.send_signal(by)
        _, said = self.process.communicate(timeout=20.0)
        return self.process.returncode, said


class Page:
    """The live page in a browser."""

    def __init__(self, browser, url, width=1280, height=800):
        self.browser = browser
        self.size(width, height)
        for kind in ("browser", "performance"):
            browser.get_log(kind)  # of the pages before
        browser.get(url)
        until(lambda: self.script("return document.documentElement.dataset.ready"), 20.0, "page")
        self.has("port", "connected")

    def size(self, width, height):
        metrics = {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": False}
        self.browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)

    def script(self, text, *arguments):
        return self.browser.execute_script(text, *arguments)

    def element(self, name):
        return self.browser.find_element("id", name)

    def text(self, name):
        return self.element(name).text

    def has(self, name, wanted, seconds=10.0):
        """Wait until an element shows some text; return all it shows."""
        until(lambda: wanted in self.text(name), seconds, f"{name}: {wanted}")
        return self.text(name)

    def type(self, name, text):
        self.element(name).clear()
        self.element(name).send_keys(text)

    def press(self, keys):
        """Press keys with nothing focused."""
        self.script("document.activeElement.blur()")
        self.browser.find_element("tag name", "body").send_keys(keys)

    def data(self, source):
        """Return the columns of one of the figures' sources."""
        return self.script(
            """
            for (const each of Bokeh.documents) {
              const source = each.get_model_by_name(arguments[0]);
              if (source) return Object.fromEntries(
                Object.entries(source.data).map(([name, column]) => [name, [...column]]));
            }""",
            source,
        )

    def set_line(self, frequency, amplitude):
        self.type("frequency", str(frequency))
        self.type("amplitude-v", str(amplitude))
        self.element("set").click()

    def requested(self):
        """Return the addresses that were asked for since the page was opened."""
        events = (
            json.loads(entry["message"])["message"] for entry in self.browser.get_log("performance")
        )
        wanted = {"Network.requestWillBeSent": "request", "Network.webSocketCreated": None}
        found = set()
        for event in events:
            if event["method"] in wanted:
                place = wanted[event["method"]]
                found.add((event["params"][place] if place else event["params"])["url"])
        return found

    def complaints(self):
        """Return what the browser's console said that is no mere information."""
        return [e["message"] for e in self.browser.get_log("browser") if e["level"] != "INFO"]

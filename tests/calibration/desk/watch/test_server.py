"""The live page's server without a browser: what it answers, and to whom."""

import asyncio
import json
import time

import numpy as np
import pytest
from tornado.httpclient import AsyncHTTPClient, HTTPRequest
from tornado.websocket import websocket_connect

from calibration.desk.watch.guard import Guard
from calibration.desk.watch.orders import Orders
from calibration.desk.watch.server import WatchServer
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.state import WatchState
from calibration.desk.watch.wire import unpack
from calibration.errors import CalibrationError
from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.drive_lines import DriveLine
from firmware_bridge.live_events import LiveBlock, LiveChannels, LiveLines, LiveReply, LiveState
from metro.bench import Bench
from metro.measured import Measured

TOKEN = "correct-horse-battery"  # noqa: S105  # invented
RATE_HZ = 2000.0


class Tone:
    """A source of a tone in real time, that keeps what it was asked for."""

    def __init__(self):
        self.asked, self.sent, self.begun_s = [], 0, time.monotonic()
        channels = (ChannelInfo("photodiode", "V"), ChannelInfo("drive", "V"))
        self.waiting = [LiveState("connected"), LiveChannels(RATE_HZ, channels, full_scale_v=5.0)]

    def poll(self):
        events, self.waiting = self.waiting, []
        due = int((time.monotonic() - self.begun_s) * RATE_HZ)
        time_s = np.arange(self.sent, due) / RATE_HZ
        values = np.stack([2.0 + np.cos(2 * np.pi * 31.7 * time_s), 0.0 * time_s], axis=1)
        events.append(LiveBlock(self.sent, values, host_time=time.time()))
        self.sent = due
        return events

    def set_line(self, slot, frequency_hz, amplitude_v, phase_rad=0.0):
        self.asked.append((slot, frequency_hz, amplitude_v, phase_rad))
        lines = {slot: DriveLine(frequency_hz, amplitude_v, phase_rad)}
        self.waiting += [
            LiveReply("set line: done"),
            LiveLines(lines, lines, False, len(self.asked)),
        ]
        return len(self.asked)

    def rest(self):
        self.asked.append("rest")
        self.waiting.append(LiveLines({}, {}, is_at_rest=True, orders=len(self.asked)))
        return len(self.asked)


class Desk:
    """A server that runs, and ways to talk to it."""

    def __init__(self, server, number):
        self.server, self.number = server, number
        self.source, self.lives = server.source, []

    async def get(self, path="/", *, status=200, **headers):
        """Return the answer to a request; header names with _ for -."""
        request = HTTPRequest(
            f"http://127.0.0.1:{self.number}{path}",
            headers={name.replace("_", "-"): value for name, value in headers.items()},
            follow_redirects=False,
        )
        answer = await AsyncHTTPClient().fetch(request, raise_error=False)
        assert answer.code == status, (path, headers, answer.code, answer.body[:200])
        return answer

    async def open(self, path="/live", **headers):
        """Return an open websocket, as a page of this server opens it unless told otherwise."""
        headers = {"Origin": f"http://127.0.0.1:{self.number}"} | headers
        request = HTTPRequest(f"ws://127.0.0.1:{self.number}{path}", headers=headers)
        self.lives.append(await websocket_connect(request))
        return self.lives[-1]

    async def close(self):
        """Close every websocket, to the end."""
        for live in self.lives:
            live.close()
            while await live.read_message() is not None:
                pass

    async def refused(self, path="/live", *, status=403, **headers):
        """Ask for a websocket as a page of this server does, unless told otherwise; be refused."""
        headers = {
            "Origin": f"http://127.0.0.1:{self.number}",
            "Upgrade": "websocket",
            "Connection": "Upgrade",
            "Sec_WebSocket_Key": "AAAAAAAAAAAAAAAAAAAAAA==",
            "Sec_WebSocket_Version": "13",
        } | headers
        headers = {name: value for name, value in headers.items() if value is not None}
        await self.get(path, status=status, **headers)


def serving(scenario, *, guard=None):
    """Run a scenario, a coroutine function that takes a `Desk`."""

    async def run():
        bench = Bench().replace({"actuator.drive_limit": Measured.of(5.0, "V")})
        state = WatchState(WatchSetup("test", bench, frequencies_hz=(31.7,)))
        source = Tone()
        server = WatchServer(source, state, Orders(source, state), guard or Guard("127.0.0.1"))
        number = await server.start(0)
        desk = Desk(server, number)
        try:
            await asyncio.wait_for(scenario(desk), 30.0)
            await asyncio.wait_for(desk.close(), 10.0)
        finally:
            await server.stop()
            AsyncHTTPClient().close()

    asyncio.run(run())


async def messages(live, count):
    """Return the next binary messages as (document, arrays)."""
    found = []
    while len(found) < count:
        message = await live.read_message()
        assert message is not None, "the connection was closed"
        if isinstance(message, bytes):
            found.append(unpack(message))
    return found


async def until(live, is_so):
    """Return the first document for which something is so."""
    while True:
        ((document, _),) = await messages(live, 1)
        if is_so(document):
            return document


async def answer(live):
    """Return the next line of text of the program itself."""
    while True:
        message = await live.read_message()
        assert message is not None, "the connection was closed"
        if isinstance(message, str) and not json.loads(message)["board"]:
            return json.loads(message)


def test_pages_files_and_figures_are_there_and_nothing_else():
    async def scenario(desk):
        page = await desk.get("/")
        assert "text/html" in page.headers["Content-Type"]
        policy = page.headers["Content-Security-Policy"]
        assert "default-src 'none'" in policy
        assert "script-src 'self';" in policy
        assert "http:" not in policy
        assert b"http" not in page.body  # nothing is named that would be fetched
        assert set(json.loads((await desk.get("/figures")).body)) == {
            "trace", "fringe", "spectrum", "amplitude", "relative", "phase",
        }  # fmt: skip
        for path in ("/page/watch.js", "/page/watch.css", "/bokeh/bokeh.min.js"):
            assert len((await desk.get(path)).body) > 1000
        for path in (
            "/page/watch.html", "/page/../watch.py", "/page/%2e%2e/watch.py", "/page/..%2fwatch.py",
            "/bokeh/bokeh.js", "/bokeh/../../server.py", "/page//etc/passwd", "/etc/passwd",
        ):  # fmt: skip
            await desk.get(path, status=404)

    serving(scenario)


def test_other_hosts_and_origins_are_refused():
    async def scenario(desk):
        for path in ("/", "/figures", "/page/watch.js", "/bokeh/bokeh.min.js"):
            await desk.get(path, status=403, Host="evil.example")
            await desk.get(path, status=403, Host=f"evil.example:{desk.number}")
        for origin in ("http://evil.example", f"http://localhost:{desk.number}", "null", None):
            await desk.refused(Origin=origin)
        await desk.refused(Host=f"evil.example:{desk.number}")
        assert desk.server.lives == set()

    serving(scenario)


def test_with_a_token_everything_asks_for_it():
    async def scenario(desk):
        paths = ("/", "/figures", "/page/watch.js", "/page/watch.css", "/bokeh/bokeh.min.js")
        cookie = f"midfringe-{desk.number}"
        for path in paths:
            await desk.get(path, status=403)
            await desk.get(f"{path}?token=wrong", status=403)
            await desk.get(path, status=403, Cookie=f"{cookie}=wrong")
        await desk.refused()
        await desk.refused("/live?token=wrong")
        await desk.refused(Cookie=f"{cookie}={TOKEN[:-1]}")
        moved = await desk.get(f"/?token={TOKEN}", status=303)
        assert moved.headers["Location"] == "/"
        assert moved.headers["Set-Cookie"].startswith(f"{cookie}={TOKEN};")
        assert {"HttpOnly", "SameSite=Lax"} <= set(moved.headers["Set-Cookie"].split("; "))
        for path in paths:
            await desk.get(path, Cookie=f"{cookie}={TOKEN}")
        live = await desk.open(Cookie=f"{cookie}={TOKEN}")
        assert await messages(live, 1)

    serving(scenario, guard=Guard("127.0.0.1", TOKEN))


@pytest.mark.slow
def test_messages_come_and_the_trace_moves_on():
    async def scenario(desk):
        live = await desk.open()
        got = await messages(live, 25)
        first, last = got[0], got[-1]
        assert last[0]["source"]["time_s"] > first[0]["source"]["time_s"] + 1.0
        assert np.median([document["latency_s"] for document, _ in got]) < 0.5
        assert last[1]["trace_high"].max() == pytest.approx(3.0, abs=1e-3)
        spectra = [arrays for _, arrays in [first, last] if "spectrum_f" in arrays]
        assert spectra
        await live.write_message(json.dumps({"do": "show", "window_s": 1.0}))
        await asyncio.sleep(0.3)
        document, arrays = (await messages(live, 8))[-1]
        assert document["window_s"] == 1.0
        assert arrays["trace_t"].min() >= -1.01

    serving(scenario)


def test_orders_are_obeyed_and_answered_on_every_page():
    async def scenario(desk):
        live, other = await desk.open(), await desk.open()
        await messages(live, 2)
        order = {"do": "set line", "frequency": 87.1, "amplitude": 2.0}
        await live.write_message(json.dumps(order))
        assert (await answer(live))["text"] == (await answer(other))["text"]
        assert desk.source.asked == [(0, 87.1, 2.0, 0.0)]
        await until(other, lambda document: document["drive"]["sum_v"] == 2.0)
        await other.write_message(json.dumps(order | {"amplitude": 3.5}))
        said = await answer(other)
        assert said["refused"]
        assert "beyond the drive limit of 5 V" in said["text"]
        await other.write_message(json.dumps({"do": "stop"}))
        assert (await answer(other))["text"] == "stop sent"
        assert (await answer(other))["text"] == "drive stopped"
        assert desk.source.asked[-1] == "rest"
        await until(live, lambda document: document["drive"]["sum_v"] == 0.0)

    serving(scenario)


def test_what_is_no_order_does_no_harm():
    async def scenario(desk):
        live = await desk.open()
        for message in (
            "",
            "{",
            "[" * 2000,
            "null",
            '{"do": 1}',
            '{"do": "show", "window_s": 1e9}',
        ):
            await live.write_message(message)
        await live.write_message(b"\x00\x01", binary=True)
        assert (await answer(live))["refused"]
        assert (await messages(live, 3))[-1][0]["window_s"] == 10.0
        await live.write_message("x" * 5000)  # longer than any order: the connection ends
        while await live.read_message() is not None:
            pass
        desk.lives.remove(live)
        live.close()
        again = await desk.open()
        assert await messages(again, 1)
        assert desk.source.asked == []

    serving(scenario)


def test_a_ninth_page_has_figures_and_a_stop_and_the_plots_of_one_that_closes(monkeypatch):
    monkeypatch.setattr("calibration.desk.watch.handlers._PAGES", 9)

    async def scenario(desk):
        lives = [await desk.open() for _ in range(9)]
        document, arrays = (await messages(lives[8], 2))[-1]
        assert not document["has_plots"]
        assert not arrays
        assert document["source"]["rate_hz"] == RATE_HZ
        assert (await messages(lives[7], 1))[0][0]["has_plots"]
        await desk.refused(status=503)
        await lives[8].write_message(json.dumps({"do": "stop"}))
        assert (await answer(lives[8]))["text"] == "stop sent"
        assert (await answer(lives[8]))["text"] == "drive stopped"
        lives[0].close()
        await until(lives[8], lambda document: document["has_plots"])

    serving(scenario)


def test_an_error_in_the_source_is_logged_and_the_page_goes_on(caplog):
    async def scenario(desk):
        live = await desk.open()
        poll = desk.source.poll
        desk.source.poll = lambda: 1 / 0
        await asyncio.sleep(0.2)
        desk.source.poll = poll
        assert await messages(live, 3)

    serving(scenario)
    assert "the live page met an error" in caplog.text


def test_a_port_number_that_is_taken_is_named():
    async def scenario(desk):
        other = WatchServer(desk.source, desk.server.state, desk.server.orders, desk.server.guard)
        with pytest.raises(
            CalibrationError, match=f"port number {desk.number} on 127.0.0.1 cannot be"
        ):
            await other.start(desk.number)
        await other.stop()

    serving(scenario)

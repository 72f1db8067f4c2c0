"""``midfringe watch`` as a command: its address, its end, and what it refuses."""

import asyncio
import json
import sys
import time
import urllib.request

import numpy as np
import pytest
from live_page import Board, Program, until
from real_data import real_data
from sessions import BENCH_FILE
from tornado.httpclient import HTTPRequest
from tornado.websocket import websocket_connect

from calibration.desk.watch.document import figures
from calibration.desk.watch.guard import Guard
from calibration.desk.watch.replay import Replay
from calibration.desk.watch.serving import serve
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.state import WatchState
from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.drive_lines import DriveLine
from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.live_events import (
    LiveBlock,
    LiveChannels,
    LiveGap,
    LiveLines,
    LiveReply,
    LiveState,
)
from firmware_bridge.opening import open_recording
from metro.bench import Bench
from metro.commandline import run


@pytest.fixture(autouse=True)
def no_bench(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)


@pytest.fixture
def recording(tmp_path):
    """Return a CSV of 2 s at 500 Hz with a value beyond the range of nothing: NaN."""
    time_s = np.arange(1000) / 500
    rows = [f"{t:.3f},{2 + np.cos(2 * np.pi * 31.7 * t):.6f}" for t in time_s]
    path = tmp_path / "scope.csv"
    path.write_text("\n".join(["time,photodiode", "s,V", *rows]) + "\n")
    return path


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ([], "one of PORT, --simulate and --replay is needed, and only one"),
        (["/dev/x", "--simulate"], "one of PORT, --simulate and --replay is needed, and only one"),
        (["--simulate", "--speed", "2"], "--speed goes with --replay"),
        (["--replay", "no.mfr"], "no.mfr"),
        (["/dev/no-such-port"], "/dev/no-such-port"),
        (["--simulate", "--folder", "/no/such"], "--folder must be a directory that exists"),
        (["--simulate", "--token", "short"], "--token must be at least 8 letters"),
        (["--simulate", "--bench", "no.toml"], "no.toml"),
        (["--simulate", "--adc-bits", "24"], "adc.bits up to 16, got 24"),
        (["--simulate", "--calibration", "no.json"], "no.json"),
        (["--simulate", "--line", "31.7"], "31.7"),
        (["--simulate", "--host", "203.0.113.7"], "port number 8642 on 203.0.113.7 cannot be served"),
    ],
)  # fmt: skip
def test_wrong_input_is_one_line_and_exit_code_2(capsys, arguments, said):
    assert run(["watch", *arguments]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert said in err
    assert err.count("\n") == 1


@pytest.mark.parametrize("package", ["tornado", "bokeh"])
def test_a_missing_package_is_named_with_what_installs_it(capsys, monkeypatch, package):
    monkeypatch.setitem(sys.modules, package, None)
    assert run(["watch", "--simulate"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.endswith(f"watch: needs {package}; run: pip install 'midfringe[live]'\n")
    assert err.count("\n") == 1


def test_a_replay_is_served_until_ctrl_c(recording):
    program = Program("--replay", recording, "--line", "31.7Hz", "--bench", BENCH_FILE)
    assert program.url.startswith("http://127.0.0.1:")
    with urllib.request.urlopen(program.url) as answer:  # noqa: S310  # our own
        assert b"midfringe watch" in answer.read()
    assert program.end() == (0, "ended\n")


def test_channels_of_a_replay_are_named_as_those_of_every_recording(capsys, recording):
    # Column 1 is the time, column 2 the photodiode; there is no third.
    assert run(["watch", "--replay", str(recording), "--channel", "3"]) == 2
    assert "column 3 is no channel" in capsys.readouterr().err
    program = Program("--replay", recording, "--channel", "2")
    assert program.end() == (0, "ended\n")


class Failing:
    """A source whose port has failed."""

    def poll(self):
        return [LiveState("failed", "out of order")]

    def stop_recording(self):
        raise BridgeError("the process that held it has ended")

    rest = stop_recording


class Ending:
    """A port with a drive that says at the end what it is told to say."""

    def __init__(self, *says):
        self.asked, self.says = [], list(says)
        self.waiting = [
            LiveState("connected"),
            LiveChannels(
                500.0, (ChannelInfo("pd", "V"), ChannelInfo("drive", "V")), full_scale_v=5.0
            ),
            LiveLines({0: DriveLine(87.1, 1.0)}, {0: DriveLine(87.1, 1.0)}),
        ]

    def poll(self):
        events, self.waiting = self.waiting, []
        return events

    def stop_recording(self):
        self.asked.append("end")

    def rest(self):
        self.asked.append("rest")
        self.waiting += self.says
        return 1


def at_once(monkeypatch):
    async def serve_at_once(server, _number, _ready):
        server.poll()

    monkeypatch.setattr("calibration.desk.watch.serving._serve", serve_at_once)


def test_at_the_end_the_board_confirms_that_its_drive_is_at_rest(monkeypatch):
    at_once(monkeypatch)
    source = Ending(LiveLines({}, {}, is_at_rest=True, orders=1))
    server = serve(source, WatchSetup("board", Bench()), Guard("127.0.0.1"), 0, ready=print)
    assert server.orders.drive.condition == "at rest"
    assert source.asked == ["end", "rest"]


@pytest.mark.parametrize(
    ("said", "reason"),
    [
        (LiveState("gone", "unplugged"), "unplugged"),
        (LiveState("silent", "nothing valid came"), "nothing valid came"),
        (LiveState("failed", "the process was told to end"), "the process was told to end"),
        (LiveLines({}, {}, is_at_rest=True, orders=0), "the board has not confirmed the stop"),
        (LiveReply("ramp: done"), "the board has not confirmed the stop"),
    ],
)
def test_an_end_without_that_is_unknown_with_exit_code_3(monkeypatch, said, reason):
    at_once(monkeypatch)
    monkeypatch.setattr("calibration.desk.watch.serving._CONFIRM_S", 0.1)
    setup = WatchSetup("board", Bench())
    with pytest.raises(DeviceFailedError) as caught:
        serve(Ending(said), setup, Guard("127.0.0.1"), 0, ready=print)
    assert str(caught.value) == f"board: {reason}; whether the drive is at rest is not known"
    assert caught.value.exit_code == 3


def test_a_port_that_failed_is_told_at_the_end_with_exit_code_3(monkeypatch):
    at_once(monkeypatch)
    setup = WatchSetup("board", Bench())
    with pytest.raises(DeviceFailedError, match="board: out of order; whether the drive") as caught:
        serve(Failing(), setup, Guard("127.0.0.1"), 0, ready=print)
    assert caught.value.exit_code == 3


def test_a_replay_gives_every_sample_once_at_its_own_pace(recording, monkeypatch):
    now_s = [100.0]
    monkeypatch.setattr("calibration.desk.watch.replay.time.monotonic", lambda: now_s[0])
    replay = Replay(open_recording(recording), speed=2.0)
    said, state = replay.poll()
    assert isinstance(said, LiveChannels)
    assert (said.rate_hz, [c.name for c in said.channels]) == (500.0, ["photodiode"])
    assert said.full_scale_v is None
    assert state.state == "connected"
    values = []
    for moment_s in (100.1, 100.1001, 100.55, 100.9, 101.4):
        now_s[0] = moment_s
        for event in replay.poll():
            if isinstance(event, LiveBlock):
                assert event.start_index == sum(map(len, values))
                values.append(event.values[:, 0])
        due = int((moment_s - 100.0) * 2 * 500)
        assert sum(map(len, values)) == min(due, 1000)
    np.testing.assert_array_equal(
        np.concatenate(values), open_recording(recording).trace("photodiode").values
    )
    assert replay.poll() == []


def test_a_replay_tells_gaps_and_its_end(tmp_path, monkeypatch):
    path = tmp_path / "gap.csv"
    kept = [*range(300), *range(450, 1000)]
    path.write_text("t,v\n" + "\n".join(f"{k / 500:.3f},{k}" for k in kept) + "\n")
    now_s = [0.0]
    monkeypatch.setattr("calibration.desk.watch.replay.time.monotonic", lambda: now_s[0])
    replay = Replay(open_recording(path))
    replay.poll()
    now_s[0] = 60.0
    events = replay.poll()
    assert [e for e in events if isinstance(e, LiveGap)] == [
        LiveGap(300, 150, exact=False)  # by the stamps of a text file
    ]
    assert events[-1] == LiveState("closed", "the recording is over")
    blocks = [e for e in events if isinstance(e, LiveBlock)]
    assert sum(np.count_nonzero(np.isfinite(b.values)) for b in blocks) == 850


def test_a_replay_has_neither_drive_nor_recording(recording):
    replay = Replay(open_recording(recording))
    with pytest.raises(BridgeError, match="nothing to record"):
        replay.start_recording("x.mfr")
    with pytest.raises(BridgeError, match="is not set"):
        replay.set_line(0, 31.7, 1.0)


async def ordered(url, *orders):
    """Give orders as a page does and wait for the answer to each."""
    request = HTTPRequest(url.replace("http", "ws") + "live", headers={"Origin": url.rstrip("/")})
    live = await websocket_connect(request)
    for order in orders:
        await live.write_message(json.dumps(order))
        while True:
            message = await live.read_message()
            if isinstance(message, str) and not json.loads(message)["board"]:
                assert not json.loads(message)["refused"], message
                break
    live.close()
    while await live.read_message() is not None:
        pass


@pytest.mark.slow
def test_a_killed_program_leaves_a_drive_at_rest_and_a_recording_that_opens(tmp_path):
    board = Board(tmp_path / "board")
    program = Program(board.port, "--bench", BENCH_FILE, "--folder", tmp_path)
    try:
        orders = [
            {"do": "set line", "frequency": 87.1, "amplitude": 0.4},
            {"do": "record", "name": "killed"},
        ]
        asyncio.run(ordered(program.url, *orders))
        until(lambda: board.drive_v() > 0.39, 5.0, "drive on")
        time.sleep(1.5)
        program.process.kill()
        # The process that holds the port sees it at once; a board rests by itself after 2 s.
        until(lambda: board.drive_v() == 0.0, 1.8, "drive at rest")
        program.process.communicate(timeout=20.0)  # until that process has ended too
        recording = open_recording(tmp_path / "killed.mfr")
        assert recording.duration_s > 1.0
        assert not any("cut" in remark for remark in recording.remarks)
    finally:
        board.unplug()


def test_a_real_recording_shows_its_line(monkeypatch):
    # Its README: after 2.5 s locked, 30 Hz line of 2.53 V for a drive of 100.4 mV, mean 5.13 V
    # between extremes of 0.44 V and 9.69 V.
    path = real_data("fiber-modulator-calline/fom-pa/fom-pa-control-actuation.csv")
    recording = open_recording(path)
    bench = Bench.of(low="0.44 V", high="9.69 V")
    state = WatchState(WatchSetup("real", bench, None, (30.0,), "rising", 0, 1, block_s=1.0))
    now_s = [0.0]
    monkeypatch.setattr("calibration.desk.watch.replay.time.monotonic", lambda: now_s[0])
    replay = Replay(recording)
    for _ in range(60):
        for event in replay.poll():
            for job in state.take(event):
                job.deliver(job.work())
        now_s[0] += 0.1
    shown = figures(state)
    (line,) = shown["lines"]
    assert line["amplitude"] == pytest.approx(2.53, abs=0.02)
    assert line["amplitude"] / line["ratio"] == pytest.approx(0.1004, rel=0.005)
    assert shown["rest"]["verdict"] == "at mid-fringe"
    assert shown["port"]["state"] == "closed"

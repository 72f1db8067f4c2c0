"""A port in a process of its own: what comes, what is recorded, and what no viewer can spoil."""

import contextlib
import multiprocessing
import os
import signal
import subprocess
import sys
import textwrap
import time
from pathlib import Path

import numpy as np
import pytest
from wire_board import RATE_HZ, SLOTS, AskedBoard, PtyLink, WireBoard, asked_board, ramp

from firmware_bridge.drive_lines import DriveError, DriveLine
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_session import (
    LiveBlock,
    LiveChannels,
    LiveGap,
    LiveLines,
    LiveRecording,
    LiveReply,
    LiveSession,
    LiveState,
)
from firmware_bridge.message import CommandCode
from firmware_bridge.recording import open_mfr

WAIT_S = 20.0


class Viewer:
    """Poll, and keep everything."""

    def __init__(self, live):
        self.live, self.events = live, []

    def until(self, is_there, timeout_s=WAIT_S):
        end = time.monotonic() + timeout_s
        while time.monotonic() < end:
            self.events += self.live.poll()
            found = [event for event in self.events if is_there(event)]
            if found:
                return found[-1]
            time.sleep(0.01)
        raise AssertionError([event for event in self.events if not isinstance(event, LiveBlock)])

    def state(self, name, timeout_s=WAIT_S):
        return self.until(lambda e: isinstance(e, LiveState) and e.state == name, timeout_s)

    def of(self, kind):
        return [event for event in self.events if isinstance(event, kind)]


def is_file(event):
    return isinstance(event, LiveRecording) and event.file is not None


def is_no_file(event):
    return isinstance(event, LiveRecording) and event.file is None


def check_ramps(paths, total):
    """The recordings hold, one behind the other, every sample once."""
    recordings = [open_mfr(path) for path in paths]
    values = np.concatenate([recording.trace("pd").values for recording in recordings])
    highs = np.concatenate([recording.trace("drive").values for recording in recordings])
    index = (values / 0.5 + 2**15 * highs).astype(int)
    np.testing.assert_array_equal(np.diff(index), 1)
    assert len(index) == total
    assert all(recording.has_end and not recording.gaps for recording in recordings)


@pytest.mark.slow
def test_channels_values_and_recordings_without_a_lost_sample(tmp_path):
    with asked_board() as board, LiveSession(board.link.port, folder=tmp_path) as live:
        viewer = Viewer(live)
        channels = viewer.until(lambda e: isinstance(e, LiveChannels))
        assert [(c.name, c.unit, c.scale) for c in channels.channels] == [
            ("pd", "V", 0.5),
            ("drive", "V", 1.0),
        ]
        assert (channels.rate_hz, channels.board, channels.simulated) == (RATE_HZ, "test", False)
        paths = [live.start_recording("a.mfr")]
        viewer.until(is_file)
        time.sleep(0.4)
        paths.append(live.start_recording("b.mfr"))
        viewer.until(lambda e: is_file(e) and e.file.endswith("b.mfr") and e.samples > 500)
        live.stop_recording()
        viewer.until(lambda e: is_no_file(e) and e is not first_end(viewer))
        ends = [event for event in viewer.of(LiveRecording) if event.file is None]
    check_ramps(paths, sum(event.samples for event in ends))
    assert [event.bytes for event in ends] == [path.stat().st_size for path in paths]
    blocks = viewer.of(LiveBlock)
    assert all(isinstance(b.values, np.ndarray) and b.values.dtype == np.float64 for b in blocks)
    values = np.concatenate([block.values for block in blocks])
    first = blocks[0].start_index
    assert [block.start_index for block in blocks] == list(
        range(first, first + SLOTS * len(blocks), SLOTS)
    )
    np.testing.assert_array_equal(values, ramp(0, len(values)) * [0.5, 1.0])
    assert abs(blocks[-1].host_time - time.time()) < 60
    assert viewer.of(LiveGap) == []


def first_end(viewer):
    return next((event for event in viewer.of(LiveRecording) if event.file is None), None)


@pytest.mark.slow
def test_gaps_and_over_range_are_shown(tmp_path):
    def damage(number, frame):
        return b"" if number == 3 else frame

    with asked_board(damage=damage) as board, LiveSession(board.link.port, folder=tmp_path) as live:
        viewer = Viewer(live)
        gap = viewer.until(lambda e: isinstance(e, LiveGap))
    assert gap == LiveGap(3 * SLOTS, SLOTS, exact=True)


@pytest.mark.parametrize(
    "name",
    [
        "",
        ".",
        "..",
        "../a.mfr",
        "/var/a.mfr",
        "x/a.mfr",
        "a",
        "a.txt",
        ".mfr",
        "a\n.mfr",
        "b\\a.mfr",
    ],
)
def test_only_a_plain_name_inside_the_folder_is_recorded(tmp_path, name):
    live = LiveSession("/dev/none", folder=tmp_path)
    with pytest.raises(BridgeError, match=r"^name must be a plain file name NAME.mfr, got '"):
        live.start_recording(name)
    assert list(tmp_path.iterdir()) == []


def test_an_existing_file_is_not_written_over(tmp_path):
    (tmp_path / "a.mfr").write_bytes(b"kept")
    (tmp_path / "b.mfr").symlink_to(tmp_path / "elsewhere")
    live = LiveSession("/dev/none", folder=tmp_path)
    for name in ("a.mfr", "b.mfr"):
        with pytest.raises(BridgeError, match=f"^{name} exists already in "):
            live.start_recording(name)


@pytest.mark.slow
def test_a_port_that_goes_is_seen_at_once_and_comes_back_by_itself(tmp_path):
    name = tmp_path / "port"
    with contextlib.closing(PtyLink()) as second:
        first = PtyLink()
        board = AskedBoard(first)
        name.symlink_to(first.port)
        with LiveSession(str(name), folder=tmp_path) as live:
            viewer = Viewer(live)
            viewer.until(lambda e: isinstance(e, LiveBlock))
            live.start_recording("a.mfr")
            viewer.until(lambda e: is_file(e) and e.samples > 200)
            board.close()
            first.close()
            gone_s = time.monotonic()
            assert viewer.state("gone").reason
            assert time.monotonic() - gone_s < 1.0
            name.unlink()
            name.symlink_to(second.port)
            with contextlib.closing(AskedBoard(second, stream=2)):
                seen = len(viewer.events)
                viewer.until(lambda e: isinstance(e, LiveChannels) and e.stream == 2)
                states = [e.state for e in viewer.events[seen:] if isinstance(e, LiveState)]
                assert states == ["connected"]
                gap = viewer.of(LiveGap)[-1]
                assert not gap.exact
                assert 0 < gap.length < 10 * RATE_HZ
                time.sleep(0.3)
                live.stop_recording()
                viewer.until(is_no_file)
    recording = open_mfr(tmp_path / "a.mfr")
    assert recording.has_end
    (gap,) = recording.gaps
    assert not gap.exact


def test_a_port_that_is_not_there_is_waited_for(tmp_path):
    with asked_board() as board:
        name = tmp_path / "port"
        with LiveSession(str(name), folder=tmp_path) as live:
            viewer = Viewer(live)
            assert "there is no such port" in viewer.state("gone").reason
            name.symlink_to(board.link.port)
            viewer.until(lambda e: isinstance(e, LiveBlock))


def test_without_reconnect_a_missing_port_ends_the_session(tmp_path):
    with LiveSession("/dev/none", folder=tmp_path, reconnect=False) as live:
        state = Viewer(live).state("failed")
    assert state.reason == (
        "/dev/none cannot be opened: there is no such port (midfringe record --list shows the ports)"
    )


@pytest.mark.slow
def test_a_silent_board_is_named(tmp_path):
    with contextlib.closing(PtyLink()) as link, LiveSession(link.port, folder=tmp_path) as live:
        viewer = Viewer(live)
        viewer.state("waiting")
        assert "the board is silent for 5 s" in viewer.state("silent").reason


@pytest.mark.slow
def test_a_viewer_that_does_not_look_costs_the_view_not_the_recording(tmp_path):
    with contextlib.closing(PtyLink()) as link, LiveSession(link.port, folder=tmp_path) as live:
        viewer = Viewer(live)
        viewer.state("waiting")
        live.start_recording("a.mfr")
        viewer.until(is_file)
        board, frames = WireBoard(link), 12_000
        board.announce()
        board.send(frames)  # 600 000 samples, 10 MB of values: more than is held for a viewer
        time.sleep(0.5)
        behind = viewer.state("behind")
        viewer.until(lambda e: is_file(e) and e.samples == frames * SLOTS)
        live.stop_recording()
        viewer.until(is_no_file)
    check_ramps([tmp_path / "a.mfr"], frames * SLOTS)
    shown = sum(len(block.values) for block in viewer.of(LiveBlock))
    left_out = sum(int(e.reason.split()[0]) for e in viewer.of(LiveState) if e.state == "behind")
    assert behind.reason.endswith(" samples were left out of the view")
    assert shown + left_out == frames * SLOTS


def test_lines_are_set_within_the_limit_and_rest_comes_first(tmp_path):
    with (
        asked_board() as board,
        LiveSession(board.link.port, folder=tmp_path, drive_limit_v=0.5) as live,
    ):
        viewer = Viewer(live)
        viewer.until(lambda e: isinstance(e, LiveBlock))
        with pytest.raises(DriveError, match=r"^the lines together may reach 0.6 V, beyond the"):
            live.set_line(0, 87.1, 0.6)
        live.set_line(0, 87.1, 0.3)
        viewer.until(lambda e: e == LiveReply("set line: done"))
        live.set_line(1, 31.7, 0.3)
        refused = viewer.until(lambda e: isinstance(e, LiveReply) and e.refused)
        assert refused.text == "the lines together may reach 0.6 V, beyond the drive limit of 0.5 V"
        time.sleep(0.6)
        live.rest()
        viewer.until(lambda e: len(viewer.of(LiveReply)) >= 6)
        live.set_line(1, 31.7, 0.3)  # the other one is no longer set
        viewer.until(lambda e: viewer.of(LiveReply)[-1] == LiveReply("set line: done"))
    codes = board.codes()
    # at opening, and when asked
    assert codes.count(CommandCode.RAMP) >= 2
    assert codes.count(CommandCode.KEEP_ALIVE) >= 1
    last = len(codes) - 1 - codes[::-1].index(CommandCode.SET_LINE)
    assert CommandCode.RAMP in codes[last:]


def test_a_text_board_has_no_lines(tmp_path):
    live = LiveSession("/dev/none", folder=tmp_path, text=True, drive_limit_v=1.0)
    with pytest.raises(DriveError, match=r"^drive lines need a board that sends frames, not text$"):
        live.set_line(0, 87.1, 0.1)


@pytest.mark.slow
def test_without_a_limit_no_line_is_set(tmp_path):
    with asked_board() as board, LiveSession(board.link.port, folder=tmp_path) as live:
        Viewer(live).until(lambda e: isinstance(e, LiveBlock))
        with pytest.raises(DriveError, match=r"^no drive limit is known, so no line is set$"):
            live.set_line(0, 87.1, 0.1)


PARENT = """
    import sys, time
    from pathlib import Path
    from firmware_bridge.live_session import LiveBlock, LiveRecording, LiveReply, LiveSession

    if __name__ == "__main__":
        live = LiveSession(sys.argv[1], folder=Path(sys.argv[2]), drive_limit_v=1.0).start()
        seen = set()
        live.start_recording("a.mfr")
        while True:
            for event in live.poll():
                seen.add(type(event))
                if isinstance(event, LiveBlock) and "set" not in seen:
                    seen.add("set")
                    live.set_line(0, 50.0, 0.5)
                if isinstance(event, LiveRecording) and event.samples > 500:
                    print("records", flush=True)
            time.sleep(0.01)
"""


@pytest.mark.slow
def test_if_the_viewer_is_killed_the_drive_rests_and_the_recording_ends(tmp_path):
    script = tmp_path / "parent.py"
    script.write_text(textwrap.dedent(PARENT))
    with asked_board() as board:
        parent = subprocess.Popen(
            [sys.executable, str(script), board.link.port, str(tmp_path)], stdout=subprocess.PIPE
        )
        assert parent.stdout.readline() == b"records\n"
        assert CommandCode.SET_LINE in board.codes()
        os.kill(parent.pid, signal.SIGKILL)
        parent.wait()
        parent.stdout.close()
        killed_s = time.monotonic()
        while CommandCode.STOP not in board.codes() and time.monotonic() < killed_s + WAIT_S:
            time.sleep(0.01)
        assert board.codes()[-3:] == [CommandCode.CLEAR_LINE, CommandCode.RAMP, CommandCode.STOP]
        assert time.monotonic() - killed_s < 2.0
        time.sleep(0.3)
    recording = open_mfr(tmp_path / "a.mfr")
    assert recording.has_end
    check_ramps([tmp_path / "a.mfr"], recording.length)


def test_a_process_that_is_told_to_end_by_another_is_a_failure(tmp_path):
    with asked_board() as board, LiveSession(board.link.port, folder=tmp_path) as live:
        viewer = Viewer(live)
        viewer.until(lambda e: isinstance(e, LiveBlock))
        (port,) = [p for p in multiprocessing.active_children() if p.name == "midfringe port"]
        os.kill(port.pid, signal.SIGTERM)
        assert viewer.state("failed").reason == "the process that held the port was told to end"
        port.join(WAIT_S)
        with pytest.raises(BridgeError, match=r"has ended$"):
            live.rest()


def test_the_lines_that_a_board_may_drive_are_told(tmp_path):
    line, other = DriveLine(87.1, 0.3), DriveLine(31.7, 0.2)
    with (
        asked_board() as board,
        LiveSession(board.link.port, folder=tmp_path, drive_limit_v=0.5) as live,
    ):
        viewer = Viewer(live)
        viewer.until(lambda e: isinstance(e, LiveLines) and e.is_at_rest)
        order = live.set_line(0, line.frequency_hz, line.amplitude_v)
        viewer.until(lambda e: e == LiveLines({0: line}, {0: line}, False, order))
        viewer.until(lambda e: e == LiveReply("set line: done"))
        order = live.set_line(1, other.frequency_hz, 0.3)  # beyond the limit
        viewer.until(lambda e: e == LiveLines({0: line}, {0: line}, False, order))
        order = live.rest()
        viewer.until(lambda e: e == LiveLines({}, {}, True, order))


def test_close_and_start_may_come_twice(tmp_path):
    with asked_board() as board:
        live = LiveSession(board.link.port, folder=tmp_path)
        assert live.start() is live.start()
        assert live.is_running
        live.close()
        live.close()
        assert not live.is_running
        assert live.poll() == []
        with pytest.raises(BridgeError, match=r"has ended$"):
            live.rest()
    assert board.codes()[-1] == CommandCode.STOP
    assert Path(tmp_path).exists()

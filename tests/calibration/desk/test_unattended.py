"""Unattended logging through what fails, and which channel is which."""

import logging
import threading

import numpy as np
import pytest

import firmware_bridge.recorder
from calibration.desk import unattended
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.log_folder import LogFolder, Retention
from calibration.desk.log_room import LeastRoom
from calibration.desk.logged_channels import ChannelChoice, LoggedChannels
from calibration.desk.unattended import LogSettings, UnattendedLog
from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.errors import DeviceFailedError
from firmware_bridge.live_events import LiveBlock
from firmware_bridge.port import PortError
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer

FULL = "bench.mfr cannot be written any further: the disk is full; nothing was recorded"


def recording(path, *channels, rate_hz=1000.0):
    Writer(path, Header(Announcement(1, rate_hz, "int16", 5, list(channels)))).close()
    return path


@pytest.fixture
def failing(monkeypatch):
    """Let the recorder fail as a list says, then end well; return its calls."""
    calls, failures = [], []

    def record(port, path, **options):
        calls.append((port, path, options))
        if failures:
            raise failures.pop(0)

    monkeypatch.setattr(firmware_bridge.recorder, "record", record)
    monkeypatch.setattr(unattended, "_AGAIN_S", 0.001)
    return calls, failures


def test_a_full_disk_is_waited_for_if_asked_and_told_once(failing, tmp_path, caplog):
    caplog.set_level(logging.WARNING, "calibration.desk")
    calls, failures = failing
    failures += [DeviceFailedError(FULL), DeviceFailedError(FULL), PortError("no such port")]
    folder = LogFolder(tmp_path / "bench", Retention())
    UnattendedLog(LogSettings("port", reconnect=True), folder, None).run(threading.Event())
    assert len(calls) == 4
    assert [r.getMessage() for r in caplog.records] == [
        f"{FULL}; trying again",
        "no such port; trying again",
    ]


@pytest.mark.parametrize("failure", [DeviceFailedError(FULL), PortError("no such port")])
def test_without_it_the_log_ends_as_the_recorder_does(failing, tmp_path, failure):
    _, failures = failing
    failures.append(failure)
    folder = LogFolder(tmp_path / "bench", Retention())
    with pytest.raises(type(failure), match=str(failure)):
        UnattendedLog(LogSettings("port"), folder, None).run(threading.Event())


class Lines:
    """Takes stretches, as the line log does."""

    def __init__(self):
        self.found, self.results, self.alarms = [], 0, []
        self.lines_hz = [31.7]

    def put(self, stretch, channels):
        self.found.append((stretch, channels))


def test_stretches_go_on_over_rotations_and_begin_anew_with_other_channels(monkeypatch, tmp_path):
    """Files of 300 samples, stretches of 400; then the board comes back with one channel."""

    def record(_port, path, *, on_block, next_path, **_options):
        for number in range(4):
            recording(path, ChannelInfo("x", "V"), ChannelInfo("pd", "V"))
            for k in range(300 * number, 300 * (number + 1), 100):
                count = np.arange(k, k + 100.0)
                on_block(LiveBlock(k, np.stack([0 * count, count], axis=1)))
            path = next_path(number + 2)
        recording(path, ChannelInfo("pd", "mV"))
        on_block(LiveBlock(1200, np.zeros((400, 1))))

    monkeypatch.setattr(firmware_bridge.recorder, "record", record)
    lines = Lines()
    settings = LogSettings("port", every_s=0.4, over_s=0.4)
    log = UnattendedLog(settings, LogFolder(tmp_path / "bench", Retention()), lines)
    summary = log.run(threading.Event())
    assert len(summary.files) == 5
    assert [channels.unit for _, channels in lines.found] == ["V", "V", "V", "mV"]
    for number, (stretch, _) in enumerate(lines.found[:3]):
        assert np.array_equal(stretch.values[:, 0], np.arange(400.0) + 400 * number)


@pytest.fixture
def kept(tmp_path):
    """Three recordings of another day, 3 kB, of which 2 kB may be kept."""
    for hour in range(3):
        (tmp_path / f"bench-20260101T{hour:02}0000Z.mfr").write_bytes(bytes(1000))
    return LogFolder(tmp_path / "bench", Retention(keep_bytes=2000))


def test_nothing_is_deleted_before_the_room_for_two_recordings_is_known(
    monkeypatch, kept, tmp_path
):
    """1000 lines a second of a channel of 2 bytes, five a frame of 56 bytes: 64 in the file."""

    def record(_port, path, *, on_block, progress, **_options):
        progress(None)
        recording(path, ChannelInfo("pd", "V"))
        on_block(LiveBlock(0, np.zeros((5, 1))))

    monkeypatch.setattr(firmware_bridge.recorder, "record", record)
    settings = LogSettings("port", room=LeastRoom(2000, 1.0, "--rotate-every"))
    log = UnattendedLog(settings, kept, Lines())
    with pytest.raises(
        LedgerError, match=r"two recordings of --rotate-every 1 s: 25\.\d+ kB at the"
    ):
        log.run(threading.Event())
    assert len(list(tmp_path.glob("*.mfr"))) == 3


def test_a_full_disk_is_made_room_on_whatever_the_board_sends(failing, kept, tmp_path):
    _, failures = failing
    failures.append(DeviceFailedError(FULL))
    settings = LogSettings("port", reconnect=True, room=LeastRoom(2000))
    UnattendedLog(settings, kept, Lines()).run(threading.Event())
    assert len(list(tmp_path.glob("*.mfr"))) == 2


def test_a_board_that_sends_more_later_is_recorded_on(tmp_path, caplog):
    slow = recording(tmp_path / "a.mfr", ChannelInfo("pd", "V"), rate_hz=1.0)
    fast = recording(tmp_path / "b.mfr", ChannelInfo("pd", "V"), rate_hz=10_000.0)
    settings = LogSettings("port", room=LeastRoom(200_000, 10.0, "--every"))
    log = UnattendedLog(settings, LogFolder(tmp_path / "x", Retention(200_000)), Lines())
    log._check_room(slow)  # a frame of 5 samples each half second at least: 128 bytes a second
    log._channels = LoggedChannels.of_recording(slow, ChannelChoice())
    with caplog.at_level("WARNING"):
        log._check_room(fast)
    assert "b.mfr: --keep-bytes must hold two recordings of --every 10 s: " in caplog.text


def test_channels_are_found_by_their_usual_or_given_names(tmp_path):
    pd, drive, warm = (
        ChannelInfo("photodiode", "V"),
        ChannelInfo("drive", "V"),
        ChannelInfo("t", "degC"),
    )
    path = recording(tmp_path / "a.mfr", drive, pd, warm)
    found = LoggedChannels.of_recording(path, ChannelChoice())
    assert (found.photodiode, found.drive, found.temperature) == (1, 0, None)
    found = LoggedChannels.of_recording(path, ChannelChoice("drive", "photodiode", "t"))
    assert (found.used, found.zero_k, found.rate_hz) == ([0, 1, 2], 273.15, 1000.0)
    found = LoggedChannels.of_recording(path, ChannelChoice("name:photodiode", "1"))
    assert (found.photodiode, found.drive) == (1, 0)
    with pytest.raises(LedgerError, match="no channel 'x'; the board has 'drive', 'photod"):
        LoggedChannels.of_recording(path, ChannelChoice(drive="x"))
    with pytest.raises(LedgerError, match="channel 'drive' must be in K or degC, got 'V'"):
        LoggedChannels.of_recording(path, ChannelChoice(temperature="drive"))
    unclear = recording(tmp_path / "b.mfr", ChannelInfo("a"), ChannelInfo("b"))
    with pytest.raises(LedgerError, match="several channels; give --channel: 'a', 'b'"):
        LoggedChannels.of_recording(unclear, ChannelChoice())
    single = recording(tmp_path / "c.mfr", ChannelInfo("a"))
    assert LoggedChannels.of_recording(single, ChannelChoice()).used == [0]

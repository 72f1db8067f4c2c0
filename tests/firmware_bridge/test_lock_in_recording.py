"""Boards that send lock-in results: recorded, inspected and exported, with samples and without."""

import contextlib
import csv
import json
import threading
import time

import numpy as np
import pytest
from wire_board import RATE_HZ, SLOTS, PtyLink, WireBoard, ramp

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.decoder import Command, Decoder
from firmware_bridge.envelope import Unwrapper
from firmware_bridge.errors import DeviceFailedError
from firmware_bridge.frame import encode_frame
from firmware_bridge.intake import Intake
from firmware_bridge.lock_in_recording import LockInRecording
from firmware_bridge.lock_in_start import LockInError, LockInStart
from firmware_bridge.message import CommandCode, LockIn, Reply, encode_lock_in, encode_reply
from firmware_bridge.opening import open_lock_in, open_recording
from firmware_bridge.recorder import record
from firmware_bridge.recording import NoSampleError, open_mfr
from firmware_bridge.recording_header import RecordingError
from metro.commandline import run

LENGTH, SHIFT, SCALE = 1000, 14, 0.5
STEPS = {round(87.1 / RATE_HZ * 2**32): (300.0, 0.4), round(31.7 / RATE_HZ * 2**32): (20.0, -2.0)}


def result(index, steps=STEPS, stream=1, length=LENGTH):
    """Sums over real samples, as SPEC.md has them: carriers from the board's index 0."""
    n = index + np.arange(length)
    turns = {step: (n * step % 2**32) * (2 * np.pi / 2**32) for step in steps}
    samples = np.rint(sum(a * np.cos(turns[s] + p) for s, (a, p) in steps.items()))
    lines = tuple(
        (
            step,
            *(int(np.rint(np.sum(samples * 2**SHIFT * f(turns[step])))) for f in (np.cos, np.sin)),
        )
        for step in steps
    )
    return LockIn(stream, index, length, 0, SHIFT, lines)


def announced(stream=1):
    infos = [ChannelInfo("pd", "V", SCALE), ChannelInfo("drive", "V", 1.0)]
    return encode_announcement(Announcement(stream, RATE_HZ, "int16", SLOTS, infos))


def recorded(path, results, samples=(), duration_s=None):
    intake = Intake(path, duration_s=duration_s)
    frames = [
        encode_frame(ramp(k * SLOTS, SLOTS), index=k * SLOTS, sequence=k, stream=1) for k in samples
    ]
    for data in [announced(), *frames, *map(encode_lock_in, results)]:
        for piece in Unwrapper().feed(data):
            intake.take(piece, time.monotonic_ns(), time.time_ns())
    intake.close()
    return intake


FIRST = 12_345  # where we came in


def test_amplitudes_and_phases_are_those_of_the_recordings_own_time(tmp_path):
    path = tmp_path / "a.mfr"
    intake = recorded(path, [result(FIRST + k * LENGTH) for k in range(6) if k != 3])
    assert (intake.samples, intake.lock_ins, intake.reached) == (0, 5, 6 * LENGTH)
    recording = open_recording(path)
    assert isinstance(recording, LockInRecording)
    assert recording.rate_hz == RATE_HZ / LENGTH
    assert [(gap.index, gap.length) for gap in recording.gaps] == [(3, 1)]
    assert (
        recording.remarks
        == [
            "lock-in results of the board, each over 0.5 s; it sent no samples",
            "1 place without a result",
        ][:1]
    )
    names = [channel.name for channel in recording.channels]
    assert names == [
        "pd 31.7 Hz amplitude",
        "pd 31.7 Hz phase",
        "pd 87.1 Hz amplitude",
        "pd 87.1 Hz phase",
    ]
    assert [channel.unit for channel in recording.channels] == ["V", "rad"] * 2
    for step, (amplitude, phase_rad) in STEPS.items():
        name = f"pd {step * RATE_HZ / 2**32:.7g} Hz"
        values = recording.trace(f"{name} amplitude").values
        phases = recording.trace(f"{name} phase").values
        assert np.flatnonzero(np.isnan(values)).tolist() == [3]
        # what the other line leaves over in a length that is no whole number of beats: under
        # 1/(pi * 55 Hz * 0.5 s) = 1.2 % of it, and 300 is 15 times 20
        tolerance = 0.02 * 300 / amplitude
        np.testing.assert_allclose(np.delete(values, 3), amplitude * SCALE, rtol=tolerance)
        expected = phase_rad + 2 * np.pi * (step * FIRST % 2**32) / 2**32
        apart = np.angle(np.exp(1j * (np.delete(phases, 3) - expected)))
        np.testing.assert_allclose(apart, 0, atol=tolerance)


def test_the_duration_is_counted_by_the_results(tmp_path):
    results = [result(FIRST + k * LENGTH) for k in range(20)]
    intake = recorded(tmp_path / "a.mfr", results, duration_s=3.0)
    assert intake.is_complete
    assert open_recording(tmp_path / "a.mfr").length == 6


def test_with_samples_both_are_read_from_one_file(tmp_path):
    path = tmp_path / "a.mfr"
    recorded(path, [result(k * LENGTH) for k in range(2)], samples=range(40))
    recording = open_mfr(path)
    assert recording.length == 2000
    assert recording.remarks == ["2 lock-in results beside (inspect --lock-in)"]
    assert open_lock_in(path).length == 2
    assert open_lock_in(path).remarks == ["lock-in results of the board, each over 0.5 s"]


def test_without_either_it_is_no_recording(tmp_path):
    path = tmp_path / "a.mfr"
    recorded(path, [], samples=range(2))
    with pytest.raises(RecordingError, match=r"holds no sample and no lock-in result$"):
        open_lock_in(path)
    recorded(tmp_path / "b.mfr", [result(0)])
    with pytest.raises(NoSampleError, match=r"holds no sample, only 1 lock-in result$"):
        open_mfr(tmp_path / "b.mfr")


def test_inspect_and_export_take_them(tmp_path, capsys):
    path, table = tmp_path / "a.mfr", tmp_path / "a.csv"
    recorded(path, [result(FIRST + k * LENGTH) for k in range(6)])
    assert run(["inspect", str(path), "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    means = {c["name"]: c["mean"]["value"] for c in found["channels"]}
    assert means["pd 87.1 Hz amplitude"] == pytest.approx(150, rel=0.01)
    assert run(["export", str(path), "--out", str(table)]) == 0
    rows = list(csv.reader(table.read_text().splitlines()))
    assert rows[0] == [
        "time_s",
        "pd 31.7 Hz amplitude [V]",
        "pd 31.7 Hz phase [rad]",
        "pd 87.1 Hz amplitude [V]",
        "pd 87.1 Hz phase [rad]",
    ]
    assert [float(row[0]) for row in rows[1:]] == [0.5 * k for k in range(6)]
    arrays = tmp_path / "a.npz"
    assert run(["export", "--lock-in", str(path), "--out", str(arrays)]) == 0
    with np.load(arrays) as loaded:
        np.testing.assert_allclose(loaded["pd 87.1 Hz amplitude"], 150, rtol=0.01)


def test_results_that_cannot_be_true_do_not_break_the_reading(tmp_path):
    path = tmp_path / "a.mfr"
    odd = [
        LockIn(1, 2**64 - 1, 2**32 - 1, 200, 255, ((2**32 - 1, 2**63 - 1, -(2**63)),)),
        LockIn(1, 2**40, LENGTH, 200, SHIFT, ((1, 5, 5),)),
        LockIn(1, 0, 0, 0, 0, ()),
    ]
    recorded(path, [result(0), result(LENGTH), *odd])
    with contextlib.suppress(RecordingError):  # 2^40 samples on: more than can be true
        open_lock_in(path)


def on_a_port(tmp_path, send, **settings):
    with contextlib.closing(PtyLink()) as link:

        def run_board():
            with contextlib.suppress(OSError):
                while not link.received():
                    time.sleep(0.005)
                send(link)

        thread = threading.Thread(target=run_board, daemon=True)
        thread.start()
        try:
            return record(link.port, tmp_path / "a.mfr", **settings)
        finally:
            thread.join(3)


def test_a_board_that_sends_nothing_else_is_recorded(tmp_path):
    def send(link):
        link.send(announced())
        for k in range(8):
            time.sleep(0.02)
            link.send(encode_lock_in(result(k * LENGTH)))

    summary = on_a_port(tmp_path, send, duration_s=4.0, lock_in=LockInStart("pd", 0.5))
    assert (summary.samples, summary.lock_ins, summary.duration_s) == (0, 8, 4.0)
    assert summary.file == tmp_path / "a.mfr"
    recording = open_recording(summary.file)
    assert (recording.length, recording.has_end) == (8, True)


@pytest.mark.slow
def test_a_board_that_only_answers_has_stalled(tmp_path):
    def send(link):
        board = WireBoard(link)
        board.announce()
        board.send(10)
        for _ in range(150):
            time.sleep(0.1)
            link.send(encode_reply(Reply(CommandCode.RAMP, 1)))

    with pytest.raises(DeviceFailedError) as error:
        on_a_port(tmp_path, send)
    assert "sent no valid frame for 10 s, though it answers; kept 500 samples" in str(error.value)


@pytest.mark.parametrize(
    ("channel", "time_s", "message"),
    [
        ("nix", 1.0, "the board has no channel 'nix'; it has 1 'pd', 2 'drive'"),
        ("3", 1.0, "the board has no channel '3'; it has 1 'pd', 2 'drive'"),
        ("pd", 1e-4, "a lock-in over 0.0001 s would take 0 samples; 1 to 2^32 - 1 are possible"),
    ],
)
def test_a_lock_in_that_cannot_be_is_refused(channel, time_s, message):
    board = Announcement(1, RATE_HZ, "int16", SLOTS, [ChannelInfo("pd"), ChannelInfo("drive")])
    with pytest.raises(LockInError) as error:
        LockInStart(channel, time_s).arguments(board)
    assert str(error.value) == message


def test_the_lock_in_asked_for_is_the_specifications():
    board = Announcement(1, RATE_HZ, "int16", SLOTS, [ChannelInfo("pd"), ChannelInfo("drive")])
    for channel in ("drive", "2"):
        assert LockInStart(channel, 0.5).arguments(board) == bytes([2, 1, 0, 0, 232, 3, 0, 0])


@pytest.mark.slow
def test_a_board_that_was_reset_is_started_again(tmp_path):
    """As a board of the specification does: after a reset it announces itself and waits."""
    starts = []

    def send(link):
        board, decoder, begun = WireBoard(link), Decoder(), time.monotonic()
        board.announce()
        board.send(10)
        board = WireBoard(link, stream=9)
        board.announce()
        while time.monotonic() < begun + 8 and not board.next:
            for event in decoder.feed(link.received()):
                if isinstance(event, Command) and event.code == CommandCode.START:
                    starts.append(event)
                    board.send(140)
            time.sleep(0.01)

    summary = on_a_port(tmp_path, send, duration_s=3.0)
    assert summary.samples == 6000
    assert len(starts) == 1
    assert not summary.gaps[0].exact

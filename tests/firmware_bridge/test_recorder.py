import contextlib
import os
import resource
import threading
import time

import numpy as np
import pytest
import serial
from wire_board import RATE_HZ, SLOTS, PtyLink, Rfc2217Link, SocketLink, WireBoard, ramp

from firmware_bridge.decoder import Command, Decoder
from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.gap import Gap
from firmware_bridge.message import CommandCode
from firmware_bridge.port import Port, PortError
from firmware_bridge.recorder import record
from firmware_bridge.recording import NO_END, open_mfr


@pytest.fixture
def background():
    """Run something beside the recorder; an error when the recorder hangs up is none."""
    threads = []

    def begin(send):
        def run():
            with contextlib.suppress(OSError):
                send()

        threads.append(threading.Thread(target=run, daemon=True))
        threads[-1].start()

    yield begin
    for thread in threads:
        thread.join(5)


@pytest.fixture
def pty(background):  # closed first, so that nobody waits for room in it
    with contextlib.closing(PtyLink()) as link:
        yield link


@pytest.fixture
def in_background(background):
    """Run ``send`` once the recorder has opened the terminal and asked."""

    def begin(link, send):
        def run():
            until = time.monotonic() + 5
            while not link.received() and time.monotonic() < until:
                time.sleep(0.005)
            send()

        background(run)

    return begin


def check_ramp(path, length, gaps=()):
    recording = open_mfr(path)
    assert recording.length == length
    assert recording.gaps == list(gaps)
    there = np.ones(length, bool)
    for gap in gaps:
        there[gap.index : gap.index + gap.length] = False
    expected = ramp(0, length)
    np.testing.assert_array_equal(recording.trace("pd").values[there], expected[there, 0] * 0.5)
    assert np.isnan(recording.trace("pd").values[~there]).all()


@pytest.mark.parametrize("duration_s", [1.0, 0.3337, 0.0251])
def test_the_duration_counts_the_boards_samples_exactly(pty, tmp_path, duration_s, in_background):
    board = WireBoard(pty)
    in_background(pty, lambda: board.run(60))
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=duration_s)
    assert summary.samples == round(duration_s * RATE_HZ)
    assert summary.duration_s == summary.samples / RATE_HZ
    check_ramp(tmp_path / "a.mfr", summary.samples)


@pytest.mark.parametrize("end", ["duration", "size", "stop"])
def test_a_recording_that_ends_as_asked_says_so(pty, tmp_path, in_background, end):
    board = WireBoard(pty)
    stop = threading.Event()

    def send():
        board.run(60)
        if end == "stop":
            time.sleep(0.3)
            stop.set()

    in_background(pty, send)
    asked = (
        {"duration_s": 0.7} if end == "duration" else {"size_bytes": 8000} if end == "size" else {}
    )
    summary = record(pty.port, tmp_path / "a.mfr", stop=stop, **asked)
    recording = open_mfr(tmp_path / "a.mfr")
    assert (recording.has_end, recording.remarks) == (True, [])
    assert (recording.length, recording.gaps) == (summary.samples, [])
    assert summary.samples > 500


def test_damaged_frames_become_exact_gaps_of_the_recording(pty, tmp_path, in_background):
    def damage(number, frame):
        if number in (3, 4):
            return b""
        if number == 8:
            return frame[:20] + bytes([frame[20] ^ 1]) + frame[21:]
        return frame + frame if number == 6 else frame

    board = WireBoard(pty, damage=damage)
    in_background(pty, lambda: board.run(200))
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=0.5)
    gaps = [Gap(3 * SLOTS, 2 * SLOTS), Gap(8 * SLOTS, SLOTS)]
    assert summary.gaps == gaps
    assert summary.bytes_discarded > 2 * 4 * SLOTS
    # Of the two pieces, the frame that came twice costs nothing.
    assert 4 * SLOTS < summary.discarded_midway < summary.bytes_discarded - 4 * SLOTS
    assert summary.reasons == [
        "2 gaps, 150 of 1000 samples missing (15.000%)",
        f"{summary.discarded_midway} bytes discarded midway",
    ]
    check_ramp(tmp_path / "a.mfr", 1000, gaps)


def test_a_gap_at_the_very_end_keeps_the_length_exact(pty, tmp_path, in_background):
    board = WireBoard(pty, damage=lambda number, frame: b"" if number == 19 else frame)
    in_background(pty, lambda: board.run(200))
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=0.5)
    assert summary.samples == 1000
    check_ramp(tmp_path / "a.mfr", 1000, [Gap(950, 50)])


def test_the_board_is_asked_and_told_to_start_and_stop(pty, tmp_path):
    seen = []
    decoder = Decoder()

    def board_side():
        board = WireBoard(pty)
        until = time.monotonic() + 5
        while time.monotonic() < until:
            seen.extend(decoder.feed(pty.received()))
            codes = [event.code for event in seen if isinstance(event, Command)]
            if codes[-1:] == [CommandCode.STOP]:
                return
            if CommandCode.START in codes and not board.next:
                board.announce()
                board.send(10)
            time.sleep(0.005)

    thread = threading.Thread(target=board_side, daemon=True)
    thread.start()
    record(pty.port, tmp_path / "a.mfr", duration_s=0.2)
    thread.join()
    codes = [event.code for event in seen if isinstance(event, Command)]
    assert codes == [CommandCode.IDENTIFY, CommandCode.START, CommandCode.STOP]


def test_a_restarted_board_goes_on_in_the_same_recording_by_the_hosts_clock(
    pty, tmp_path, in_background
):
    def send():
        first, second = WireBoard(pty, stream=1), WireBoard(pty, stream=2)
        first.announce()
        first.send(4, paced=True)
        time.sleep(0.3)
        second.announce()
        second.send(60, paced=True)

    in_background(pty, send)
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=0.8)
    assert summary.samples == 1600
    (gap,) = summary.gaps
    assert (gap.index, gap.exact) == (200, False)
    # 0.3 s of silence; a loaded test machine adds to it.
    assert 0.28 * RATE_HZ < gap.length < 0.5 * RATE_HZ
    assert 0 < gap.length_u < 0.1 * RATE_HZ


def test_another_rate_goes_on_in_another_file(pty, tmp_path, in_background):
    def send():
        for stream, rate_hz in ((1, RATE_HZ), (2, 500.0)):
            board = WireBoard(pty, stream=stream, rate_hz=rate_hz)
            board.announce()
            board.send(10)

    in_background(pty, send)
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=1.0)
    assert [path.name for path in summary.files] == ["a.mfr", "a-2.mfr"]
    first, second = map(open_mfr, summary.files)
    assert (first.rate_hz, first.length) == (RATE_HZ, 500)
    assert (second.rate_hz, second.length) == (500.0, 375)
    assert summary.duration_s == pytest.approx(1.0, abs=1e-12)


def test_a_port_gone_midway_says_what_was_kept(tmp_path, background):
    with contextlib.closing(SocketLink()) as link:

        def send():
            board = WireBoard(link)
            board.announce()
            board.send(10)
            link.hang_up()

        background(send)
        with pytest.raises(DeviceFailedError) as error:
            record(link.port, tmp_path / "a.mfr", duration_s=60.0)
        assert str(error.value) == (
            f"{link.port} failed: the other side closed the connection; "
            f"kept 500 samples (0.25 s) in {tmp_path / 'a.mfr'}"
        )
        assert error.value.exit_code == 3
        check_ramp(tmp_path / "a.mfr", 500)


def test_reconnecting_goes_on_with_the_known_gap(tmp_path, background):
    with contextlib.closing(SocketLink()) as link:

        def send():
            board = WireBoard(link)
            board.announce()
            board.send(10)
            link.hang_up()
            board.next += 300  # the board went on counting
            board.send(40)

        background(send)
        summary = record(link.port, tmp_path / "a.mfr", duration_s=1.0, reconnect=True)
        assert summary.gaps == [Gap(500, 300)]
        check_ramp(tmp_path / "a.mfr", 2000, [Gap(500, 300)])
        texts = [note.text for note in open_mfr(tmp_path / "a.mfr").notes]
        assert f"{link.port} is back" in texts


def test_a_loop_is_a_port_too(tmp_path):
    class LoopLink:
        def __init__(self):
            self.serial = serial.serial_for_url("loop://", timeout=0.05)
            self.send = self.serial.write

    link = LoopLink()
    WireBoard(link).run(12)  # all before the recorder's own commands come round in the loop
    record(Port("loop://", link.serial), tmp_path / "a.mfr", duration_s=0.25)
    check_ramp(tmp_path / "a.mfr", 500)


def test_a_stop_event_ends_it_with_everything_kept(pty, tmp_path, in_background):
    stop = threading.Event()

    def send():
        board = WireBoard(pty)
        board.announce()
        board.send(8)
        time.sleep(0.2)
        stop.set()

    in_background(pty, send)
    summary = record(pty.port, tmp_path / "a.mfr", stop=stop)
    assert summary.samples == 400


def test_a_silent_port_is_named_where_lines_are_expected(pty, tmp_path, monkeypatch):
    monkeypatch.setattr("firmware_bridge.silence._SILENCE_S", 0.3)
    with pytest.raises(DeviceFailedError) as error:
        record(pty.port, tmp_path / "a.mfr", duration_s=1.0, text=True)
    assert error.value.exit_code == 3
    assert str(error.value) == (
        f"{pty.port} sent nothing for 0.3 s (is it the right port? --reconnect waits for a first "
        "line); nothing was recorded"
    )
    assert not (tmp_path / "a.mfr").exists()


def test_waiting_for_a_first_line_is_said_once(pty, tmp_path, monkeypatch, caplog):
    monkeypatch.setattr("firmware_bridge.silence._SILENCE_S", 0.2)
    stop = threading.Event()
    threading.Timer(0.9, stop.set).start()
    record(pty.port, tmp_path / "a.mfr", text=True, rate_hz=50.0, reconnect=True, stop=stop)
    waiting = f"{pty.port} sent nothing for 0.2 s; waiting for a line"
    assert [entry.message for entry in caplog.records].count(waiting) == 1


def test_a_silent_board_is_named_and_nothing_is_left(pty, tmp_path, monkeypatch):
    monkeypatch.setattr("firmware_bridge.silence._SILENCE_S", 0.3)
    with pytest.raises(DeviceFailedError) as error:
        record(pty.port, tmp_path / "a.mfr", duration_s=1.0)
    assert str(error.value) == (f"{pty.port}: the board is silent for 0.3 s; nothing was recorded")
    assert not (tmp_path / "a.mfr").exists()


def test_noise_of_a_wrong_speed_is_named(pty, tmp_path, monkeypatch, in_background):
    monkeypatch.setattr("firmware_bridge.silence._SILENCE_S", 0.3)
    in_background(pty, lambda: pty.send(os.urandom(500)))
    with pytest.raises(
        DeviceFailedError,
        match=r"500 bytes came in 0\.3 s and no valid frame is in them \(is 115200 baud right\?\)",
    ):
        record(pty.port, tmp_path / "a.mfr", duration_s=1.0)


def test_two_programs_on_one_port_are_refused(pty, tmp_path):
    with serial.Serial(pty.port, exclusive=True), pytest.raises(PortError) as error:
        record(pty.port, tmp_path / "a.mfr")
    assert str(error.value) == (
        f"{pty.port} cannot be opened: it is busy: another program has it open"
    )


def test_an_existing_recording_is_kept(pty, tmp_path):
    (tmp_path / "a.mfr").write_bytes(b"precious")
    with pytest.raises(BridgeError):
        record(pty.port, tmp_path / "a.mfr")
    assert (tmp_path / "a.mfr").read_bytes() == b"precious"


def test_lines_of_numbers_become_a_recording(pty, tmp_path, background):
    def send():
        time.sleep(0.1)
        pty.send(b"17, 2.5\r\nboard v1\r\n")
        for k in range(60):
            pty.send(b"%d, %.2f\r\n" % (k * k, k / 4))

    background(send)
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=0.5, text=True, rate_hz=100.0)
    assert summary.samples == 50
    recording = open_mfr(tmp_path / "a.mfr")
    np.testing.assert_array_equal(recording.trace("1").values, np.arange(50) ** 2)
    np.testing.assert_allclose(recording.trace("2").values, np.arange(50) / 4, atol=1e-12)


@pytest.mark.slow
def test_a_rate_by_the_hosts_clock_is_remarked_and_fitted_over_all(pty, tmp_path, background):
    def send():
        for k in range(2000):
            pty.send(b"%d\n" % (k % 7))
            time.sleep(0.01)

    background(send)
    summary = record(pty.port, tmp_path / "a.mfr", duration_s=3.0, text=True)
    recording = open_mfr(tmp_path / "a.mfr")
    assert recording.remarks == ["the rate is by the host's clock"]
    assert recording.timing.is_by_host
    assert 30 < recording.rate_hz < 100  # sleeps of 10 ms on a loaded machine
    # The duration counts lines at the rate of the first seconds.
    assert summary.samples == pytest.approx(3.0 * recording.rate_hz, rel=0.3)


def test_the_last_lines_before_the_end_are_kept(pty, tmp_path, background):
    stop = threading.Event()

    def send():
        time.sleep(0.1)
        pty.send(b"x\n" + b"".join(b"%d\n" % (k * k) for k in range(37)))
        time.sleep(0.1)
        stop.set()

    background(send)
    record(pty.port, tmp_path / "a.mfr", text=True, rate_hz=10.0, stop=stop)
    values = open_mfr(tmp_path / "a.mfr").trace("1").values
    np.testing.assert_array_equal(values, np.arange(37) ** 2)


@pytest.mark.parametrize("size_bytes", [5000, 20_000])
def test_a_size_ends_a_recording_before_it_is_exceeded(pty, tmp_path, in_background, size_bytes):
    in_background(pty, lambda: WireBoard(pty).run(500))
    summary = record(pty.port, tmp_path / "a.mfr", size_bytes=size_bytes)
    assert size_bytes - 2000 < (tmp_path / "a.mfr").stat().st_size <= size_bytes
    check_ramp(tmp_path / "a.mfr", summary.samples)


def test_a_disk_that_fills_up_says_what_was_kept(pty, tmp_path, in_background):
    in_background(pty, lambda: WireBoard(pty).run(500))
    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, before[1]))
    try:
        with pytest.raises(DeviceFailedError) as error:
            record(pty.port, tmp_path / "a.mfr")
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)
    kept = open_mfr(tmp_path / "a.mfr")
    assert kept.length > 3000
    assert str(error.value) == (
        f"{tmp_path / 'a.mfr'} cannot be written any further: a file may not be larger here; "
        f"kept {kept.length} samples ({kept.duration_s:.4g} s) in {tmp_path / 'a.mfr'}"
    )
    check_ramp(tmp_path / "a.mfr", kept.length)
    assert kept.remarks == [NO_END]


def test_text_where_frames_are_expected_is_named(pty, tmp_path, monkeypatch, in_background):
    monkeypatch.setattr("firmware_bridge.silence._SILENCE_S", 0.3)
    in_background(pty, lambda: pty.send(b"1 2 3\r\n" * 40))
    with pytest.raises(DeviceFailedError, match="text and no frames"):
        record(pty.port, tmp_path / "a.mfr", duration_s=1.0)


@pytest.mark.parametrize("sent", [b"\x80\xfe\xf8\x00" * 100, b"\x80\xfe\xf8\x0a" * 100])
def test_noise_where_lines_are_expected_is_named(pty, tmp_path, monkeypatch, background, sent):
    monkeypatch.setattr("firmware_bridge.silence._SILENCE_S", 0.3)

    def send():
        time.sleep(0.1)
        pty.send(sent)

    background(send)
    with pytest.raises(DeviceFailedError) as error:
        record(pty.port, tmp_path / "a.mfr", text=True)
    frames = ", or does it send frames, without --text" if 0 in sent else ""
    assert str(error.value) == (
        f"{pty.port}: 400 bytes came in 0.3 s and no line of numbers is in them "
        f"(is 115200 baud right{frames}?); nothing was recorded"
    )


@pytest.mark.slow
def test_lines_stay_in_one_recording_across_a_reconnection(tmp_path, background):
    with contextlib.closing(SocketLink()) as link:

        def send():
            link.accept_quietly()
            link.send(b"x\n" + b"".join(b"%d %d\n" % (20 * k, k % 9) for k in range(150)))
            link.hang_up()
            link.accept_quietly()
            link.send(b"0 5\n" + b"".join(b"%d %d\n" % (20 * k, k % 9) for k in range(190, 400)))
            link.hang_up_for_good()

        background(send)
        record(
            link.port, tmp_path / "a.mfr", text=True, rate_hz=50.0, reconnect=True, duration_s=7.0
        )
    recording = open_mfr(tmp_path / "a.mfr")
    assert [(gap.index, gap.length) for gap in recording.gaps] == [(150, 40)]
    values = recording.trace("2").values
    np.testing.assert_array_equal(values[190:350], np.arange(190, 350) % 9)


def test_a_port_over_rfc2217_is_a_port_too(tmp_path, background):
    with contextlib.closing(Rfc2217Link()) as link:

        def send():
            link.accept()
            WireBoard(link).run(40)

        background(send)
        record(link.port, tmp_path / "a.mfr", duration_s=1.0)
    check_ramp(tmp_path / "a.mfr", 2000)

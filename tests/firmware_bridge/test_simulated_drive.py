"""Lines set over the wire move the simulated board's mirror and its drive channel, by a ramp."""

import time
from pathlib import Path

import numpy as np
import pytest

import firmware_bridge.simulated as package
from firmware_bridge.arguments import (
    clear_arguments,
    line_arguments,
    phase_step,
    ramp_arguments,
)
from firmware_bridge.decoder import Announcement, Command, Decoder, Reply, Samples
from firmware_bridge.lock_in_start import LockInError, LockInStart
from firmware_bridge.message import CommandCode, encode_command
from firmware_bridge.port import open_port
from firmware_bridge.recorder import record
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard
from firmware_bridge.simulated.live_drive import FADE_S, LiveDrive
from firmware_bridge.simulated.setup import Setup, Tone
from firmware_bridge.simulated.wired_drive import WiredDrive
from metro.bench import load_bench

FULL_V = 50.0 * 32767 / 32768  # the bench file: a converter of +-5 V behind a divider of 10


@pytest.fixture(scope="module")
def bench():
    return SimulatedBench(load_bench(Path(package.__file__).with_name("bench.toml")), 3)


def set_line(slot, frequency_hz, volts, phase_rad=0.0, rate_hz=4000.0):
    arguments = line_arguments(slot, phase_step(frequency_hz, rate_hz), volts / FULL_V, phase_rad)
    return Command(CommandCode.SET_LINE, 0, arguments)


def test_a_line_fades_in_and_out_and_keeps_its_phase(bench):
    wired = WiredDrive(bench)
    stream = bench.start(Setup(1.0, slope="rising"), drive=wired.drive)
    quiet = stream.block(4000)
    assert wired.maybe_refusal(set_line(0, 87.1, 2.0, 0.4)) == ""
    begins, on = 4000 + 24, stream.block(8000)  # what the filter has seen already stays
    assert wired.maybe_refusal(Command(CommandCode.CLEAR_LINE, 0, clear_arguments())) == ""
    off = stream.block(4000)
    codes = np.concatenate([quiet, on, off])[:, 1] * bench.converter.step_v
    n = np.arange(codes.size)
    truth = bench.truth
    step = phase_step(87.1, 4000.0)
    delay = truth.channel_delay_s * bench.rate_hz * (1 + truth.clock)
    line = np.cos(2 * np.pi * step / 2**32 * (n + delay) + 0.4)
    level = np.interp(n, [begins, begins + 200, 12024, 12224], [0, 0.2, 0.2, 0])
    # scale 0.15 %, divider 0.15 %, anti-alias pole 0.2 % and its 58 mrad, noise 0.2 mV rms
    assert np.max(np.abs(codes - level * line)) < 0.015
    np.testing.assert_allclose(codes[:begins], 0, atol=3e-3)
    np.testing.assert_allclose(codes[12_250:], 0, atol=3e-3)
    photodiode = np.concatenate([quiet, on, off])[:, 0].astype(float)
    carrier = np.exp(-2j * np.pi * step / 2**32 * n)

    def size(part):
        window = np.hanning(part.stop - part.start)
        centred = photodiode[part] - photodiode[part].mean()
        return abs(np.sum(window * centred * carrier[part])) / window.sum()

    assert size(slice(5000, 12_000)) > 20 * size(slice(0, 4000))
    assert size(slice(5000, 12_000)) > 20 * size(slice(12_500, 16_000))


def test_the_ramp_is_even_and_a_change_begins_where_the_line_is():
    drive = LiveDrive()
    drive.advance(1.0)
    drive.set(0, Tone(10.0, 2.0))
    drive.advance(1.0 + FADE_S / 2)
    drive.set(0, Tone(10.0, 4.0))  # midway
    time_s = np.array([1.0 + FADE_S / 2, 1.0 + FADE_S, 1.0 + 1.5 * FADE_S, 2.0])
    level = drive.volts(time_s, lambda _: 1.0 + 0j) / np.cos(2 * np.pi * 10 * time_s)
    np.testing.assert_allclose(level, [1.0, 2.5, 4.0, 4.0], rtol=1e-12)
    drive.ramp(3.0, 0.5)
    offset = drive.volts(np.array([2.0]), lambda f: 1.0 + 0j if not f else 0j)
    np.testing.assert_allclose(offset, [3.0])
    drive.rest()
    assert abs(drive.volts(np.array([9.0]), lambda _: 1.0 + 0j)[0]) == 0.0


def test_what_the_drive_cannot_do_is_refused(bench):
    wired = WiredDrive(bench)
    assert wired.maybe_refusal(set_line(0, 87.1, 30.0)) == ""
    assert wired.maybe_refusal(set_line(1, 31.7, 30.0)) == "beyond the range"
    assert wired.maybe_refusal(set_line(6, 31.7, 1.0)) == "no such line"
    assert wired.maybe_refusal(Command(CommandCode.RAMP, 0, ramp_arguments(0.5, 10))) == (
        "beyond the range"
    )
    assert wired.maybe_refusal(Command(CommandCode.RAMP, 0, ramp_arguments(0.1, 0))) == (
        "no such ramp"
    )
    assert wired.maybe_refusal(Command(CommandCode.SET_LINE, 0, b"")) == "wrong length"


@pytest.mark.slow
def test_in_real_time_the_board_answers_and_rests_when_the_host_is_silent(bench):
    decoder, events = Decoder(), []
    wanted = set_line(0, 87.1, 2.0).arguments
    with SimulatedBoard(bench, Setup(1.0, slope="rising"), speed=1.0) as board:
        port = open_port(board.port)
        port.write(encode_command(CommandCode.START, 1))
        begun_s = time.monotonic()
        while time.monotonic() < begun_s + 3.2:
            if not any(isinstance(e, Reply) and e.code == CommandCode.SET_LINE for e in events):
                port.write(encode_command(CommandCode.SET_LINE, 2, wanted))
            events += decoder.feed(port.read())
        took_s = time.monotonic() - begun_s
        port.close()
    announced = next(e for e in events if isinstance(e, Announcement))
    assert announced.speed == 1.0
    drive_v = np.concatenate([e.data for e in events if isinstance(e, Samples)])[:, 1] * (
        bench.converter.step_v
    )
    assert 0.5 * 4000 * took_s < drive_v.size < 1.1 * 4000 * took_s
    loud = np.flatnonzero(np.abs(drive_v) > 0.1)
    assert 1.8 * 4000 < loud[-1] - loud[0] < 2.4 * 4000  # 2 s of silence, then to rest
    np.testing.assert_allclose(drive_v[loud[-1] + 400 :], 0, atol=3e-3)


def test_without_a_lock_in_the_board_refuses_one_in_one_line(bench, tmp_path):
    with SimulatedBoard(bench, Setup(1.0, slope="rising"), speed=1.0) as board:
        with pytest.raises(LockInError) as error:
            record(board.port, tmp_path / "a.mfr", lock_in=LockInStart("photodiode", 0.5))
        assert str(error.value) == (f"{board.port}: the board refuses the lock-in: no such start")
    assert list(tmp_path.iterdir()) == []

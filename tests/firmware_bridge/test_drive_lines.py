"""Drive lines from volts to commands, and a recording that drives: before, during, after."""

import re
import struct
import subprocess
import sys
import threading
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from wire_board import RATE_HZ, announced, asked_board

import firmware_bridge.simulated as package
from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines, full_scale_v
from firmware_bridge.errors import BridgeError
from firmware_bridge.message import CommandCode
from firmware_bridge.recorder import record
from firmware_bridge.recording import open_mfr
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard
from firmware_bridge.simulated.setup import Setup
from metro.bench import load_bench
from metro.commandline import run

BENCH = Path(package.__file__).with_name("bench.toml")


def board(**drive):
    channels = [ChannelInfo("pd", "V", 1e-3), ChannelInfo(**{"name": "drive", "unit": "V"} | drive)]
    return Announcement(1, 2000.0, "int16", 50, channels)


@pytest.mark.parametrize(
    ("drive", "full_v"),
    [
        ({"scale": 2.0**-10, "low": -2048, "high": 2047}, 2047 / 1024),
        ({"scale": 3.3 / 65536, "offset": 1.65}, 3.3 * (1 - 2**-16)),
        ({"scale": 1e-3}, 32.767),
        ({"scale": 1e-3, "unit": "mV"}, None),
        ({"scale": 1e-3, "name": "monitor"}, None),
    ],
)
def test_full_scale_is_what_the_drive_channel_shows_at_its_highest_code(drive, full_v):
    assert full_scale_v(board(**drive)) == pytest.approx(full_v)


def test_a_line_becomes_a_command_as_the_specification_has_it():
    lines = DriveLines(1.0, terminal_factor=10.0)
    lines.set(1, DriveLine(40.0, 0.5, -np.pi / 2))
    code, arguments = lines.request(1, board(scale=2.0**-10, low=-2048, high=2047), part=0.5)
    assert code == CommandCode.SET_LINE
    slot, _, amplitude, step, phase = struct.unpack("<BBHII", arguments)
    assert slot == 1
    assert amplitude == round(0.5 * 0.5 / 10 / (2047 / 1024) * 65536)
    assert step == round(40.0 / 2000.0 * 2**32)
    assert phase == 3 * 2**30


def test_lines_fall_evenly_and_end_in_rest():
    lines = DriveLines(1.0)
    lines.set(0, DriveLine(40.0, 1.0))
    steps = list(lines.fall(board(scale=2.0**-10, low=-2048, high=2047)))
    sizes = [struct.unpack("<BBHII", request[0][1])[2] for _, request in steps[:-1]]
    np.testing.assert_allclose(
        np.array(sizes) / 65536 * 2047 / 1024, np.arange(0.9, 0.05, -0.1), atol=2e-5
    )
    assert [code for code, _ in steps[-1][1]] == [CommandCode.CLEAR_LINE, CommandCode.RAMP]
    assert sum(wait_s for wait_s, _ in steps) == pytest.approx(0.25)


@pytest.mark.parametrize(
    ("slot", "line", "message"),
    [
        (255, DriveLine(40.0, 0.1), "slot must be 0 to 254, got 255"),
        (0, DriveLine(40.0, -0.1), "amplitude_v must be finite and ≥ 0 V, got -0.1"),
        (0, DriveLine(40.0, float("nan")), "amplitude_v must be finite and ≥ 0 V, got nan"),
        (0, DriveLine(0.0, 0.1), "frequency_hz must be finite and > 0 Hz, got 0.0"),
        (0, DriveLine(40.0, 0.1, float("inf")), "phase_rad must be finite, got inf"),
        (
            0,
            DriveLine(40.0, 0.8),
            "the lines together may reach 1.2 V, beyond the drive limit of 1 V",
        ),
    ],
)
def test_what_is_no_line_is_refused_and_changes_nothing(slot, line, message):
    lines = DriveLines(1.0)
    lines.set(1, DriveLine(30.0, 0.4))
    with pytest.raises(DriveError, match=f"^{re.escape(message)}$"):
        lines.set(slot, line)
    assert lines.lines == {1: DriveLine(30.0, 0.4)}


def driven(amplitude_v=0.5, limit_v=1000.0):
    lines = DriveLines(limit_v)
    lines.set(0, DriveLine(87.1, amplitude_v))
    lines.set(1, DriveLine(31.7, amplitude_v))
    return lines


@pytest.mark.slow
def test_lines_are_set_before_the_first_sample_kept_and_at_rest_in_the_end(tmp_path):
    stop = threading.Event()
    with asked_board() as there:
        threading.Timer(2.2, stop.set).start()
        record(there.link.port, tmp_path / "a.mfr", drive=driven(), stop=stop)
        time.sleep(0.1)
        heard = list(there.heard)
    codes = [command.code for _, command in heard]
    first = codes.index(CommandCode.SET_LINE)
    assert codes[first : first + 2] == [CommandCode.SET_LINE] * 2
    rest = [CommandCode.CLEAR_LINE, CommandCode.RAMP]
    assert codes[:first][-2:] == rest  # whatever a program before this one has left
    last = max(k for k, code in enumerate(codes) if code == CommandCode.SET_LINE)
    ending = codes[last + 1 :]  # the rest is sent again only while it is not answered
    assert ending[:2] == rest
    assert ending[2:-1] == rest * ((len(ending) - 3) // 2)
    assert ending[-1] == CommandCode.STOP
    assert codes[last - 17 : last + 1] == [CommandCode.SET_LINE] * 18  # ten steps, the last clears
    gaps_s = np.diff([at_s for at_s, _ in heard])
    assert gaps_s.max() < 1.0  # something is said at least every second, as the specification asks
    recording = open_mfr(tmp_path / "a.mfr")
    assert recording.header.info["lines"] == "87.1 Hz 0.5 V 0 rad; 31.7 Hz 0.5 V 0 rad"
    begun = recording.trace("pd").values[0] / 0.5
    set_s = heard[first][0] - heard[0][0]
    assert begun / RATE_HZ > set_s + 0.25  # slew and filters have passed


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"status": 1}, "the board has no drive lines"),
        ({"status": 2}, "the board refuses to set line: steep"),
        (
            {"says": lambda *a, **k: replace(announced(*a, **k), channels=[ChannelInfo("pd")] * 2)},
            "the board announces no drive lines (no channel named 'drive' in V)",
        ),
        pytest.param(
            {"answers": False},
            "the board does not answer to set line for 5 s",
            marks=pytest.mark.slow,
        ),
    ],
)
def test_a_board_that_does_not_drive_is_not_recorded(tmp_path, settings, message):
    with asked_board(**settings) as there:
        with pytest.raises(DriveError) as error:
            record(there.link.port, tmp_path / "a.mfr", drive=driven())
        assert str(error.value) == f"{there.link.port}: {message}"
    assert list(tmp_path.iterdir()) == []


def test_text_boards_have_no_lines(tmp_path):
    with pytest.raises(
        BridgeError, match=r"^drive lines need a board that sends frames, not text$"
    ):
        record("/dev/none", tmp_path / "a.mfr", text=True, drive=driven())


@pytest.mark.slow
def test_after_a_reset_the_lines_are_set_again(tmp_path):
    stop = threading.Event()
    with asked_board() as there:

        def reset():
            time.sleep(1.5)
            there.board.stream += 1
            there.board.next = 0
            there.board.announce()
            time.sleep(0.7)
            stop.set()

        threading.Thread(target=reset, daemon=True).start()
        record(there.link.port, tmp_path / "a.mfr", drive=driven(), stop=stop, reconnect=True)
        codes = there.codes()
    assert codes.count(CommandCode.SET_LINE) == 2 + 2 + 18


@pytest.mark.slow
def test_the_command_drives_a_simulated_bench_within_its_limit(tmp_path):
    bench = SimulatedBench(load_bench(BENCH), 5)
    path = str(tmp_path / "a.mfr")
    with SimulatedBoard(bench, Setup(1.0, slope="rising"), speed=1.0) as there:
        words = ["--port", there.port, "--out", path, "--duration", "1 s", "--bench", str(BENCH)]
        done = subprocess.run(
            [sys.executable, "-m", "metro", "record", *words, "--line", "87.1Hz=0.5V@0.5rad"],
            capture_output=True, text=True, check=False,
        )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert "caution: drive_limit is 40 V: a drive limit in software is no interlock" in done.stderr
    assert "local rules govern" in done.stderr
    drive = open_mfr(path).trace("drive").values
    n = np.arange(drive.size)
    # the divider of 10 to 0.15 %, the anti-alias pole of 1.5 kHz 0.2 %
    phasor = 2 * np.mean(drive * np.exp(-2j * np.pi * 87.1 / 4000 * n))
    assert abs(phasor) == pytest.approx(0.05, rel=0.02)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (
            ["--line", "87.1Hz=0.5V"],
            "--line needs a limit: --bench with [actuator] drive_limit, or --drive-limit",
        ),
        (
            ["--line", "87.1Hz=30V", "--line", "50Hz=20V", "--bench", str(BENCH)],
            "the lines together may reach 50 V, beyond the drive limit of 40 V",
        ),
        (
            ["--line", "87.1Hz=30V", "--bench", str(BENCH), "--drive-limit", "20V"],
            "the lines together may reach 30 V, beyond the drive limit of 20 V",
        ),
        (
            ["--line", "87.1Hz", "--drive-limit", "20V"],
            "--line must be FREQUENCY=AMPLITUDE, such as 87.1Hz=0.2V, or 87.1Hz=0.2V@0.5rad with a phase, got '87.1Hz'",
        ),
        (["--drive-limit", "20V"], "--drive-limit goes with --line"),
    ],
)
def test_lines_beyond_what_is_stated_are_refused_in_one_line(tmp_path, capsys, words, message):
    path = tmp_path / "a.mfr"
    assert run(["record", "--port", "/dev/none", "--out", str(path), *words]) == 2
    assert capsys.readouterr().err == f"midfringe: {message}\n"
    assert not path.exists()

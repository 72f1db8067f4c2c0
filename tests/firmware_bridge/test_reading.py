import io
import sys

import click
import numpy as np
import pytest
from click.testing import CliRunner

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.channel import ChannelError
from firmware_bridge.cobs import decode
from firmware_bridge.frame import encode_frame
from firmware_bridge.reading import Reading, recording_options
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer
from metro.errors import MidfringeError


@pytest.fixture
def scope(tmp_path):
    path = tmp_path / "scope.csv"
    rows = "".join(f"{k / 10 - 2},{k},{k * 2}\n" for k in range(100))
    path.write_text("x-axis,1,3\nsecond,Volt,Volt\n" + rows)
    return str(path)


def run(arguments, **settings):
    seen = []

    @click.command()
    @recording_options(**settings)
    def command(reading):
        seen.append(reading)

    result = CliRunner().invoke(command, arguments, catch_exceptions=False)
    return seen[0] if seen else result


def test_all_options_arrive_in_si():
    reading = run(
        [
            *("--time", "1", "--channel", "3", "--drive", "name:1", "--rate", "4kHz"),
            *("--from", "-250 ms", "--to", "1.5min", "--own-time"),
        ]
    )
    assert reading == Reading("1", "3", "name:1", 4000.0, -0.25, 90.0, own_time=True)
    assert run([]) == Reading()


def test_a_command_may_do_without_some():
    assert run(["--rate", "2Hz"], omit=("drive", "channel")) == Reading(rate_hz=2.0)
    assert "No such option" in run(["--drive", "2"], omit=("drive",)).output


@pytest.mark.parametrize("rate", ["0Hz", "5", "3kg", "nanHz", "4,5kHz"])
def test_wrong_values_name_the_option(rate):
    with pytest.raises(MidfringeError, match=r"^--rate must "):
        run(["--rate", rate])


def test_signal_and_drive_over_the_same_stretch(scope):
    reading = Reading(channel="3", drive_channel="2", from_s=1.0, to_s=2.0)
    recording = reading.open(scope)
    signal, drive = reading.signal(recording), reading.drive(recording)
    np.testing.assert_array_equal(signal.values, 2.0 * np.arange(10, 20))
    np.testing.assert_array_equal(drive.values, np.arange(10.0, 20.0))
    assert signal.start_index == drive.start_index == 10
    assert Reading().drive(recording) is None


def test_which_channel_is_meant_without_a_name(scope, tmp_path):
    recording = Reading().open(scope)
    with pytest.raises(ChannelError) as error:
        Reading().signal(recording)
    assert str(error.value) == f"{scope} has several channels; give --channel: 2 '1', 3 '3'"
    path = tmp_path / "x.csv"
    for header, column in (("t,Photodiode,b", 1), ("t,a,pd", 2)):
        path.write_text(header + "\n0,1,2\n1,1,2\n2,1,2\n")
        assert Reading().signal(Reading().open(str(path))).values.tolist() == [float(column)] * 3
    path.write_text("t,something\n0,5\n1,5\n2,5\n")
    assert Reading().channel_name(Reading().open(str(path))) == "2"


def test_remarks_are_told_unless_quiet(scope, capsys):
    reading = Reading(rate_hz=11.0)
    reading.tell(reading.open(scope))
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err == f"{scope}: the rate given, 11 Hz, is used; the time stamps say 10 Hz\n"


def make_mfr(path):
    announced = Announcement(3, 100.0, "int16", 10, (ChannelInfo("pd", "V", 0.5, 1.0),))
    writer = Writer(path, Header(announced))
    samples = np.arange(10, dtype=np.int16).reshape(10, 1)
    wire = encode_frame(samples, index=0, sequence=0, stream=3, slots=10, format="int16")
    writer.append(decode(wire[1:-1]))
    writer.close()


def test_recordings_of_the_wire_open_from_a_file_and_from_standard_input(tmp_path, monkeypatch):
    path = tmp_path / "named.anything"
    make_mfr(path)
    stdin = io.TextIOWrapper(io.BytesIO(path.read_bytes()))
    monkeypatch.setattr(sys, "stdin", stdin)
    for source in (str(path), "-"):
        recording = Reading().open(source)
        assert (recording.path, recording.format, recording.rate_hz) == (source, "mfr", 100.0)
        trace = Reading().signal(recording)
        np.testing.assert_array_equal(trace.values, 1 + np.arange(10) / 2)
    with pytest.raises(
        MidfringeError, match=r"holds its own rate; --rate is for files that do not$"
    ):
        Reading(rate_hz=1.0).open(str(path))

import json

import numpy as np
import pytest
from click.testing import CliRunner

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.commands.inspect import inspect
from firmware_bridge.envelope import seal_rows
from firmware_bridge.frame import pack_frames
from firmware_bridge.host_note import End, Stamp
from firmware_bridge.inspection import inspect_recording
from firmware_bridge.recording import NO_END, open_mfr
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer

RATE_HZ, SLOTS = 1000.0, 50


@pytest.fixture
def written(tmp_path):
    def write(samples, *, drop=(), clock_offset=0.0, flags=0, has_end=True):
        channels = [ChannelInfo("pd", "V", 0.001), ChannelInfo("drive", "V", 0.01)]
        announced = Announcement(3, RATE_HZ, "int16", SLOTS, channels)
        path = tmp_path / "run.mfr"
        writer = Writer(path, Header(announced, 10**18))
        rows = seal_rows(
            pack_frames(
                samples,
                slots=SLOTS,
                first_index=0,
                first_sequence=0,
                stream=3,
                clock=0,
                flags=flags,
            )
        )
        rng = np.random.default_rng(5)
        for k, row in enumerate(rows):
            if k not in drop:
                writer.append(row.tobytes())
            if k % 40 == 0:
                end = (k + 1) * SLOTS
                host_s = end / RATE_HZ / (1 + clock_offset) + float(rng.uniform(0, 0.004))
                writer.note(Stamp(10**18, round(host_s * 1e9), 3, end))
        if has_end:
            writer.note(End(3, len(samples)))
        writer.close()
        return path

    return write


def noise(n=60_000):
    return np.random.default_rng(2).integers(-2000, 2000, (n, 2)).astype(np.int16)


def test_channel_figures_are_those_of_numpy(written):
    samples = noise()
    found = inspect_recording(open_mfr(written(samples)))
    for k, scale in enumerate((0.001, 0.01)):
        state, values = found.channels[k], samples[:, k] * scale
        assert (state.minimum, state.maximum) == (values.min(), values.max())
        assert state.mean == pytest.approx(values.mean(), abs=1e-12)
        assert state.standard_deviation == pytest.approx(values.std(ddof=1), rel=1e-12)
    assert (found.is_sound, found.reasons) == (True, [])


@pytest.mark.parametrize("offset", [0.0, 2e-4, 0.012])
def test_the_clock_offset_is_found_within_its_uncertainty(written, offset):
    found = inspect_recording(open_mfr(written(noise(), clock_offset=offset)))
    assert abs(found.clock.offset - offset) < 3 * found.clock.offset_u < 6e-4
    off = ["the board's clock is off by +1.20% against the host's"] if offset == 0.012 else []
    assert found.reasons == off


def test_what_speaks_against_a_recording_is_named(written):
    samples = noise()
    samples[:, 1] = 7
    found = inspect_recording(open_mfr(written(samples, drop=(3, 9, 10))))
    assert found.reasons == [
        "2 gaps, 150 of 60000 samples missing (0.250%)",
        "channel 'drive' is constant: dead, stuck or not connected",
    ]
    assert found.channels[0].missing == 150


def test_a_recording_without_its_end_is_not_sound(written):
    found = inspect_recording(open_mfr(written(noise(), has_end=False)))
    assert found.reasons == [NO_END]
    assert "did not end as asked" in NO_END


def test_a_file_cut_within_a_record_is_not_sound(written):
    path = written(noise())
    content = path.read_bytes()
    path.write_bytes(content[:-1])  # within the end
    recording = open_mfr(path)
    assert inspect_recording(recording).reasons == [NO_END, "the file ends within a record"]
    assert NO_END in recording.remarks
    path.write_bytes(content + b"\0")
    assert inspect_recording(open_mfr(path)).reasons == ["the file ends within a record"]


def test_one_of_a_kind_is_said_in_the_singular(written):
    path = written(noise(), drop=(3,))
    content = bytearray(path.read_bytes())
    recording = open_mfr(path)
    first = len(content) - recording.file.count * recording.file.record_bytes
    content[first + 100] ^= 1
    path.write_bytes(content)
    assert inspect_recording(open_mfr(path)).reasons == [
        "1 gap, 50 of 59950 samples missing (0.083%)",
        "1 damaged record",
    ]
    assert open_mfr(path).remarks == ["1 damaged record left out"]


def test_over_range_is_counted(written):
    samples = noise()
    samples[70, 0] = 32767
    recording = open_mfr(written(samples, flags=1))
    # Every frame is flagged; those with no sample at an end of the range are left out whole.
    assert recording.over_range == 60_000 * 2 - SLOTS * 2 + 1
    assert inspect_recording(recording).channels[0].over_range == 60_000 - SLOTS + 1


def test_the_command_prints_the_agreed_keys(written):
    path = written(noise(), drop=(3,))
    result = CliRunner().invoke(inspect, [str(path), "--json"])
    document = json.loads(result.stdout)
    assert result.exit_code == 1
    agreed = {"samples", "rate", "channels", "gaps", "over_range", "clock", "sound", "reasons"}
    assert agreed <= set(document)
    assert document["samples"] == 60_000
    assert document["rate"] == {"value": 1000.0, "unit": "Hz", "u": None}
    assert document["gaps"] == [{"index": 150, "length": 50, "exact": True, "length_u": 0.0}]
    assert document["sound"] is False
    assert len(document["reasons"]) == 1
    assert result.stderr.count("\n") == 1


def test_the_command_takes_tables_too(tmp_path):
    path = tmp_path / "a.csv"
    path.write_text("time (s),pd (V)\n" + "".join(f"{k / 100},{k % 7}\n" for k in range(100)))
    result = CliRunner().invoke(inspect, [str(path)])
    assert result.exit_code == 0
    assert "100 at 100 Hz" in result.stdout
    assert result.stdout.endswith("no reason for distrust found\n")


def test_a_repeated_frame_and_a_stuck_channel_are_reasons(written):
    samples = noise()
    samples[5000:5050] = samples[4950:5000]
    samples[30_000:32_000, 0] = 12
    result = CliRunner().invoke(inspect, [str(written(samples)), "--json"])
    document = json.loads(result.stdout)
    assert document["reasons"] == [
        "channel 'pd' does not change for 2 s from 30 s on: stuck",
        "1 block of 50 samples equal to an earlier one in every value (first at 5 s)",
    ]
    assert document["repeated_blocks"] == 1
    assert document["channels"][0]["stuck"]["value"] == 2.0
    assert result.exit_code == 1


def test_missing_codes_are_a_reason(written):
    rng = np.random.default_rng(9)
    samples = np.rint(rng.normal(0, 60, (60_000, 2))).astype(np.int16)
    samples[samples == 8] = 7
    found = inspect_recording(open_mfr(written(samples)))
    assert found.reasons == [
        f"channel {name!r}: 1 code absent though the codes beside occur often (first: 8)"
        for name in ("pd", "drive")
    ]

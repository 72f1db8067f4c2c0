import json
import struct
import zlib

import numpy as np
import pytest

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.cobs import decode
from firmware_bridge.errors import BridgeError
from firmware_bridge.frame import encode_frame
from firmware_bridge.gap import Gap
from firmware_bridge.host_note import End, Join, Remark, Stamp
from firmware_bridge.message import encode_note
from firmware_bridge.record_index import RUN, RecordIndex
from firmware_bridge.recording import NO_END, open_mfr
from firmware_bridge.recording_header import Header, RecordingError, encode_header
from firmware_bridge.writer import Writer

SLOTS, RATE_HZ = 10, 100.0
CHANNELS = (ChannelInfo("pd", "V", 0.5, 1.0), ChannelInfo("drive", "V", 2.0, 0.0, -100, 100))


def announced(name="int16", stream=3):
    return Announcement(stream, RATE_HZ, name, SLOTS, CHANNELS, board="bench")


def frame(samples, index, *, stream=3, flags=0, name="int16"):
    wire = encode_frame(
        samples,
        index=index,
        sequence=index // SLOTS,
        stream=stream,
        flags=flags,
        slots=SLOTS,
        format=name,
    )
    return decode(wire[1:-1])


def counts(n=100, name="int16"):
    rng = np.random.default_rng(1)
    return rng.integers(-90, 90, (n, 2)).astype(np.int16 if name == "int16" else np.int32)


@pytest.fixture
def written(tmp_path):
    def write(messages, name="int16"):
        path = tmp_path / "run.mfr"
        writer = Writer(path, Header(announced(name), 10**18, {"port": "loop://"}))
        for message in messages:
            (writer.append if isinstance(message, bytes) else writer.note)(message)
        writer.close()
        return path

    return write


@pytest.mark.parametrize("name", ["int16", "int24", "int32"])
def test_what_was_written_is_read_in_channel_units(written, name):
    samples = counts(95, name)
    path = written([frame(samples[k : k + 10], 7 + k, name=name) for k in range(0, 95, 10)], name)
    recording = open_mfr(path)
    assert (recording.length, recording.gaps, recording.over_range) == (95, [], 0)
    assert (recording.rate_hz, recording.start_unix_s) == (RATE_HZ, 1e9)
    np.testing.assert_array_equal(recording.trace("pd").values, samples[:, 0] * 0.5 + 1.0)
    part = recording.trace("2", from_s=0.13, to_s=0.58)
    assert part.start_index == 13
    np.testing.assert_array_equal(part.values, samples[13:58, 1] * 2.0)
    joined = np.concatenate([block.values for block in recording.blocks(samples=17)])
    np.testing.assert_array_equal(joined, samples * [0.5, 2.0] + [1.0, 0.0])


def test_lost_reordered_and_repeated_frames_leave_exact_gaps(written):
    samples = counts()
    order = [0, 1, 3, 2, 5, 5, 1, 9]
    recording = open_mfr(written([frame(samples[10 * k : 10 * k + 10], 10 * k) for k in order]))
    assert recording.gaps == [Gap(40, 10), Gap(60, 30)]
    assert (recording.length, recording.duplicates) == (100, 2)
    trace = recording.trace("pd")
    assert (trace.missing, trace.over_range) == (40, 0)
    there = ~np.isnan(trace.values)
    np.testing.assert_array_equal(np.flatnonzero(~there), [*range(40, 50), *range(60, 90)])
    np.testing.assert_array_equal(trace.values[there], samples[there, 0] * 0.5 + 1.0)


def test_a_restart_stands_where_the_host_saw_it(written):
    samples = counts(40)
    messages = [
        frame(samples[:10], 50),
        frame(samples[10:20], 60),
        Join(4, 5, 45, 3.0),
        frame(samples[20:30], 5, stream=4),
        frame(samples[30:40], 15, stream=4),
    ]
    recording = open_mfr(written(messages))
    assert recording.gaps == [Gap(20, 25, exact=False, length_u=3.0)]
    assert recording.length == 65
    values = recording.trace("pd").values
    np.testing.assert_array_equal(values[45:], samples[20:, 0] * 0.5 + 1.0)


def test_an_end_as_asked_makes_the_last_gap_exact(written):
    recording = open_mfr(written([frame(counts(10), 0), End(3, 34)]))
    assert (recording.length, recording.gaps) == (34, [Gap(10, 24)])


def test_over_range_samples_are_marked_in_flagged_frames_only(written):
    samples = counts(30)
    samples[3, 1] = 100  # the announced end of the range, but the board did not flag it
    samples[14, 1] = -100
    samples[15, 0] = 32767
    recording = open_mfr(
        written([frame(samples[k : k + 10], k, flags=int(k > 0)) for k in (0, 10, 20)])
    )
    pd, drive = recording.trace("pd"), recording.trace("drive")
    # The last frame is flagged without a sample at an end: all of it is left out.
    assert np.flatnonzero(np.isnan(pd.values)).tolist() == [15, *range(20, 30)]
    assert np.flatnonzero(np.isnan(drive.values)).tolist() == [14, *range(20, 30)]
    assert (pd.over_range, pd.missing, recording.over_range) == (11, 0, 22)


def test_other_messages_and_long_notes_come_back(written):
    long = "a long remark " * 40
    note = decode(encode_note("hello ✓")[1:-1])
    path = written(
        [
            frame(counts(10), 0),
            note,
            Remark(long),
            Stamp(5 * 10**18, 9, 3, 10),
            frame(counts(10), 10),
        ]
    )
    recording = open_mfr(path)
    assert [entry.text for entry in recording.notes] == ["hello ✓", long]
    assert recording.stamps == [Stamp(5 * 10**18, 9, 3, 10)]
    assert (recording.length, recording.damaged) == (20, 0)


def test_a_damaged_record_is_a_gap_and_a_remark(written):
    path = written([frame(counts(10), 10 * k) for k in range(5)])
    data = bytearray(path.read_bytes())
    data[-200] ^= 4
    path.write_bytes(data)
    recording = open_mfr(path)
    assert (len(recording.gaps), recording.gaps[0].length) == (1, 10)
    assert recording.remarks == ["1 damaged record left out", NO_END]


def test_every_cut_of_the_tail_still_opens(written):
    path = written([frame(counts(10), 10 * k) for k in range(4)])
    whole = path.read_bytes()
    record = Header(announced()).record_bytes
    for cut in range(1, 2 * record, 7):
        path.write_bytes(whole[:-cut])
        recording = open_mfr(path)
        assert recording.length == 40 - 10 * -(-cut // record)


def test_indices_that_cannot_be_true_are_refused(written):
    path = written([frame(counts(10), 0), frame(counts(10), 2**63)])
    with pytest.raises(RecordingError) as error:
        open_mfr(path)
    assert str(error.value) == f"{path} spans {2**63 + 10} samples, more than can be true"


@pytest.mark.parametrize("length", [1, 8, 20, 39, 40, 64, 191])
def test_a_recording_cut_within_its_header_says_so(tmp_path, length):
    path = tmp_path / "a.mfr"
    whole = encode_header(Header(announced()))
    path.write_bytes(whole[:length])
    with pytest.raises(RecordingError) as error:
        open_mfr(path)
    assert str(error.value).startswith(f"{path} ends within its header: {length} ")
    assert length < len(whole)


@pytest.mark.parametrize("content", [b"", b"mfr", b"\x8bmfr\n"])
def test_what_does_not_begin_as_a_recording_is_none(tmp_path, content):
    path = tmp_path / "a.mfr"
    path.write_bytes(content)
    with pytest.raises(RecordingError, match=r"does not begin as an \.mfr file does$"):
        open_mfr(path)


def test_a_newer_format_is_refused_by_name(tmp_path):
    data = bytearray(encode_header(Header(announced())))
    struct.pack_into("<H", data, 8, 2)
    data[-4:] = zlib.crc32(data[:-4]).to_bytes(4, "little")
    path = tmp_path / "new.mfr"
    path.write_bytes(data)
    with pytest.raises(RecordingError) as error:
        open_mfr(path)
    assert str(error.value) == f"{path} has recording format 2.0; this program reads up to 1"


@pytest.mark.parametrize("place", [9, 20, 60, -1])
def test_a_damaged_header_is_refused(written, place):
    path = written([frame(counts(10), 0)])
    size = len(encode_header(Header(announced(), 10**18, {"port": "loop://"})))
    data = bytearray(path.read_bytes())
    data[place % size] ^= 0x40
    path.write_bytes(data)
    with pytest.raises(RecordingError):
        open_mfr(path)


@pytest.mark.parametrize("content", [b"", b"time,pd\n0,1\n", encode_header(Header(announced()))])
def test_what_is_no_recording_or_empty_is_refused_in_one_line(tmp_path, content):
    path = tmp_path / "not.mfr"
    path.write_bytes(content)
    with pytest.raises(RecordingError) as error:
        open_mfr(path)
    assert str(error.value).startswith(f"{path}")
    assert "\n" not in str(error.value)


def test_an_existing_file_is_kept_unless_told_otherwise(written, tmp_path):
    path = written([frame(counts(10), 0)])
    with pytest.raises(BridgeError) as error:
        Writer(path, Header(announced()))
    assert str(error.value) == f"{path} exists; --overwrite replaces it"
    Writer(path, Header(announced()), overwrite=True).close()
    assert path.stat().st_size == len(encode_header(Header(announced())))


def test_the_header_describes_itself(written):
    data = written([frame(counts(10), 0)]).read_bytes()
    info = json.loads(data[data.index(b"{") : data.index(b"}") + 1])
    assert info == {"port": "loop://"}
    assert decode(encode_announcement(announced())[1:-1]) in data


def test_repeats_within_long_runs_and_across_their_ends_count_once(written):
    samples = counts(200)
    order = [*range(10), *range(12, 20), 9, 10, 11, 12, 9, 10, 11, 12, 3]
    path = written([frame(samples[10 * k : 10 * k + 10], 10 * k) for k in order])
    recording = open_mfr(path)
    assert (recording.length, recording.gaps, recording.duplicates) == (200, [], 7)
    np.testing.assert_array_equal(recording.trace("pd").values, samples[:, 0] * 0.5 + 1.0)


def test_a_long_recording_with_one_repeat_takes_no_memory_for_each_record():
    index = RecordIndex(SLOTS)
    index._runs = [np.zeros(2, RUN)]
    index._runs[0]["records"] = (10**9, 1)
    index._runs[0]["last"] = SLOTS
    index._runs[0]["index"][1] = 500 * SLOTS
    index._runs[0]["record"][1] = 10**9
    found = index.placed(0)
    assert found.duplicates == 1
    assert found.runs["records"].tolist() == [10**9]

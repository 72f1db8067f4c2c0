import numpy as np
import pytest
from real_data import real_data
from text_board import arrivals_of, lines_of, record_chunks

from firmware_bridge.announcement import parse_announcement
from firmware_bridge.decoder import Decoder, Gap, Samples
from firmware_bridge.envelope import Discarded
from firmware_bridge.message import Note
from firmware_bridge.message_head import MessageType
from firmware_bridge.opening import open_recording
from firmware_bridge.text_frames import TextFramer


def of_type(pieces, kind):
    return [piece for piece in pieces if isinstance(piece, bytes) and piece[0] == kind]


def framed(chunks, rate_hz=50.0):
    """Announcement, values of all columns, gaps and discarded reasons of (time, text) chunks."""
    framer = TextFramer(5, rate_hz)
    pieces = []
    for now_s, text in chunks:
        pieces += framer.feed(text, now_s)
    pieces += framer.finish()
    reasons = [piece.reason for piece in pieces if isinstance(piece, Discarded)]
    decoder, events = Decoder(), []
    for piece in of_type(pieces, MessageType.SAMPLES):
        events += decoder.accept(piece)
    events += decoder.flush()
    announced = next(parse_announcement(p) for p in of_type(pieces, MessageType.ANNOUNCEMENT))
    counts = np.concatenate([e.data for e in events if isinstance(e, Samples)])
    gaps = [event for event in events if isinstance(event, Gap)]
    notes = of_type(pieces, MessageType.NOTE)
    scales = [channel.scale for channel in announced.channels]
    return announced, counts * np.array(scales), gaps, reasons, [note[4:-4] for note in notes]


def lines(rows, end=b"\r\n", separator=b" "):
    return [
        (0.02 * k, separator.join(b"%g" % value for value in row) + end)
        for k, row in enumerate(rows)
    ]


ROWS = [(k * 7 % 40, k / 8 - 2) for k in range(40)]


@pytest.mark.parametrize("end", [b"\n", b"\r\n", b"\r"])
@pytest.mark.parametrize("separator", [b" ", b",", b", ", b";", b"\t", b" ; ", b"|"])
def test_any_line_end_and_separator(end, separator):
    announced, values, gaps, reasons, _ = framed(
        [(0.0, b"half a li" + end), *lines(ROWS, end, separator)]
    )
    np.testing.assert_allclose(values, ROWS, atol=1e-12)
    assert (len(announced.channels), announced.rate_hz, gaps) == (2, 50.0, [])
    assert reasons == ["first line, perhaps only a part of one"]


@pytest.mark.parametrize("separator", [b";", b"\t", b"  "])
def test_decimal_commas(separator):
    rows = lines(ROWS, b"\n", separator)
    rows = [(0.0, b"x\n")] + [(t, text.replace(b".", b",")) for t, text in rows]
    np.testing.assert_allclose(framed(rows)[1], ROWS, atol=1e-12)


def test_a_single_column_of_decimal_commas():
    chunks = [(0.0, b"x\n")] + [(0.02 * k, b"0,%03d\r" % (k * 37 % 1000)) for k in range(60)]
    _, values, _, _, _ = framed(chunks)
    np.testing.assert_allclose(values[:, 0], [k * 37 % 1000 / 1000 for k in range(60)], atol=1e-12)


def test_a_header_names_the_channels_and_their_units():
    head = [(0.0, b"x\n"), (0.0, b"photodiode [mV];drive [V]\n")]
    announced, values, _, _, notes = framed([*head, *lines(ROWS, b"\n", b";")])
    channels = [(channel.name, channel.unit) for channel in announced.channels]
    assert channels == [("photodiode", "V"), ("drive", "V")]
    np.testing.assert_allclose(values, np.array(ROWS) * [1e-3, 1.0], atol=1e-12)
    assert notes == [b"photodiode [mV];drive [V]"]


def test_a_damaged_line_is_one_missing_sample_and_a_banner_is_a_note():
    chunks = [(0.0, b"\n"), *lines(ROWS)]
    chunks[20] = (0.4, b"19 0.3g5\r\n")
    chunks.insert(30, (0.6, b"calibrating\r\n"))
    _, values, gaps, reasons, notes = framed(chunks)
    np.testing.assert_allclose(values, [row for k, row in enumerate(ROWS) if k != 19], atol=1e-12)
    assert gaps == [Gap(19, 1)]
    assert (reasons, notes) == (["damaged lines"], [b"calibrating"])


def test_lines_cut_anywhere_are_the_same():
    text = b"".join(line for _, line in lines(ROWS))
    whole = framed([(0.0, b"\n" + text)])
    bytewise = framed([(0.0, b"\n"), *((0.0, text[k : k + 1]) for k in range(len(text)))])
    np.testing.assert_array_equal(whole[1], bytewise[1])


def test_without_a_rate_the_hosts_clock_tells_it():
    rng = np.random.default_rng(3)
    chunks = [(0.0, b"x\n")]
    chunks += [(0.004 * k + rng.uniform(0, 0.003), b"%d\n" % k) for k in range(1, 1500)]
    announced, values, _, _, _ = framed(chunks, rate_hz=None)
    assert announced.rate_hz == pytest.approx(250.0, rel=2e-3)  # 3 ms in 2 s
    np.testing.assert_array_equal(values[:, 0], np.arange(1, 1500))


def test_numbers_too_large_for_their_decimals_and_no_numbers_are_marked(tmp_path):
    chunks = [(0.02 * k, b"%.3f %d\n" % (k * 7 % 60, k % 5)) for k in range(60)]
    chunks[30], chunks[40] = (0.6, b"1e9 0\n"), (0.8, b"nan 0\n")
    recording, _ = record_chunks(tmp_path / "a.mfr", [(0.0, b"x\n"), *chunks], 50.0)
    values = recording.trace("1").values
    assert (recording.over_range, recording.gaps) == (2, [])
    assert np.flatnonzero(np.isnan(values)).tolist() == [30, 40]


def test_no_line_end_for_ever_is_said():
    framer = TextFramer(5)
    pieces = [piece for _ in range(3) for piece in framer.feed(b"\xff" * 2000, 0.0)]
    assert [piece.reason for piece in pieces] == ["no line end in 4096 bytes: is this text?"]


def test_fewer_lines_than_tell_the_layout_are_kept_at_the_end(tmp_path):
    chunks = [(0.5 * k, b"%d\n" % (k * k)) for k in range(6)]
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks)
    np.testing.assert_array_equal(recording.trace("1").values, [1, 4, 9, 16, 25])


RATE_HZ = 50.0
UNITS = {"s": (1.0, "%.4f"), "ms": (1e3, "%d"), "us": (1e6, "%d")}


def board(n=600, seed=4, jitter_s=0.0):
    """Moments of sampling, values, and arrivals."""
    rng = np.random.default_rng(seed)
    times_s = 3.2 + np.arange(n) / RATE_HZ + rng.normal(0, 1, n) * jitter_s
    return times_s, rng.integers(-500, 500, n), arrivals_of(times_s + 70.0, rng)


@pytest.mark.parametrize("unit", UNITS)
def test_the_boards_stamps_tell_rate_and_missing_lines(tmp_path, unit):
    factor, spell = UNITS[unit]
    times_s, values, arrivals = board()
    stamps = times_s * factor if unit == "s" else np.floor(times_s * factor + 1e-6)
    chunks = lines_of(stamps, values, arrivals, spell=spell)
    gone = [100, 101, 102, 250, 400]
    chunks = [chunk for k, chunk in enumerate(chunks) if k - 1 not in gone]
    recording, framer = record_chunks(tmp_path / "a.mfr", chunks)
    assert recording.gaps == [Gap(100, 3), Gap(250, 1), Gap(400, 1)]
    assert (recording.length, framer.lines) == (600, 595)
    assert abs(recording.rate_hz - RATE_HZ) < 3 * recording.rate_u_hz < 0.01
    assert len(recording.channels) == 1
    expected = values.astype(float)
    expected[gone] = np.nan
    np.testing.assert_array_equal(recording.trace("2").values, expected)
    assert not recording.timing.is_by_host


def test_jitter_is_measured_and_no_gap(tmp_path):
    times_s, values, arrivals = board(3000, jitter_s=2e-3)
    chunks = lines_of(np.floor(times_s * 1e6), values, arrivals)
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks)
    assert (recording.gaps, recording.length) == ([], 3000)
    timing = recording.timing
    assert abs(timing.jitter_s - 2e-3) < 4 * timing.jitter_u_s < 1e-3
    assert abs(recording.rate_hz - RATE_HZ) < 4 * recording.rate_u_hz


def test_gaps_are_found_beside_jitter(tmp_path):
    times_s, values, arrivals = board(3000, seed=8, jitter_s=2e-3)
    chunks = lines_of(np.floor(times_s * 1e6), values, arrivals)
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks[:701] + chunks[706:])
    assert [gap.length for gap in recording.gaps] == [5]
    assert recording.length == 3000


def test_stamps_that_lag_and_catch_up_are_no_gap(tmp_path):
    times_s, values, arrivals = board(1000)
    late_s = times_s.copy()
    for first, count in ((300, 40), (600, 12)):  # printed when the buffer was free again
        late_s[first : first + count] = times_s[first + count - 1] + 1e-4 * np.arange(count)
    chunks = lines_of(np.floor(late_s * 1e3 + 1e-6), values, np.maximum(arrivals, late_s + 70.0))
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks)
    assert (recording.gaps, recording.length) == ([], 1000)
    np.testing.assert_array_equal(recording.trace("2").values, values)
    texts = [note.text for note in recording.notes]
    assert any("time stamps were late, by up to 0.78 s, and caught up" in t for t in texts)


def test_lines_that_wait_in_the_hosts_buffers_are_no_gap(tmp_path):
    _, values, arrivals = board(1500)
    arrivals[500:650] = arrivals[649]  # three seconds
    chunks = [(float(t), b"%d\n" % v) for t, v in zip(arrivals, values, strict=True)]
    recording, _ = record_chunks(tmp_path / "a.mfr", [(float(arrivals[0]), b"x\n"), *chunks])
    assert (recording.gaps, recording.length) == ([], 1500)
    assert recording.timing.is_by_host


def test_a_pause_by_the_hosts_clock_alone_is_a_gap_of_estimated_length(tmp_path):
    _, values, arrivals = board(1500)
    arrivals[500:] += 3.0
    chunks = [(float(t), b"%d\n" % v) for t, v in zip(arrivals, values, strict=True)]
    recording, _ = record_chunks(tmp_path / "a.mfr", [(float(arrivals[0]), b"x\n"), *chunks])
    (gap,) = recording.gaps
    assert (gap.index, gap.exact) == (500, False)
    assert abs(gap.length - 150) < 3 * gap.length_u < 10
    assert abs(recording.rate_hz - RATE_HZ) < 4 * recording.rate_u_hz < 0.2


@pytest.mark.parametrize(("modulus", "unit"), [(2**32, 1e6), (2**30, 1e3), (2**16, 1e3)])
def test_a_counter_that_begins_anew_is_no_restart(tmp_path, modulus, unit):
    times_s, values, arrivals = board(800)
    ticks = np.floor(times_s * unit + 1e-6) + modulus - 400 / RATE_HZ * unit
    chunks = lines_of(ticks % modulus, values, arrivals)
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks[:551] + chunks[556:])
    assert (recording.gaps, recording.length) == ([Gap(550, 5)], 800)


def test_a_reset_of_the_board_is_a_gap_by_the_hosts_clock_and_its_banner_a_note(tmp_path):
    times_s, values, arrivals = board(1200)
    times_s = times_s.copy()
    times_s[700:] -= times_s[700] - 0.05
    arrivals[700:] += 0.8
    chunks = lines_of(np.floor(times_s * 1e3 + 1e-6), values, arrivals)
    chunks.insert(701, (float(arrivals[700]) - 0.1, b"interferometer v1.2 ready\n"))
    recording, framer = record_chunks(tmp_path / "a.mfr", chunks)
    (gap,) = recording.gaps
    assert (gap.index, gap.exact) == (700, False)
    assert abs(gap.length - 40) < 3 * gap.length_u < 10
    assert [n.text for n in recording.notes if isinstance(n, Note)] == ["interferometer v1.2 ready"]
    assert framer.texts == 1
    np.testing.assert_array_equal(recording.trace("2").values[-500:], values[700:])


def test_a_stray_stamp_is_neither_a_gap_nor_a_reset(tmp_path):
    times_s, values, arrivals = board(900)
    ticks = np.floor(times_s * 1e3 + 1e-6)
    ticks[300], ticks[600] = ticks[300] + 80_000, ticks[600] - 7_000
    recording, _ = record_chunks(tmp_path / "a.mfr", lines_of(ticks, values, arrivals))
    assert (recording.gaps, recording.length) == ([], 900)
    np.testing.assert_array_equal(recording.trace("2").values, values)


def test_garbage_between_lines_costs_what_it_hit(tmp_path):
    times_s, values, arrivals = board(900)
    chunks = lines_of(np.floor(times_s * 1e3 + 1e-6), values, arrivals)
    rng = np.random.default_rng(6)
    for k in (200, 201, 500):
        chunks[k] = (chunks[k][0], rng.integers(128, 256, 9, np.uint8).tobytes() + chunks[k][1][3:])
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks)
    assert recording.gaps == [Gap(199, 2), Gap(499, 1)]
    assert recording.length == 900


def test_after_the_port_was_away_the_boards_stamps_tell_the_gap(tmp_path):
    times_s, values, arrivals = board(1500)
    chunks = lines_of(np.floor(times_s * 1e6), values, arrivals)
    chunks = chunks[:501] + chunks[812:]
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks, away_before=[501])
    (gap,) = recording.gaps
    assert (gap.index, gap.length, recording.length) == (500, 312, 1500)  # a first line is dropped


def test_after_the_port_was_away_the_hosts_clock_tells_where_there_are_no_stamps(tmp_path):
    _, values, arrivals = board(1500)
    chunks = [(float(t), b"%d\n" % v) for t, v in zip(arrivals, values, strict=True)]
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks[:500] + chunks[525:], away_before=[500])
    (gap,) = recording.gaps
    assert (gap.exact, gap.index) == (False, 499)
    assert abs(gap.length - 26) < 3 * gap.length_u < 10


def test_a_counter_of_lines_tells_what_is_missing(tmp_path):
    _, values, arrivals = board(700)
    chunks = lines_of(np.arange(700) + 40, values, arrivals)
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks[:301] + chunks[308:])
    assert (recording.gaps, recording.length) == ([Gap(300, 7)], 700)
    assert not recording.timing.is_by_host
    assert abs(recording.rate_hz - RATE_HZ) < 4 * recording.rate_u_hz


def test_a_board_that_prints_in_another_way_goes_on_in_another_file(tmp_path):
    _, values, arrivals = board(800)
    rows = zip(arrivals, values, strict=True)
    chunks = [
        (float(t), b"%d\n" % v if k < 400 else b"%d %d %d\n" % (v, 2 * v, 3))
        for k, (t, v) in enumerate(rows)
    ]
    first, _ = record_chunks(tmp_path / "a.mfr", [(0.0, b"x\n"), *chunks])
    second = open_recording(tmp_path / "a-2.mfr")
    assert (len(first.channels), len(second.channels)) == (1, 3)
    np.testing.assert_array_equal(second.trace("2").values, 2.0 * values[400:])


def test_calendar_stamps_are_a_time_too(tmp_path):
    _, values, arrivals = board(600)
    chunks = [(float(arrivals[0]), b"x\n")] + [
        (float(arrivals[k]), b"2026-03-01T12:%02d:%06.3fZ,%d\n" % (k // 3000, k / 50 % 60, v))
        for k, v in enumerate(values)
    ]
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks[:301] + chunks[304:])
    assert recording.gaps == [Gap(300, 3)]
    np.testing.assert_array_equal(recording.trace("2").values[303:], values[303:])


@pytest.mark.parametrize("name", ["Task_8_6", "Task_6a_2", "Task_9_blue"])
def test_a_real_stream_is_placed_live_as_the_file_is(tmp_path, name):
    path = real_data(f"two-detector-motor-scan/{name}.txt")
    data = path.read_bytes().splitlines(keepends=True)
    rng = np.random.default_rng(1)
    stamps = np.array([float(w[2]) + 1e-6 * float(w[3]) for w in map(bytes.split, data)])
    arrivals = arrivals_of(stamps - stamps[0] + 20.0, rng)
    chunks = [(float(arrivals[0]), b"x\n"), *zip(map(float, arrivals), data, strict=True)]
    live, _ = record_chunks(tmp_path / "a.mfr", chunks)
    read = open_recording(path)
    assert [(gap.index, gap.length) for gap in live.gaps] == [
        (gap.index, gap.length) for gap in read.gaps
    ]
    assert live.rate_hz == pytest.approx(read.rate_hz, abs=4 * live.rate_u_hz)
    np.testing.assert_array_equal(live.trace("1").values, read.trace("1").values)


@pytest.mark.parametrize("stray", [b"9" * 30, b"1e308", b"-1e300", b"nan", b"inf"])
def test_a_stamp_that_cannot_be_true_is_one_missing_sample(tmp_path, stray):
    times_s, values, arrivals = board(600)
    chunks = lines_of(np.floor(times_s * 1e3 + 1e-6), values, arrivals)
    chunks[301] = (chunks[301][0], stray + b" 5\n")
    recording, _ = record_chunks(tmp_path / "a.mfr", chunks)
    assert (recording.gaps, recording.length) == ([Gap(300, 1)], 600)


def test_another_way_to_print_right_after_a_gap_counts_nothing_twice(tmp_path):
    times_s, values, arrivals = board(900)
    chunks = lines_of(np.floor(times_s * 1e3 + 1e-6), values, arrivals)
    del chunks[397:400]
    chunks[402:] = [(t, line.replace(b"\n", b" 1 2\n")) for t, line in chunks[402:]]
    first, _ = record_chunks(tmp_path / "a.mfr", chunks)
    second = open_recording(tmp_path / "a-2.mfr")
    assert (first.gaps, first.length) == ([Gap(396, 3)], 404)
    assert (second.gaps, second.length, len(second.channels)) == ([], 900 - 404, 3)

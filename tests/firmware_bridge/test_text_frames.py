import numpy as np
import pytest

from firmware_bridge.announcement import parse_announcement
from firmware_bridge.decoder import Decoder, Gap, Samples
from firmware_bridge.envelope import Discarded
from firmware_bridge.message import MessageType
from firmware_bridge.text_frames import TextFramer


def of_type(pieces, kind):
    return [piece for piece in pieces if isinstance(piece, bytes) and piece[0] == kind]


def framed(chunks, rate_hz=50.0):
    """Announcement, values of all columns, gaps and discarded reasons of (time, text) chunks."""
    framer = TextFramer(5, rate_hz)
    pieces = []
    for now_s, text in chunks:
        pieces += framer.feed(text, now_s)
    pieces += framer.flush()
    reasons = [piece.reason for piece in pieces if isinstance(piece, Discarded)]
    decoder, events = Decoder(), []
    for piece in of_type(pieces, MessageType.SAMPLES):
        events += decoder.accept(piece)
    events += decoder.flush()
    announced = next(parse_announcement(p) for p in of_type(pieces, MessageType.ANNOUNCEMENT))
    counts = np.concatenate([e.data for e in events if isinstance(e, Samples)])
    gaps = [event for event in events if isinstance(event, Gap)]
    return announced, counts * announced.channels[0].scale, gaps, reasons


def lines(rows, end=b"\r\n", separator=b" "):
    return [
        (0.02 * k, separator.join(b"%g" % value for value in row) + end)
        for k, row in enumerate(rows)
    ]


ROWS = [(k, k / 8 - 2) for k in range(40)]


@pytest.mark.parametrize("end", [b"\n", b"\r\n", b"\r"])
@pytest.mark.parametrize("separator", [b" ", b",", b", ", b";", b"\t", b" ; "])
def test_any_line_end_and_separator(end, separator):
    announced, values, gaps, reasons = framed(
        [(0.0, b"half a li" + end), *lines(ROWS, end, separator)]
    )
    np.testing.assert_allclose(values, ROWS, atol=1e-12)
    assert (len(announced.channels), announced.rate_hz, gaps) == (2, 50.0, [])
    assert reasons == ["first line, perhaps only a part of one"]


def test_decimal_commas():
    rows = [(0.0, b"x\n")] + [(t, text.replace(b".", b",")) for t, text in lines(ROWS, b"\n", b";")]
    _, values, _, _ = framed(rows)
    np.testing.assert_allclose(values, ROWS, atol=1e-12)


def test_a_damaged_line_is_one_missing_sample_and_a_banner_is_none():
    chunks = [(0.0, b"\n"), *lines(ROWS)]
    chunks[20] = (0.4, b"19 0.3g5\r\n")
    chunks.insert(30, (0.6, b"calibrating\r\n"))
    _, values, gaps, reasons = framed(chunks)
    np.testing.assert_allclose(values, [row for k, row in enumerate(ROWS) if k != 19], atol=1e-12)
    assert gaps == [Gap(19, 1)]
    assert reasons == ["a damaged line, one sample missing", "a line without numbers"]


def test_lines_cut_anywhere_are_the_same():
    text = b"".join(line for _, line in lines(ROWS))
    whole = framed([(0.0, b"\n" + text)])
    bytewise = framed([(0.0, b"\n"), *((0.0, text[k : k + 1]) for k in range(len(text)))])
    np.testing.assert_array_equal(whole[1], bytewise[1])


def test_without_a_rate_the_hosts_clock_tells_it():
    rng = np.random.default_rng(3)
    chunks = [(0.0, b"x\n")]
    chunks += [(0.004 * k + rng.uniform(0, 0.003), b"%d\n" % k) for k in range(1, 1500)]
    announced, values, _, _ = framed(chunks, rate_hz=None)
    assert announced.rate_hz == pytest.approx(250.0, rel=2e-3)  # 3 ms in 2 s
    np.testing.assert_array_equal(values[:, 0], np.arange(1, 1500))


def test_numbers_too_large_for_their_decimals_are_over_range():
    chunks = [(0.0, b"x\n")] + [(0.02 * k, b"%.3f\n" % k) for k in range(20)] + [(1.0, b"1e9\n")]
    framer = TextFramer(5, 50.0)
    pieces = [piece for now_s, text in chunks for piece in framer.feed(text, now_s)]
    pieces += framer.flush()
    events = [Decoder().accept(p)[0] for p in of_type(pieces, MessageType.SAMPLES)]
    assert [event.over_range for event in events][-1]
    assert events[-1].data[-1, 0] == 2**31 - 1


def test_no_line_end_for_ever_is_said():
    framer = TextFramer(5)
    pieces = [piece for _ in range(3) for piece in framer.feed(b"\xff" * 2000, 0.0)]
    assert [piece.reason for piece in pieces] == ["no line end in 4096 bytes: is this text?"]

import numpy as np
import pytest

from firmware_bridge.channel import Channel, ChannelError
from firmware_bridge.span import Span, SpanError
from firmware_bridge.trace import Recording


class Ramp(Recording):
    """Channel k holds index + 1000·k; sample 5 is missing, sample 7 over range in channel 0."""

    def read(self, channels, start, stop):
        values = np.arange(start, stop, dtype=float)[:, None] + 1000.0 * np.asarray(channels)
        values[np.arange(start, stop) == 5] = np.nan
        hit = (np.arange(start, stop) == 7)[:, None] & (np.asarray(channels) == 0)
        values[hit] = np.nan
        return Span(values, int(hit.sum()))


@pytest.fixture
def ramp():
    return Ramp(
        path="ramp.csv",
        format="csv",
        rate_hz=10.0,
        channels=[Channel("pd", "V"), Channel("3", "V"), Channel("pd2")],
        length=20,
        columns=[2, 3, 4],
    )


@pytest.mark.parametrize(
    ("name", "position"), [("pd", 0), ("2", 0), ("3", 1), ("name:3", 1), ("4", 2)]
)
def test_channels_are_found_by_header_or_by_column_number(ramp, name, position):
    assert ramp.find(name) == position


def test_an_unknown_channel_is_refused_with_the_names_there_are(ramp):
    with pytest.raises(ChannelError) as error:
        ramp.find("photo")
    assert str(error.value) == (
        "ramp.csv has no channel named 'photo'; it has 2 'pd', 3 '3', 4 'pd2'"
    )
    with pytest.raises(ChannelError) as error:
        ramp.find("1")
    assert str(error.value) == (
        "ramp.csv: column 1 is no channel (columns count from 1, the time column included); "
        "it has 2 'pd', 3 '3', 4 'pd2'"
    )


def test_a_trace_counts_missing_and_over_range_apart(ramp):
    trace = ramp.trace("pd")
    assert (trace.unit, trace.missing, trace.over_range, trace.start_index) == ("V", 1, 1, 0)
    assert np.flatnonzero(np.isnan(trace.values)).tolist() == [5, 7]


def test_a_stretch_is_half_open_and_keeps_its_index(ramp):
    trace = ramp.trace("3", from_s=0.3, to_s=1.2)
    assert trace.start_index == 3
    assert trace.values[0] == 1003.0
    assert trace.values.size == 9
    assert trace.times_s()[0] == pytest.approx(0.3, abs=1e-15)


def test_blocks_together_are_the_trace(ramp):
    blocks = list(ramp.blocks(samples=6))
    assert [block.start_index for block in blocks] == [0, 6, 12, 18]
    joined = np.concatenate([block.values for block in blocks])
    np.testing.assert_array_equal(joined[:, 0], ramp.trace("pd").values)
    assert joined.shape == (20, 3)


def test_an_empty_stretch_is_refused(ramp):
    with pytest.raises(SpanError) as error:
        ramp.trace("pd", from_s=5.0)
    assert str(error.value) == "ramp.csv has no sample from 5 s to 2 s; it lasts 2 s"

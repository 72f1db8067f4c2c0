"""The state of a live page: what a port tells goes in, what the page shows comes out."""

import numpy as np
import pytest
from sessions import built_in_bench

from calibration.desk.watch.arrays import (
    fringe_arrays,
    line_arrays,
    spectrum_arrays,
    trace_arrays,
)
from calibration.desk.watch.document import figures
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.state import WatchState
from calibration.desk.watch.wire import pack, unpack
from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.live_events import (
    LiveBlock,
    LiveChannels,
    LiveGap,
    LiveRecording,
    LiveReply,
    LiveState,
)
from metro.bench import Bench

RATE_HZ = 1000.0
CHANNELS = (ChannelInfo("photodiode", "V"), ChannelInfo("drive", "V"))


def said(stream=1, **more):
    return LiveChannels(RATE_HZ, CHANNELS, board="test", full_scale_v=5.0, stream=stream, **more)


def block(start, n, *, amplitude=0.2, drive=0.1, level=2.0, over_range=0):
    time_s = (start + np.arange(n)) / RATE_HZ
    tone = np.cos(2 * np.pi * 31.7 * time_s)
    noise = np.random.default_rng(start + 1).normal(0, 1e-3, (n, 2))
    values = np.stack([level + amplitude * tone, drive * tone], axis=1) + noise
    values[:over_range, 0] = np.nan
    return LiveBlock(start, values, over_range, host_time=1.0)


def take(state, *events):
    """Take events and do the work they make due at once."""
    for event in events:
        for job in state.take(event):
            job.deliver(job.work())


@pytest.fixture
def state():
    bench = Bench.of(low="0.5 V", high="3.5 V")
    state = WatchState(WatchSetup("test", bench, frequencies_hz=(31.7,)))
    take(state, LiveState("connected"), said())
    return state


def run_for(state, seconds, start=0, size=100, **more):
    stop = start + round(seconds * RATE_HZ)
    for first in range(start, stop, size):
        take(state, block(first, size, **more))
    return stop


def test_figures_of_a_quiet_stream(state):
    run_for(state, 9.0)
    shown = figures(state)
    assert shown["port"] == {"state": "connected", "reason": ""}
    assert shown["source"]["time_s"] == pytest.approx(9.0)
    assert shown["source"]["shown"] == "photodiode"
    assert shown["rest"]["verdict"] == "at mid-fringe"
    assert shown["rest"]["off_deg"] == pytest.approx(0.0, abs=2.0)
    assert shown["rest"]["phase_deg"] == pytest.approx(-90.0, abs=2.0)
    assert shown["rest"]["high"] - shown["rest"]["low"] == pytest.approx(0.4, abs=0.02)
    assert shown["losses"] == {
        "gaps": 0, "missing": 0, "over_range": 0, "gap_ago_s": None, "over_ago_s": None,
    }  # fmt: skip
    (line,) = shown["lines"]
    assert line["amplitude"] == pytest.approx(0.2, abs=1e-4)
    assert line["ratio"] == pytest.approx(2.0, abs=5e-3)
    assert line["phase_deg"] == pytest.approx(0.0, abs=0.2)
    assert shown["recording"]["file"] is None
    assert shown["contrast"] is None  # no dark


def test_losses_are_counted_and_dated(state):
    end = run_for(state, 2.0)
    take(state, LiveGap(end, 50), block(end + 50, 100, over_range=7))
    run_for(state, 1.0, start=end + 150)
    losses = figures(state)["losses"]
    assert (losses["gaps"], losses["missing"], losses["over_range"]) == (1, 50, 7)
    assert losses["gap_ago_s"] == pytest.approx(1.15, abs=1e-6)
    assert losses["over_ago_s"] == pytest.approx(1.0, abs=1e-6)
    trace = trace_arrays(state, 10.0)
    lost = trace["trace_t"][trace["trace_lost"]]
    assert lost.size > 0
    assert ((lost > -1.2) & (lost < -0.95)).all()


def test_port_recording_and_replies_are_passed_on(state):
    run_for(state, 1.0)
    take(
        state,
        LiveRecording("/somewhere/run.mfr", 2500, 10_000),
        LiveReply("the board refuses", refused=True),
        LiveState("gone", "unplugged"),
    )
    shown = figures(state)
    assert shown["recording"] == {
        "file": "/somewhere/run.mfr", "bytes": 10_000, "duration_s": 2.5, "reason": "",
    }  # fmt: skip
    assert shown["port"] == {"state": "gone", "reason": "unplugged"}
    assert state.take_replies() == [LiveReply("the board refuses", refused=True)]
    assert state.take_replies() == []


def test_another_stream_of_the_same_board_keeps_the_trace_and_begins_the_lines_anew(state):
    end = run_for(state, 9.0)
    assert len(line_arrays(state)["line_t"]) == 2
    take(state, LiveGap(end, 1000, exact=False), said(stream=2))
    assert len(line_arrays(state)["line_t"]) == 0
    run_for(state, 5.0, start=end + 1000)
    assert len(line_arrays(state)["line_t"]) == 1
    assert figures(state)["losses"]["missing"] == 1000


def test_a_board_with_other_channels_begins_everything_anew(state):
    run_for(state, 2.0)
    take(state, LiveChannels(500.0, (ChannelInfo("adc", "1"),), stream=9))
    assert state.stream.samples == 0
    take(state, LiveBlock(0, np.full((250, 1), 1234.0), host_time=1.0))
    shown = figures(state)
    assert (shown["source"]["shown"], shown["source"]["unit"]) == ("adc", "1")
    # Volts of the bench say nothing about counts.
    assert shown["rest"]["verdict"] == "fringe unknown"
    assert np.isnan(spectrum_arrays(state)["spectrum_expected"]).all()


def test_driven_lines_are_followed_beside_those_asked_for(state):
    run_for(state, 1.0)
    state.set_driven((87.1,))
    assert [line["frequency_hz"] for line in figures(state)["lines"]] == [31.7, 87.1]
    state.set_driven(())
    assert [line["frequency_hz"] for line in figures(state)["lines"]] == [31.7]


def test_a_fringe_that_is_not_stated_is_found_when_it_is_passed():
    state = WatchState(WatchSetup("test", Bench()))
    take(state, said())
    assert fringe_arrays(state)["fringe_v"].size == 0
    time_s = np.arange(31_000) / RATE_HZ
    noise = np.random.default_rng(1).normal(0, 2e-3, time_s.size)
    volts = 2.0 + 1.5 * np.cos(2 * np.pi * 4 * np.abs((time_s / 7) % 2 - 1)) + noise
    values = np.stack([volts, np.zeros_like(volts)], axis=1)
    for first in range(0, volts.size, 500):
        take(state, LiveBlock(first, values[first : first + 500], host_time=1.0))
    assert state.fringe.low_v == pytest.approx(0.5, abs=0.02)
    assert state.fringe.high_v == pytest.approx(3.5, abs=0.02)
    assert fringe_arrays(state)["fringe_v"].max() == pytest.approx(state.fringe.high_v)


def test_the_bench_gives_the_expected_noise_and_contrast():
    state = WatchState(WatchSetup("test", built_in_bench()))
    take(state, said())
    run_for(state, 3.0)
    arrays = spectrum_arrays(state)
    assert np.isfinite(arrays["spectrum_expected"]).all()
    assert figures(state)["contrast"] == {"value": 0.93, "origin": "bench"}
    assert [line["frequency_hz"] for line in figures(state)["lines"]] == [31.7, 87.1, 141.3, 233.9]


def test_channels_are_found_by_name_or_number():
    setup = WatchSetup("test", Bench())
    assert setup.columns(["drive", "pd"]) == (1, 0)
    assert setup.columns(["a", "Photodiode", "b"]) == (1, None)
    assert setup.columns(["a"]) == (0, None)
    assert WatchSetup("test", Bench(), channel="2", drive="1").columns(["a", "b"]) == (1, 0)
    assert WatchSetup("test", Bench(), channel="name:2").columns(["1", "2", "3"]) == (1, None)
    assert WatchSetup("test", Bench(), channel=0).columns(["1", "2", "3"]) == (0, None)
    wrong = WatchSetup("test", Bench(), channel="pd", drive="4")
    assert wrong.columns(["a", "b"]) == (0, None)
    assert wrong.remarks(["a", "b"]) == (
        "no channel 'pd' for the photodiode: there are a, b",
        "no channel '4' for the drive: there are a, b",
    )


def test_what_is_sent_is_what_the_state_holds_and_json_can_hold(state):
    run_for(state, 9.0)
    arrays = trace_arrays(state, 1.0) | spectrum_arrays(state) | line_arrays(state)
    document, got = unpack(pack(figures(state), arrays))
    assert document["rest"]["verdict"] == "at mid-fringe"
    assert set(got) == set(arrays)
    for name, values in arrays.items():
        np.testing.assert_array_equal(got[name], np.asarray(values, dtype=np.float32))


def test_before_anything_has_come_there_is_a_page_too():
    state = WatchState(WatchSetup("test", Bench()))
    arrays = trace_arrays(state, 60.0) | spectrum_arrays(state) | line_arrays(state)
    document, got = unpack(pack(figures(state), arrays | fringe_arrays(state)))
    assert document["rest"] is None
    assert document["port"]["state"] == "waiting"
    assert all(values.size == 0 for values in got.values())


def test_numbers_that_are_not_finite_become_null():
    document, arrays = unpack(pack({"a": [float("nan"), {"b": float("inf")}], "ä": 1}, {}))
    assert document == {"a": [None, {"b": None}], "ä": 1}
    assert arrays == {}


def test_memory_does_not_grow_with_time(state):
    def held():
        stream = state.stream
        boxes = [*stream.envelopes.values(), stream.rest, stream.spectrum, stream.finder]
        arrays = [v.nbytes for box in boxes for v in vars(box).values() if hasattr(v, "nbytes")]
        return sum(arrays) + stream.lines._held.nbytes

    run_for(state, 2.0)
    before = held()
    end = 2000
    for _ in range(12):
        take(state, block(end, 10_000))
        end += 10_000
    assert held() == before

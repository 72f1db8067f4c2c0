"""Lines over the last minutes, against the lines that were put in."""

import numpy as np
import pytest

from calibration.desk.watch.line_block import fit_block
from calibration.desk.watch.lines import LineWatch

RATE_HZ = 1000.0


def stream(seconds, lines, *, offset=0.0, noise=1e-3, rng=None, start_s=0.0):
    """Return samples of A·cos(2πf(1+offset)t + φ) in white noise."""
    time_s = start_s + np.arange(round(seconds * RATE_HZ)) / RATE_HZ
    rng = rng or np.random.default_rng(1)
    values = rng.normal(0.0, noise, time_s.size)
    for frequency_hz, amplitude, phase_rad in lines:
        values += amplitude * np.cos(2 * np.pi * frequency_hz * (1 + offset) * time_s + phase_rad)
    return values


def followed(watch, values, start=0, size=173):
    for first in range(0, len(values), size):
        for block in watch.add(start + first, values[first : first + size]):
            watch.take(block, fit_block(block))


def test_amplitude_and_phase_of_each_block_lie_within_their_uncertainty():
    lines = [(31.7, 0.5, 0.4), (87.1, 0.2, -2.0)]
    watch = LineWatch(RATE_HZ)
    watch.set_lines([f for f, _, _ in lines])
    followed(watch, stream(120.0, lines))
    outside = 0
    for frequency_hz, amplitude, phase_rad in lines:
        points = watch.points(frequency_hz)
        assert len(points) == 30
        assert [p.time_s for p in points] == pytest.approx(np.arange(2.0, 120.0, 4.0))
        outside += sum(abs(p.amplitude - amplitude) > p.amplitude_u95 for p in points)
        off = [np.angle(np.exp(1j * (p.phase_rad - phase_rad))) for p in points]
        outside += sum(abs(o) > p.phase_u95_rad for o, p in zip(off, points, strict=True))
        # U of an amplitude in white noise: k·σ·√(2/n), k some 2.
        assert np.median([p.amplitude_u95 for p in points]) == pytest.approx(
            2.05e-3 * np.sqrt(2 / 4000), rel=0.3
        )
    # 120 intervals of 95 %: six outside on average, 15 with a probability of 1e-4 (binomial).
    assert outside < 15


def test_phase_runs_away_as_a_clock_that_is_off_makes_it():
    watch = LineWatch(RATE_HZ)
    watch.set_lines([50.3, 200.0])
    followed(watch, stream(40.0, [(50.3, 0.3, 0.1), (200.0, 0.3, 0.1)], offset=1e-5))
    points = watch.points(200.0)
    turns = np.unwrap([p.phase_rad for p in points])
    slope = (turns[-1] - turns[0]) / (points[-1].time_s - points[0].time_s)
    assert slope == pytest.approx(2 * np.pi * 200.0 * 1e-5, rel=0.02)
    value, u95 = watch.clock
    assert abs(value - 1e-5) < 3 * u95 < 1e-6


def test_ratio_and_its_phase_are_those_of_response_over_drive():
    rng = np.random.default_rng(4)
    lines, drive = [(31.7, 0.5, 0.4)], [(31.7, 2.0, 0.1)]
    both = np.stack(
        [stream(20.0, lines, rng=rng), stream(20.0, drive, noise=1e-4, rng=rng)], axis=1
    )
    watch = LineWatch(RATE_HZ, has_drive=True)
    watch.set_lines([31.7])
    followed(watch, both)
    last = watch.points(31.7)[-1]
    assert last.ratio == pytest.approx(0.25, rel=1e-3)
    assert last.phase_rad == pytest.approx(0.3, abs=1e-3)


def test_a_silent_drive_gives_the_phase_of_the_line_itself():
    both = np.stack([stream(9.0, [(31.7, 0.5, 0.4)]), np.zeros(9000)], axis=1)
    watch = LineWatch(RATE_HZ, has_drive=True)
    watch.set_lines([31.7])
    followed(watch, both)
    last = watch.points(31.7)[-1]
    assert last.ratio is None
    assert last.phase_rad == pytest.approx(0.4, abs=1e-3)


def test_phase_is_that_of_sample_zero_after_weeks():
    # 30 days of 1 kHz: 2.592e9 samples; exact in whole cycles, since 1000/31.25 = 32 samples.
    start = 2_592_000_000
    watch = LineWatch(RATE_HZ)
    watch.set_lines([31.25])
    followed(watch, stream(9.0, [(31.25, 0.5, 0.7)]), start=start)
    assert watch.points(31.25)[-1].phase_rad == pytest.approx(0.7, abs=1e-3)


def test_gaps_and_over_range_are_left_out():
    values = stream(8.0, [(31.7, 0.5, 0.4)])
    values[5000:5300] = np.nan
    watch = LineWatch(RATE_HZ)
    watch.set_lines([31.7])
    followed(watch, values[:1700])
    followed(watch, values[2400:], start=2400)  # 700 samples never came
    points = watch.points(31.7)
    assert len(points) == 2
    for point in points:
        assert abs(point.amplitude - 0.5) < 2 * point.amplitude_u95 < 1e-3


def test_a_block_that_is_mostly_missing_is_no_result():
    watch = LineWatch(RATE_HZ)
    watch.set_lines([31.7])
    assert watch.add(0, stream(1.5, [(31.7, 0.5, 0.4)])) == []
    assert watch.add(20_000, stream(0.1, [(31.7, 0.5, 0.4)])) == []


def test_other_lines_begin_anew_after_the_drive_has_settled():
    watch = LineWatch(RATE_HZ)
    watch.set_lines([31.7])
    values = stream(30.0, [(31.7, 0.5, 0.4), (87.1, 0.2, 0.0)])
    followed(watch, values[:6000])
    watch.set_lines([31.7, 87.1], settle_s=1.0)
    followed(watch, values[6000:], start=6000)
    assert [round(p.time_s, 3) for p in watch.points(31.7)] == [2.0, 9.0, 13.0, 17.0, 21.0, 25.0]
    assert round(watch.points(87.1)[0].time_s, 3) == 9.0


def test_a_fit_of_lines_that_have_changed_is_dropped():
    watch = LineWatch(RATE_HZ)
    watch.set_lines([31.7])
    (block,) = watch.add(0, stream(4.0, [(31.7, 0.5, 0.4)]))
    watch.set_lines([87.1])
    watch.take(block, fit_block(block))
    assert watch.points(31.7) == watch.points(87.1) == ()


@pytest.mark.parametrize(
    ("lines_hz", "told"),
    [
        ((31.7, 87.1), ()),
        ((31.7, 31.9), ("lines are 0.2 Hz apart: each fit takes 40 s",)),
        ((31.7, 31.75), ("lines are 0.05 Hz apart: each fit takes 60 s",)),
        ((0.5, 31.7), ("a line is slow: each fit takes 16 s",)),
        ((), ()),
    ],
)
def test_long_blocks_are_told(lines_hz, told):
    """Eight cycles of the lowest line, and eight between neighbours; a minute at most."""
    watch = LineWatch(1000.0)
    watch.set_lines(lines_hz)
    assert watch.remarks == told


def test_lines_beyond_half_the_rate_are_named_and_left_out():
    watch = LineWatch(RATE_HZ)
    watch.set_lines([600.0, 31.7])
    assert watch.frequencies_hz == (31.7,)
    assert watch.remarks == ("600 Hz lies at or above half the rate, 500 Hz",)


def test_blocks_are_long_enough_to_tell_close_lines_apart():
    watch = LineWatch(RATE_HZ)
    watch.set_lines([50.0, 50.5])
    blocks = watch.add(0, stream(17.0, [(50.0, 1.0, 0.0)]))
    assert [block.response.size for block in blocks] == [16_000]  # eight beats of 0.5 Hz


def test_no_more_points_are_kept_than_are_shown():
    watch = LineWatch(RATE_HZ, block_s=0.3)
    watch.set_lines([100.0])
    blocks = watch.add(0, stream(60.0, [(100.0, 1.0, 0.0)]))
    assert len(blocks) == 200
    fit = fit_block(blocks[0])
    for block in blocks:
        watch.take(block, fit)
    points = watch.points(100.0)
    assert len(points) == 150
    assert points[-1].time_s == pytest.approx(59.85)

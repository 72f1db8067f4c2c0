"""Counting fringes: scans, motors, piezos with hysteresis; what cannot be counted says why."""

import itertools

import numpy as np
import pytest
from published import records
from real_data import real_data

from calibration.count_reading import read_count
from calibration.errors import CalibrationError
from calibration.fringe_count import count_fringes
from calibration.fringe_pass import cut_passes
from calibration.ruler import ruler_of
from calibration.turning_points import turning_points
from calibration.unfolding import Unfolded
from firmware_bridge.opening import open_recording
from firmware_bridge.trace import Trace

COUNT = 12_000
TIME = np.arange(COUNT) / 1000.0


def triangle(legs):
    """Return a triangle from 0 to 1 and back, so many legs."""
    return np.abs((np.linspace(0, legs, COUNT) + 1) % 2 - 1)


def volts(phase, seed=0, noise=0.02):
    rng = np.random.default_rng(seed)
    start = rng.uniform(0, 2 * np.pi)
    return 1.0 + 0.8 * np.cos(phase + start) + noise * 0.8 * rng.normal(size=len(phase))


def whole(fringes):
    return 2 * np.pi * fringes * np.linspace(0, 1, COUNT)


def test_turning_points_alternate_and_keep_the_band():
    rng = np.random.default_rng(3)
    walk = np.cumsum(rng.normal(size=5000))
    for band in (1.0, 5.0, 20.0):
        turns = turning_points(walk, band)
        swings = np.diff(walk[turns])
        assert np.all(np.abs(swings) >= band)
        assert np.all(swings[1:] * swings[:-1] < 0)
        # nothing within a swing turns by more than the band
        for a, b in itertools.pairwise(turns):
            part = walk[a : b + 1] * np.sign(walk[b] - walk[a])
            assert np.max(np.maximum.accumulate(part) - part) < band
    assert not len(turning_points(np.arange(100.0), 1.0))
    assert not len(turning_points(np.zeros(2), 1.0))


@pytest.mark.parametrize(
    ("fringes", "noise"), [(1000.3, 0.02), (601.3, 0.05), (30.4, 0.05), (3.2, 0.01), (1801.7, 0.02)]
)
def test_a_steady_scan(fringes, noise):
    got = count_fringes(volts(whole(fringes), 1, noise), 1000.0)
    assert got.reasons == []
    assert len(got.passes) == 1
    assert got.fringes == pytest.approx(fringes, abs=max(4 * got.fringes_u, 0.02))


def test_vibration_and_mains_add_no_fringes():
    shaken = (
        whole(200.3) + 0.5 * np.sin(2 * np.pi * 33.0 * TIME) + 0.2 * np.sin(2 * np.pi * 50 * TIME)
    )
    got = count_fringes(volts(shaken, 2), 1000.0, TIME)
    assert got.net_fringes == pytest.approx(200.3, abs=0.2)


def test_a_slow_scan_that_shakes_is_counted():
    shaking = 0.1 * np.sin(2 * np.pi * 87.3 * TIME)  # faster than the scan itself
    slowing = 18.6 * (1 - np.exp(-TIME / 4)) / (1 - np.exp(-3))
    got = count_fringes(volts(2 * np.pi * slowing + shaking, 3), 1000.0)
    assert got.reasons == []
    assert got.fringes == pytest.approx(18.6, abs=0.1)
    ramp = (TIME / 3) % 1
    saw = np.where(ramp < 0.9, ramp / 0.9, (1 - ramp) / 0.1)
    rough = saw + 0.005 * np.random.default_rng(1).normal(size=COUNT)
    got = count_fringes(volts(2 * np.pi * 5.9 * saw + shaking, 3), 1000.0, rough)
    assert got.reasons == []
    assert [one.direction for one in got.passes] == [1, -1] * 4
    assert [one.fringes for one in got.passes[1:]] == pytest.approx([5.9] * 7, abs=0.1)


@pytest.mark.parametrize("end", [0.46, 0.41, -0.41, -0.46])
def test_shaking_next_to_an_extreme_at_the_end_goes_not_over_it(end):
    way = 20.0 + end / (2 * np.pi)
    slowing = way * (1 - (1 - TIME / 12.0) ** 4)  # comes to rest there
    record = 1.0 + 0.8 * np.cos(2 * np.pi * slowing + 0.1 * np.sin(2 * np.pi * 81.0 * TIME))
    got = count_fringes(record, 1000.0, slowing)
    assert got.net_fringes == pytest.approx(way, abs=3 * got.net_u)
    assert got.net_u < 0.08


@pytest.mark.slow
def test_a_mirror_that_turns_later_than_its_drive_and_shakes_follows_it():
    drive = np.sin(2 * np.pi * 0.2 * TIME)
    late = np.sin(2 * np.pi * 0.2 * TIME - 0.15) + 0.007 * np.sin(2 * np.pi * 71.0 * TIME)
    for start in np.linspace(0, 6, 7):
        record = 1.0 + 0.8 * np.cos(2 * np.pi * 4.3 * late + start)
        got = count_fringes(record, 1000.0, drive)
        assert got.reasons == []
        # from peak to peak of what shakes on top
        assert all(abs(one.fringes - 8.66) < 2 * one.fringes_u < 0.4 for one in got.passes[1:-1])


@pytest.mark.parametrize("seed", range(6))
def test_piezo_ramps_with_hysteresis(seed):
    drive = triangle(4)
    rising = np.diff(drive, append=drive[-1]) >= 0
    moved = np.where(rising, drive**1.3, drive**0.7)  # the way back lies above the way up
    got = count_fringes(volts(2 * np.pi * 7.4 * moved, seed), 1000.0, drive)
    assert [one.direction for one in got.passes] == [1, -1, 1, -1]
    assert [one.fringes for one in got.passes] == pytest.approx([7.4] * 4, abs=0.12)
    assert abs(got.net_fringes) < 0.25
    assert got.per_period is not None
    assert got.per_period[0] == pytest.approx(14.8, abs=3 * got.per_period[1])


def harsh(kind, rng):
    """Return the drive and the true phase of a mirror that is driven hard or seen coarsely."""
    x = np.linspace(0, 1, COUNT)
    drive = np.abs((int(rng.integers(2, 9)) * x + 1) % 2 - 1)
    if kind == "coarse":  # 2.5 to 5 samples a fringe, one way
        drive, way = x, COUNT / rng.uniform(2.5, 5)
    elif kind == "reversing":
        way = rng.uniform(2, 60)
    elif kind == "coarse and reversing":
        way = COUNT / rng.uniform(2.5, 5) / np.abs(np.diff(drive)).sum()
    else:  # from rest to 2.5 samples a fringe and slower
        drive, way = x ** rng.uniform(1.2, 2.5), rng.uniform(20, 0.15 * COUNT)
    size = rng.choice([0.0, 0.3, 1.0, 3.0]) * rng.uniform(0.5, 1)
    shaken = size * np.sin(2 * np.pi * rng.uniform(1, 60) * TIME + rng.uniform(0, 6))
    shaken += 0.3 * size * np.sin(2 * np.pi * 50 * TIME)
    return drive, 2 * np.pi * way * drive + shaken


@pytest.mark.slow
@pytest.mark.parametrize("has_drive", [True, False])
@pytest.mark.parametrize("kind", ["coarse", "reversing", "coarse and reversing", "from rest"])
def test_a_harsh_count_is_right_or_distrusted(kind, has_drive):
    trusted = 0
    for seed in range(8):
        rng = np.random.default_rng([seed, len(kind)])
        drive, phase = harsh(kind, rng)
        got = count_fringes(
            volts(phase, seed, float(rng.choice([0.003, 0.02]))),
            1000.0,
            drive if has_drive else None,
        )
        if got.reasons:
            continue
        trusted += 1
        true = (phase[-1] - phase[0]) / (2 * np.pi)
        if has_drive:
            assert abs(got.net_fringes - true) < 2.5 * got.net_u, (seed, got.net_fringes, true)
        ends = [0, *turning_points(phase, np.pi).tolist(), COUNT - 1]
        whole_way = np.abs(np.diff(phase[ends])).sum() / (2 * np.pi)
        # a way to and fro of less than half a fringe at an end is part of its pass
        assert abs(got.fringes - whole_way) < 2.5 * got.fringes_u + 0.15, (seed, got.fringes)
    assert trusted >= (1 if kind == "coarse" or has_drive else 0)


def test_shaking_over_two_extremes_is_named():
    # a mirror that goes back by more than half a fringe passes extremes on its way back
    shaken = whole(40.3) + 2.4 * np.sin(2 * np.pi * 9.0 * TIME)
    got = count_fringes(volts(shaken, 3, 0.01), 1000.0, TIME)
    assert any("shakes to and fro" in reason for reason in got.reasons), got.reasons
    gently = whole(200.3) + 0.4 * np.sin(2 * np.pi * 33.0 * TIME)
    got = count_fringes(volts(gently, 3, 0.01), 1000.0, TIME)
    assert not any("shakes to and fro" in reason for reason in got.reasons), got.reasons
    assert got.net_fringes == pytest.approx(200.3, abs=0.2)


def test_a_turn_among_coarse_samples_is_named_without_a_drive():
    turned = 2 * np.pi * 1600.3 * triangle(2) + 0.9
    got = count_fringes(volts(turned, 2, 0.01), 1000.0)
    assert any("to see the mirror turn" in reason for reason in got.reasons), got.reasons
    steady = count_fringes(volts(whole(3200.6), 2, 0.03), 1000.0)
    assert steady.reasons == []
    assert steady.fringes == pytest.approx(3200.6, abs=2 * steady.fringes_u)


@pytest.mark.slow
@pytest.mark.parametrize("start", [0.8, 0.05, -0.1, 2.9, 3.2])
@pytest.mark.parametrize("count", [2000, 20_000])
def test_a_turn_next_to_an_extreme_is_covered_without_a_drive(start, count):
    rng = np.random.default_rng(1)
    there = 1 - np.abs(np.linspace(-1, 1, count))
    for end in (-0.65, -0.3, -0.1, 0.0, 0.05, 0.2, 0.5, 0.65, 0.8, 1.2):
        way = 6 * np.pi + end - start
        record = 2 + 1.9 * np.cos(start + way * there) + 3e-3 * rng.normal(size=count)
        got = count_fringes(record, 1000.0)
        assert abs(got.fringes - way / np.pi) < 2 * got.fringes_u, (end, got.fringes, got.fringes_u)


@pytest.mark.slow
def test_the_net_count_of_driven_triangles_has_a_u_as_wide_as_its_errors():
    pulls = []
    for seed in range(60):
        rng = np.random.default_rng(seed)
        drive = triangle(int(rng.integers(2, 6)) + rng.uniform(0.1, 0.9))
        phase = 2 * np.pi * rng.uniform(4, 30) * drive + rng.uniform(0, 2 * np.pi)
        record = 2 + 1.9 * np.cos(phase) + 0.04 * rng.normal(size=COUNT)
        got = count_fringes(record, 1000.0, drive)
        pulls.append((got.net_fringes - (phase[-1] - phase[0]) / (2 * np.pi)) / got.net_u)
    assert 0.7 < np.sqrt(np.mean(np.square(pulls))) < 1.3, pulls
    assert np.max(np.abs(pulls)) < 4.0


def test_method_1_of_iso_16063_11():
    # s = (λ/8)·R_f: the tabulated metres per unit of R_f, and the same from a sine
    per_unit = records("bessel")["iso.m1"]
    drive = np.cos(2 * np.pi * 2.3 * TIME)
    depth = 31.7
    trace = Trace("pd", "V", volts(depth * drive, 4), 1000.0)
    got = read_count(trace, Trace("drive", "V", drive, 1000.0), ruler=ruler_of("632.81 nm"))
    fringes = 4 * depth / (2 * np.pi)
    assert got.count.per_period is not None
    assert got.count.per_period[0] == pytest.approx(fringes, abs=0.1)
    assert got.amplitude is not None
    metres = float(got.amplitude.magnitude)
    assert metres == pytest.approx(per_unit["value"] * got.count.per_period[0], rel=1e-9)
    assert metres == pytest.approx(632.81e-9 * depth / (4 * np.pi), rel=5e-3)


@pytest.mark.parametrize(
    ("record", "word"),
    [
        (volts(whole(4600.3)), "sampled too slowly"),
        (volts(2 * np.pi * 5000 * np.linspace(0, 1, COUNT) ** 2), "sampled too slowly"),
        (np.minimum(volts(whole(50)), 1.5), "clipped"),
        (volts(whole(0.4)), "less than one whole fringe"),
        (1.0 + (0.1 + 0.9 * np.linspace(0, 1, COUNT)) * (volts(whole(60)) - 1.0), "too uneven"),
        (volts(whole(1000), noise=0.6), "too noisy"),
    ],
)
def test_what_cannot_be_counted_says_why(record, word):
    got = count_fringes(record, 1000.0)
    assert any(word in reason for reason in got.reasons), got.reasons


def test_a_long_gap_loses_fringes_and_a_short_one_does_not():
    record = volts(whole(50.3))
    record[3000:3020] = np.nan
    assert count_fringes(record, 1000.0).reasons == []
    record[5000:5600] = np.nan
    got = count_fringes(record, 1000.0)
    assert any("fringes are lost" in reason for reason in got.reasons)


def test_a_drive_that_is_not_followed_is_named():
    got = count_fringes(
        volts(2 * np.pi * 9.3 * triangle(4), 5), 1000.0, np.sin(2 * np.pi * 1.3 * TIME)
    )
    assert any("does not follow the drive" in reason for reason in got.reasons)


def test_a_flyback_within_a_sample_is_named():
    ramp = (TIME * 0.5) % 1.0
    got = count_fringes(volts(2 * np.pi * 8.6 * ramp, 6), 1000.0, ramp)
    assert any("the drive leaps by up to 8.6 fringes" in reason for reason in got.reasons)
    slow = np.where(ramp < 0.9, ramp / 0.9, (1 - ramp) / 0.1)
    got = count_fringes(volts(2 * np.pi * 8.6 * slow, 6), 1000.0, slow)
    assert got.reasons == []
    assert [one.direction for one in got.passes[:4]] == [1, -1, 1, -1]


@pytest.mark.slow
@pytest.mark.parametrize("fringes", [30.3, 1400.7])
def test_a_laser_that_goes_off_midway_is_named_and_a_motor_that_rests_is_not(fringes):
    ramp = np.clip(1.6 * np.linspace(0, 1, COUNT) - 0.3, 0, 1)  # rests before and after
    record = volts(2 * np.pi * fringes * ramp, 3)
    for drive in (None, ramp):
        got = count_fringes(record, 1000.0, drive)
        assert got.reasons == []
        assert got.fringes == pytest.approx(fringes, abs=3 * got.fringes_u)
    for dark in (0.2, 0.7):  # at full contrast, and with room light
        off = np.where(TIME > 7.0, dark, record)
        reasons = count_fringes(off, 1000.0, np.linspace(0, 1, COUNT)).reasons
        assert any("the drive moves on meanwhile" in reason for reason in reasons)
    slow = volts(2 * np.pi * 7.3 * triangle(4), 2)
    slow[5000:6000] = 0.05  # shorter than a pass
    assert any("laser off" in reason for reason in count_fringes(slow, 1000.0, triangle(4)).reasons)
    reasons = count_fringes(np.where(TIME > 7.0, 0.2, record), 1000.0).reasons
    assert any("laser off, beam blocked" in reason for reason in reasons)


def behind_a_capacitor(record, samples):
    keep = np.exp(-1.0 / samples)
    out = np.zeros(len(record))
    for k in range(1, len(record)):
        out[k] = keep * (out[k - 1] + record[k] - record[k - 1])
    return out


def test_a_screw_that_takes_up_its_backlash_is_no_laser_that_goes_off():
    drive = triangle(2)
    rises = np.diff(drive, append=drive[-1]) >= 0
    way = np.where(rises, drive, np.minimum(drive + 0.01, 1.0))  # stands after the turn
    got = count_fringes(volts(2 * np.pi * 430.2 * way, 5), 1000.0, drive)
    assert got.reasons == []
    assert [one.fringes for one in got.passes] == pytest.approx([430.2, 0.99 * 430.2], abs=0.4)


def test_ac_coupling_is_named_where_fringes_slow_down():
    way = 27.4 * triangle(3)
    record = volts(2 * np.pi * way, 8)
    assert count_fringes(record, 1000.0).reasons == []
    assert count_fringes(record - record.mean(), 1000.0).reasons == []
    slow = 2 * np.pi * (way + 1.5 * np.sin(TIME))  # unsteady: slow here, fast there
    sunk = behind_a_capacitor(volts(slow, 8), 1000.0)
    assert any("AC-coupled" in reason for reason in count_fringes(sunk, 1000.0).reasons)


@pytest.mark.slow
@pytest.mark.parametrize("hertz", [2.3, 9.7, 31.0])
def test_lamp_light_on_top_is_in_the_u_or_named(hertz):
    for seed in range(4):
        flicker = 0.15 * np.cos(2 * np.pi * hertz * TIME + seed)
        for drive in (None, TIME):
            got = count_fringes(volts(whole(40.3), seed, 0.003) + flicker, 1000.0, drive)
            assert got.reasons or abs(got.net_fringes - 40.3) < 3 * got.net_u


def test_extremes_that_drift_are_carried_on_to_the_ends():
    power = 1 + 0.12 * TIME / 12
    got = count_fringes(volts(2 * np.pi * 4.3 * triangle(4), 4, 0.005) * power, 1000.0, triangle(4))
    assert abs(got.net_fringes) < 3 * got.net_u < 0.06


def test_coarse_levels_are_not_taken_for_clipping():
    rough = np.round(volts(2 * np.pi * 5.3 * triangle(4), 7, 0.01) / 0.02) * 0.02
    got = count_fringes(rough, 1000.0, np.round(triangle(4) * 200) / 200)
    assert got.reasons == []
    assert [one.fringes for one in got.passes] == pytest.approx([5.3] * 4, abs=0.12)


def test_too_short_or_constant():
    with pytest.raises(CalibrationError, match="needs 40 samples"):
        count_fringes(np.arange(10.0), 1000.0)
    with pytest.raises(CalibrationError, match="does not change"):
        count_fringes(np.ones(100), 1000.0)


@pytest.mark.parametrize(
    ("name", "column", "first", "band"),
    [("Task_11_mark_7", "2", 0, [1.0, 3.5]), ("Task_6c_7500", "1", 200, [0.15, 1.5])],
)
def test_real_motor_scans(name, column, first, band):
    from scipy import signal

    recording = open_recording(str(real_data(f"two-detector-motor-scan/{name}.txt")))
    record = recording.trace(column).values[first:]
    got = count_fringes(record, recording.rate_hz, recording.trace("6").values[first:])
    # the same from the phase of the analytic signal, band-passed (scipy)
    good = np.flatnonzero(np.isfinite(record))
    sos = signal.butter(3, band, "band", fs=recording.rate_hz, output="sos")
    passed = signal.sosfiltfilt(sos, np.interp(np.arange(len(record)), good, record[good]))
    phase = np.unwrap(np.angle(signal.hilbert(passed)))
    assert abs(got.net_fringes) == pytest.approx((phase[-1] - phase[0]) / (2 * np.pi), abs=0.4)
    assert got.reasons == []
    assert len(got.passes) <= 2


def test_a_drive_that_only_rises_never_tells_down():
    recording = open_recording(str(real_data("two-detector-motor-scan/Task_6c_7500.txt")))
    drive, record = recording.trace("6").values, recording.trace("1").values
    assert np.diff(drive[np.isfinite(drive)]).min() > 0
    assert all(one.direction == 1 for one in count_fringes(record, 62.5, drive).passes)


def test_a_pass_against_the_drive_has_no_direction():
    phase = np.concatenate([np.linspace(9, 0, 500), np.linspace(0, 60, 3000)])
    none = np.zeros(0, dtype=np.int64)
    got = Unfolded(phase, none, none.astype(bool), 0.05, 0.005, 0.0, (0, 0))
    rising = np.arange(len(phase), dtype=float)
    assert [one.direction for one in cut_passes(got, 0, rising)] == [0, 1]
    there_and_back = np.abs(rising - 500)[::-1].max() - np.abs(rising - 500)
    assert [one.direction for one in cut_passes(got, 0, -there_and_back)] == [-1, 1]


def test_a_real_bench_held_near_mid_fringe_is_no_scan():
    # a sweep over one fringe, then a 30 Hz line under control
    path = real_data("fiber-modulator-calline/fom-pa/fom-pa-control-actuation.csv")
    recording = open_recording(str(path))
    got = count_fringes(recording.trace("2").values, recording.rate_hz)
    assert any(reason.startswith("no scan") for reason in got.reasons)


@pytest.mark.parametrize(
    ("name", "word"),
    [("Task_8_6", "lost in them"), ("Task_9_blue", "too uneven"), ("Task_6a_2", "level jumps")],
)
def test_real_records_that_cannot_be_trusted(name, word):
    recording = open_recording(str(real_data(f"two-detector-motor-scan/{name}.txt")))
    got = count_fringes(recording.trace("1").values, recording.rate_hz)
    assert any(word in reason for reason in got.reasons), got.reasons

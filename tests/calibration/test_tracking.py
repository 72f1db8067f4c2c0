"""Tracking: a bench that runs through its fringes, against the simulated truth."""

import numpy as np
import pytest

from calibration.errors import CalibrationError
from calibration.lines import fit_lines_si
from calibration.tracked_course import TrackedCourse
from calibration.tracking import track_phase

RATE_HZ, COUNT, PILOT_HZ = 4000.0, 60_000, 401.3
TIME = np.arange(COUNT) / RATE_HZ
LINES = {87.1: (0.15, 1.0), 31.7: (0.1, -0.4)}


def moved(speed, depth=0.3):
    """Return the true phase: drift both ways, a pilot and two lines."""
    slow = 0.4 + speed * TIME + 2.0 * np.sin(2 * np.pi * 0.2 * TIME)
    lines = sum(m * np.cos(2 * np.pi * f * TIME + p) for f, (m, p) in LINES.items())
    return slow + depth * np.cos(2 * np.pi * PILOT_HZ * TIME + 0.6) + lines


def volts(phase, noise=0.005, seed=1):
    rng = np.random.default_rng(seed)
    return 2.0 + 1.5 * np.cos(phase) + 1.5 * noise * rng.normal(size=len(phase))


@pytest.mark.parametrize("speed", [-20.0, 0.0, 1.0, 30.0, 100.0])
@pytest.mark.parametrize("depth", [0.2, 0.6])
def test_phase_is_carried_over_the_extremes(speed, depth):
    phase = moved(speed, depth)
    record = volts(phase)
    record[5000:5050] = np.nan
    got = track_phase(record, RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6)
    error = got.phase_rad - phase
    error -= 2 * np.pi * np.round(np.nanmedian(error) / (2 * np.pi))
    assert got.reasons == []
    assert got.known.mean() > 0.97
    assert np.quantile(np.abs(error[got.inverted]), 0.999) < 0.06
    assert np.sqrt(np.mean(error[got.carried] ** 2)) < 0.25  # the lines, which are not carried
    assert got.pilot is not None
    assert got.pilot.depth_rad == pytest.approx(depth, rel=0.15)
    assert got.pilot.phase_rad == pytest.approx(0.6, abs=0.02)


@pytest.mark.slow
def test_lines_in_phase_have_pulls_within_four():
    for seed in range(4):
        got = track_phase(
            volts(moved(3.0), 0.01, seed), RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6
        )
        fit = fit_lines_si(got.for_lines, RATE_HZ, list(LINES), search_clock=False)
        for line, (depth, phase) in zip(fit.lines, LINES.values(), strict=True):
            size, u = float(line.amplitude.magnitude), float(line.amplitude.u_magnitude)
            assert abs(size - depth) < 4 * u
            assert u < 0.01 * depth
            assert abs(float(line.phase.magnitude) - phase) < 4 * float(line.phase.u_magnitude)


def test_the_sign_is_the_pilots():
    phase = moved(5.0)
    for declared, sign in ((0.6, 1.0), (0.6 + np.pi, -1.0)):
        got = track_phase(volts(phase), RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=declared)
        slope = np.nanmean(np.diff(got.phase_rad[::1000]))
        assert np.sign(slope) == sign
        assert any("polarity as declared" in one for one in got.assumptions)
    unknown = track_phase(volts(phase), RATE_HZ, 0.5, 3.5, PILOT_HZ)
    assert any("sign is not known" in one for one in unknown.assumptions)


def test_a_pilot_a_quarter_turn_off_its_drive_has_no_sure_sign():
    got = track_phase(
        volts(moved(5.0)), RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6 + np.radians(75)
    )
    assert any("the sign is not sure: the pilot moves 75° off" in one for one in got.reasons)


def test_a_drift_too_fast_for_the_pilot_is_lost_and_says_so():
    phase = moved(1.0)
    phase[30_000:] += 3000.0 * (TIME[30_000:] - TIME[30_000]) ** 2
    got = track_phase(volts(phase), RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6)
    assert any("lost" in reason for reason in got.reasons)
    assert got.inverted[:29_000].mean() > 0.4


def test_without_a_pilot_the_first_extreme_ends_it():
    phase = 1.2 + 0.4 * TIME
    got = track_phase(volts(phase, 0.001), RATE_HZ, 0.5, 3.5)
    stop = int(np.count_nonzero(got.known))
    assert np.cos(phase[stop]) == pytest.approx(-0.97, abs=0.01)
    assert np.abs(got.phase_rad[:stop] - phase[:stop]).max() < 0.03
    assert any("pilot line is needed" in reason for reason in got.reasons)
    assert got.assumptions == ["the sign is not known: phase and −phase fit alike; phase modulo π"]


def test_a_pilot_that_is_not_there_is_named():
    got = track_phase(volts(0.4 + 2.0 * TIME), RATE_HZ, 0.5, 3.5, PILOT_HZ)
    assert any("too weak" in reason for reason in got.reasons)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((0.0, 0.5, 3.5, 10.0), "rate_hz must be"),
        ((1000.0, 3.5, 0.5, 10.0), "high must be above low"),
        ((1000.0, 0.5, 3.5, 480.0), "below 0.45 of the rate"),
        ((1000.0, 0.5, 3.5, 0.01), "needs"),
    ],
)
def test_wrong_input(arguments, words):
    with pytest.raises(CalibrationError, match=words):
        track_phase(np.ones(1000), *arguments)


@pytest.mark.parametrize("parts_per_million", [-10_000, -100, 30])
def test_a_board_whose_clock_is_off_is_followed(parts_per_million):
    """Boards on an RC oscillator are 1 % off: the pilot turns by a hundred fringes in a minute."""
    time = TIME * (1 + 1e-6 * parts_per_million)
    phase = 0.4 + 3.0 * time + 0.3 * np.cos(2 * np.pi * PILOT_HZ * time + 0.6)
    got = track_phase(volts(phase), RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6)
    assert got.reasons == []
    assert got.known.all()
    assert got.pilot.frequency_hz == pytest.approx(PILOT_HZ * (1 + 1e-6 * parts_per_million), 3e-6)
    assert got.pilot.depth_rad == pytest.approx(0.3, rel=0.01)
    assert np.sqrt(np.mean((got.phase_rad - phase) ** 2)) < 0.01


def tracked_in_pieces(record, piece):
    cosine = (record - 2.0) / 1.5
    course = TrackedCourse(
        lambda k, n: cosine[k:n], COUNT, RATE_HZ, PILOT_HZ, 0.6, piece, length=40
    )
    return course, course.read(0, COUNT)


@pytest.mark.parametrize("speed", [3.0, -60.0])
def test_pieces_make_what_the_whole_makes(speed):
    record = volts(moved(speed))
    record[20_000:20_007] = np.nan
    one, whole = tracked_in_pieces(record, COUNT)
    many, pieces = tracked_in_pieces(record, 5000)
    assert (one.pieces, many.pieces) == (1, 12)
    same = whole.inverted & pieces.inverted
    assert same.sum() > 0.999 * max(whole.inverted.sum(), pieces.inverted.sum())
    np.testing.assert_allclose(pieces.phase_rad[same], whole.phase_rad[same], atol=1e-4)
    both = whole.carried & pieces.carried
    np.testing.assert_allclose(pieces.phase_rad[both], whole.phase_rad[both], atol=0.02)
    assert (whole.known == pieces.known).mean() > 0.9999
    for first, last in ((0, 10), (4990, 5010), (4960, 17_000), (59_990, 60_000)):
        part = many.read(first, last)
        np.testing.assert_array_equal(part.phase_rad, pieces.phase_rad[first:last])
        np.testing.assert_array_equal(part.carried, pieces.carried[first:last])


def test_with_one_pilot_pieces_are_the_whole_to_rounding():
    record = volts(moved(8.0))
    (one, whole), (many, _) = (tracked_in_pieces(record, n) for n in (COUNT, 5000))
    many.pilot, many.noise = one.pilot, one.noise
    many.piece.cache_clear()
    pieces = many.read(0, COUNT)
    np.testing.assert_array_equal(whole.inverted, pieces.inverted)
    np.testing.assert_allclose(pieces.phase_rad, whole.phase_rad, atol=1e-9)


def test_a_gap_longer_than_a_fringe_takes_is_told():
    record = volts(moved(30.0))
    record[5000:5800] = np.nan  # 0.2 s: a fringe
    got = track_phase(record, RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6)
    assert any("after 1 stretches without a phase, the first of 8" in one for one in got.reasons)


@pytest.mark.parametrize("size", [0.2, 0.35])
def test_deep_lines_beside_the_pilot_are_kept_clear_of_the_extremes(size):
    """Four lines reach 3 and 5 times as far as the margin: no sample is taken on the wrong branch."""
    lines = sum(size * np.cos(2 * np.pi * f * TIME + f) for f in (87.1, 31.7, 141.3))
    phase = 0.4 + 2.0 * TIME + 0.2 * np.cos(2 * np.pi * PILOT_HZ * TIME + 0.6) + lines
    got = track_phase(volts(phase, 0.002), RATE_HZ, 0.5, 3.5, PILOT_HZ, pilot_phase_rad=0.6)
    assert got.inverted.any()
    assert np.abs(got.phase_rad - phase)[got.inverted].max() < 0.05


def test_named_lines_are_carried_over_the_extremes():
    """Three lines of 0.35 rad beside the pilot: known, they neither narrow nor blur what is carried."""
    lines = sum(0.35 * np.cos(2 * np.pi * f * TIME + f) for f in (87.1, 31.7, 141.3))
    phase = 0.4 + 3.0 * TIME + 0.2 * np.cos(2 * np.pi * PILOT_HZ * TIME + 0.6) + lines
    record, drive = volts(phase, 0.002), {"pilot_phase_rad": 0.6}
    bare = track_phase(record, RATE_HZ, 0.5, 3.5, PILOT_HZ, **drive)
    named = track_phase(
        record, RATE_HZ, 0.5, 3.5, PILOT_HZ, **drive, others_hz=(31.7, 87.1, 141.3, 233.9)
    )
    assert named.inverted.mean() > bare.inverted.mean() + 0.2
    rms = [np.sqrt(np.mean((one.phase_rad - phase)[one.carried] ** 2)) for one in (bare, named)]
    assert rms[1] < 0.1 * rms[0]
    assert np.abs(named.phase_rad - phase)[named.inverted].max() < 0.05

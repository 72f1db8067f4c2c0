"""Parts of a recording: merged, they give the fit of the whole."""

import itertools

import numpy as np
import pytest

import calibration
from calibration.errors import CalibrationError

RATE = 4000.0
LINES = ["31.7 Hz", "87.13 Hz", "211.37 Hz"]


def _recording(kind, rng, samples):
    t = np.arange(samples) / RATE * (1 + (8e-5 if kind == "clock" else 0))
    turns = np.exp(2j * np.pi * np.outer([31.7, 87.13, 211.37], t))
    values = 0.3 + (np.array([[1.0], [0.5j], [-0.2]]) * turns).real.sum(axis=0)
    drive = (np.array([[0.5], [0.3], [0.2j]]) * turns).real.sum(axis=0)
    drive += 0.01 * rng.standard_normal(samples)
    if kind == "walk":
        values += np.cumsum(0.02 * rng.standard_normal(samples))
    values += 0.1 * rng.standard_normal(samples)
    if kind == "mains":
        values += 0.7 * np.cos(2 * np.pi * 50.02 * t + 1)
    if kind == "gaps":
        for start in rng.integers(0, samples, 20):
            values[start : start + rng.integers(1, 200)] = np.nan
        drive[500:560] = np.nan
    return values, drive


def _numbers(fit):
    for line in fit.lines:
        for estimate in (line.response, line.drive, line.ratio):
            if estimate is not None:
                yield "amplitude", abs(estimate.phasor)
                yield "phase", np.angle(estimate.phasor)
                yield "u", estimate.along_u
                yield "u of phase", estimate.across_u
                yield "dof", estimate.dof
        yield "density", line.density_value
        yield "snr", line.snr_value
        yield "frequency", line.frequency_hz
        yield "u of frequency", line.frequency_u_hz
    yield "used", fit.used_fraction
    yield "duration", fit.duration_s
    if fit.clock_offset is not None:
        yield "u of clock", fit.clock_u


def _pieces(rng, start, samples, most):
    cuts = rng.choice(np.arange(1, samples), size=rng.integers(0, most), replace=False)
    return list(itertools.pairwise([start, *(start + np.sort(cuts)).tolist(), start + samples]))


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("kind", ["white", "walk", "mains", "gaps", "clock", "free"])
def test_a_recording_split_at_random_and_merged_gives_the_fit_of_the_whole(kind, seed):
    # Sums in another order differ by rounding, some 1e-16 of the largest; an ill-conditioned phase
    # near 0 is compared with 1 rad.
    rng = np.random.default_rng(seed)
    samples, start, free = int(rng.integers(8000, 30_000)), int(rng.integers(5000)), kind == "free"
    values, drive = _recording(kind, rng, samples)
    keys = {"free": free, "start_index": start}
    plan = calibration.plan_lines(values, "4 kHz", LINES, drive, **keys)
    pieces = _pieces(rng, start, samples, 20)
    parts = [
        calibration.accumulate_lines(
            values[a - start : b - start], plan, drive[a - start : b - start], start_index=a
        )
        for a, b in pieces
    ]
    order = rng.permutation(len(parts))
    merged = parts[order[0]].merge(*(parts[k] for k in order[1:])).fit()
    whole = calibration.accumulate_lines(values, plan, drive, start_index=start).fit()
    for (name, got), (_, exact) in zip(_numbers(merged), _numbers(whole), strict=True):
        # The u of a phase at t = 0, which may lie 5000 samples before the data, is a small difference of
        # large terms of phase, clock and drift: rounding comes out some 1e4 times larger, 1.1e-12 at worst.
        relative = 2e-12 if name == "u of phase" else 1e-12
        assert got == pytest.approx(exact, rel=relative, abs=1e-12 if name == "phase" else 0), name
    assert merged.clock_value == pytest.approx(whole.clock_value, abs=1e-12, nan_ok=True)
    assert merged.distrust_reasons == whole.distrust_reasons


@pytest.mark.parametrize("kind", ["white", "walk", "gaps"])
def test_the_plan_of_a_recording_gives_what_fit_lines_gives(kind):
    values, drive = _recording(kind, np.random.default_rng(7), 20_000)
    plan = calibration.plan_lines(values, "4 kHz", LINES, drive)
    parts = [
        calibration.accumulate_lines(values[a:b], plan, drive[a:b], start_index=a)
        for a, b in ((0, 7001), (7001, 7003), (7003, 20_000))
    ]
    merged = parts[0].merge(parts[1]).merge(parts[2]).fit()
    whole = calibration.fit_lines(values, "4 kHz", LINES, drive)
    assert list(_numbers(merged)) == [
        (name, pytest.approx(value, rel=1e-12, abs=1e-12)) for name, value in _numbers(whole)
    ]


def test_pieces_shorter_than_the_filter_join_too():
    rng = np.random.default_rng(9)
    values, _ = _recording("walk", rng, 6000)
    plan = calibration.plan_lines(values, "4 kHz", LINES)
    assert plan.reach > 1
    edges = [0, 100, 101, 102, 103, 105, 3000, 3001, 6000]
    parts = [
        calibration.accumulate_lines(values[a:b], plan, start_index=a)
        for a, b in itertools.pairwise(edges)
    ]
    merged = parts[0].merge(*reversed(parts[1:])).fit()
    whole = calibration.accumulate_lines(values, plan).fit()
    for (_, got), (_, exact) in zip(_numbers(merged), _numbers(whole), strict=True):
        assert got == pytest.approx(exact, rel=1e-12, abs=1e-15)


def test_a_missing_part_is_a_gap():
    values, _ = _recording("white", np.random.default_rng(3), 20_000)
    plan = calibration.plan_lines(values, "4 kHz", LINES)
    parts = [
        calibration.accumulate_lines(values[a:b], plan, start_index=a)
        for a, b in ((0, 5000), (9000, 20_000))
    ]
    holed = values.copy()
    holed[5000:9000] = np.nan
    whole = calibration.accumulate_lines(holed, plan).fit()
    merged = parts[1].merge(parts[0]).fit()
    assert merged.used_fraction == pytest.approx(0.8)
    for one, other in zip(merged.lines, whole.lines, strict=True):
        assert one.phasor == pytest.approx(other.phasor, rel=1e-12)


def test_the_plan_of_the_first_seconds_serves_for_all():
    values, _ = _recording("clock", np.random.default_rng(5), 40_000)
    plan = calibration.plan_lines(values[:6000], "4 kHz", LINES)
    fit = calibration.accumulate_lines(values, plan).fit()
    whole = calibration.fit_lines(values, "4 kHz", LINES)
    for one, other in zip(fit.lines, whole.lines, strict=True):
        assert abs(one.phasor - other.phasor) < 0.3 * other.response.across_u


def test_what_does_not_belong_together_is_refused():
    values = np.random.default_rng(1).standard_normal(1000)
    plan = calibration.plan_lines(values, "4 kHz", LINES)
    one = calibration.accumulate_lines(values[:600], plan)
    with pytest.raises(CalibrationError, match="sample 599 is in two parts"):
        one.merge(calibration.accumulate_lines(values[599:], plan, start_index=599))
    other = calibration.plan_lines(values, "4 kHz", LINES[:2])
    with pytest.raises(CalibrationError, match="must be of one plan"):
        one.merge(calibration.accumulate_lines(values[600:], other, start_index=600))
    with pytest.raises(CalibrationError, match="at least one sample, got 0"):
        calibration.accumulate_lines(values[:0], plan)
    with pytest.raises(CalibrationError, match="drive must be given where it was planned"):
        calibration.accumulate_lines(values, plan, values)

"""Line fits: against general least squares, and whether their intervals cover."""

import itertools

import numpy as np
import pytest
from real_data import real_data

import metro
from calibration.channel_fit import fit_channel
from calibration.errors import CalibrationError
from calibration.lines import fit_lines, fit_lines_si
from calibration.phase_course import free_course
from calibration.phasors import block_phasors, merge_phasors
from calibration.sine_fit import fit_sine

RATE = 4000.0
LINES = np.array([31.7, 87.13, 211.37])  # no whole cycles in 10 s


def _tones(t, frequencies, phasors):
    turns = np.exp(2j * np.pi * np.outer(frequencies, t))
    return (np.asarray(phasors)[:, None] * turns).real.sum(axis=0)


def _pulls(estimate, truth):
    """Errors of amplitude and phase over their u."""
    size = abs(truth)
    along = (abs(estimate.phasor) - size) / estimate.along_u
    across = np.angle(estimate.phasor / truth) * size / estimate.across_u
    return along, across


# --- against general least squares ------------------------------------------------------------


@pytest.mark.parametrize("noise", [0.0, 0.2])
def test_three_parameter_fit_is_that_of_lstsq(noise):
    # IEEE Std 1057 three-parameter fit; the reference is numpy's SVD least squares. Both solve the
    # same well-conditioned problem in float64: they agree to some 1e-13.
    rng = np.random.default_rng(1)
    t = np.arange(1234) / RATE
    values = 1.3 * np.cos(2 * np.pi * 87.13 * t + 0.4) + 0.7 + noise * rng.standard_normal(len(t))
    angle = 2 * np.pi * 87.13 * t
    table = np.column_stack([np.cos(angle), np.sin(angle), np.ones_like(t)])
    a, b, offset = np.linalg.lstsq(table, values, rcond=None)[0]
    fit = fit_sine(values, RATE, 87.13)
    np.testing.assert_allclose([fit.phasor, fit.offset], [a - 1j * b, offset], atol=1e-9)


@pytest.mark.parametrize("noise", [0.0, 0.2])
@pytest.mark.parametrize("samples", [100, 1234])
def test_four_parameter_fit_is_that_of_curve_fit(noise, samples):
    # IEEE Std 1057 four-parameter fit; curve_fit with its exact Jacobian, as differences stop at 1e-8.
    optimize = pytest.importorskip("scipy.optimize")
    rng = np.random.default_rng(2)
    t = np.arange(samples) / 1000.0
    values = 1.3 * np.cos(2 * np.pi * 87.2 * t + 0.4) + 0.7 + noise * rng.standard_normal(samples)

    def model(t, a, b, f, offset):
        return a * np.cos(2 * np.pi * f * t) - b * np.sin(2 * np.pi * f * t) + offset

    def slopes(t, a, b, f, offset):
        c, s, w = np.cos(2 * np.pi * f * t), np.sin(2 * np.pi * f * t), 2 * np.pi * t
        return np.column_stack([c, -s, -w * (a * s + b * c), np.ones_like(t)])

    start = (1.3 * np.cos(0.4), 1.3 * np.sin(0.4), 87.2, 0.7)
    limits = {"jac": slopes, "ftol": 1e-15, "xtol": 1e-15, "gtol": 1e-15}
    with np.errstate(all="ignore"):
        (a, b, f, offset), _ = optimize.curve_fit(model, t, values, p0=start, **limits)
    fit = fit_sine(values, 1000.0, 87.0, free=True)
    np.testing.assert_allclose(
        [fit.phasor, fit.frequency_hz, fit.offset], [a + 1j * b, f, offset], atol=1e-9, rtol=1e-9
    )


def test_lines_with_gaps_are_those_of_lstsq():
    rng = np.random.default_rng(3)
    n = 500 + np.arange(6000)
    values = _tones(n / RATE, LINES, [1, 0.5j, -0.2]) + 0.1 * rng.standard_normal(len(n)) + 2.0
    values[rng.random(len(n)) < 0.1] = np.nan
    values[700:900] = np.nan
    phasors = block_phasors(values, LINES / RATE, start_index=500)
    fit = fit_channel(phasors, 3, free_course(3, 500, len(n), RATE), refine=False, drift=0)
    good = np.isfinite(values)
    waves = np.exp(2j * np.pi * np.outer(n[good] / RATE, LINES))
    table = np.hstack([waves.real, -waves.imag, np.ones((good.sum(), 1))])
    expected = np.linalg.lstsq(table, values[good], rcond=None)[0]
    np.testing.assert_allclose(fit.coefficients, expected[:3] + 1j * expected[3:6], atol=1e-11)
    np.testing.assert_allclose(fit.drift, expected[6:], atol=1e-11)


def test_merged_parts_give_the_fit_of_the_whole():
    rng = np.random.default_rng(4)
    values = _tones(np.arange(20_000) / RATE, LINES, [1, 0.5j, -0.2])
    values += 0.1 * rng.standard_normal(len(values))
    cuts = [0, *np.sort(rng.integers(1, 20_000, 19)).tolist(), 20_000]
    parts = [
        block_phasors(values[a:b], LINES / RATE, start_index=a, block=64)
        for a, b in itertools.pairwise(cuts)
    ]
    course = free_course(3, 0, len(values), RATE)
    whole = fit_channel(block_phasors(values, LINES / RATE, block=64), 3, course, refine=False)
    merged = fit_channel(merge_phasors(parts), 3, course, refine=False)
    np.testing.assert_allclose(merged.coefficients, whole.coefficients, atol=1e-12)
    np.testing.assert_allclose(merged.covariance, whole.covariance, rtol=1e-9)


@pytest.mark.parametrize("scale", [1.0, 1e-9, 1e6])
def test_without_noise_lines_are_exact_at_any_scale(scale):
    truth = scale * np.array([1.0, 0.3 * np.exp(1j), 0.02 * np.exp(-2j)])
    values = _tones(np.arange(40_000) / RATE, LINES, truth) + 3 * scale
    for line, exact in zip(fit_lines_si(values, RATE, LINES).lines, truth, strict=True):
        assert abs(line.phasor - exact) < 1e-9 * scale


def test_phases_count_from_the_first_sample_of_the_recording():
    values = _tones(np.arange(30_000) / RATE, LINES, [1, 0.5j, -0.2])
    whole = fit_lines_si(values, RATE, LINES)
    part = fit_lines_si(values[7001:], RATE, LINES, start_index=7001)
    for one, other in zip(part.lines, whole.lines, strict=True):
        assert abs(one.phasor - other.phasor) < 1e-9


# --- honest errors ----------------------------------------------------------------------------

# Coverage in six kinds of noise and the bounds: long_runs/line_statistics.py.


@pytest.mark.slow
@pytest.mark.parametrize(
    ("records", "within"), [(20, 0.15), pytest.param(600, 0.04, marks=pytest.mark.trials)]
)
def test_displacements_under_a_large_drift_have_honest_errors(records, within):
    # What a calibration hands over: metres, lines of nanometres under a random walk a hundred times
    # larger, six lines in 12 s. 20 records of 12 independent pairs, the ratio repeating the line: σ of a
    # standard deviation √(1/2·240) = 5 %, of a mean 6 %. The slow test knows them to 1 %.
    f = np.array([31.7, 57.3, 87.13, 133.9, 211.37, 397.1])
    n, pulls = 24_000, []
    for seed in range(records):
        rng = np.random.default_rng(seed)
        t = np.arange(n) / 2000.0
        truth = rng.uniform(1e-9, 1e-7, 6) * np.exp(1j * rng.uniform(-3, 3, 6))
        walk = np.cumsum(rng.standard_normal(n))
        walk *= 100 * 3e-8 / np.ptp(walk)
        driven = 1 + 0.5j
        values = _tones(t, f, truth) + walk + 1e-10 * rng.standard_normal(n)
        drive = _tones(t, f, np.full(6, driven)) + 1e-4 * rng.standard_normal(n)
        fit = fit_lines_si(values, 2000.0, f, drive, value_unit="m", drive_unit="V")
        for line, exact in zip(fit.lines, truth, strict=True):
            pulls += _pulls(line.response, exact)
            pulls += _pulls(line.ratio, exact / driven)
    assert np.std(pulls) == pytest.approx(1.0, abs=within)
    assert np.mean(pulls) == pytest.approx(0.0, abs=1.2 * within)


def test_what_drive_and_response_have_in_common_cancels_in_the_ratio():
    rng = np.random.default_rng(8)
    t = np.arange(20_000) / RATE
    drive = np.cos(2 * np.pi * 87.13 * t) + 0.1 * rng.standard_normal(len(t))
    values = 3 * drive + 0.001 * rng.standard_normal(len(t))
    line = fit_lines_si(values, RATE, [87.13], drive).lines[0]
    # 3·0.1·√(2/N) would be 3e-3; the noise not shared is 0.001·√(2/N) = 1e-5.
    assert line.ratio.along_u == pytest.approx(1e-5, rel=0.3)
    assert abs(line.ratio_phasor - 3) < 5e-5


def test_noise_density_is_that_beside_the_line_and_not_that_of_other_tones():
    rng = np.random.default_rng(9)
    t = np.arange(40_000) / RATE
    values = _tones(t, [87.13, 88.7, 50.0], [1, 0.5, 2]) + 0.1 * rng.standard_normal(len(t))
    line = fit_lines_si(values, RATE, [87.13]).lines[0]
    # S = 2σ²/rate; 64 bins: u 6 % of the amplitude density.
    assert line.density_value == pytest.approx(0.1 * np.sqrt(2 / RATE), rel=0.2)
    assert line.snr_value == pytest.approx(1 / (0.1 * np.sqrt(2 / 40_000)), rel=0.2)


# --- clock and free frequency -----------------------------------------------------------------


def _clocked(offset, seconds, frequencies, noise, drift=0.2e-6, seed=1):
    t = np.arange(int(seconds * RATE)) / RATE
    course = t * (1 + offset) + drift * (t * t / (2 * seconds) - 0.5 * t)
    values = sum(np.cos(2 * np.pi * f * course + 0.7) for f in frequencies)
    return values + noise * np.random.default_rng(seed).standard_normal(len(t))


@pytest.mark.parametrize("offset", [1e-2, -1.7e-2, 1e-4, 1e-5, 2e-6])
@pytest.mark.parametrize("frequencies", [[1000.0], [31.7, 87.1, 1000.0]])
def test_a_clock_that_is_off_and_drifts_costs_no_amplitude(offset, frequencies):
    fit = fit_lines_si(_clocked(offset, 600, frequencies, 0.01), RATE, frequencies)
    for line in fit.lines:
        assert abs(abs(line.phasor) - 1) < 1e-4
        assert abs(np.angle(line.phasor) - 0.7) < 5 * line.response.across_u
    assert abs(fit.clock_value - offset) < 5 * fit.clock_u
    assert fit.clock_applied
    assert fit.is_trustworthy


def test_a_good_clock_is_left_alone():
    fit = fit_lines_si(_clocked(0.0, 20, [87.13], 0.1, drift=0.0), RATE, [87.13])
    assert not fit.clock_applied
    assert abs(fit.clock_value) < 4 * fit.clock_u


def test_lines_lost_in_noise_say_nothing_about_the_clock():
    fit = fit_lines_si(np.random.default_rng(2).standard_normal(20_000), RATE, [87.13, 211.3])
    assert fit.clock_offset is None
    assert "too weak" in fit.distrust_reasons[0]


def test_clock_offset_intervals_cover():
    # 40 records: standard deviation of the pulls known to 11 %; three of it.
    pulls = []
    for seed in range(40):
        fit = fit_lines_si(
            _clocked(1e-4, 4, [87.13, 211.4], 0.3, drift=0.0, seed=seed), RATE, [87.13, 211.4]
        )
        pulls.append((fit.clock_value - 1e-4) / fit.clock_u)
    assert np.std(pulls) == pytest.approx(1.0, abs=0.33)


@pytest.mark.slow
def test_free_frequency_and_its_u():
    # Cramér–Rao: u(f) = √(6/(π²·N·T²))·σ/A, here √(6/(π²·N))·0.1/T. 50 records: 10 % of it.
    n, pulls, errors = 4000, [], []
    for seed in range(50):
        rng = np.random.default_rng(seed)
        f = 87.13 + rng.uniform(-0.2, 0.2)
        values = np.cos(2 * np.pi * f * np.arange(n) / RATE + 1) + 0.1 * rng.standard_normal(n)
        line = fit_lines_si(values, RATE, [87.13], free=True).lines[0]
        errors.append(line.frequency_hz - f)
        pulls += [errors[-1] / line.frequency_u_hz, *_pulls(line.response, np.exp(1j))]
    bound = np.sqrt(6 / (np.pi**2 * n)) * 0.1 * RATE / n
    assert np.std(errors) / bound == pytest.approx(1.0, abs=0.3)
    assert np.std(pulls) == pytest.approx(1.0, abs=0.2)


# --- distrust ---------------------------------------------------------------------------------


def _reasons(values, frequencies=(87.13,), **keys):
    return " | ".join(fit_lines_si(values, RATE, frequencies, **keys).distrust_reasons)


def _sine(n=16_000, f=87.13, noise=0.01, seed=5):
    rng = np.random.default_rng(seed)
    return np.cos(2 * np.pi * f * np.arange(n) / RATE) + noise * rng.standard_normal(n)


def test_ten_cycles_in_four_seconds_are_believed():
    rng = np.random.default_rng(6)
    t = np.arange(16_000) / RATE
    values = np.cos(2 * np.pi * 2.5 * t) + 0.05 * rng.standard_normal(len(t))
    assert fit_lines_si(values, RATE, [2.5]).is_trustworthy


def test_sound_lines_are_believed():
    distrusted = [seed for seed in range(40) if _reasons(_sine(4000, noise=0.3, seed=seed)) != ""]
    assert len(distrusted) <= 1


def test_reasons_are_named():
    t = np.arange(16_000) / RATE
    walk = 0.05 * np.cumsum(np.random.default_rng(7).standard_normal(len(t)))
    assert "on the mains (50 Hz)" in _reasons(_sine(f=50.0), [50.0])
    assert "on the mains (60 Hz)" in _reasons(_sine(f=60.0), [60.0], mains_hz=60.0)
    loud = _sine(f=150.0) + 0.2 * np.cos(2 * np.pi * 50 * t)
    assert "on a mains harmonic (3 × 50 Hz)" in _reasons(loud, [150.0])
    assert _reasons(_sine(f=150.0), [150.0]) == ""
    assert "too near the line at 87.23 Hz" in _reasons(_sine(), [87.13, 87.23])
    assert "clipped" in _reasons(np.clip(_sine(), -0.9, 0.9))
    assert "too few cycles" in _reasons(_sine(f=0.8), [0.8])
    assert "at a fringe top or bottom" in _reasons(np.cos(3 * _sine()) + 0.02 * _sine())
    assert "the working point wandered" in _reasons(_sine() * np.cos(0.02 * walk * t))
    assert "too weak" in _reasons(_sine() + 300 * _sine(noise=1, f=1.0))


def test_gaps_in_step_with_the_line_are_named():
    values = _sine(f=100.0) + 0.5
    cycle = np.arange(len(values)) % 40
    values[(cycle < 14) | ((cycle >= 20) & (cycle < 34))] = np.nan
    assert "the pattern of the gaps aliases" in _reasons(values, [100.0])


def test_a_quantised_sine_is_not_called_clipped():
    assert _reasons(np.rint(31.3 * _sine(noise=0.0)) + 0.0, [87.13]) == ""


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        ({"frequencies_hz": [2000.0]}, "below half the sampling rate, 2000 Hz, got 2000 Hz"),
        ({"frequencies_hz": [0.0]}, "a line must lie above 0 Hz"),
        ({"frequencies_hz": []}, "at least one line must be named"),
        ({"frequencies_hz": [31.7, 31.7]}, "each line must be named once"),
        ({"values": np.zeros((10, 2))}, "samples must have shape (n,), got (10, 2)"),
        ({"values": np.zeros(5)}, "samples must have at least 16 values, got 5"),
        ({"values": np.full(100, np.nan)}, "samples: no value is there"),
        ({"drive": np.zeros(99)}, "drive must have 100 samples like the response, got 99"),
    ],
)
def test_what_cannot_be_fitted_is_refused(keys, message):
    given = {"values": np.ones(100), "rate_hz": RATE, "frequencies_hz": [31.7], **keys}
    with pytest.raises(CalibrationError) as raised:
        fit_lines_si(**given)
    assert message in str(raised.value)
    assert "\n" not in str(raised.value)


# --- units and results ------------------------------------------------------------------------


def test_units_go_in_and_come_out():
    t = np.arange(8000) / RATE
    values = metro.Quantity(1e3 * _tones(t, [31.7], [0.5]) + _sine(8000, 500.0, 1.0), "mV")
    drive = metro.Quantity(_tones(t, [31.7], [2.0]), "V")
    fit = fit_lines(values, "4 kHz", ["31.7 Hz", metro.Quantity(0.5, "kHz")], drive)
    line = fit.lines[0]
    assert line.amplitude.unit == "V"
    assert line.amplitude.magnitude == pytest.approx(0.5, abs=1e-4)
    assert line.noise_density.unit == "V/Hz**0.5"
    assert line.ratio.magnitude.unit == "1"
    assert line.ratio.magnitude.magnitude == pytest.approx(0.25, abs=1e-4)
    assert line.phase.unit == "rad"
    assert str(fit.duration.to("s")) == "2.0 second"
    assert fit_lines(drive.magnitude, "4 kHz", "31.7 Hz").lines[0].amplitude.unit == "1"


def test_a_bare_rate_is_refused():
    with pytest.raises(metro.MetroError, match="rate must have a unit"):
        fit_lines(np.ones(100), 4000, ["31.7 Hz"])


def test_used_fraction_and_duration():
    values = _sine(8000)
    values[1000:1800] = np.nan
    fit = fit_lines_si(values, RATE, [87.13])
    assert fit.used_fraction == pytest.approx(0.9)
    assert fit.duration_s == 2.0


# --- real recordings ---------------------------------------------------------------------------

FOLDER = "fiber-modulator-calline"


def _columns(name):
    return np.genfromtxt(real_data(f"{FOLDER}/{name}"), delimiter=",", skip_header=2)


def test_the_line_at_1_khz_and_its_drive():
    # Figures: README of the data, independent fits; 0.5 % as its amplitudes are stated.
    data = _columns("fom-pa/fom-pa-waveform_1kHz.csv")
    line = fit_lines_si(data[:, 2], 50e3, [1000.0], data[:, 1]).lines[0]
    assert abs(line.drive_phasor) == pytest.approx(0.1002, rel=5e-3)
    assert abs(line.phasor) == pytest.approx(1.757, rel=5e-3)
    assert line.is_trustworthy


@pytest.mark.parametrize(
    ("name", "rate", "line", "amplitude", "frequency"),
    [
        ("fom-mc/fom-mc-waveform-30Hz.csv", 2000.0, 30.0, 4.914, 29.9994),
        ("fom-mc/fom-mc-waveform-150Hz.csv", 5000.0, 150.0, 4.911, 150.001),
    ],
)
def test_drive_columns_with_free_frequency(name, rate, line, amplitude, frequency):
    # Figures: README of the data, four-parameter fits.
    found = fit_lines_si(_columns(name)[:, 3], rate, [line], free=True).lines[0]
    assert abs(found.phasor) == pytest.approx(amplitude, rel=3e-3)
    assert found.frequency_hz == pytest.approx(frequency, abs=1e-3)
    assert found.is_trustworthy


def test_a_working_point_at_a_fringe_top_is_not_trusted():
    data = _columns("fom-pa/fom-pa-control-actuation.csv")
    early = fit_lines_si(data[:100, 1], 200.0, [30.0])
    assert "at a fringe top or bottom" in early.distrust_reasons[0]
    swept = fit_lines_si(data[:, 1], 200.0, [30.0])
    assert "times stronger in one part of the recording" in swept.distrust_reasons[0]
    locked = fit_lines_si(data[520:, 1], 200.0, [30.0], start_index=520)
    assert locked.is_trustworthy
    assert abs(locked.lines[0].phasor) == pytest.approx(2.53, rel=5e-3)


@pytest.mark.parametrize("drive", [None, np.zeros(4000), np.ones(4000)])
@pytest.mark.parametrize("values", [np.zeros(4000), np.full(4000, 3.3), _sine(4000)])
def test_a_dead_channel_is_distrusted_and_no_crash(values, drive):
    fit = fit_lines_si(values, RATE, [87.13], drive)
    dead = drive is not None or np.ptp(values) == 0
    assert fit.is_trustworthy is not dead
    if dead:
        assert "too weak" in " | ".join(fit.distrust_reasons)


@pytest.mark.slow
@pytest.mark.parametrize("free", [False, True])
def test_the_shortest_records_do_not_crash(free):
    for n in range(16, 64):
        fit = fit_lines_si(_sine(n), RATE, [700.0], free=free)
        assert np.isfinite(abs(fit.lines[0].phasor))


@pytest.mark.parametrize("lines", [(87.1,), (31.7, 87.1), (31.7, 87.1, 141.3, 233.9)])
@pytest.mark.parametrize("missing", ["response", "drive", "both"])
def test_half_a_channel_may_be_missing(lines, missing):
    """The terms of the phase hang together where half of a record is there: no warning, right answers."""
    rng = np.random.default_rng(11)
    time_s = np.arange(40_000) / 4000.0
    clean = sum(np.cos(2 * np.pi * f * time_s) for f in lines)
    response, drive = (clean + 0.01 * rng.normal(size=time_s.size) for _ in range(2))
    for name, values in (("response", response), ("drive", drive)):
        if missing in (name, "both"):
            values[: time_s.size // 2] = np.nan
    fit = fit_lines_si(response, 4000.0, lines, drive)
    assert np.isfinite(fit.clock_u)
    for line in fit.lines:
        assert line.ratio.phasor == pytest.approx(1.0, abs=1e-3)
        assert 1e-6 < np.sqrt(np.trace(line.ratio.covariance)) < 1e-3


@pytest.mark.parametrize("constant", [1.5, 1.234])
def test_a_constant_has_one_signal_to_noise(constant):
    fit = fit_lines_si(np.full(8000, constant), 4000.0, [87.1, 31.7])
    for line in fit.lines:
        assert line.snr_value < 5
        weak = f"too weak: signal to noise {line.snr_value:.2g}, 5 is needed"
        assert line.distrust_reasons[0] == weak
    nothing = fit_lines_si(np.zeros(8000), 4000.0, [87.1]).lines[0]
    assert nothing.snr_value == 0
    assert nothing.distrust_reasons[0] == "too weak: signal to noise 0, 5 is needed"

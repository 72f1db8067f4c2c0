"""Driven fringe: depths, extremes and working point, unbiased and with a u that covers."""

import numpy as np
import pytest
from real_data import real_data

from calibration.driven_fringe import fit_driven_fringe, fit_driven_fringe_si
from calibration.errors import CalibrationError

RATE_HZ = 1000.0


def record(seed, depths, *, n=20_000, snr_db=20.0, drift=0.0, working=None, offset=1.2):
    """Return a driven fringe of unit half span and its truth (frequencies, line phases, φ0)."""
    rng = np.random.default_rng(seed)
    depths = np.atleast_1d(depths)
    top = RATE_HZ / (2.5 * (depths.sum() + 5))
    frequencies = np.sort(rng.uniform(0.35, 1.0, len(depths)) * top)
    t = np.arange(n) / RATE_HZ
    psi = rng.uniform(-np.pi, np.pi, len(depths))
    phi0 = rng.uniform(0.3, np.pi - 0.3) if working is None else working
    phase = phi0 + drift * t / t[-1]
    for m, f, p in zip(depths, frequencies, psi, strict=True):
        phase = phase + m * np.cos(2 * np.pi * f * t + p)
    noise = 0.0 if snr_db is None else 10 ** (-snr_db / 20) / np.sqrt(2)
    return offset + np.cos(phase) + noise * rng.normal(size=n), frequencies, psi, phi0


def pull(measured, truth):
    return float((measured.magnitude - truth) / measured.u_magnitude)


@pytest.mark.parametrize("depth", [1.0, 1.8, 3.8317, 7.0, 25.0, 110.0, 320.0])
def test_depth_and_extremes_from_the_record_alone(depth):
    for seed in range(1):
        volts, f, _, _ = record(seed, depth, n=20_000)
        fit = fit_driven_fringe_si(volts, RATE_HZ, f)
        assert fit.is_trustworthy, fit.reasons
        assert abs(pull(fit.phase_amplitude[0], depth)) < 4
        assert abs(pull(fit.low, 0.2)) < 4
        assert abs(pull(fit.high, 2.2)) < 4
        assert fit.residual_rms == pytest.approx(0.0707, rel=0.03)


@pytest.mark.parametrize("depth", [0.02, 0.1, 0.4, 0.95])
def test_shallow_lines_with_given_extremes(depth):
    for seed in range(1):
        volts, f, psi, phi0 = record(seed, depth)
        fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=0.2, high=2.2)
        assert abs(pull(fit.phase_amplitude[0], depth)) < 4
        assert abs(pull(fit.working_phase, phi0)) < 4
        turn = float(fit.phase[0].magnitude) - psi[0]
        assert abs(np.angle(np.exp(1j * turn))) < 5 * float(fit.phase[0].u_magnitude)


@pytest.mark.parametrize("depth", [0.03, 0.2, 0.8])
def test_shallow_lines_with_a_drifting_working_point(depth):
    for seed in range(1):
        volts, f, _, _ = record(seed, depth, drift=3.6)
        fit = fit_driven_fringe_si(volts, RATE_HZ, f)
        assert fit.is_trustworthy, fit.reasons
        assert abs(pull(fit.phase_amplitude[0], depth)) < 4


def test_a_shallow_line_with_neither_is_not_determined():
    volts, f, _, _ = record(1, 0.6)
    fit = fit_driven_fringe_si(volts, RATE_HZ, f)
    assert not fit.is_trustworthy
    assert fit.reasons[0].startswith("depth not determined by this record")


@pytest.mark.parametrize(
    ("depth", "extremes", "drift"),
    [(0.02, True, 0.0), (0.5, True, 0.0), (0.3, False, 4.0), (2.3, False, 0.0), (60.0, False, 0.0)],
)
def test_noise_free_bias_is_below_1e_5(depth, extremes, drift):
    volts, f, _, _ = record(5, depth, snr_db=None, drift=drift)
    given = {"low": 0.2, "high": 2.2} if extremes else {}
    fit = fit_driven_fringe_si(volts, RATE_HZ, f, **given)
    assert float(fit.phase_amplitude[0].magnitude) == pytest.approx(depth, rel=1e-5)
    assert float(fit.high.magnitude - fit.low.magnitude) == pytest.approx(2.0, rel=1e-5)


@pytest.mark.slow
def test_several_lines_at_once():
    depths = [0.2, 0.3, 0.15, 0.25, 0.2, 0.1]
    for seed in range(2):
        volts, f, psi, _ = record(seed, depths, n=10_000)
        fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=0.2, high=2.2)
        for got, phase, m, p in zip(fit.phase_amplitude, fit.phase, depths, psi, strict=True):
            assert abs(pull(got, m)) < 4
            assert abs(np.angle(np.exp(1j * (phase.magnitude - p)))) < 5 * phase.u_magnitude


@pytest.mark.slow
@pytest.mark.parametrize(
    "depths", [(4.0, 1.5), (0.3, 6.0), (2.5, 2.0), (12.0, 11.0), (5.5, 11.5, 0.2)]
)
def test_deep_tones_from_the_record_alone(depths):
    for seed in range(2):
        volts, f, _, _ = record(seed, depths, n=10_000)
        fit = fit_driven_fringe_si(volts, RATE_HZ, f)
        for got, m in zip(fit.phase_amplitude, depths, strict=True):
            assert abs(pull(got, m)) < 4, (seed, fit.phase_amplitude)


@pytest.mark.slow
def test_uncertainty_of_given_extremes_reaches_the_depth():
    pulls = []
    for seed in range(8):
        volts, f, _, _ = record(seed, 0.3, n=4000)
        low, high = np.array([0.2, 2.2]) + 0.02 * np.random.default_rng(seed).normal(size=2)
        fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=low, high=high, low_u=0.02, high_u=0.02)
        pulls.append(pull(fit.phase_amplitude[0], 0.3))
        sure = fit_driven_fringe_si(volts, RATE_HZ, f, low=low, high=high)
        assert fit.phase_amplitude[0].u_magnitude > sure.phase_amplitude[0].u_magnitude
    assert np.abs(pulls).max() < 3.5
    assert 0.4 < np.std(pulls) < 1.7


def test_a_clock_error_is_found():
    volts, f, _, _ = record(2, 5.0)
    fit = fit_driven_fringe_si(volts, RATE_HZ, f * (1 + 2e-5))
    assert fit.clock_offset is not None
    assert float(fit.clock_offset.magnitude) == pytest.approx(-2e-5, abs=3e-6)
    assert abs(pull(fit.phase_amplitude[0], 5.0)) < 4


def test_line_phase_counts_from_the_recordings_first_sample():
    volts, f, psi, _ = record(3, 2.0)
    whole = fit_driven_fringe_si(volts, RATE_HZ, f)
    part = fit_driven_fringe_si(volts[5000:], RATE_HZ, f, start_index=5000)
    for fit in (whole, part):
        turn = float(fit.phase[0].magnitude) - psi[0]
        # one photodiode: (φ, x) and (−φ, −x) look alike, so the phase is known modulo π
        assert abs(np.angle(np.exp(2j * turn))) / 2 < 5 * float(fit.phase[0].u_magnitude)


def test_missing_samples_are_left_out():
    volts, f, _, _ = record(4, 2.0)
    volts[3000:5000] = np.nan
    volts[::97] = np.nan
    fit = fit_driven_fringe_si(volts, RATE_HZ, f)
    assert fit.used_samples == np.count_nonzero(np.isfinite(volts))
    assert abs(pull(fit.phase_amplitude[0], 2.0)) < 4


def test_coloured_noise_is_in_the_uncertainty():
    pulls = []
    for seed in range(8):
        volts, f, _, _ = record(seed, 0.4, n=4000, snr_db=60.0)
        steps = np.random.default_rng(seed).normal(size=len(volts))
        volts += 0.0004 * (np.cumsum(steps) - np.cumsum(steps).mean())
        fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=0.2, high=2.2, low_u=0.01, high_u=0.01)
        pulls.append(pull(fit.phase_amplitude[0], 0.4))
    assert 0.4 < np.std(pulls) < 1.7
    assert np.abs(pulls).max() < 4


def test_quantities_at_the_door():
    volts, f, _, _ = record(6, 3.0)
    from metro.units import quantity

    fit = fit_driven_fringe(
        quantity(1e3 * volts, "mV"), "1 kHz", [f"{f[0]:.15g} Hz"], "632.99 nm", dark="0 mV"
    )
    assert str(fit.low.unit) == "V"
    assert fit.displacement_amplitude is not None
    # x = m·λ/(4π) in a simple Michelson: ISO 16063-11:1999, clause 9 (from memory)
    assert float(fit.displacement_amplitude[0].magnitude) == pytest.approx(
        float(fit.phase_amplitude[0].magnitude) * 632.99e-9 / (4 * np.pi), rel=1e-12
    )
    assert fit.contrast is not None
    assert float(fit.contrast.magnitude) == pytest.approx(1 / 1.2, rel=5e-3)
    assert fit_driven_fringe(volts, "1 kHz", quantity(f[0], "Hz")).displacement_amplitude is None


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"rate_hz": 0.0}, "rate_hz must be finite and > 0 Hz, got 0.0"),
        (
            {"frequencies_hz": [600.0]},
            "a line must lie above 0 Hz and below half the rate, 500 Hz, got 600 Hz",
        ),
        ({"frequencies_hz": []}, "at least one line frequency is needed"),
        ({"low": 1.0}, "low and high must be given together"),
        ({"low": 2.0, "high": 1.0}, "high must be above low, got low 2 and high 1"),
        ({"values": np.ones(100)}, "the record does not change: every sample is 1"),
        ({"values": np.arange(5.0)}, "a driven fringe needs 24 samples, got 5"),
    ],
)
def test_wrong_input_is_named(change, message):
    given = {
        "values": np.random.default_rng(0).normal(size=500),
        "rate_hz": 1000.0,
        "frequencies_hz": [31.0],
    }
    given.update(change)
    with pytest.raises(CalibrationError) as caught:
        fit_driven_fringe_si(
            given.pop("values"), given.pop("rate_hz"), given.pop("frequencies_hz"), **given
        )
    assert str(caught.value) == message


def fibre(name):
    path = real_data(f"fiber-modulator-calline/fom-pa/{name}")
    return np.loadtxt(path, delimiter=",", skiprows=2)


def test_fibre_modulator_at_1_khz():
    # Published depths beside the recordings; without Bessel functions one finds 0.362, which is wrong.
    columns = fibre("fom-pa-waveform_1kHz.csv")
    for low, high, least, most in ((0.5, 10.2, 0.366, 0.373), (0.44, 9.69, 0.384, 0.391)):
        fit = fit_driven_fringe_si(columns[:, 2], 50e3, [1000.0], low=low, high=high)
        assert fit.is_trustworthy, fit.reasons
        assert least < float(fit.phase_amplitude[0].magnitude) < most


def test_fibre_modulator_under_control():
    from calibration.scan import fit_scan

    volts = fibre("fom-pa-control-actuation.csv")[:, 1]
    for scan in (fit_scan(volts[180:280], 200.0), fit_scan(volts, 200.0)):
        fit = fit_driven_fringe_si(
            volts[500:],
            200.0,
            [30.0],
            low=scan.low,
            high=scan.high,
            low_u=scan.low_u,
            high_u=scan.high_u,
            start_index=500,
        )
        assert fit.is_trustworthy, fit.reasons
        assert 0.555 < float(fit.phase_amplitude[0].magnitude) < 0.590
    fit = fit_driven_fringe_si(volts[500:], 200.0, [30.0], low=0.5, high=10.2, start_index=500)
    assert 0.536 < float(fit.phase_amplitude[0].magnitude) < 0.549


def test_fibre_modulator_at_a_fringe_top_is_refused():
    volts = fibre("fom-pa-control-actuation.csv")[:100, 1]
    for given in ({"low": 0.44, "high": 9.69}, {"low": 0.5, "high": 10.2}):
        fit = fit_driven_fringe_si(volts, 200.0, [30.0], **given)
        assert any("fringe top" in reason for reason in fit.reasons)


@pytest.mark.slow
@pytest.mark.parametrize("sweeps", [4, 15])
def test_a_free_running_bench(sweeps):
    # 10 s of a bench whose arms run over many fringes, back and forth, under a shallow line
    rate_hz, n = 2000.0, 20_000
    rng = np.random.default_rng(sweeps)
    t = np.arange(n) / rate_hz
    phase = 0.4 + np.cumsum(rng.normal(size=n)) * 0.2 / np.sqrt(rate_hz)
    phase += 2 * np.pi * sweeps * np.abs(((t / 7 + 0.3) % 1) * 2 - 1)
    volts = 1.2 + np.cos(phase + 0.3 * np.cos(2 * np.pi * 87.1 * t)) + 0.01 * rng.normal(size=n)
    fit = fit_driven_fringe_si(volts, rate_hz, [87.1])
    assert fit.is_trustworthy, fit.reasons
    assert float(fit.phase_amplitude[0].magnitude) == pytest.approx(0.3, abs=3e-3)
    assert float(fit.low.magnitude) == pytest.approx(0.2, abs=8e-3)
    assert float(fit.high.magnitude) == pytest.approx(2.2, abs=8e-3)
    moved = fit.working_range_rad[1] - fit.working_range_rad[0]
    assert moved == pytest.approx(np.ptp(phase), rel=0.05)


def clipped_tones():
    t = np.arange(20_000) / 2000.0
    phase = 1.0 + 3.0 * np.cos(2 * np.pi * 17.3 * t) + 5.0 * np.cos(2 * np.pi * 5.1 * t + 1)
    return 2 + 1.5 * np.cos(phase) + 0.02 * np.random.default_rng(1).normal(size=len(t))


def test_a_clipped_record_is_named():
    fit = fit_driven_fringe_si(np.minimum(clipped_tones(), 3.48), 2000.0, [17.3, 5.1])
    assert any("clipped" in reason for reason in fit.reasons)


@pytest.mark.slow
def test_clipping_is_named_on_either_side_and_where_there_is_none_is_not():
    volts = clipped_tones()
    for clipped in (np.minimum(volts, 3.2), np.maximum(volts, 0.6)):
        fit = fit_driven_fringe_si(clipped, 2000.0, [17.3, 5.1])
        assert any("clipped" in reason for reason in fit.reasons)
    assert fit_driven_fringe_si(volts, 2000.0, [17.3, 5.1]).reasons == []
    rough = np.round(volts / 0.05) * 0.05
    assert fit_driven_fringe_si(rough, 2000.0, [17.3, 5.1]).reasons == []


@pytest.mark.parametrize("off", [pytest.param(-0.01, marks=pytest.mark.slow), 0.004])
def test_frequencies_given_a_little_wrong_are_put_right(off):
    volts, f, _, _ = record(5, 2.5)
    fit = fit_driven_fringe_si(volts, RATE_HZ, np.asarray(f) * (1.0 - off))
    assert fit.is_trustworthy, fit.reasons
    assert fit.clock_offset is not None
    assert float(fit.clock_offset.magnitude) == pytest.approx(1.0 / (1.0 - off) - 1.0, abs=1e-5)
    assert abs(pull(fit.phase_amplitude[0], 2.5)) < 4


def test_a_fringe_that_changes_within_the_record_is_named():
    volts, f, _, _ = record(7, 2.5)
    rise = np.linspace(-0.5, 0.5, len(volts))
    for share in (0.1, -0.3):
        changed = volts.mean() + (volts - volts.mean()) * (1.0 + share * rise)
        reasons = fit_driven_fringe_si(changed, RATE_HZ, f).reasons
        assert any("amplitude changes within the record" in reason for reason in reasons)


def test_fixed_extremes_that_are_not_the_records_are_named():
    volts, f, _, _ = record(8, 2.5)
    fit = fit_driven_fringe_si(volts, RATE_HZ, f)
    low, high = (float(one.magnitude) for one in (fit.low, fit.high))
    moved = 0.05 * (high - low)
    assert fit_driven_fringe_si(volts, RATE_HZ, f, low=low, high=high).reasons == []
    reasons = fit_driven_fringe_si(volts, RATE_HZ, f, low=low + moved, high=high + moved).reasons
    assert any("the given extremes disagree with the record" in reason for reason in reasons)

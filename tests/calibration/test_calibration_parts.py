"""The parts of a calibration by themselves: slopes put together, extremes, drive, curvature."""

import numpy as np
import pytest

from calibration.curvature import line_terms, swing_terms
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.pickup import Additive
from calibration.slope_line import SlopeLine, combine
from calibration.working_point import SlopeMeans, invert_fringe
from metro.bench import Bench, load_bench
from metro.drive import peak_factor, point_factor, terminal_factor
from metro.measured import Measured

EXTREMES = Extremes(0.2, 3.8, np.diag([1e-6, 4e-6]))
STEEP = SlopeMeans(0.0, 0.0, 1.1, 1.2, 0.0)
FLAT = SlopeMeans(0.0, 0.0, 1.3, 1.5, 0.0)


def slope_line(slope, ratio, means, u=1e-3):
    return SlopeLine(slope, ratio, np.eye(2) * u**2, 50.0, means)


def test_two_slopes_give_motion_and_what_adds_to_the_light():
    """Constructed from A and p by the law in the module: both come back exactly."""
    motion, added, swing_v = 0.7 * np.exp(0.2j), 0.01 * np.exp(-1.1j), 1.8
    rising = slope_line("rising", motion + added * STEEP.inverse_sin / swing_v, STEEP)
    falling = slope_line("falling", motion - added * FLAT.inverse_sin / swing_v, FLAT)
    both = combine([rising], [falling], swing_v, None)
    assert both.ratio == pytest.approx(motion, rel=1e-12)
    assert both.additive.ratio == pytest.approx(added, rel=1e-12)
    assert sum(both.weights) == pytest.approx(1.0)
    for one, record in ((rising, [rising]), (falling, [falling])):
        known = Additive(added, np.zeros((2, 2)))
        args = (record, []) if one is rising else ([], record)
        assert combine(*args, swing_v, known).ratio == pytest.approx(motion, rel=1e-12)


def test_records_on_one_slope_are_weighted_by_their_variance():
    better, worse = slope_line("rising", 1.0, STEEP, 1e-3), slope_line("rising", 2.0, STEEP, 2e-3)
    both = combine([better, worse], [], 1.8, None)
    assert both.weights == pytest.approx((0.8, 0.2))
    assert both.ratio == pytest.approx(1.2)


def test_inverse_is_the_fringe_law_backwards_on_each_slope():
    phase_rad = np.linspace(-2.8, -0.3, 400)
    for slope, sign in (("rising", 1.0), ("falling", -1.0)):
        volts = EXTREMES.mid_v + EXTREMES.swing_v * np.cos(sign * phase_rad)
        found = invert_fringe(volts, EXTREMES, slope)
        np.testing.assert_allclose(found.phase_rad, sign * phase_rad, atol=1e-12)


def test_inverse_leaves_gaps_and_refuses_other_slopes():
    volts = np.array([1.0, np.nan, 2.0, 5.0])
    phase = invert_fringe(volts, EXTREMES, "rising")
    assert np.isnan(phase.phase_rad[[1, 3]]).all()
    assert (phase.present, phase.kept) == (3, 2)
    with pytest.raises(CalibrationError, match="slope must be 'rising' or 'falling', got 'up'"):
        invert_fringe(volts, EXTREMES, "up")


def test_means_are_the_derivatives_of_a_line_by_the_extremes():
    """d ln(line)/d(swing), d ln(line)/d(mid) by finite differences of the inverse."""
    rng = np.random.default_rng(1)
    phase_rad = -np.pi / 2 + 0.3 + 0.2 * rng.normal(size=4000)
    step = 1e-6
    volts = EXTREMES.mid_v + EXTREMES.swing_v * np.cos(phase_rad)
    moved = EXTREMES.mid_v + EXTREMES.swing_v * np.cos(phase_rad + step)

    def gain(d_swing, d_mid):
        low = EXTREMES.low_v + d_mid - d_swing
        other = Extremes(low, EXTREMES.high_v + d_mid + d_swing, np.zeros((2, 2)))
        pair = [invert_fringe(v, other, "rising").phase_rad for v in (moved, volts)]
        return float(np.mean(pair[0] - pair[1])) / step

    means, change = invert_fringe(volts, EXTREMES, "rising").means, 1e-5
    assert (gain(change, 0.0) - 1) / change == pytest.approx(
        -means.inverse_sin2 / EXTREMES.swing_v, rel=2e-3
    )
    assert (gain(0.0, change) - 1) / change == pytest.approx(
        -means.cos_over_sin2 / EXTREMES.swing_v, rel=2e-3
    )


def test_curvature_terms_are_the_derivatives_of_a_bent_reading():
    """A small line at a working point, read through V + R·(c·(x³ − x) + q·(1 − x²)), against extremes."""
    bench = Bench.of(**{"adc-range": "10 V"}).replace(
        {key: Measured.of(0.0, "1", 1e-4) for key in ("adc.quadratic", "adc.cubic")}
    )
    cosine, tiny = 0.2, 1e-5

    def bent(volts, q, c):
        x = volts / 5.0
        return volts + 10.0 * (q * (1 - x**2) + c * (x**3 - x))

    def line_over_drive(q, c):
        level = EXTREMES.mid_v + cosine * EXTREMES.swing_v
        low, high = bent(EXTREMES.low_v, q, c), bent(EXTREMES.high_v, q, c)
        swing, mid = (high - low) / 2, (high + low) / 2
        turn = [np.arccos((bent(v, q, c) - mid) / swing) for v in (level - tiny, level + tiny)]
        drive = bent(tiny, q, c) - bent(-tiny, q, c)
        return abs(turn[1] - turn[0]) / drive

    def swing(q, c):
        return (bent(EXTREMES.high_v, q, c) - bent(EXTREMES.low_v, q, c)) / 2

    size = 1e-5
    for number, (q, c) in enumerate(((size, 0.0), (0.0, size))):
        line = line_terms(bench, EXTREMES, (cosine,), drive_read=True)[number]
        found = (line_over_drive(q, c) / line_over_drive(0.0, 0.0) - 1) / size
        assert line.relative == pytest.approx(found, rel=2e-3, abs=2e-4)
        found = (swing(q, c) / swing(0.0, 0.0) - 1) / size
        assert abs(swing_terms(bench, EXTREMES)[number].relative) == pytest.approx(
            abs(found), rel=1e-3, abs=1e-6
        )


@pytest.mark.parametrize(
    ("drive", "stated", "recorded"),
    [
        ("", 1.0, 10.0),
        ('point = "amplifier input"\namplifier_gain = 20', 20.0, 200.0),
        ('point = "generator setting"\nassumed_load = "50 ohm"', 2.0, 10.0),
        ('point = "generator setting"\nassumed_load = "50 ohm"\nload = "50 ohm"', 1.0, 10.0),
        ('point = "generator setting"\nassumed_load = "50 ohm"\nload = "1 Mohm"', 1.9999, 10.0),
    ],
)
def test_volts_at_the_terminals(tmp_path, drive, stated, recorded):
    """A 50 Ω generator that shows volts into 50 Ω gives twice that into an open end: Ohm's law.

    A recorded drive is a voltage as it is: what a generator shows does not concern it.
    """
    path = tmp_path / "bench.toml"
    path.write_text(f"[drive]\ndivider = 10\n{drive}\n", encoding="utf-8")
    bench = load_bench(path)
    assert point_factor(bench) == pytest.approx(stated, rel=1e-6)
    assert terminal_factor(bench, recorded=False) == pytest.approx(stated, rel=1e-6)
    assert terminal_factor(bench, recorded=True) == pytest.approx(recorded, rel=1e-6)


@pytest.mark.parametrize(
    ("reading", "factor"), [("peak", 1.0), ("peak-to-peak", 0.5), ("rms", 2**0.5)]
)
def test_reading_to_zero_to_peak(tmp_path, reading, factor):
    path = tmp_path / "bench.toml"
    path.write_text(f'[drive]\nreading = "{reading}"\n', encoding="utf-8")
    assert peak_factor(load_bench(path)) == pytest.approx(factor)


def test_extremes_refuse_high_below_low():
    with pytest.raises(CalibrationError, match="high must lie above its low, got high 1 and low 2"):
        Extremes(2.0, 1.0, np.zeros((2, 2)))


def test_uncertainty_of_swing_and_mid():
    assert EXTREMES.u_of(1.0, 0.0) == pytest.approx(np.sqrt(5e-6) / 2)
    assert EXTREMES.u_of(0.0, 1.0) == pytest.approx(np.sqrt(5e-6) / 2)

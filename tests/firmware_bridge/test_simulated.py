"""The simulated bench: its filter, its motion, its truth, and its board behind a terminal."""

from pathlib import Path

import numpy as np
import pytest
from scipy import signal

from firmware_bridge.decoder import Announcement, Decoder, Samples
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard, wire_bytes
from firmware_bridge.simulated.motion import Component, Motion
from firmware_bridge.simulated.response import AHEAD, pole_gain, taps_for_poles
from firmware_bridge.simulated.setup import Setup, Tone, Triangle
from firmware_bridge.simulated.truth import draw_truth
from metro.bench import load_bench

BENCH = Path(__file__).resolve().parents[2] / "firmware_bridge" / "simulated" / "bench.toml"
CORNERS = [(5000.0, 1500.0), (1500.0,), (500.0,), ()]


@pytest.fixture(scope="module")
def bench():
    if not BENCH.exists():  # the tests run against an installed package: take its own file
        import firmware_bridge.simulated as package

        return load_bench(Path(package.__file__).with_name("bench.toml"))
    return load_bench(BENCH)


@pytest.mark.parametrize("corners_hz", CORNERS)
@pytest.mark.parametrize("rate_hz", [4000.0, 50_000.0])
def test_filter_follows_its_poles(corners_hz, rate_hz):
    taps = taps_for_poles(corners_hz, rate_hz)
    frequencies_hz = np.linspace(0.0, 0.25 * rate_hz, 60)
    _, response = signal.freqz(taps, worN=frequencies_hz, fs=rate_hz)
    response = response * np.exp(2j * np.pi * frequencies_hz * AHEAD / rate_hz)
    wanted = [pole_gain(f, corners_hz) for f in frequencies_hz]
    # 3e-5 is a hundredth of the least u that a session reaches
    assert np.max(np.abs(response - wanted)) < 3e-5


def test_motion_does_not_depend_on_block_lengths():
    parts = [Component(1.0, 20.0), Component(0.5, 0.01), Component(2.0, 0.5, 47.0)]
    whole = Motion(parts, 4000.0, np.random.default_rng(3)).block(9000)
    pieces = Motion(parts, 4000.0, np.random.default_rng(3))
    joined = np.concatenate([pieces.block(n) for n in (1, 4000, 17, 4982)])
    np.testing.assert_allclose(joined, whole, rtol=0, atol=1e-9)


def test_motion_has_the_stated_size_and_spectrum():
    """A damped process has the one-sided density 4σ²τ/(1 + (2πfτ)²) (from memory, textbook)."""
    rms, correlation_s = 2.0, 0.01
    rng = np.random.default_rng(5)
    values = Motion([Component(rms, correlation_s)], 4000.0, rng).block(400_000)
    # 100 s hold 100/(2·0.01) = 5000 independent values: the rms is known to 1/sqrt(2·5000) = 1 %
    assert np.std(values) == pytest.approx(rms, rel=0.04)
    frequency_hz, density = signal.welch(values, 4000.0, nperseg=4000)
    inside = (frequency_hz > 20) & (frequency_hz < 200)
    wanted = 4 * rms**2 * correlation_s / (1 + (2 * np.pi * frequency_hz * correlation_s) ** 2)
    ratio = np.mean(density[inside] / wanted[inside])
    assert ratio == pytest.approx(
        1.0, abs=0.03
    )  # 180 bins × 199 averages: 0.5 %, window leakage 1 %


def test_triangle_starts_at_zero_and_rises():
    scan = Triangle(20.0, 4.0)
    np.testing.assert_allclose(
        scan.volts(np.array([0.0, 0.5, 1.0, 2.0, 3.0, 4.0])), [0, 10, 20, 0, -20, 0], atol=1e-12
    )


def test_truth_is_drawn_from_the_bench_file(bench):
    """400 draws: each mean within 4 standard errors, each spread within 4·3.5 % of the stated u."""
    draws = [draw_truth(bench, seed) for seed in range(400)]
    for name, key in [
        ("wavelength_m", "laser.wavelength"),
        ("divider", "drive.divider"),
        ("reference", "adc.reference"),
        ("amplifier_hz", "photodiode.bandwidth"),
        ("channel_delay_s", "adc.channel_delay"),
        ("clock", "adc.clock"),
    ]:
        values = np.array([getattr(draw, name) for draw in draws])
        value, u = bench.magnitude(key), bench.u(key)
        assert abs(values.mean() - value) < 4 * u / 20, name
        assert np.std(values) == pytest.approx(u, rel=0.14), name
    index = np.array([draw.index for draw in draws])
    nominal = bench.index()
    assert np.std(index) == pytest.approx(nominal.u_magnitude, rel=0.14)


def test_same_seed_same_truth_other_seed_another(bench):
    assert draw_truth(bench, 7) == draw_truth(bench, 7)
    assert draw_truth(bench, 7) != draw_truth(bench, 8)


def test_line_appears_with_its_true_size_at_the_photodiode(bench):
    """One line, inverted with the true extremes: the phase amplitude is κ·|H|·V·|readout|."""
    simulated = SimulatedBench(bench, 4)
    truth, rate_hz, n = simulated.truth, simulated.rate_hz, 40_000
    tone = Tone(233.9, 0.16, 0.3)
    samples = simulated.start(Setup(10.0, slope="rising", tones=(tone,)))
    volts = samples.block(n)[:, 0] * simulated.converter.step_v
    cosine = (volts / (1 + truth.reference) - truth.dark_v) / truth.swing_v - 1 / truth.contrast
    phase_rad = -np.arccos(np.clip(cosine, -1, 1))
    time_s = np.arange(n) / (rate_hz * (1 + truth.clock))
    window = signal.windows.hann(n, sym=False)
    phasor = 2 * np.sum(window * phase_rad * np.exp(-2j * np.pi * 233.9 * time_s)) / window.sum()
    expected = truth.actuator(233.9) * 0.16 * np.exp(0.3j) * truth.phase_per_metre
    expected *= truth.readout_gain(233.9)
    # pick-up at 234 Hz is some 3e-4 of the line, noise 1e-3 of it in 10 s, power noise 5e-4
    assert abs(phasor / expected - 1) < 6e-3


def test_rising_and_falling_slopes_are_what_they_say(bench):
    simulated = SimulatedBench(bench, 4)
    for slope, sign in (("rising", 1.0), ("falling", -1.0)):
        tone = Tone(31.7, 0.16)
        codes = simulated.start(Setup(4.0, slope=slope, tones=(tone,))).block(16_000)
        photodiode, drive = (codes - codes.mean(axis=0)).T
        assert np.sign(np.sum(photodiode * drive)) == sign


def test_wire_holds_every_sample_in_order(bench):
    setup = Setup(2.0, beam="blocked")
    source = wire_bytes(SimulatedBench(bench, 1), setup, stream=5)
    decoder = Decoder()
    events = decoder.feed(b"".join(next(source) for _ in range(4))) + decoder.close()
    announcement = next(e for e in events if isinstance(e, Announcement))
    assert announcement.simulated
    assert announcement.speed > 1
    assert [c.name for c in announcement.channels] == ["photodiode", "drive"]
    codes = np.concatenate([e.data for e in events if isinstance(e, Samples)])
    direct = SimulatedBench(bench, 1).start(setup).block(codes.shape[0])
    np.testing.assert_array_equal(codes, direct)


def test_board_closes_cleanly_without_a_reader(bench):
    with SimulatedBoard(SimulatedBench(bench, 1), Setup(1.0, beam="blocked")) as board:
        assert Path(board.port).exists()

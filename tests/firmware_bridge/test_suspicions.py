import numpy as np
import pytest

from firmware_bridge.suspicions import Codes, Repetition, StuckRuns


def pieces(values, size=1000):
    return [(k, values[k : k + size]) for k in range(0, len(values), size)]


def noise(n=20_000, channels=2, seed=1, spread=40):
    return np.rint(np.random.default_rng(seed).normal(0, spread, (n, channels)))


def repetition_of(values):
    found = Repetition(50)
    for start, part in pieces(values, 990):
        found.add(start, part)
    return found


def test_a_repeated_frame_is_found_and_noise_is_none():
    values = noise()
    assert not repetition_of(values).is_suspicious
    values[1050:1100] = values[1000:1050]
    values[9000:9050] = values[500:550]
    found = repetition_of(values)
    assert (found.repeated, found.is_suspicious) == ([1050, 9000], True)
    assert found.blocks == 400


def test_rest_gaps_and_a_periodic_signal_are_no_repetition():
    values = noise()
    values[2000:3000] = 7
    values[4000:4050], values[4050:4100] = np.nan, np.nan
    assert not repetition_of(values).is_suspicious
    wave = np.rint(1000 * np.sin(2 * np.pi * np.arange(20_000) / 25))[:, None]
    assert not repetition_of(wave).is_suspicious


@pytest.mark.parametrize("start", [0, 990, 5500, 19_700])
def test_a_channel_that_sticks_is_found(start):
    values = noise(spread=2)  # neighbours are equal in one of seven
    values[start : start + 300, 1] = 3
    found = StuckRuns(2)
    for begin, part in pieces(values):
        found.add(begin, part)
    assert [found.is_suspicious(0), found.is_suspicious(1)] == [False, True]
    assert abs(found.starts[1] - start) <= 5
    assert 300 <= found.longest[1] <= 310


def test_a_slow_signal_in_coarse_steps_is_not_stuck():
    values = np.repeat(np.arange(200.0), 100)[:, None]
    found = StuckRuns(1)
    for begin, part in pieces(values):
        found.add(begin, part)
    assert not found.is_suspicious(0)


@pytest.mark.parametrize("step", [1, 16])
def test_missing_codes_are_found_and_only_those(step):
    codes = np.rint(np.random.default_rng(3).normal(100, 30, 60_000))
    codes = codes[(codes != 90) & (codes != 111)]
    found = Codes(0.5, -3.0)
    for start in range(0, codes.size, 997):
        found.add(codes[start : start + 997] * step * 0.5 - 3.0)
    assert found.missing() == [90 * step, 111 * step]


def test_a_channel_of_few_codes_is_looked_at_too():
    rng = np.random.default_rng(6)
    for count in range(1, 20):
        found = Codes(1.0, 0.0)
        found.add(rng.integers(0, count, 5000).astype(float))
        assert found.missing() == []


def test_rounded_numbers_and_rare_codes_are_not_missing():
    rng = np.random.default_rng(4)
    volts = np.rint(np.rint(rng.normal(500, 60, 60_000)) * 3300 / 1024)  # 10 bits, printed in mV
    found = Codes(1.0, 0.0)
    found.add(volts)
    assert found.missing() == []
    rare = Codes(1.0, 0.0)
    rare.add(np.rint(rng.normal(0, 100, 2000)))
    assert rare.missing() == []


def test_a_line_switched_on_over_a_quiet_channel_has_no_missing_codes():
    rng = np.random.default_rng(4)
    found = Codes(1.0, 0.0)
    quiet, n = rng.normal(0.0, 1.3, 6000), np.arange(6000)
    found.add(np.rint(quiet))
    found.add(np.rint(3000 * np.cos(0.137 * n)))
    found.add(np.rint(40 + rng.normal(0.0, 1.3, 6000)))  # another level: nothing between them
    assert found.missing() == []

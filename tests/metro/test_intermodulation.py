"""Products of several lines on the curved fringe, against a sampled one."""

import numpy as np
import pytest

from metro.intermodulation import folded, products


@pytest.mark.parametrize("rate_hz", [None, 200.0])
def test_against_a_sampled_fringe(rate_hz):
    """Every product up to the third order, where it appears and how large (Fourier series)."""
    depths, cycles, offset = [0.3, 0.2, 0.1], [5, 31, 87], 0.1
    n = 4096 if rate_hz is None else int(rate_hz)
    t = np.arange(n) / n
    phase = sum(m * np.cos(2 * np.pi * k * t) for m, k in zip(depths, cycles, strict=True))
    spectrum = 2 / n * np.abs(np.fft.rfft(np.cos(-np.pi / 2 + offset + phase)))
    smallest = min(spectrum[cycles])
    found = products(cycles, depths, rate_hz=rate_hz, offset_rad=offset)
    places = [p.frequency_hz for p in found]
    assert len(found) == len({p.orders for p in found}) > 25
    alone = [p for p in found if places.count(p.frequency_hz) == 1 and p.frequency_hz not in cycles]
    assert len(alone) > 10
    for product in alone:
        # products of the fifth order reach some 1e-5 of the fringe
        seen = spectrum[round(product.frequency_hz)] / smallest
        assert product.relative == pytest.approx(seen, abs=1e-3)


def test_the_largest_first_and_in_words():
    found = products([31.7, 87.1], [0.2, 0.1])
    assert [p.relative for p in found] == sorted((p.relative for p in found), reverse=True)
    texts = {p.text: p.frequency_hz for p in found}
    assert texts["2 × 31.7 Hz + 87.1 Hz"] == pytest.approx(150.5)
    assert texts["87.1 Hz − 2 × 31.7 Hz"] == pytest.approx(23.7)
    assert texts["3 × 31.7 Hz"] == pytest.approx(95.1)


def test_many_lines_stay_quick():
    frequencies = [100.0 + 7.3 * k for k in range(60)]
    assert max(sum(map(abs, p.orders)) for p in products(frequencies, [0.01] * 60)) == 2


@pytest.mark.parametrize(
    ("frequency_hz", "there_hz"),
    [(400.0, 400.0), (600.0, 400.0), (1000.0, 0.0), (1020.0, 20.0), (2450.0, 450.0)],
)
def test_folding(frequency_hz, there_hz):
    assert folded(frequency_hz, 1000.0) == pytest.approx(there_hz)
    assert folded(frequency_hz, None) == frequency_hz

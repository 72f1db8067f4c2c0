"""Block phasors: exact sums, gaps left out exactly, parts that merge."""

import itertools

import numpy as np
import pytest

from calibration.coarse_blocks import coarsened
from calibration.errors import CalibrationError
from calibration.phasors import block_length, block_phasors, merge_phasors, start_phases

CYCLES = np.array([0.0123, 0.1057, 0.31])
TAPS = (1.0, -0.7, 0.2, 0.1)


def _samples(n=5003, seed=1):
    values = np.random.default_rng(seed).standard_normal(n)
    values[100] = np.nan
    values[2000:2300] = np.nan
    values[4000] = np.inf
    return values


def _filtered(values, taps):
    reach = len(taps) - 1
    padded = np.concatenate([np.full(reach, np.nan), values])
    with np.errstate(invalid="ignore"):
        total = sum(h * padded[reach - j : reach - j + len(values)] for j, h in enumerate(taps))
    return total, np.isfinite(total)


@pytest.mark.parametrize("taps", [(1.0,), TAPS])
@pytest.mark.parametrize("block", [1, 16, 512, 8192])
def test_sums_are_those_of_the_samples_that_are_there(taps, block):
    values, start = _samples(), 777
    phasors = block_phasors(values, CYCLES, start_index=start, block=block, taps=taps, slopes=True)
    filtered, good = _filtered(values, taps)
    n = start + np.arange(len(values))[good]
    waves = np.exp(-2j * np.pi * CYCLES * n[:, None])
    # Sums of 5000 terms of order 1 against phases of up to 2π·0.31·5780 rad, rounded at 1e-12 rad.
    np.testing.assert_allclose(phasors.sums.sum(axis=0), filtered[good] @ waves, atol=2e-9)
    np.testing.assert_allclose(phasors.drift[:, 0].sum(), filtered[good].sum(), atol=1e-10)
    assert phasors.used == good.sum()
    assert phasors.present.sum() == np.isfinite(values).sum()
    middles = (n // block) * block + 0.5 * (block - 1)
    expected = (filtered[good] * (n - middles) / block) @ waves
    np.testing.assert_allclose(phasors.slopes.sum(axis=0), expected, atol=2e-9)


def test_each_block_holds_its_own_samples():
    values = np.random.default_rng(3).standard_normal(300)
    phasors = block_phasors(values, CYCLES, start_index=10, block=64)
    assert phasors.numbers.tolist() == [0, 1, 2, 3, 4]
    assert phasors.counts.tolist() == [54, 64, 64, 64, 54]
    assert phasors.touched.tolist() == [0, 4]
    expected = values[54:118] @ np.exp(-2j * np.pi * CYCLES * np.arange(64, 128)[:, None])
    np.testing.assert_allclose(phasors.sums[1], expected, atol=1e-12)


def test_blocks_without_a_sample_are_not_kept():
    values = np.random.default_rng(4).standard_normal(1000)
    values[200:600] = np.nan
    phasors = block_phasors(values, CYCLES, block=50)
    assert phasors.numbers.tolist() == [*range(4), *range(12, 20)]


@pytest.mark.parametrize("dtype", [np.int16, np.int32, np.float32])
def test_samples_of_other_types_are_taken_as_they_are(dtype):
    values = (1000 * np.random.default_rng(5).standard_normal(3000)).astype(dtype)
    got = block_phasors(values, CYCLES, block=256)
    expected = block_phasors(values.astype(np.float64), CYCLES, block=256)
    np.testing.assert_array_equal(got.sums, expected.sums)


def test_every_second_sample_of_an_array_needs_no_copy_to_be_right():
    values = np.random.default_rng(6).standard_normal(6000)[::2]
    got = block_phasors(values, CYCLES, block=256)
    expected = block_phasors(values.copy(), CYCLES, block=256)
    np.testing.assert_allclose(got.sums, expected.sums, atol=1e-10)


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("taps", [(1.0,), TAPS])
def test_parts_merge_to_the_whole(seed, taps):
    # Issue of rounding only: sums of 16 terms of order 1 in another order, 1e-15 each.
    rng = np.random.default_rng(seed)
    values, reach = _samples(seed=seed), len(taps) - 1
    cuts = np.sort(rng.choice(np.arange(1, len(values)), size=rng.integers(0, 20), replace=False))
    edges = [0, *cuts.tolist(), len(values)]
    keys = {"block": 16, "taps": taps, "slopes": True}
    whole = block_phasors(values, CYCLES, start_index=777, **keys)
    parts = [
        block_phasors(
            values[a:b], CYCLES, start_index=777 + a, history=values[max(0, a - reach) : a], **keys
        )
        for a, b in itertools.pairwise(edges)
    ]
    merged = merge_phasors([parts[k] for k in rng.permutation(len(parts))])
    for name in ("numbers", "counts", "present", "touched", "masks"):
        np.testing.assert_array_equal(getattr(merged, name), getattr(whole, name))
    for name in ("sums", "slopes", "drift"):
        np.testing.assert_allclose(getattr(merged, name), getattr(whole, name), atol=1e-12)


@pytest.mark.parametrize("slopes", [False, True])
def test_short_blocks_add_up_to_long_ones(slopes):
    # Rounding of sums of 512 terms of order 1.
    values = _samples(seed=11)
    values[1024:2560] = np.nan
    keys = {"start_index": 777, "taps": TAPS, "slopes": slopes}
    long = block_phasors(values, CYCLES, block=512, **keys)
    coarse = coarsened(block_phasors(values, CYCLES, block=16, **keys), 512)
    assert coarse.block == 512
    for name in ("numbers", "counts", "present", "touched", "masks"):
        np.testing.assert_array_equal(getattr(coarse, name), getattr(long, name))
    for name in ("sums", "drift", *(["slopes"] if slopes else [])):
        np.testing.assert_allclose(getattr(coarse, name), getattr(long, name), atol=1e-11)


def test_two_parts_add_up():
    values = _samples(seed=9)
    whole = block_phasors(values, CYCLES, block=32)
    both = block_phasors(values[:1001], CYCLES, block=32) + block_phasors(
        values[1001:], CYCLES, start_index=1001, block=32
    )
    np.testing.assert_allclose(both.sums, whole.sums, atol=1e-12)


def test_overlapping_parts_are_refused():
    values = np.ones(100)
    parts = [block_phasors(values, CYCLES, start_index=s, block=64) for s in (0, 90)]
    with pytest.raises(CalibrationError, match="overlapping parts cannot be merged"):
        merge_phasors(parts)


def test_parts_of_another_kind_are_refused():
    one = block_phasors(np.ones(100), CYCLES, block=64)
    with pytest.raises(CalibrationError, match="one block length"):
        merge_phasors([one, block_phasors(np.ones(100), CYCLES, start_index=100, block=32)])
    with pytest.raises(CalibrationError, match="the same carriers"):
        merge_phasors([one, block_phasors(np.ones(100), CYCLES[:2], start_index=100, block=64)])


def test_phases_far_into_a_recording_are_exact():
    # 12345/2^16 cycles a sample is an exact float, so integers give the phase without rounding.
    cycles = np.array([12345 / 2**16])
    starts = np.array([0, 1, 10**6 + 7, 3 * 10**10 + 11])
    exact = [2 * np.pi * ((12345 * int(n)) % 2**16) / 2**16 for n in starts]
    np.testing.assert_allclose(start_phases(cycles, starts)[:, 0], exact, atol=1e-14)


def test_block_length_is_a_power_of_two_that_fits_the_cache():
    lengths = [block_length(n) for n in (10, 300, 1000, 40_000, 10**6, 10**9, 5 * 10**9)]
    assert lengths == [1, 1, 2, 128, 512, 16384, 131_072]

import numpy as np
import pytest

from firmware_bridge.gap import Gap
from firmware_bridge.stamps import StampsError, fit_grid

K = np.arange(2000)


def spans(grid):
    return [(gap.index, gap.length) for gap in grid.gaps]


@pytest.mark.parametrize("rate", [3000.0, 50e3, 62.5268236, 4096.123, 1 / 3, 44100.0])
@pytest.mark.parametrize("start", [0, 77])
def test_unrounded_stamps_give_the_very_rate_that_made_them(rate, start):
    grid = fit_grid((K + start) / rate, 0.0, "x")
    assert grid.rate_hz == rate
    assert np.array_equal(grid.index, K)
    assert (grid.gaps, grid.remarks) == ([], [])


@pytest.mark.parametrize("decimals", [3, 4, 5, 7])
def test_rounded_stamps_give_the_rate_within_its_uncertainty(decimals):
    rng = np.random.default_rng(decimals)
    pulls = []
    for rate in rng.uniform(1000, 5000, 40):
        stamps = np.round(rng.uniform(0, 1) + K / rate, decimals)
        grid = fit_grid(stamps, 10.0**-decimals, "x")
        assert np.array_equal(grid.index, K)
        pulls.append((grid.rate_hz - rate) / grid.rate_u_hz)
    # Two rounded end points are the least that rounding can do; the fit may well be better.
    assert np.abs(pulls).max() < 2.5


def test_a_round_rate_comes_out_round():
    assert fit_grid(np.round(K / 3000, 3), 1e-3, "x").rate_hz == 3000.0
    assert fit_grid(-5 + K * 0.005, 1e-6, "x").rate_hz == 200.0


def test_missing_rows_become_gaps_at_their_place():
    rows = np.delete(K, [500, 501, 502, 1000])
    for stamps, digit in ((rows / 3000, 0.0), (np.round(rows / 3000, 5), 1e-5)):
        grid = fit_grid(stamps, digit, "x")
        assert spans(grid) == [(500, 3), (1000, 1)]
        assert np.array_equal(grid.index, rows)
        assert grid.rate_hz == 3000.0
    assert not grid.gaps[0].exact
    assert grid.gaps[0].length_u < 0.1


@pytest.mark.parametrize("digits", [1, 2, 16])
@pytest.mark.parametrize("lost", [[50], [400, 401, 1300], [*range(3, 1900, 7), 100, 555]])
def test_gaps_are_seen_where_the_last_digit_is_as_long_as_a_sample(digits, lost):
    rows = np.delete(K, lost)
    grid = fit_grid(rows * digits * 1e-3, 1e-3, "x")
    assert np.array_equal(grid.index, rows)
    assert grid.rate_hz == pytest.approx(1000 / digits, rel=1e-12)


@pytest.mark.parametrize("step", [1.004, 1.37, 2.02, 16.0123])
def test_rounding_to_the_length_of_a_sample_makes_no_gaps(step):
    grid = fit_grid(np.floor(K * step) * 1e-3, 1e-3, "x")
    assert grid.gaps == []
    assert abs(grid.rate_hz - 1000 / step) < 3 * grid.rate_u_hz


def test_jittered_stamps_with_a_quarter_of_the_samples_missing():
    rng = np.random.default_rng(7)
    rows = np.sort(rng.choice(20000, 15000, replace=False))
    stamps = rows * 0.016003 + rng.normal(0, 0.0003, rows.size)
    grid = fit_grid(stamps, 1e-6, "x")
    assert np.array_equal(grid.index, rows - rows[0])
    assert abs(grid.rate_hz - 1 / 0.016003) < 4 * grid.rate_u_hz


def test_the_rate_uncertainty_holds_under_white_jitter():
    rng = np.random.default_rng(3)
    pulls = []
    for _ in range(300):
        grid = fit_grid(K * 0.01 + rng.normal(0, 0.0005, K.size), 0.0, "x")
        pulls.append((grid.rate_hz - 100) / grid.rate_u_hz)
    # Never too small; block means widen it now and then, hence below one.
    assert 0.75 < np.std(pulls) < 1.05


def test_late_stamps_are_no_gaps():
    stamps = K * 0.01
    for at in (300, 900, 1500):
        stamps[at : at + 3] = stamps[at + 2] + 0.018 + 1e-4 * np.arange(3)
        stamps[at + 3] = stamps[at + 2] + 1e-4
    grid = fit_grid(stamps, 1e-5, "x")
    assert np.array_equal(grid.index, K)
    assert grid.gaps == []
    assert [text.split(" are ")[1][:4] for text in grid.remarks] == ["late"]


def test_a_row_sent_twice_is_left_out_and_no_gap_is_lost_for_it():
    rows = np.r_[K[:100], K[110:800], 799, K[800:]]
    grid = fit_grid(rows * 0.01, 1e-3, "x")
    assert spans(grid) == [(100, 10)]
    assert np.array_equal(grid.index, np.delete(K, range(100, 110)))
    assert grid.remarks == ["1 row repeats a time stamp and is left out"]


def test_a_long_pause_need_not_be_a_whole_number_of_samples():
    rows = K * 0.01
    rows[1000:] += 51.715
    (gap,) = fit_grid(rows, 1e-6, "x").gaps
    assert gap.index == 1000
    assert abs(gap.length - 5171.5) <= 0.51
    assert gap.length_u == pytest.approx(0.5, abs=0.02)


def test_stray_and_missing_stamps_are_left_out():
    stamps = K / 100.0
    stamps[500], stamps[700], stamps[900] = 1e9, -4.0, np.nan
    grid = fit_grid(stamps, 0.0, "x")
    assert spans(grid) == [(500, 1), (700, 1), (900, 1)]
    assert grid.remarks == [
        "1 of 2000 rows has no readable time stamp and is left out",
        "2 rows with a stray time stamp are left out (first: row 501)",
    ]


def test_a_clock_that_starts_anew_ends_the_recording():
    grid = fit_grid(np.r_[K[:700], K] / 100.0, 0.0, "x")
    assert np.array_equal(grid.index, K[:700])
    (remark,) = grid.remarks
    assert remark == (
        "the time stamps go back at row 701: what stands before it is read (700 rows), "
        "the rest is not (2000 rows)"
    )


def test_stamps_too_coarse_for_single_samples_show_long_gaps():
    stamps = np.floor(np.r_[K, K + 5000] / 62.5)
    grid = fit_grid(stamps, 1.0, "x")
    (gap,) = grid.gaps
    assert gap.index == 2000
    assert abs(gap.length - 3000) < 3 * gap.length_u
    assert abs(grid.rate_hz - 62.5) < 3 * grid.rate_u_hz
    assert "shorter gaps cannot be seen" in grid.remarks[0]


def test_irregular_stamps_are_said_to_be_so():
    rng = np.random.default_rng(1)
    grid = fit_grid(np.sort(rng.uniform(0, 20, 2000)), 0.0, "x")
    assert grid.rate_hz == pytest.approx(100, rel=0.05)
    assert grid.remarks[0].startswith("the time stamps are irregular (from ")


@pytest.mark.parametrize(
    ("stamps", "message"),
    [
        ([1.0], "x: the time column must increase over at least two samples"),
        ([1.0, 1.0, 1.0], "x: the time column must increase over at least two samples"),
        ([3.0, 2.0, 1.0], "x: the time column must increase over at least two samples"),
        ([np.nan, np.inf], "x: the time column must increase over at least two samples"),
        ([0.0, 1e-300], "x: the time stamps must be between 1e-15 s and 1e15 s apart"),
    ],
)
def test_stamps_that_tell_no_rate_are_refused(stamps, message):
    with pytest.raises(StampsError) as caught:
        fit_grid(np.array(stamps), 0.0, "x")
    assert str(caught.value) == message


def test_a_wrong_last_stamp_is_refused_and_not_a_grid_of_all_memory():
    with pytest.raises(
        StampsError, match=r"^x: the time stamps leave 1e\+14 samples missing after row 1999"
    ):
        fit_grid(np.r_[K[:-1] / 100, 1e12], 0.0, "x")


def test_gaps_are_the_bridges():
    grid = fit_grid(np.array([0, 1, 2, 3, 6, 7, 8, 9, 10.0]), 0.0, "x")
    assert isinstance(grid.gaps[0], Gap)


@pytest.mark.parametrize("tick_s", [1e-3, 16e-3])
def test_a_clock_that_ticks_once_in_many_samples_tells_the_rate(tick_s):
    times = 3.2345 + np.arange(5000) / 20e3
    grid = fit_grid(np.floor(times / tick_s) * tick_s, 1e-6, "x")  # though microseconds are printed
    assert abs(grid.rate_hz - 20e3) < 4 * grid.rate_u_hz < 4000
    assert grid.gaps == []
    assert grid.index[-1] == 4999

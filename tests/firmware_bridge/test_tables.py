import numpy as np
import pytest

from firmware_bridge import open_recording
from firmware_bridge.errors import BridgeError
from firmware_bridge.gap import Gap

K = np.arange(100)


@pytest.fixture
def opened(tmp_path):
    def write(text, **options):
        path = tmp_path / "x.csv"
        path.write_text(text)
        return open_recording(path, **options)

    return write


def lines(rows, header=""):
    return header + "".join(",".join(map(str, row)) + "\n" for row in rows)


def message(tmp_path, error):
    return str(error.value).replace(f"{tmp_path}/", "")


def test_a_table_becomes_channels_in_si_units_on_a_grid(opened):
    rows = zip(K * 2, K + 0.5, K * 10, strict=True)
    recording = opened(lines(rows, "time [ms],pd [mV],position\n"))
    assert (recording.format, recording.rate_hz, recording.length) == ("csv", 500.0, 100)
    assert [(c.name, c.unit) for c in recording.channels] == [("pd", "V"), ("position", "1")]
    trace = recording.trace("pd")
    np.testing.assert_allclose(trace.values, (K + 0.5) * 1e-3, rtol=1e-15)
    assert (trace.rate_hz, trace.start_index, trace.missing, trace.over_range) == (500.0, 0, 0, 0)
    assert recording.remarks == []


def test_columns_count_from_one_with_the_time_and_names_can_be_digits(opened):
    recording = opened(
        lines(zip(K, K * 2, K * 3, K * 4, strict=True), "x-axis,1,3,4\nsecond,Volt,Volt,Volt\n")
    )
    assert [recording.find(name) for name in ("2", "3", "4")] == [0, 1, 2]
    assert [recording.find(name) for name in ("name:1", "name:3", "name:4")] == [0, 1, 2]
    assert recording.trace("3").values[1] == 3.0
    assert recording.trace("name:3").values[1] == 3.0
    with pytest.raises(BridgeError, match=r"no channel named '5'; it has 2 '1', 3 '3', 4 '4'$"):
        recording.find("name:5")


def test_the_time_column_may_stand_anywhere(opened):
    for header, rows in [
        ("pd,time_us\n", zip(K, K * 250, strict=True)),
        ("pd,zeit\nV,ms\n", zip(K, K * 0.25, strict=True)),
        ("pd,T / ms\n", zip(K, K * 0.25, strict=True)),
    ]:
        recording = opened(lines(rows, header))
        assert (recording.rate_hz, recording.columns) == (4000.0, (1,))


def test_a_regular_first_column_without_name_is_taken_as_time(opened):
    recording = opened(lines(zip(K * 0.25, K, strict=True)))
    assert recording.rate_hz == 4.0
    assert recording.remarks == ["column '1' is regular and increasing: taken as time in seconds"]
    # A ramp in volts, or one that is not regular, is no time.
    for text in (
        lines(zip(K * 0.25, K, strict=True), "U [V],b\n"),
        lines(zip(K**2, K, strict=True)),
    ):
        with pytest.raises(BridgeError, match="it has no time column; give --rate, or --time"):
            opened(text)


def test_a_time_without_unit_is_taken_as_seconds_and_said_so(opened):
    recording = opened(lines(zip(K * 0.25, K, strict=True), "t,pd\n"))
    assert recording.remarks == ["the time column 't' states no unit: taken as seconds"]


def test_time_and_rate_given_win(opened, tmp_path):
    text = lines(zip(K * 0.25, K * 0.5, K, strict=True), "t,u,v\n")
    recording = opened(text, time="u")
    assert (recording.rate_hz, recording.columns) == (2.0, (1, 3))
    assert opened(text, time="2").rate_hz == 2.0
    recording = opened(text, rate="4.2 Hz")
    assert (recording.rate_hz, recording.columns) == (4.2, (2, 3))
    assert recording.remarks[-1] == "the rate given, 4.2 Hz, is used; the time stamps say 4 Hz"
    for wanted in ("w", "name:7", "9"):
        with pytest.raises(BridgeError) as error:
            opened(text, time=wanted)
        assert message(tmp_path, error).endswith("; it has 1 't', 2 'u', 3 'v'")


def test_a_rate_is_needed_where_there_is_no_time(opened, tmp_path):
    text = "pd\n" + "".join(f"{v}\n" for v in np.sin(K))
    with pytest.raises(BridgeError) as error:
        opened(text)
    assert message(tmp_path, error) == (
        "x.csv: it has no time column; give --rate, or --time and one of its columns: 1 'pd'"
    )
    recording = opened(text, rate="2 kHz")
    assert (recording.rate_hz, recording.length) == (2000.0, 100)
    np.testing.assert_array_equal(recording.trace("pd").values, np.sin(K))
    with pytest.raises(BridgeError):
        opened("t\n" + "".join(f"{v}\n" for v in K))


def test_a_rate_from_the_preamble_is_used_and_said_so(opened):
    recording = opened("Sample Interval,0.5E-3,s\npd\n" + "".join(f"{v}\n" for v in np.sin(K)))
    assert recording.rate_hz == 2000.0
    assert recording.remarks == ["rate 2000 Hz as the file states it"]


def test_a_column_that_counts_samples_gives_exact_gaps(opened):
    kept = np.delete(K, [40, 41])
    text = lines(zip(kept, np.sin(kept), strict=True))
    with pytest.raises(BridgeError, match="the first column counts samples; give --rate"):
        opened(text)
    recording = opened(text, rate="10 Hz")
    assert recording.gaps == [Gap(40, 2, exact=True)]
    assert (recording.length, recording.rate_hz) == (100, 10.0)


def test_gaps_in_the_stamps_are_nan_on_the_grid(opened):
    kept = np.delete(K, [10, 11, 12, 50])
    recording = opened(lines(zip(kept * 0.25, kept, strict=True), "t,pd\n"))
    values = recording.trace("pd").values
    expected = np.where(np.isin(K, kept), K, np.nan)
    np.testing.assert_array_equal(values, expected)
    assert [(gap.index, gap.length) for gap in recording.gaps] == [(10, 3), (50, 1)]
    trace = recording.trace("pd", 2.0, 13.0)
    np.testing.assert_array_equal(trace.values, expected[8:52])
    assert (trace.start_index, trace.missing) == (8, 4)
    np.testing.assert_array_equal(
        np.concatenate([b.values[:, 0] for b in recording.blocks(7)]), expected
    )


def test_rows_without_values_are_gaps_and_infinities_over_range(opened):
    text = "pd,b\n1,1\n2,2\n,\n,\nnan,5\n6,inf\n-inf,7\n8,8\n,\n"
    recording = opened(text, rate="1 Hz")
    assert recording.gaps == [Gap(2, 2), Gap(8, 1)]
    assert recording.over_range == 2
    pd = recording.trace("pd")
    np.testing.assert_array_equal(pd.values, [1, 2, np.nan, np.nan, np.nan, 6, np.nan, 8, np.nan])
    assert (pd.missing, pd.over_range) == (4, 1)


def test_damaged_lines_keep_the_samples_after_them_in_place(opened):
    text = "pd,b,c\n" + "".join("1,#,@\n" if k == 30 else f"{k},0,0\n" for k in K)
    recording = opened(text, rate="1 Hz")
    np.testing.assert_array_equal(recording.trace("pd").values, np.where(K == 30, np.nan, K))
    assert recording.gaps == [Gap(30, 1)]


def test_one_unreadable_value_costs_only_itself(opened):
    text = "pd,b\n" + "".join("30,0#7\n" if k == 30 else f"{k},0\n" for k in K)
    recording = opened(text, rate="1 Hz")
    np.testing.assert_array_equal(recording.trace("pd").values, K)
    assert np.flatnonzero(np.isnan(recording.trace("b").values)).tolist() == [30]
    assert recording.gaps == []
    assert recording.trace("b").missing == 1
    assert recording.remarks == [
        "1 line with a value that could not be read is kept, that value missing (first: line 32, '30,0#7')"
    ]


def test_stretches_count_from_the_first_sample_or_in_own_time(opened):
    text = lines(zip(K * 0.5 - 5, K, strict=True), "t,pd\n")
    trace = opened(text).trace("pd", 1.0, 2.0)
    assert (trace.start_index, trace.values.tolist()) == (2, [2, 3])
    trace = opened(text, own_time=True).trace("pd", -4.0, -3.0)
    assert (trace.start_index, trace.values.tolist()) == (2, [2, 3])
    np.testing.assert_array_equal(trace.times_s(), [1.0, 1.5])


def test_unknown_units_are_said(opened):
    recording = opened(lines(zip(K, K, K, strict=True), "t,a,b\ns,V,smoots\n"))
    assert [(c.name, c.unit) for c in recording.channels] == [("a", "V"), ("b", "1")]
    assert recording.remarks == ["column 3 has the unknown unit 'smoots': taken as a pure number"]


def test_seconds_and_microseconds_make_one_time(opened):
    micros = 1_673_605_353 * 1_000_000 + 500_000 + K * 16_000
    rows = list(zip(K, micros // 1_000_000, micros % 1_000_000, K * 2, strict=True))
    for options in ({}, {"time": "2+3"}):
        recording = opened(lines(rows), **options)
        assert (recording.rate_hz, recording.columns) == (62.5, (1, 4))
        assert recording.start_s == pytest.approx(1_673_605_353.5, abs=1e-6)


@pytest.mark.parametrize(
    ("pattern", "delimiter"),
    [
        ("2024-02-29T23:59:{:06.3f}Z", ","),
        ("2024-02-29 23:59:{:06.3f}", ";"),
        ("2024-03-01 01:59:{:06.3f}+02:00", "\t"),
        ('"2024-02-29 23:59:{:06.3f}"', " "),
    ],
)
@pytest.mark.parametrize("header", ["timestamp{0}pd\n", ""])
def test_calendar_stamps_are_times(opened, pattern, delimiter, header):
    rows = (pattern.format(k / 8) + f"{delimiter}{k * 0.1}\n" for k in np.delete(K, 30))
    recording = opened(header.format(delimiter) + "".join(rows))
    assert (recording.rate_hz, recording.columns) == (8.0, (2,))
    assert [(gap.index, gap.length) for gap in recording.gaps] == [(30, 1)]
    # 2024-02-29 23:59:00 UTC, by GNU date.
    assert recording.start_s == 1709251140.0
    np.testing.assert_allclose(recording.trace("2", 0.0, 1.0).values, K[:8] * 0.1)


def test_a_date_that_is_none_is_a_damaged_line(opened):
    rows = [f"2024-02-29 23:59:{k:02d},{k}\n" for k in range(50)]
    rows[20] = "2024-02-31 23:59:20,20\n"
    recording = opened("time,pd\n" + "".join(rows))
    assert recording.gaps == [Gap(20, 1, exact=False, length_u=recording.gaps[0].length_u)]
    assert recording.remarks == [
        "1 line with a value that could not be read is kept, that value missing (first: line 22, '2024-02-31 23:59:20,20')",
        "1 of 50 rows has no readable time stamp and is left out",
    ]


def test_uneven_stamps_without_a_name_are_hinted_at(opened):
    times = np.cumsum(np.random.default_rng(2).uniform(900, 1100, 60)).astype(int)
    rows = [f"{k % 7},{t},{k % 5}\n" for k, t in enumerate(times)]
    with pytest.raises(BridgeError, match=r"one of its columns \(2 rises throughout\): 1, 2, 3$"):
        opened("".join(rows))

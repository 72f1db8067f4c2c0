import random

import numpy as np
import pytest

from firmware_bridge.errors import BridgeError
from firmware_bridge.text_table import TextError, read_text_table

ROWS = [(0.0, 1.5, -2.25), (0.1, 2.5, 3e-3), (0.2, -3.5, 4.0), (0.3, 0.25, 5.0)]


def text_of(rows=ROWS, delimiter=",", decimal=".", header="t,a,b"):
    lines = [] if header is None else [header.replace(",", delimiter)]
    lines += [delimiter.join(str(v).replace(".", decimal) for v in row) for row in rows]
    return "\n".join(lines) + "\n"


def values(table):
    return np.column_stack(table.columns)


@pytest.mark.parametrize(
    ("delimiter", "decimal"),
    [
        *((mark, ".") for mark in (",", ";", "\t", " ", "   ", "|", "; ")),
        *((mark, ",") for mark in (";", "\t", " ")),
    ],
)
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "latin-1"])
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r", "\r\r\n"])
def test_delimiter_decimal_encoding_and_line_ends_are_found_out(delimiter, decimal, encoding, end):
    text = text_of(delimiter=delimiter, decimal=decimal, header="t,größe,µ")
    table = read_text_table(text.replace("\n", end).encode(encoding), "x")
    assert np.array_equal(values(table), ROWS)
    assert table.names == ["t", "größe", "µ"]
    assert table.remarks == []


@pytest.mark.parametrize(
    ("head", "names", "units"),
    [
        ("x-axis,1,3\nsecond,Volt,Volt", ["x-axis", "1", "3"], ["second", "Volt", "Volt"]),
        ("time [ms],pd (V),drive / mV", ["time", "pd", "drive"], ["ms", "V", "mV"]),
        ("# t,a,b", ["t", "a", "b"], ["", "", ""]),
        ("# made by hand\n#\n# t,a,b\n# s,V,-", ["t", "a", "b"], ["s", "V", "-"]),
        ('"t","a, left","b"', ["t", "a, left", "b"], ["", "", ""]),
        ("Model,17B\nMemory Length,4\n\nt,a,b\ns,V,V", ["t", "a", "b"], ["s", "V", "V"]),
        ("s,V,mV", ["s", "V", "mV"], ["s", "V", "mV"]),
    ],
)
def test_names_and_units_come_from_the_lines_before_the_data(head, names, units):
    table = read_text_table((head + "\n" + text_of(header=None)).encode(), "x")
    assert (table.names, table.units) == (names, units)
    assert np.array_equal(values(table), ROWS)


def test_header_of_words_over_columns_of_blanks():
    table = read_text_table(b"time (s)  voltage (V)\n0 1\n1 2\n2 4\n", "x")
    assert (table.names, table.units) == (["time", "voltage"], ["s", "V"])
    table = read_text_table(b"# time, voltage\n0 1\n1 2\n2 4\n", "x")
    assert table.names == ["time", "voltage"]


def test_one_column_with_decimal_comma_is_told_from_two_columns():
    table = read_text_table(b"0,052\n0,113\n1,094\n", "x")
    assert np.array_equal(values(table), [[0.052], [0.113], [1.094]])
    table = read_text_table(b"0,52\n1,13\n2,94\n", "x")
    assert np.array_equal(values(table), [[0, 52], [1, 13], [2, 94]])


def test_settings_to_the_left_of_the_data_take_no_sample_away():
    text = "Length,2500,,0.0,1.0\nInterval,0.1,s,0.1,2.0\n,,,0.2,3.0\n,,,0.3,4.0\n,,,0.4,5.0\n"
    table = read_text_table(text.encode(), "x")
    assert np.array_equal(values(table)[:, -2:], np.c_[np.arange(5) / 10, np.arange(1, 6)])


def test_empty_columns_at_the_edges_are_none():
    table = read_text_table(b"\t1.0\t2.0\t\n\t3.0\t\t\n\t5.0\t6.0\t\n", "x")
    assert np.array_equal(values(table), [[1, 2], [3, np.nan], [5, 6]], equal_nan=True)


def test_words_for_missing_and_over_range_values():
    table = read_text_table(b"t,a\n0,1\n1,NaN\n2,\n3,NA\n4,OL\n5,-inf\n6,---\n7,2\n", "x")
    a = [1, np.nan, np.nan, np.nan, np.inf, -np.inf, np.nan, 2]
    assert np.array_equal(table.columns[1], a, equal_nan=True)
    assert table.remarks == []


def test_damaged_lines_stay_as_rows_of_nan_and_are_counted():
    lines = [f"{k / 10},{k},{2 * k}" for k in range(200)]
    lines[17], lines[90], lines[150] = "1.7,1", "9.0,9\x00#,180", "hello world"
    table = read_text_table(("t,a,b\n" + "\n".join(lines) + "\n19.9").encode(), "x")
    expected = np.array([(k / 10, k, 2 * k) for k in range(200) if k != 150])
    expected[17], expected[90, 1] = np.nan, np.nan
    assert np.array_equal(values(table), expected, equal_nan=True)
    assert table.remarks == [
        "2 lines could not be read and are taken as missing (first: line 19, '1.7,1')",
        "1 line with a value that could not be read is kept, that value missing (first: line 92, '9.0,9\\x00#,180')",
        "1 line of text between the data is left out (first: line 152, 'hello world')",
    ]


@pytest.mark.parametrize(
    ("between", "remark"),
    [
        ("t,a,b\n", "section 2 (line 6: 4 rows of t, a, b) is not read"),
        ("\nt,a,b\ns,V,V\n", "section 2 (line 7: 4 rows of t, a, b) is not read"),
        ("freq,re,im\n", "section 2 (line 6: 4 rows of freq, re, im) is not read"),
        ("\n\n", "section 2 (line 8: 4 rows of 3 columns) is not read"),
    ],
)
def test_the_first_section_is_read_and_the_rest_reported(between, remark):
    data = text_of() + between + text_of(header=None)
    table = read_text_table(data.encode(), "x")
    assert np.array_equal(values(table), ROWS)
    assert table.remarks == [remark]


def test_a_lasting_change_of_shape_is_a_section():
    data = text_of() + "".join(f"{k},{k}\n" for k in range(12)) + "1,2,3,4,5\n" * 11
    table = read_text_table(data.encode(), "x")
    assert np.array_equal(values(table), ROWS)
    assert table.remarks == [
        "section 2 (line 6: 12 rows of 2 columns) is not read",
        "section 3 (line 18: 11 rows of 5 columns) is not read",
    ]


def test_a_message_in_a_stream_without_header_is_no_section():
    data = text_of(header=None) + "boot,ok,now\n" + text_of(header=None)
    assert values(read_text_table(data.encode(), "x")).shape == (8, 3)


def test_the_rate_a_preamble_states():
    for line, rate in [
        ("Sample Interval,2.0E-03,s", 500.0),
        ("Sampling Period: 20 us", 50e3),
        ("# sample rate = 4 kHz", 4000.0),
        ("#rate_hz=62.5", 62.5),
    ]:
        table = read_text_table(f"{line}\nv\n1\n2\n3\n".encode(), "x")
        assert table.rate_hz == pytest.approx(rate, rel=1e-14)
    counted = "X,CH1,Start,Increment\nSequence,Volt,-1.0e-01,2.000e-04\n0,1.5,\n1,1.6,\n2,1.4,\n"
    assert read_text_table(counted.encode(), "x").rate_hz == pytest.approx(5000.0, rel=1e-14)


@pytest.mark.parametrize(
    ("tokens", "digit"),
    [
        (["0.000", "0.001", "0.002"], 1e-3),
        (["0", "0.001", "0.002"], 1e-3),
        (["-10.00000E-03", "-9.98000E-03"], 1e-8),
        ([f"{k / 8:.6g}" for k in range(100, 100000)], 0.1),
    ],
)
def test_the_last_printed_digit_of_a_column(tokens, digit):
    table = read_text_table("".join(f"{t} 1\n" for t in tokens).encode(), "x")
    assert table.resolutions[0] == pytest.approx(digit)


def test_texts_without_numbers_are_refused():
    with pytest.raises(TextError, match=r"^x has no line of numbers; a recording has"):
        read_text_table(b"only words\nand more\n", "x")
    assert read_text_table(b"nan nan\nnan nan\nnan nan\n", "x").rows == 3
    with pytest.raises(TextError, match=r"^x is neither a text nor a known kind of recording$"):
        read_text_table(bytes(range(32)) * 10, "x")


def damage(rng, data):
    data = bytearray(data)
    for _ in range(rng.randrange(1, 12)):
        at = rng.randrange(len(data) + 1)
        kind = rng.randrange(5)
        if kind == 0:
            data[at : at + rng.randrange(1, 20)] = b""
        elif kind == 1:
            data[at:at] = rng.randbytes(rng.randrange(1, 6))
        elif kind == 2:
            data[at:at] = rng.choice(
                [b"\n", b"\r", b",", b'"', b"\x00", b";", b"nan", b"1e999", b"\n\n\n"]
            )
        elif kind == 3:
            data[at:at] = data[: rng.randrange(200)]
        elif data:
            data[at % len(data)] ^= 1 << rng.randrange(8)
    return bytes(data)


@pytest.mark.parametrize("seed", range(8))
def test_damaged_texts_raise_nothing_but_bridge_errors(seed):
    from firmware_bridge.tables import to_recording

    rng = random.Random(seed)  # noqa: S311  # a seeded test
    styles = [(",", "."), (";", ","), ("\t", "."), (" ", ".")]
    for _ in range(60):
        rows = [
            (k / 100, rng.gauss(0, 1), rng.randrange(-99, 99)) for k in range(rng.randrange(60))
        ]
        header = rng.choice([None, "t,a,b", "x-axis,1,3\nsecond,Volt,Volt"])
        text = text_of(rows, *rng.choice(styles), header)
        data = damage(rng, text.encode(rng.choice(["utf-8", "utf-16", "latin-1"])))
        try:
            recording = to_recording(
                read_text_table(data, "x"), "x", rate_hz=rng.choice([None, 1.0])
            )
        except BridgeError:
            continue
        block = next(recording.blocks(4096))
        assert block.values.shape[1] == len(recording.channels)


@pytest.mark.parametrize(
    "text",
    [
        "".join(f"{k // 100},{k % 100:02d},-{k // 50},{k % 50:02d}\n" for k in range(150)),
        "t,pd\n" + "".join(f"{k},5,{k * k},25\n" for k in range(20)),
    ],
)
def test_commas_of_two_kinds_are_not_guessed_at(text):
    with pytest.raises(TextError) as error:
        read_text_table(text.encode(), "x.csv")
    first = next(line for line in text.split("\n") if line[0].isdigit())
    assert str(error.value) == (
        "x.csv: decimal commas and commas between the columns cannot be told apart "
        f"({first!r}); write it with semicolons between the columns, or with decimal points"
    )


@pytest.mark.parametrize(
    "text",
    [
        "".join(f"{k},{k % 7},{k % 3},{k * 37}\n" for k in range(150)),
        "".join(f"{k},0.5,{k % 3},07\n" for k in range(150)),
        "a,b,c,d\n" + "".join(f"{k},{k % 100},{k % 3},{k % 10}\n" for k in range(150)),
    ],
)
def test_whole_numbers_parted_by_commas_are_read(text):
    assert len(read_text_table(text.encode(), "x.csv").columns) == 4

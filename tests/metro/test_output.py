"""JSON, tables, and files written whole or not at all."""

import json
import math
import os
import stat
import threading
from pathlib import Path

import numpy as np
import pytest

from metro.extras import MissingExtraError, require
from metro.measured import Measured
from metro.output import (
    OutputError,
    OutputFailedError,
    check_document,
    check_writable,
    table,
    to_json,
    write_whole,
)
from metro.units import quantity


def test_json_forms():
    document = {
        "measured": Measured.of(1.0, "m", 0.1),
        "quantity": quantity(2.0, "nm"),
        "array": np.array([1.0, math.nan, math.inf]),
        "numpy": [np.float64(1.5), np.int16(3), np.bool_(1)],
        "nan": math.nan,
        "none": None,
        "flag": True,
        "text": "√Hz",
        "nested": ({"a": (1, 2)},),
    }
    text = to_json(document)
    assert "√" in text
    assert json.loads(text) == {
        "measured": {"value": 1.0, "unit": "m", "u": 0.1},
        "quantity": {"value": 2e-9, "unit": "m", "u": None},
        "array": [1.0, None, None],
        "numpy": [1.5, 3, True],
        "nan": None,
        "none": None,
        "flag": True,
        "text": "√Hz",
        "nested": [{"a": [1, 2]}],
    }


def test_complex_numbers_have_no_json_form():
    for value in (1j, np.array([1j]), object()):
        with pytest.raises(TypeError, match="has no JSON form"):
            to_json({"value": value})


def test_long_lists_stay_on_one_line():
    assert len(to_json({"x": np.arange(2000.0)}).splitlines()) == 1
    assert len(to_json({"x": np.arange(3.0)}).splitlines()) > 1


def test_table_is_aligned():
    text = table([["a", 1.0], ["longer", 123456.789], ["µ√", None]], header=["name", "value"])
    assert text.splitlines() == [
        "name    value",
        "a       1",
        "longer  123457",
        "µ√      unknown",
    ]
    assert table([["x", 1.0], ["y", 10.5]]).splitlines() == ["x     1", "y  10.5"]
    assert table([]) == ""
    assert table([["two\nlines"]]) == "two lines"


def test_files_are_written_and_never_overwritten_unasked(tmp_path):
    path = tmp_path / "out.txt"
    write_whole(path, "first µ")
    assert path.read_text(encoding="utf-8") == "first µ"
    with pytest.raises(OutputError) as caught:
        write_whole(path, "second")
    assert str(caught.value) == f"{path} exists; give --overwrite to replace it"
    assert path.read_text(encoding="utf-8") == "first µ"
    path.chmod(0o640)
    write_whole(path, b"third", overwrite=True)
    assert path.read_bytes() == b"third"
    assert stat.S_IMODE(path.stat().st_mode) == 0o640
    assert list(tmp_path.iterdir()) == [path]


@pytest.mark.parametrize("name", ["in.csv", "./in.csv", "soft.csv", "hard.csv"])
def test_an_input_is_never_replaced(tmp_path, monkeypatch, name):
    monkeypatch.chdir(tmp_path)
    Path("in.csv").write_text("precious")
    Path("soft.csv").symlink_to("in.csv")
    Path("hard.csv").hardlink_to("in.csv")
    with pytest.raises(OutputError) as caught:
        check_writable(name, True, [None, "", "-", "gone.csv", tmp_path / "in.csv"])
    assert str(caught.value) == (
        f"cannot write {Path(name)}: it is read for this itself; give another name"
    )
    Path("other.csv").write_text("precious")
    assert check_writable("other.csv", True, ["in.csv"]) == Path("other.csv")


@pytest.mark.parametrize("suffix", [".mfr", ".toml", ".csv", ".npz", ".npy", ".H5", ".hdf5"])
def test_json_is_not_written_under_the_name_of_a_recording_or_bench(tmp_path, suffix):
    path = tmp_path / f"x{suffix}"
    with pytest.raises(OutputError, match=rf"^--out is written as JSON: .* end in {suffix}, got "):
        check_document(path, True)
    assert check_document(tmp_path / "x.json") == tmp_path / "x.json"


def test_a_link_stays_a_link(tmp_path):
    (tmp_path / "real").write_text("old")
    (tmp_path / "link").symlink_to("real")
    write_whole(tmp_path / "link", "new", overwrite=True)
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "real").read_text() == "new"


def test_devices_are_written_to_directly():
    write_whole("/dev/null", "text", overwrite=True)
    assert stat.S_ISCHR(Path("/dev/null").stat().st_mode)


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no /dev/full on this system")
def test_a_full_disk_is_named():
    with pytest.raises(OutputFailedError) as caught:
        write_whole("/dev/full", "text")
    assert str(caught.value).startswith("writing /dev/full failed: no space left on device")
    assert caught.value.exit_code == 3


def test_a_failure_midway_leaves_what_was_there(tmp_path, monkeypatch):
    path = tmp_path / "out.txt"
    path.write_text("old")

    def fails(_descriptor):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", fails)
    with pytest.raises(OutputFailedError, match="no space left on device; nothing was left there"):
        write_whole(path, "new", overwrite=True)
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_two_writers_cannot_both_win(tmp_path):
    path, results = tmp_path / "out.txt", []

    def write(text):
        try:
            write_whole(path, text)
            results.append(text)
        except OutputError:
            results.append(None)

    threads = [threading.Thread(target=write, args=(str(n) * 1000,)) for n in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    winners = [text for text in results if text]
    assert len(winners) == 1
    assert path.read_text() == winners[0]


def test_what_cannot_be_written_is_said_before_the_work(tmp_path):
    (tmp_path / "file").write_text("x")
    cases = {
        tmp_path: "it is a directory",
        tmp_path / "none" / "x": f"there is no directory {tmp_path / 'none'}",
        tmp_path / "file" / "x": f"{tmp_path / 'file'} is not a directory",
        tmp_path / ("n" * 300): "file name too long",
    }
    for path, reason in cases.items():
        with pytest.raises(OutputError) as caught:
            check_writable(path)
        assert str(caught.value) == f"cannot write {path}: {reason}"
    assert check_writable(tmp_path / "file", True) == tmp_path / "file"
    assert check_writable(tmp_path / "new") == tmp_path / "new"


def test_no_permission(tmp_path, monkeypatch):
    # Root may write everywhere, so the system's answer is given here.
    monkeypatch.setattr(os, "access", lambda *_: False)
    with pytest.raises(OutputError, match="no permission"):
        check_writable(tmp_path / "x")


def test_a_missing_extra_names_the_line_to_run():
    assert require("math", "bench", "spectrum") is math
    with pytest.raises(MissingExtraError) as caught:
        require("no_such_package.part", "bench", "plot")
    assert str(caught.value) == ("plot: needs no_such_package; run: pip install 'midfringe[bench]'")
    assert caught.value.exit_code == 2

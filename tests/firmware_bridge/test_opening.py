import io
import sys

import numpy as np
import pytest
from real_data import real_data

import firmware_bridge
from firmware_bridge import open_recording
from firmware_bridge.errors import BridgeError
from metro.errors import MidfringeError

CALLINE = "fiber-modulator-calline"
SCAN = "two-detector-motor-scan"


@pytest.mark.parametrize(
    ("name", "rate", "columns", "means"),
    [
        ("fom-pa/fom-pa-control-actuation", 200.0, ("1", "3", "4"), {}),
        ("fom-pa/fom-pa-waveform_1kHz", 50e3, ("1", "2", "3"), {"3": 5.07}),
        ("fom-mc/fom-mc-waveform-30Hz", 2000.0, ("1", "3", "4"), {}),
        ("fom-mc/fom-mc-waveform-150Hz", 5000.0, ("1", "3", "4"), {}),
    ],
)
def test_scope_files(name, rate, columns, means):
    # Intervals, lengths and means: README.md beside the files.
    recording = open_recording(real_data(f"{CALLINE}/{name}.csv"))
    assert (recording.format, recording.rate_hz, recording.length) == ("csv", rate, 1000)
    assert [(c.name, c.unit) for c in recording.channels] == [(n, "V") for n in columns]
    assert (recording.gaps, recording.over_range, recording.remarks) == ([], 0, [])
    for column, mean in means.items():
        assert recording.trace(column).values.mean() == pytest.approx(mean, abs=0.01)


def test_columns_of_a_scope_file_by_number_and_by_digit_name():
    # README.md: column 2 the drive of about 0.1002 V, column 3 the photodiode; the headers are digits.
    recording = open_recording(real_data(f"{CALLINE}/fom-pa/fom-pa-waveform_1kHz.csv"))
    drive = recording.trace("2").values
    assert np.sqrt(2) * drive.std() == pytest.approx(0.1002, rel=0.005)
    np.testing.assert_array_equal(recording.trace("name:1").values, drive)
    photodiode = recording.trace("3").values
    np.testing.assert_array_equal(recording.trace("name:2").values, photodiode)
    assert np.sqrt(2) * photodiode.std() == pytest.approx(1.757, rel=0.02)


def test_own_stamps_of_a_scope_file():
    # README.md: the control file's own stamps start at -5 s.
    path = real_data(f"{CALLINE}/fom-pa/fom-pa-control-actuation.csv")
    counted = open_recording(path).trace("2", 0.9, 1.4)
    own = open_recording(path, own_time=True).trace("2", -4.1, -3.6)
    np.testing.assert_array_equal(counted.values, own.values)
    assert counted.start_index == own.start_index == 180
    # README.md: from 0.9 s to 1.4 s a full fringe with the extremes 9.69 V and 0.44 V.
    assert counted.values.max() == pytest.approx(9.69, abs=0.01)
    assert counted.values.min() == pytest.approx(0.44, abs=0.01)


@pytest.mark.parametrize("number", [1, 11])
def test_tables_without_time_ask_for_a_rate(number):
    path = real_data(f"{CALLINE}/fom-pa/fom-pa-freq-resp_{number}.lvm")
    with pytest.raises(
        BridgeError, match=r"it has no time column; give --rate, .* 1, 2, 3, 4, 5, 6, 7, 8, 9$"
    ):
        open_recording(path)
    recording = open_recording(path, rate="1 Hz")
    # Tab-separated with a tab before the first column; README.md: drive [V], frequency [Hz] are 4 and 5.
    table = np.loadtxt(path)
    assert recording.length == len(table)
    for column in range(1, 10):
        np.testing.assert_array_equal(recording.trace(str(column)).values, table[:, column - 1])


@pytest.mark.parametrize("line", [30, 150])
def test_a_table_of_amplitudes_has_no_time(line):
    path = real_data(f"{CALLINE}/fom-mc/fom-mc-linearity_{line}Hz.csv")
    with pytest.raises(
        BridgeError, match=r"1 'Vin', 2 'Vsignal_max', 3 'Vsignal_min', 4 'average'$"
    ):
        open_recording(path)
    recording = open_recording(path, rate="1 Hz")
    assert recording.trace("Vin").values[:3].tolist() == [5.0, 4.5, 4.0]
    assert recording.trace("average").missing == 16


@pytest.mark.parametrize(
    ("name", "rows"),
    [("Task_6c_7500", 8182), ("Task_6a_2", 1711), ("Task_9_blue", 7277), ("Task_11_mark_7", 13377)],
)
def test_streams_of_integers_with_dropped_samples(name, rows):
    # README.md: rows; 62.5 Hz with occasional dropped samples (steps of 32 ms).
    path = real_data(f"{SCAN}/{name}.txt")
    recording = open_recording(path)
    assert recording.rate_hz == pytest.approx(62.5, rel=0.001)
    assert recording.columns == (1, 2, 5, 6, 7, 8, 9)
    table = np.loadtxt(path)
    assert len(table) == rows
    # The whole seconds and microseconds, counted without our own reader: a step of 32 ms is one lost.
    micros = np.diff((table[:, 2] - table[0, 2]) * 1e6 + table[:, 3])
    dropped = int((np.rint(micros / 16000) - 1).sum())
    assert sum(gap.length for gap in recording.gaps) == dropped
    assert recording.length == rows + dropped
    values = recording.trace("1").values
    assert np.count_nonzero(np.isnan(values)) == dropped
    np.testing.assert_array_equal(values[~np.isnan(values)], table[:, 0])


def test_a_long_gap_in_a_stream():
    # README.md: a 51.7 s gap in the time stamps, 2903 rows.
    path = real_data(f"{SCAN}/Task_8_6.txt")
    recording = open_recording(path)
    gap = max(recording.gaps, key=lambda gap: gap.length)
    stamps = np.loadtxt(path)[:, 2:4] @ [1.0, 1e-6]
    at = int(np.argmax(np.diff(stamps)))
    assert (gap.length + 1) / recording.rate_hz == pytest.approx(51.711, abs=0.6 / 62.5)
    assert gap.index / recording.rate_hz == pytest.approx(stamps[at] - stamps[0], abs=1.5 / 62.5)
    assert not gap.exact
    # The pause is no whole number of samples, and the uncertainty says so.
    assert 0.3 < gap.length_u < 0.6
    assert recording.length - sum(g.length for g in recording.gaps) == 2903


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("fom-mc/temp_fom_mc.xlsx", "is a spreadsheet or document; save the sheet as CSV"),
        ("fom-mc/AV-fom-mc.mat", "is a MAT-file; save its columns as CSV, NPZ or HDF5"),
        ("README.md", "has no line of numbers; a recording has one or more numbers a line"),
    ],
)
def test_files_that_are_no_recordings_are_refused_in_one_line(name, reason):
    path = real_data(f"{CALLINE}/{name}")
    with pytest.raises(BridgeError) as error:
        open_recording(path)
    assert str(error.value) == f"{path} {reason}"


def test_standard_input(monkeypatch):
    stdin = io.TextIOWrapper(io.BytesIO(b"t [s],pd [V]\n0,1\n0.5,2\n1,3\n"))
    monkeypatch.setattr(sys, "stdin", stdin)
    recording = open_recording("-")
    assert (recording.path, recording.rate_hz) == ("-", 2.0)
    assert recording.trace("pd").values.tolist() == [1, 2, 3]


@pytest.mark.parametrize(
    ("content", "reason"),
    [
        (b"", "is empty"),
        (b"\x1f\x8b\x08\x00", "is compressed (gzip); unpack it first"),
        (b"PK\x03\x04 no archive", "is a damaged archive"),
        (b"%PDF-1.7", "is a PDF document, not a recording"),
    ],
)
def test_other_kinds_of_files(tmp_path, content, reason):
    path = tmp_path / "x.csv"
    path.write_bytes(content)
    with pytest.raises(BridgeError) as error:
        open_recording(path)
    assert str(error.value) == f"{path} {reason}"


def test_paths_that_cannot_be_opened(tmp_path):
    with pytest.raises(BridgeError) as error:
        open_recording(tmp_path / "none.csv")
    assert str(error.value) == f"cannot open '{tmp_path}/none.csv': no such file or directory"
    with pytest.raises(BridgeError, match=r"is a directory$"):
        open_recording(tmp_path)


@pytest.mark.parametrize("rate", ["0 Hz", "-1 Hz", "3 kg", 5.0, "fast"])
def test_rates_that_are_none(tmp_path, rate):
    path = tmp_path / "x.csv"
    path.write_text("1\n2\n3\n")
    with pytest.raises(MidfringeError, match=r"^rate must "):
        open_recording(path, rate=rate)


def test_it_is_published():
    assert firmware_bridge.open_recording is open_recording

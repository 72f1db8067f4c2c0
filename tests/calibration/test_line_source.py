"""Lines of a recording file: the same as those of its samples in memory, gaps and over-range told."""

import numpy as np
import pytest
from big_recording import LINES_HZ, RATE_HZ, VOLTS_A_COUNT, write_recording

import calibration.line_source
from calibration.errors import CalibrationError
from calibration.line_reading import read_lines, read_recording_lines
from calibration.line_source import RecordingSource
from calibration.lines import fit_source
from firmware_bridge.recording import open_mfr
from firmware_bridge.span import Span


@pytest.fixture(scope="module")
def path(tmp_path_factory):
    path = tmp_path_factory.mktemp("lines") / "big.mfr"
    write_recording(path, 2.2e6)
    return path


def _numbers(fit):
    return [
        value
        for line in fit.lines
        for value in (line.phasor, line.response.along_u, line.dof, line.density_value)
    ]


@pytest.mark.parametrize("span", [(None, None), (0.1234, 7.7)])
def test_chunk_by_chunk_is_as_all_at_once(path, monkeypatch, span):
    monkeypatch.setattr(calibration.line_source, "_CHUNK_SAMPLES", 70_000)
    recording = open_mfr(path)
    fit = read_recording_lines(recording, ["pd"], LINES_HZ, from_s=span[0], to_s=span[1])
    whole = read_lines(recording.trace("pd", *span), None, LINES_HZ)
    assert _numbers(fit) == pytest.approx(_numbers(whole), rel=1e-12)
    for line in fit.lines:
        assert abs(line.phasor) == pytest.approx(1000 * VOLTS_A_COUNT, rel=3e-3)
    assert fit.gaps == ()


def test_free_frequencies_chunk_by_chunk(path, monkeypatch):
    monkeypatch.setattr(calibration.line_source, "_CHUNK_SAMPLES", 70_000)
    recording = open_mfr(path)
    source = RecordingSource(recording, [0], 1.0, 3.0)
    fit = fit_source(source, LINES_HZ[:2], free=True)
    for line, exact in zip(fit.lines, LINES_HZ, strict=False):
        assert abs(line.frequency_hz - exact) < 5 * line.frequency_u_hz


def test_lost_records_are_gaps(path, tmp_path):
    data = bytearray(path.read_bytes())
    record = open_mfr(path).header.record_bytes
    place = len(data) - 600 * record
    del data[place : place + 20 * record]  # 20 records of 500 samples
    holed = tmp_path / "holed.mfr"
    holed.write_bytes(data)
    recording = open_mfr(holed)
    fit = read_recording_lines(recording, ["pd"], LINES_HZ)
    assert fit.gaps == (10_000,)
    assert fit.used_fraction == pytest.approx(1 - 10_000 / recording.length)
    until = (recording.gaps[0].index + 5000) / RATE_HZ
    assert read_recording_lines(recording, ["pd"], LINES_HZ, to_s=until).gaps == (5000,)
    for line in fit.lines:
        assert abs(line.phasor) == pytest.approx(1000 * VOLTS_A_COUNT, rel=3e-3)


def test_response_and_drive_together(tmp_path, monkeypatch):
    monkeypatch.setattr(calibration.line_source, "_CHUNK_SAMPLES", 70_000)
    path = tmp_path / "two.mfr"
    write_recording(path, 4e6, drive=True)
    recording = open_mfr(path)
    fit = read_recording_lines(recording, ["pd", "drive"], LINES_HZ)
    whole = read_lines(recording.trace("pd"), recording.trace("drive"), LINES_HZ)
    assert _numbers(fit) == pytest.approx(_numbers(whole), rel=1e-11)
    for line, other in zip(fit.lines, whole.lines, strict=True):
        assert line.ratio.phasor == pytest.approx(2, rel=3e-3)
        assert line.ratio.phasor == pytest.approx(other.ratio.phasor, rel=1e-11)


def test_a_channel_without_a_value_is_refused(path):
    recording = open_mfr(path)

    def nothing(positions, start, stop):
        return Span(np.full((stop - start, len(positions)), np.nan), 0)

    recording.read = nothing
    with pytest.raises(CalibrationError, match="samples: no value is there, all are NaN"):
        read_recording_lines(recording, ["pd"], LINES_HZ)


def test_every_sample_comes_once_and_in_order(path):
    recording = open_mfr(path)
    source = RecordingSource(recording, [0], 0.5, 5.0)
    pieces = list(source.chunks(4096))
    assert pieces[0][0] == source.start == 50_000
    assert all(start % 4096 == 0 for start, _ in pieces[1:])
    joined = np.concatenate([values for _, (values,) in pieces])
    np.testing.assert_array_equal(joined, recording.trace("pd", 0.5, 5.0).values)

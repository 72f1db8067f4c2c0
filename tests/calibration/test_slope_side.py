"""The slope that a recording lies on: half a turn between response and drive gives it away."""

import pytest
from sessions import built_in_bench, play

from calibration.analysis import calibrate
from calibration.slope_side import side_cautions
from firmware_bridge.opening import open_recording


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    keep = {"05-scan", "06-lines-rising", "07-lines-falling"}
    folder = tmp_path_factory.mktemp("session")
    _, files = play(built_in_bench(), 6, folder, lines_s=6.0, keep=lambda s: s.name in keep)
    return files, calibrate(built_in_bench(), **files)


@pytest.mark.parametrize("lies", ["rising", "falling"])
@pytest.mark.parametrize("taken", ["rising", "falling"])
def test_only_the_wrong_side_is_a_caution(session, lies, taken):
    files, calibration = session
    recording = open_recording(files[f"lines_{lies}"][0])
    said = side_cautions(recording, "photodiode", calibration, taken)
    assert len(said) == (lies != taken)
    for text in said:
        assert "half a turn from the calibration at 31.7 Hz, 87.1 Hz, 141.3 Hz, 233.9 Hz" in text
        assert f"on the other slope than {taken}" in text


def test_a_drive_alone_says_nothing(session):
    files, calibration = session
    recording = open_recording(files["lines_rising"][0])
    assert side_cautions(recording, "drive", calibration, "rising") == []

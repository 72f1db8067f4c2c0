"""A recording that is deleted before its end is told does not end the log."""

from pathlib import Path

from calibration.desk.log_folder import LogFolder, Retention
from calibration.desk.unattended import LogSettings, UnattendedLog


def test_a_recording_deleted_meanwhile_is_no_failure(tmp_path: Path) -> None:
    log = UnattendedLog(LogSettings("COM1"), LogFolder(tmp_path / "b", Retention()), None)
    log._ended(tmp_path / "b-gone.mfr")
    assert list(tmp_path.iterdir()) == []

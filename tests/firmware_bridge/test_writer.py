from pathlib import Path

import pytest

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer

HEADER = Header(Announcement(1, 10.0, "int16", 5, [ChannelInfo("pd")]))


def test_a_full_disk_is_one_line_and_ends_with_three():
    if not Path("/dev/full").exists():
        pytest.skip("no /dev/full here")
    with pytest.raises(DeviceFailedError) as error:
        Writer("/dev/full", HEADER, overwrite=True)
    assert str(error.value) == (
        "/dev/full cannot be written any further: No space left on device; "
        "what was written before is kept"
    )
    assert error.value.exit_code == 3


def test_a_folder_that_is_not_there_is_refused(tmp_path):
    with pytest.raises(BridgeError) as error:
        Writer(tmp_path / "no" / "run.mfr", HEADER)
    assert str(error.value) == f"{tmp_path}/no/run.mfr cannot be written: No such file or directory"


def test_records_are_in_the_file_after_a_sync_whatever_happens_next(tmp_path):
    writer = Writer(tmp_path / "run.mfr", HEADER)
    begin = (tmp_path / "run.mfr").stat().st_size
    writer.append(bytes(50))
    assert (tmp_path / "run.mfr").stat().st_size == begin
    writer.sync(if_due=True)
    assert (tmp_path / "run.mfr").stat().st_size == begin, "not due yet"
    writer.sync()
    assert (tmp_path / "run.mfr").stat().st_size == begin + HEADER.record_bytes
    writer.close()

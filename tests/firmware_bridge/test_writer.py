import contextlib
import resource
from pathlib import Path

import pytest

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.errors import BridgeError
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import DiskError, Writer

HEADER = Header(Announcement(1, 10.0, "int16", 5, [ChannelInfo("pd")]))


def test_a_disk_that_is_full_at_the_start_is_one_line():
    if not Path("/dev/full").exists():
        pytest.skip("no /dev/full here")
    with pytest.raises(BridgeError) as error:
        Writer("/dev/full", HEADER, overwrite=True)
    assert str(error.value) == "/dev/full cannot be written: the disk is full"
    assert error.value.exit_code == 2
    assert Path("/dev/full").exists()


@contextlib.contextmanager
def small_files(limit):
    """No file may grow beyond so many bytes: the test's own output neither, so not for longer."""
    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (limit, before[1]))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)


def test_a_disk_that_fills_up_leaves_whole_records(tmp_path):
    with small_files(1000):
        writer = Writer(tmp_path / "run.mfr", HEADER)
        begin = writer.bytes
        for _ in range(20):
            writer.append(bytes(50))
        with pytest.raises(DiskError) as error:
            writer.flush()
        writer.append(bytes(50))
        writer.close()
    path = tmp_path / "run.mfr"
    assert str(error.value) == (
        f"{path} cannot be written any further: a file may not be larger here"
    )
    assert error.value.exit_code == 3
    assert (path.stat().st_size - begin) % 64 == 0
    assert 1000 - 64 < path.stat().st_size <= 1000


def test_a_file_without_room_for_its_header_is_not_left_behind(tmp_path):
    with small_files(50), pytest.raises(BridgeError, match="a file may not be larger here"):
        Writer(tmp_path / "run.mfr", HEADER)
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_is_not_there_is_refused(tmp_path):
    with pytest.raises(BridgeError) as error:
        Writer(tmp_path / "no" / "run.mfr", HEADER)
    assert str(error.value) == f"{tmp_path}/no/run.mfr cannot be written: no such file or directory"


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


def test_under_its_name_a_recording_has_its_header_from_the_first_moment(tmp_path, monkeypatch):
    path, seen = tmp_path / "run.mfr", []
    real = Writer.sync

    def watched(writer, **options):
        seen.append(path.exists())
        real(writer, **options)

    monkeypatch.setattr(Writer, "sync", watched)
    Writer(path, HEADER).close()
    assert seen == [False, True]
    assert [p.name for p in tmp_path.iterdir()] == ["run.mfr"]


def test_a_recording_that_appears_meanwhile_is_left_alone(tmp_path, monkeypatch):
    path = tmp_path / "run.mfr"
    real = Writer.sync

    def slow(writer, **options):
        real(writer, **options)
        path.write_text("another's")

    monkeypatch.setattr(Writer, "sync", slow)
    with pytest.raises(BridgeError, match=r"run\.mfr exists; --overwrite replaces it$"):
        Writer(path, HEADER)
    assert path.read_text() == "another's"
    assert [p.name for p in tmp_path.iterdir()] == ["run.mfr"]

"""The recordings of a log: their names, and which of them are deleted in time."""

import os
import re
import subprocess
import sys
import time

import pytest

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.log_folder import LogFolder, Retention


def recordings(folder, count, size=1000, name="bench"):
    paths = []
    for k in range(count):
        path = folder / f"{name}-20260301T12{k:02d}00Z.mfr"
        path.write_bytes(bytes(size))
        paths.append(path)
    return paths


def test_names_say_when_a_recording_begins(tmp_path):
    log = LogFolder(tmp_path / "bench", Retention())
    first = log.next_path()
    assert re.fullmatch(r"bench-\d{8}T\d{6}Z\.mfr", first.name)
    first.touch()
    while (second := log.next_path()).stem == first.stem:
        pass
    if second.stem.startswith(first.stem):
        assert second.name == f"{first.stem}-2.mfr"
    second.touch()
    assert log.recordings() == [first, second]


def test_recordings_of_one_second_sort_by_their_number(tmp_path):
    stem = "bench-20260301T120000Z"
    names = [f"{stem}.mfr", *(f"{stem}-{k}.mfr" for k in range(2, 12))]
    for name in reversed(names):
        (tmp_path / name).touch()
    log = LogFolder(tmp_path / "bench", Retention())
    assert [path.name for path in log.recordings()] == names


def test_the_oldest_go_where_all_are_too_large(tmp_path):
    paths = recordings(tmp_path, 10)
    others = [*recordings(tmp_path, 3, name="bench-two"), tmp_path / "bench.mfr", tmp_path / "x"]
    for path in others[3:]:
        path.write_bytes(bytes(9000))
    log = LogFolder(tmp_path / "bench", Retention(keep_bytes=4500))
    assert log.tidy(paths[-1]) == paths[:6]
    assert log.recordings() == paths[6:]
    assert all(path.exists() for path in others)
    assert log.deleted == 6


def test_growth_to_come_is_kept_free(tmp_path):
    paths = recordings(tmp_path, 4)
    log = LogFolder(tmp_path / "bench", Retention(keep_bytes=6000))
    assert log.tidy(paths[-1]) == []
    paths[-1].write_bytes(bytes(1700))  # 4700 now; another 1400 would be too many
    assert log.tidy(paths[-1]) == paths[:1]


def test_no_room_is_kept_once_nothing_runs_and_never_more_than_a_quarter(tmp_path):
    paths = recordings(tmp_path, 4)
    log = LogFolder(tmp_path / "bench", Retention(keep_bytes=8000))
    log.tidy(paths[-1])
    paths[-1].write_bytes(bytes(4900))  # 7900 now, 3900 more than before
    assert log.tidy(None) == []
    assert log.tidy(paths[-1]) == paths[:2]  # 5900: a quarter of 8000 is left


def test_the_running_one_is_never_deleted(tmp_path):
    paths = recordings(tmp_path, 1, size=9000)
    log = LogFolder(tmp_path / "bench", Retention(keep_bytes=100, keep_s=1.0))
    os.utime(paths[0], (0, 0))
    assert log.tidy(paths[0]) == []
    assert paths[0].exists()


def test_those_of_an_age_go(tmp_path):
    paths = recordings(tmp_path, 5)
    now_s = time.time()
    for k, path in enumerate(paths):
        os.utime(path, (now_s, now_s - 86400 * (4.5 - k)))
    log = LogFolder(tmp_path / "bench", Retention(keep_s=3 * 86400))
    assert log.tidy(None) == paths[:2]


def test_a_place_that_is_none_is_refused(tmp_path):
    with pytest.raises(LedgerError, match=r"^--out must be FOLDER/NAME.*got '.*/run.mfr'$"):
        LogFolder(tmp_path / "run.mfr", Retention())
    with pytest.raises(LedgerError, match=r"^--out: there is no folder .*/none$"):
        LogFolder(tmp_path / "none" / "bench", Retention())


HOLDER = """
import sys
from calibration.desk.log_folder import LogFolder, Retention
with LogFolder(sys.argv[1], Retention()).held():
    print("held", flush=True)
    sys.stdin.readline()
"""


def test_a_name_is_held_by_one_log_until_it_ends_however_that_is(tmp_path):
    log = LogFolder(tmp_path / "bench", Retention())
    with subprocess.Popen(
        [sys.executable, "-c", HOLDER, str(tmp_path / "bench")],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    ) as other:
        assert other.stdout.readline() == "held\n"
        with pytest.raises(LedgerError, match="another log is writing"), log.held():
            pass
        with LogFolder(tmp_path / "other", Retention()).held():
            pass
        other.kill()
    with log.held():
        pass

"""A ledger's file: made by many at once, read where nothing can be written, gone while it is open."""

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from ledgers import result, sample_calibration, sample_ledger

from calibration.desk.ledger import Ledger
from calibration.desk.ledger_errors import LedgerError, LedgerFailedError

# Forked once everything is imported, so that all reach the file within a fraction of a millisecond.
CROWD = """
import multiprocessing, sys, traceback
import sqlalchemy.dialects.sqlite
from ledgers import result
from calibration.desk.ledger import Ledger

def write(place, number, gate):
    gate.wait()
    for k in range(5):
        with Ledger(place) as ledger:
            assert ledger.add_line_result(result(100 * number + k, unix_s=1.7e9 + k))

context = multiprocessing.get_context("fork")
gate = context.Barrier(8)
crowd = [context.Process(target=write, args=(sys.argv[1], n, gate)) for n in range(8)]
for process in crowd:
    process.start()
for process in crowd:
    process.join()
sys.exit(max(abs(process.exitcode) for process in crowd))
"""


@pytest.mark.slow
@pytest.mark.parametrize("attempt", range(20))
def test_8_that_all_make_the_ledger_at_the_same_moment_lose_nothing(tmp_path, attempt):
    place = str(tmp_path / f"{attempt}.ledger")
    tests = str(Path(__file__).parents[2])
    done = subprocess.run(
        [sys.executable, "-c", CROWD, place],
        check=False,
        capture_output=True,
        text=True,
        env=os.environ | {"PYTHONPATH": tests},
        timeout=120,
    )
    assert (done.returncode, done.stderr) == (0, "")
    with Ledger(place, create=False) as ledger:
        values = sorted(entry.value.magnitude for entry in ledger.line_results())
    assert values == [100 * n + k for n in range(8) for k in range(5)]


def unprivileged(*words):
    """Run a ledger's command where file permissions count, for root too; return what it did."""
    command = [sys.executable, "-m", "metro", "ledger", *map(str, words)]
    if os.geteuid() == 0:
        if shutil.which("setpriv") is None:
            pytest.skip("root is refused nothing, and there is no setpriv (util-linux)")
        without = "-dac_override,-dac_read_search"
        command = ["setpriv", f"--inh-caps={without}", f"--bounding-set={without}", *command]
    return subprocess.run(command, check=False, capture_output=True, text=True)


@pytest.fixture
def kept(tmp_path):
    """A ledger in a folder of its own, which may be written again at the end."""
    folder = tmp_path / "kept"
    folder.mkdir()
    entry = sample_calibration(tmp_path)
    place = folder / "bench.ledger"
    with Ledger(str(place)) as ledger:
        ledger.add_calibration(entry)
        ledger.add_line_result(result(33.3e-9, unix_s=1.9e9))
    yield place
    folder.chmod(0o755)


@pytest.mark.slow
@pytest.mark.parametrize("what", ["list", "chart", "check"])
@pytest.mark.parametrize(("folder_mode", "file_mode"), [(0o555, 0o644), (0o755, 0o444)])
def test_what_cannot_be_written_is_read(kept, what, folder_mode, file_mode):
    kept.chmod(file_mode)
    kept.parent.chmod(folder_mode)
    done = unprivileged(what, "--ledger", kept)
    assert done.returncode in ((0, 1) if what == "check" else (0,)), done.stderr
    assert "87.1 Hz" in done.stdout
    assert [path.name for path in kept.parent.iterdir()] == [kept.name]


@pytest.mark.slow
def test_what_may_not_be_read_or_written_is_one_line(kept, tmp_path):
    kept.parent.chmod(0o555)
    done = unprivileged("add", tmp_path / "cal.json", "--ledger", kept)
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr == (
        f"midfringe: the ledger {kept} cannot be written: no permission to write the file, or in its folder\n"
    )
    kept.chmod(0)
    done = unprivileged("list", "--ledger", kept)
    assert (done.returncode, done.stderr) == (2, f"midfringe: {kept}: permission denied\n")


def forbid(monkeypatch):
    """Let nothing be writable, as far as this is asked."""
    monkeypatch.setattr(os, "access", lambda _path, mode: not mode & os.W_OK)


def test_reading_alone_leaves_no_file_and_writes_nothing(kept, monkeypatch):
    forbid(monkeypatch)
    with Ledger(str(kept), create=False) as ledger:
        assert [entry.value.magnitude for entry in ledger.line_results()] == [33.3e-9]
        with pytest.raises(LedgerFailedError, match="failed: attempt to write a readonly database"):
            ledger.add_line_result(result(1.0))
    assert [path.name for path in kept.parent.iterdir()] == [kept.name]


def test_a_ledger_without_a_write_ahead_log_is_read_too(tmp_path, monkeypatch):
    place = sample_ledger(tmp_path)
    forbid(monkeypatch)
    with Ledger(place, create=False) as ledger:
        assert len(ledger.calibrations()) == 1


def test_what_another_writes_meanwhile_is_seen_by_a_reader(kept, monkeypatch):
    with Ledger(str(kept)) as writer:
        writer.add_line_result(result(2.0))
        forbid(monkeypatch)
        with Ledger(str(kept), create=False) as reader:
            assert len(reader.line_results()) == 2


def test_entries_that_cannot_be_read_are_not_left_out_silently(kept, monkeypatch):
    forbid(monkeypatch)
    kept.with_name("bench.ledger-wal").write_bytes(bytes(5000))
    with pytest.raises(LedgerError) as error:
        Ledger(str(kept), create=False)
    assert str(error.value) == (
        f"the ledger {kept} cannot be read whole: its last entries are in bench.ledger-wal, "
        "which is read with permission to write only; copy both"
    )


def test_a_ledger_that_is_gone_is_made_again(tmp_path, caplog):
    place = tmp_path / "bench.ledger"
    with Ledger(str(place)) as ledger:
        ledger.add_line_result(result(1.0))
        for path in list(tmp_path.iterdir()):
            path.unlink()
        ledger.add_line_result(result(2.0))
        ledger.add_line_result(result(3.0))
    with Ledger(str(place), create=False) as again:
        assert [entry.value.magnitude for entry in again.line_results()] == [2.0, 3.0]
    assert [record.getMessage() for record in caplog.records] == [
        f"the ledger {place} is gone; a new one is made in its place"
    ]


def test_one_who_leaves_no_ledger_takes_none_from_another(tmp_path):
    """The maker is refused after another has opened the same file; what that one adds is kept."""
    place = str(tmp_path / "bench.ledger")
    maker, other = Ledger(place), Ledger(place)
    maker.discard_if_new()
    assert list(tmp_path.iterdir()) == []
    assert other.add_line_result(result(2.0))
    other.close()
    with Ledger(place, create=False) as again:
        assert len(again.line_results()) == 1


def test_a_new_ledger_with_entries_of_another_is_left(tmp_path):
    place = str(tmp_path / "bench.ledger")
    maker = Ledger(place)
    with Ledger(place) as other:
        other.add_line_result(result(2.0))
    maker.discard_if_new()
    with Ledger(place, create=False) as again:
        assert len(again.line_results()) == 1

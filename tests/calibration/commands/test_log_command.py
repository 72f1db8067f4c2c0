"""``midfringe log`` on a board in real time: recordings in a row, results, ends of every kind."""

import contextlib
import itertools
import json
import resource
import signal
import subprocess
import sys
import threading
import time

import numpy as np
import pytest
from ledgers import result, sample_ledger
from long_runs.killed_log import without_drive
from sessions import built_in_bench
from wire_board import PtyLink, asked_board

from calibration.desk.ledger import Ledger
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.unattended import LogSettings, UnattendedLog
from calibration.rehearsal_script import session_steps
from firmware_bridge.opening import open_recording
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard
from metro.commandline import run


@pytest.fixture(autouse=True)
def no_ledger(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_LEDGER", raising=False)


@pytest.fixture
def board():
    with asked_board(says=without_drive) as asked:
        yield asked


def arguments(board, folder, *more):
    return [
        *("log", board.link.port, "--out", str(folder / "bench")),
        *("--ledger", str(folder / "l.ledger"), "--line", "87.1Hz", "--every=0.4s", *more),
    ]


def ramp_in(folder):
    """Return the board's count in the recordings, one after the other."""
    parts = []
    for path in sorted(folder.glob("bench-*.mfr"), key=lambda p: (p.stat().st_mtime_ns, p.name)):
        recording = open_recording(path)
        values = recording.read([0, 1], 0, recording.length).values
        parts.append(np.rint(values[:, 0] / 0.5) + 2**15 * np.rint(values[:, 1]))
    return np.concatenate(parts)


@pytest.mark.slow
def test_recordings_follow_one_another_without_a_lost_sample(board, tmp_path, capsys):
    more = ("--duration=2s", "--rotate-every=0.5s", "--quiet", "--json")
    assert run(arguments(board, tmp_path, *more)) == 0
    out, err = capsys.readouterr()
    document = json.loads(out)
    assert err == ""
    assert len(document["files"]) == 4
    assert document["results"] == 5
    assert document["alarms"] == []
    assert np.array_equal(ramp_in(tmp_path), np.arange(4000))
    with Ledger(str(tmp_path / "l.ledger"), create=False) as ledger:
        entries = ledger.line_results()
    assert [entry.line_hz for entry in entries] == [87.1] * 5
    assert not entries[0].is_ratio
    assert entries[0].source == board.link.port
    assert abs(entries[-1].unix_s - time.time()) < 30


# A frame has 36 + 50·2·2 + 4 = 240 bytes, 40 a second; two of 2 s are 38.4 kB beside two headers.
@pytest.mark.parametrize(
    ("more", "told"),
    [
        (
            ["--keep-bytes=30kB", "--rotate-every=2s"],
            "--keep-bytes must hold two recordings of --rotate-every 2 s: 39 kB at the board's 9.6 kB/s, got 30 kB",
        ),
        (
            ["--keep-bytes=500kB", "--every=60s"],
            "--keep-bytes must hold two recordings of --every 60 s: ",
        ),
        (
            ["--keep-bytes=5kB", "--rotate-bytes=2kB"],
            "--keep-bytes must hold two recordings of 1 s: ",
        ),
        (["--channel=nosuch"], "no channel 'nosuch'; the board has "),
        (["--line=3kHz"], "--line must be below half the board's rate, 1000 Hz, got 3000 Hz"),
    ],
)
def test_what_the_board_does_not_have_is_one_line_and_leaves_nothing(
    board, tmp_path, capsys, more, told
):
    assert run(arguments(board, tmp_path, "--duration=5s", *more)) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert [line for line in err.splitlines() if not line.startswith("info: ")] == [
        f"midfringe: {told}" if told[-1] != " " else err.splitlines()[-1]
    ]
    assert told in err
    assert list(tmp_path.glob("*.mfr")) == []


def test_a_board_that_comes_back_with_other_channels_is_recorded_on(tmp_path, caplog):
    """Later the channels are the board's matter: results stop, the recording does not."""
    log = UnattendedLog.__new__(UnattendedLog)
    log._channels, log._window, log._described = object(), object(), None
    log._settings = LogSettings("port")

    def describe(_path):
        raise LedgerError("no channel 'pd'; the board has 'a'")

    log._describe = describe
    with caplog.at_level("WARNING"):
        log._begin(tmp_path / "b.mfr")
    assert log._window is None
    assert "no channel 'pd'; the board has 'a'; recorded without line results" in caplog.text


@pytest.mark.slow
def test_every_step_is_one_line_on_standard_error(board, tmp_path, capsys):
    assert run(arguments(board, tmp_path, "--duration=1.2s", "--rotate-every=0.5s")) == 0
    _, err = capsys.readouterr()
    lines = err.splitlines()
    assert sum(line.startswith("info: 87.1 Hz: ") for line in lines) == 3
    assert sum("is complete" in line for line in lines) == 2
    assert all(line.startswith(("info: ", "warning: ")) for line in lines)


@pytest.mark.slow
def test_all_recordings_stay_within_what_is_kept(board, tmp_path, capsys):
    most = 0
    done = threading.Event()

    def look():
        nonlocal most
        while not done.wait(0.02):
            with contextlib.suppress(FileNotFoundError):  # deleted just now
                most = max(most, sum(p.stat().st_size for p in tmp_path.glob("*.mfr")))

    watcher = threading.Thread(target=look)
    watcher.start()
    more = ("--duration=7s", "--keep-bytes=50kB", "--quiet", "--json")
    code = run(arguments(board, tmp_path, *more))
    done.set()
    watcher.join()
    document = json.loads(capsys.readouterr().out)
    assert code == 0
    assert document["deleted"] >= 2  # 7 s are 70 kB
    assert most <= 50_000
    ramp = ramp_in(tmp_path)
    assert np.array_equal(ramp, np.arange(14000)[-len(ramp) :])


def test_an_alarm_is_a_log_line_and_an_exit_code(tmp_path, capsys):
    """A month of results 3 % lower than what the board's lines are now; measured in metres."""
    place = sample_ledger(tmp_path)
    with Ledger(place, create=False) as ledger:
        now_s = time.time()
        last = [entry.value for entry in ledger.line_results(line_hz=87.1)]
        rng = np.random.default_rng(1)
        values = 0.97 * last[-1].magnitude * (1 + 1e-3 * rng.standard_normal(60))
        ledger.add_line_results(
            result(value, unix_s=now_s + 9e6 + k) for k, value in enumerate(values)
        )
    steps = session_steps(built_in_bench(), 1e5)
    setup = next(step.setup for step in steps if step.role == "lines-rising")
    with SimulatedBoard(SimulatedBench(built_in_bench(), 1), setup, speed=20.0) as board:
        words = ["log", board.port, "--out", str(tmp_path / "bench"), "--ledger", place]
        options = ["--line", "87.1Hz", "--slope=rising", "--every=5s", "--until-alarm"]
        assert run([*words, *options]) == 1
    out, err = capsys.readouterr()
    assert ", 1 alarms" in out
    (line,) = [line for line in err.splitlines() if line.startswith("warning: alarm: ")]
    assert "line at 87.1 Hz has shifted by about" in line
    assert err.splitlines()[-1].startswith("not to be trusted: line at 87.1 Hz has shifted")


def start(board, folder, *more, **settings):
    return subprocess.Popen(
        [sys.executable, "-m", "metro", *arguments(board, folder, *more)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        **settings,
    )


def wait_for_recording(folder):
    begun_s = time.monotonic()
    while not list(folder.glob("*.mfr")):
        assert time.monotonic() - begun_s < 60
        time.sleep(0.01)


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT, signal.SIGHUP])
def test_a_polite_end_is_clean(board, tmp_path, number):
    with start(board, tmp_path, "--quiet") as process:
        wait_for_recording(tmp_path)
        time.sleep(0.6)
        process.send_signal(number)
        out, err = process.communicate(timeout=30)
    assert (process.returncode, err) == (0, "")
    assert out.startswith("1 recordings here, 0 deleted in time, ")
    (path,) = tmp_path.glob("*.mfr")
    assert not any("end" in remark for remark in open_recording(path).remarks)
    ramp = ramp_in(tmp_path)
    assert np.array_equal(ramp, np.arange(len(ramp)))
    assert len(ramp) >= 1000


@pytest.mark.slow
def test_a_full_disk_says_what_was_kept_and_ends_with_3(tmp_path):
    """The limit on a file's size stands for it; the ledger's files are smaller."""

    def limit():
        resource.setrlimit(resource.RLIMIT_FSIZE, (300_000, 300_000))

    with (
        asked_board(says=without_drive, rate_hz=40_000.0) as board,
        start(board, tmp_path, "--quiet", preexec_fn=limit) as process,
    ):
        _, err = process.communicate(timeout=60)
    assert process.returncode == 3
    assert "cannot be written any further: a file may not be larger here; kept " in err
    assert err.count("\n") == 1
    ramp = ramp_in(tmp_path)
    assert f"kept {len(ramp)} samples" in err
    assert np.array_equal(ramp, np.arange(len(ramp)))


def test_a_second_log_in_the_same_place_is_refused(board, tmp_path, capsys):
    with start(board, tmp_path, "--quiet") as process:
        wait_for_recording(tmp_path)
        assert run(arguments(board, tmp_path)) == 2
        process.terminate()
        process.communicate(timeout=30)
    assert "another log is writing" in capsys.readouterr().err


def refused(capsys, *words):
    assert run(["log", *map(str, words)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    return err


def test_wrong_input_is_one_line(tmp_path, capsys):
    out = ("/dev/none", "--out", tmp_path / "bench")
    place = ("--ledger", tmp_path / "l.ledger")
    line = ("--line", "50Hz")
    assert "Missing option '--out'" in refused(capsys, "/dev/none")
    assert "--ledger is needed" in refused(capsys, *out)
    assert "--line is needed: no calibration is in force" in refused(capsys, *out, *place)
    assert "--slope needs a calibration in force" in refused(
        capsys, *out, *place, *line, "--slope=rising"
    )
    assert "/dev/none" in refused(capsys, *out, *place, *line)
    assert "--over must be at most --every, 60 s, got 61 s" in refused(
        capsys, *out, *place, *line, "--over=61s"
    )
    assert "--rotate-bytes must be at most half of --keep-bytes" in refused(
        capsys, *out, *place, *line, "--keep-bytes=1MB", "--rotate-bytes=600kB"
    )
    assert "--rate goes with --text" in refused(capsys, *out, *place, *line, "--rate=5Hz")
    assert "--text needs --rate" in refused(capsys, *out, *place, *line, "--text")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.slow
def test_a_board_that_prints_text_is_logged_too(tmp_path, capsys):
    """0.3 V at 10 Hz in lines of text, 200 a second; the second column is a temperature's number.

    Times are the host's: a printer that pauses may have half of a stretch placed a line late, which is
    0.314 rad of 10 Hz and takes 1 − cos(0.157) = 1.2 % off the amplitude at most.
    """
    stop = threading.Event()

    def print_lines(link):
        begun_s = time.monotonic()
        for k in itertools.count():
            volts = 1.5 + 0.3 * np.cos(2 * np.pi * 10 * k / 200)
            with contextlib.suppress(OSError):
                link.send(f"{volts:.4f} {k % 7}\n".encode())
            if stop.wait(max(0.0, begun_s + k / 200 - time.monotonic())):
                return

    with contextlib.closing(PtyLink()) as link:
        sender = threading.Thread(target=print_lines, args=(link,))
        sender.start()
        words = ["log", link.port, "--text", "--rate=200Hz", "--line=10Hz", "--channel=1"]
        place = ["--out", str(tmp_path / "b"), "--ledger", str(tmp_path / "l")]
        code = run([*words, *place, "--every=1s", "--duration=2s", "--quiet", "--json"])
        stop.set()
        link.give_up()
        sender.join()
    assert code == 0
    assert json.loads(capsys.readouterr().out)["results"] == 2
    with Ledger(str(tmp_path / "l")) as ledger:
        for entry in ledger.line_results():
            assert entry.value.magnitude == pytest.approx(0.3, rel=0.013)


def test_a_port_that_is_none_leaves_a_ledger_with_entries_alone(tmp_path, capsys):
    place = tmp_path / "l.ledger"
    with Ledger(str(place)) as ledger:
        ledger.add_line_result(result(1.0))
    out = ("/dev/none", "--out", tmp_path / "bench")
    assert "/dev/none" in refused(capsys, *out, "--ledger", place, "--line", "50Hz")
    with Ledger(str(place), create=False) as ledger:
        assert len(ledger.line_results()) == 1

import contextlib
import json
import signal
import subprocess
import sys
import threading
import time

import pytest
from wire_board import RATE_HZ, PtyLink, SocketLink, WireBoard

from firmware_bridge.port import PortInfo
from firmware_bridge.recording import open_mfr
from metro.commandline import run

PROGRAM = [sys.executable, "-m", "metro", "record"]


def start(*arguments):
    return subprocess.Popen(
        [*PROGRAM, *arguments], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )


def run_to_end(*arguments):
    with start(*arguments) as process:
        out, err = process.communicate(timeout=30)
    return process.returncode, out, err


@contextlib.contextmanager
def board_on(link, frames, *, paced=False, damage=None):
    """A board that starts when it is asked for the first time."""
    board = WireBoard(link) if damage is None else WireBoard(link, damage=damage)

    def run():
        while not link.received():
            time.sleep(0.005)
        board.run(frames, paced=paced)

    thread = threading.Thread(target=run, daemon=True)
    thread.start()
    yield board
    board._stop.set()
    link.close()
    thread.join()


def wait_for(path, size, limit_s=15.0):
    until = time.monotonic() + limit_s
    while not (path.exists() and path.stat().st_size > size):
        assert time.monotonic() < until, "the recording does not grow"
        time.sleep(0.02)


def test_json_has_the_agreed_keys_and_nothing_else_is_on_stdout(tmp_path):
    path = tmp_path / "a.mfr"
    with board_on(PtyLink(), 100) as board:
        code, out, err = run_to_end(
            "--port", board.link.port, "--out", str(path), "--duration", "1.5 s", "--json"
        )
    document = json.loads(out)
    assert (code, err) == (0, "")
    assert document["file"] == str(path)
    assert (document["samples"], document["gaps"], document["over_range"]) == (3000, [], 0)
    assert document["bytes_discarded"] == 0
    assert document["duration"] == {"value": 1.5, "unit": "s", "u": None}
    assert open_mfr(path).length == 3000


def test_lost_samples_end_with_one_and_the_reason(tmp_path):
    path = tmp_path / "a.mfr"
    with board_on(PtyLink(), 100, damage=lambda k, frame: b"" if k == 7 else frame) as board:
        arguments = ("--port", board.link.port, "--out", str(path), "--duration", "1.5s")
        code, out, err = run_to_end(*arguments, "--json")
    reason = "1 gap, 50 of 3000 samples missing (1.667%)"
    assert (code, err) == (1, f"not to be trusted: {reason}\n")
    document = json.loads(out)
    assert (document["samples"], document["reasons"]) == (3000, [reason])


def test_bytes_discarded_midway_end_with_one_and_those_before_the_first_message_do_not(tmp_path):
    noise = b"\0noise on the line\0"
    for number, expected in ((0, 0), (7, 1)):
        path = tmp_path / f"{number}.mfr"
        link = PtyLink()

        def damage(k, frame, number=number):
            return noise + frame if k == number else frame

        with board_on(link, 100, damage=damage) as board:
            code, out, err = run_to_end(
                "--port", board.link.port, "--out", str(path), "--duration", "1.5s", "--json"
            )
        assert json.loads(out)["bytes_discarded"] == len(noise) - 2
        said = "not to be trusted: 17 bytes discarded midway\n" if expected else ""
        assert (code, err) == (expected, said)


@pytest.mark.parametrize("how", [signal.SIGINT, signal.SIGTERM])
def test_ctrl_c_ends_a_recording_cleanly(tmp_path, how):
    path = tmp_path / "a.mfr"
    with board_on(PtyLink(), 10_000, paced=True) as board:
        process = start("--port", board.link.port, "--out", str(path), "--json")
        wait_for(path, 3000)
        process.send_signal(how)
        out, err = process.communicate(timeout=20)
    assert (process.returncode, err) == (0, "")
    recording = open_mfr(path)
    assert recording.length == json.loads(out)["samples"]
    assert (recording.gaps, recording.remarks) == ([], [])


@pytest.mark.slow
def test_sigkill_costs_at_most_the_last_second(tmp_path):
    path = tmp_path / "a.mfr"
    with board_on(PtyLink(), 10_000, paced=True) as board:
        process = start("--port", board.link.port, "--out", str(path))
        wait_for(path, 3000)
        time.sleep(1.3)  # somewhere between two syncs
        sent = board.next
        process.kill()
        process.communicate(timeout=20)
    assert process.returncode == -signal.SIGKILL
    recording = open_mfr(path)
    assert recording.gaps == []
    assert recording.length > RATE_HZ
    assert sent - recording.length <= RATE_HZ, "more than a second is missing"


@pytest.mark.parametrize(
    ("arguments", "line"),
    [
        (["--port", "/dev/nowhere"], "midfringe: /dev/nowhere cannot be opened: there is no such port (midfringe record --list shows the ports)"),
        (["--port", "socket://127.0.0.1:1"], "midfringe: socket://127.0.0.1:1 cannot be opened: connection refused"),
        (["--port", "loop://", "--duration", "5"], "midfringe: --duration must have a unit of time"),
        (["--port", "loop://", "--duration", "-5s"], "midfringe: --duration must be > 0"),
        (["--port", "loop://", "--rate", "5Hz"], "midfringe: --rate goes with --text; a board that sends frames announces its rate"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_one_line_and_nothing_is_written(tmp_path, arguments, line):
    code, out, err = run_to_end(*arguments, "--out", str(tmp_path / "a.mfr"))
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert err.startswith(line)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("name", ["a.csv", "a", ".mfr.txt"])
def test_a_recording_is_named_as_one_before_the_port_is_opened(tmp_path, name):
    path = tmp_path / name
    code, out, err = run_to_end("--port", "/dev/nowhere", "--out", str(path))
    assert (code, out) == (2, "")
    assert err == f"midfringe: --out must end in .mfr, got {str(path)!r}\n"


@pytest.mark.parametrize("missing", ["--port", "--out"])
def test_port_and_file_are_needed(capsys, missing):
    given = {"--port": "loop://", "--out": "a.mfr"}
    del given[missing]
    code = run(["record", *(word for pair in given.items() for word in pair)])
    captured = capsys.readouterr()
    assert (code, captured.out, captured.err.count("\n")) == (2, "", 1)
    assert f"Missing option '{missing}'" in captured.err


@pytest.mark.parametrize("order", [("--list", "--json"), ("--json", "--list")])
def test_the_ports_as_one_json_document(capsys, monkeypatch, order):
    found = [PortInfo("/dev/ttyACM0", "a board")]
    monkeypatch.setattr("firmware_bridge.port.list_ports", lambda: found)
    assert run(["record", *order]) == 0
    captured = capsys.readouterr()
    assert json.loads(captured.out) == {
        "ports": [{"name": "/dev/ttyACM0", "description": "a board"}]
    }
    found.clear()
    assert run(["record", *order]) == 0
    captured = capsys.readouterr()
    assert (json.loads(captured.out), captured.err) == ({"ports": []}, "")
    assert run(["record", "--list"]) == 0
    captured = capsys.readouterr()
    assert (captured.out, captured.err) == ("", "no serial port found on this computer\n")


def test_an_existing_file_is_kept(tmp_path):
    path = tmp_path / "a.mfr"
    path.write_bytes(b"precious")
    code, out, err = run_to_end("--port", "loop://", "--out", str(path))
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert path.read_bytes() == b"precious"


def test_a_port_that_goes_midway_ends_with_three_and_what_was_kept(tmp_path):
    link = SocketLink()

    def send():
        board = WireBoard(link)
        board.announce()
        board.send(10)
        link.hang_up()

    thread = threading.Thread(target=send, daemon=True)
    thread.start()
    code, out, err = run_to_end("--port", link.port, "--out", str(tmp_path / "a.mfr"))
    thread.join()
    link.close()
    assert (code, out) == (3, "")
    assert err == (
        f"midfringe: {link.port} failed: the other side closed the connection; "
        f"kept 500 samples (0.25 s) in {tmp_path / 'a.mfr'}\n"
    )


def test_json_says_what_was_kept_when_the_port_goes(tmp_path):
    path, link = tmp_path / "a.mfr", SocketLink()

    def send():
        WireBoard(link).run(40)
        link.hang_up()

    thread = threading.Thread(target=send, daemon=True)
    thread.start()
    code, out, err = run_to_end("--port", link.port, "--out", str(path), "--json")
    thread.join()
    link.close()
    found = json.loads(out)
    assert code == 3
    assert (found["samples"], found["file"], found["gaps"]) == (2000, str(path), [])
    assert found["failure"] in err
    assert found["failure"].endswith(f"kept 2000 samples (1 s) in {path}")


def test_json_of_nothing_kept_is_a_document_too(tmp_path):
    link = SocketLink()

    def send():
        link.accept()
        link.hang_up()

    thread = threading.Thread(target=send, daemon=True)
    thread.start()
    path = str(tmp_path / "a.mfr")
    code, out, _ = run_to_end("--port", link.port, "--out", path, "--json")
    thread.join()
    link.close()
    found = json.loads(out)
    assert (code, found["samples"], found["file"]) == (3, 0, None)
    assert found["failure"].endswith("nothing was recorded")

"""What goes wrong unforeseen in the threads of a recording ends it, and is raised where it was begun."""

import threading

import pytest
from wire_board import asked_board

from firmware_bridge.board_talk import BoardTalk
from firmware_bridge.intake import Intake
from firmware_bridge.recorder import record


def recorded(path):
    """Record for 50 ms in a thread of its own, so that a recorder that hangs fails the test."""
    found = []

    def run():
        try:
            record(board.link.port, path, duration_s=0.05)
        except BaseException as error:  # noqa: BLE001  # whatever it was is looked at
            found.append(error)

    with asked_board() as board:
        recorder = threading.Thread(target=run, daemon=True)
        recorder.start()
        recorder.join(20)
        assert not recorder.is_alive()
    (error,) = found
    return error


@pytest.mark.parametrize("kind", [ValueError, KeyError, SystemExit, MemoryError])
def test_closing_a_recording_fails_in_a_way_that_nobody_foresaw(monkeypatch, tmp_path, kind):
    def close(_self, **_options):
        raise kind("unforeseen")

    monkeypatch.setattr(Intake, "close", close)
    error = recorded(tmp_path / "a.mfr")
    assert (type(error), error.args) == (kind, ("unforeseen",))


@pytest.mark.parametrize("method", ["tick", "take"])
def test_so_does_writing_it(monkeypatch, tmp_path, method):
    def fail(_self, *_arguments):
        raise ZeroDivisionError("unforeseen")

    monkeypatch.setattr(Intake, method, fail)
    assert isinstance(recorded(tmp_path / "a.mfr"), ZeroDivisionError)


def test_so_does_leaving_the_board(monkeypatch, tmp_path):
    def leave(_self):
        raise ValueError("unforeseen")

    monkeypatch.setattr(BoardTalk, "leave", leave)
    assert str(recorded(tmp_path / "a.mfr")) == "unforeseen"

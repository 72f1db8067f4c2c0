"""How a board is left: it is heard whether the drive is at rest, for a second and no longer."""

import logging
import threading
import time

import pytest
from wire_board import announced, asked_board

from firmware_bridge.decoder import Command, Decoder
from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import DriveLine, DriveLines
from firmware_bridge.farewell import Farewell
from firmware_bridge.message import CommandCode, Reply, encode_command, encode_reply
from firmware_bridge.port import PortLostError
from firmware_bridge.recorder import record

NOT_CONFIRMED = (
    "the board has not confirmed within 1 s that its drive is at rest: look whether it is"
)
UNTOLD = (
    "the port is gone, so that the drive could not be told to rest; a board brings it to rest by "
    "itself once it has heard nothing for 2 s"
)


class Port:
    """A board that answers each command, but for those that are lost."""

    name = "port"

    def __init__(self, *, lose=0, status=0, gone_after=None):
        self.said, self.lose, self.status, self.gone_after = [], lose, status, gone_after
        self._answers, self._decoder = [b"\1cut off\0"], Decoder()

    def say(self, code, arguments):
        if self.gone_after is not None and len(self.said) >= self.gone_after:
            return 0
        self.said.append(code)
        number = 65535 + len(self.said)  # counts over the 16 bits of the wire
        for event in self._decoder.feed(encode_command(code, number % 65536, arguments)):
            assert isinstance(event, Command)
            if len(self.said) > self.lose:
                reply = Reply(event.code, event.request, self.status, "no")
                self._answers.append(encode_reply(reply))
        return number

    def read(self):
        if self.gone_after is not None and len(self.said) >= self.gone_after:
            raise PortLostError("unplugged")
        time.sleep(0.001)
        return self._answers.pop(0) if self._answers else b""


class Intake:
    announcement = announced(1)


def desk_that_drives():
    desk = DriveDesk(DriveLines(1000.0), is_held=False)
    for number, (code, _) in enumerate(desk.due(Intake.announcement), 1):
        desk.sent(number, code)
        desk.heard(Reply(code, number))
    desk.set(0, DriveLine(87.1, 1.0))
    for code, _ in desk.due(Intake.announcement):
        desk.sent(9, code)
        desk.heard(Reply(code, 9))
    return desk


@pytest.mark.slow
@pytest.mark.parametrize(
    ("settings", "told", "within_s"),
    [
        ({}, "", 0.35),
        ({"status": 1}, "", 0.35),  # the board has no drive
        ({"lose": 13}, "", 0.8),
        ({"status": 2}, NOT_CONFIRMED, 1.6),
        ({"lose": 1000}, NOT_CONFIRMED, 1.6),
        ({"gone_after": 3}, UNTOLD, 0.2),
        ({"gone_after": 11}, UNTOLD, 0.4),
    ],
)
def test_the_answers_to_the_rest_are_waited_for(settings, told, within_s):
    port, begun_s = Port(**settings), time.monotonic()
    assert Farewell(port, port.say).rest(desk_that_drives(), Intake()) == told
    assert time.monotonic() - begun_s < within_s + 0.5  # the machine may be slow
    if not told:
        assert port.said[-2:] == [CommandCode.CLEAR_LINE, CommandCode.RAMP]


def test_an_answer_that_is_lost_is_asked_for_again():
    port = Port(lose=12)  # nine steps of the fall, the rest, and a part of its repetition
    assert Farewell(port, port.say).rest(desk_that_drives(), Intake()) == ""
    assert port.said.count(CommandCode.CLEAR_LINE) == 3


def test_where_nothing_was_driven_nothing_is_said():
    port = Port(lose=1000)
    desk = DriveDesk(DriveLines(1.0), is_held=False)
    assert Farewell(port, port.say).rest(desk, Intake()) == ""
    assert port.said == []


@pytest.mark.slow
def test_a_recording_says_whether_its_drive_came_to_rest(tmp_path, caplog):
    """The board answers until the recording ends; then it drives on, as far as anyone knows."""
    lines = DriveLines(1000.0)
    lines.set(0, DriveLine(87.1, 0.5))
    for name, is_deaf in (("a", False), ("b", True)):
        stop = threading.Event()

        def deaf_later(_block, stop=stop, is_deaf=is_deaf):
            there._answers = not is_deaf
            stop.set()

        with asked_board() as there:
            record(
                there.link.port,
                tmp_path / f"{name}.mfr",
                drive=lines,
                stop=stop,
                on_block=deaf_later,
            )
            said = [r.getMessage() for r in caplog.records]
            assert all(r.levelno == logging.ERROR for r in caplog.records)  # --quiet hides less
            assert said == ([f"{there.link.port}: {NOT_CONFIRMED}"] if is_deaf else [])
            assert CommandCode.CLEAR_LINE in there.codes()

"""What the desk has a board drive: never beyond the limit, and nothing after a stop, whatever is lost."""

import struct
from dataclasses import dataclass

import numpy as np
import pytest

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines
from firmware_bridge.message import CommandCode

RATE_HZ = 4000.0
FULL_V = 32767 * 3e-4
LIMIT_V = 5.0
# Amplitudes go out in 2^-16 of full scale: half a step for each of 8 slots.
STEP_V = FULL_V / 65536


def announced(stream=4):
    channels = [ChannelInfo("photodiode", "V", 1e-4), ChannelInfo("drive", "V", 3e-4)]
    return Announcement(stream, RATE_HZ, "int16", 64, channels)


@dataclass
class Answer:
    """As a `Reply`."""

    request: int
    code: int
    status: int
    text: str = ""


class Bench:
    """A desk, a board that obeys by SPEC.md, and a wire that may lose both ways."""

    def __init__(self, monkeypatch, *, is_held=False, wanted=()):
        self.now_s, self.number, self.told = 100.0, 0, []
        for module in ("drive_desk", "drive_settling"):
            monkeypatch.setattr(f"firmware_bridge.{module}.time.monotonic", lambda: self.now_s)
        self.board, self.codes, self.refuses = {}, [], set()
        self.lost = lambda: False
        lines = DriveLines(LIMIT_V)
        for slot, line in enumerate(wanted):
            lines.set(slot, line)
        self.desk = DriveDesk(lines, is_held=is_held, tell=self.told.append)
        self.waiting = []
        self.stream, self.worst_v = 4, 0.0

    def speak(self):
        """Send what is due; the board obeys at once, its answers wait."""
        for code, arguments in self.desk.due(announced(self.stream)):
            self.number += 1
            self.desk.sent(self.number, code)
            if self.lost():
                continue
            self.codes.append(code)
            status = self.obey(code, arguments)
            self.worst_v = max(self.worst_v, self.driven_v)
            if not self.lost():
                self.waiting.append(Answer(self.number % 65536, code, status, "no such line"))

    def obey(self, code, arguments):
        if code == CommandCode.RAMP:
            return 0
        slot = arguments[0]
        if code == CommandCode.CLEAR_LINE:
            for each in list(self.board) if slot == 255 else [slot]:
                self.board.pop(each, None)
            return 0
        if slot in self.refuses:
            return 2
        self.board[slot] = struct.unpack("<BBHII", arguments)[2] * STEP_V
        return 0

    def hear(self, count=None):
        count = len(self.waiting) if count is None else count
        answers, self.waiting = self.waiting[:count], self.waiting[count:]
        return [self.desk.heard(answer) for answer in answers]

    def run(self, turns=4, every_s=0.6):
        for _ in range(turns):
            self.speak()
            self.hear()
            self.now_s += every_s

    @property
    def driven_v(self):
        return sum(self.board.values())


@pytest.fixture
def bench(monkeypatch):
    bench = Bench(monkeypatch)
    bench.run()
    return bench


def test_a_stop_is_not_lost_over_a_line_that_cannot_be(bench):
    bench.desk.set(0, DriveLine(87.1, 3.0))
    bench.run()
    assert bench.driven_v == pytest.approx(3.0, abs=STEP_V)
    bench.desk.rest()
    bench.desk.set(0, DriveLine(5000.0, 0.1))
    bench.speak()
    assert bench.driven_v == 0.0
    assert bench.codes[-2:] == [CommandCode.CLEAR_LINE, CommandCode.RAMP]
    (reason,) = bench.desk.refusals()
    assert "half the rate" in reason
    bench.run()
    assert bench.driven_v == 0.0
    assert bench.told[-1].is_at_rest


def test_a_line_that_can_be_is_set_beside_one_that_cannot(bench):
    bench.desk.set(0, DriveLine(5000.0, 0.1))
    bench.desk.set(1, DriveLine(87.1, 1.0))
    bench.desk.set(2, DriveLine(31.7, LIMIT_V - 1.5))
    bench.run()
    assert sorted(bench.board) == [1, 2]
    assert len(bench.desk.refusals()) == 1


def test_where_a_line_in_place_of_another_cannot_be_the_other_counts_on(bench):
    bench.desk.set(0, DriveLine(87.1, 3.0))
    bench.run()
    bench.desk.set(0, DriveLine(5000.0, 0.1))
    bench.desk.set(1, DriveLine(50.0, 4.0))
    bench.run()
    assert list(bench.board) == [0]
    first, second = bench.desk.refusals()
    assert "half the rate" in first
    assert second == "the lines together may reach 7 V, beyond the drive limit of 5 V"
    assert bench.told[-1].lines == bench.told[-1].wanted == {0: DriveLine(87.1, 3.0)}


def test_where_the_board_refuses_a_line_in_place_of_another_the_other_counts_on(bench):
    bench.desk.set(0, DriveLine(87.1, 3.0))
    bench.run()
    bench.refuses = {0}
    bench.desk.set(0, DriveLine(60.0, 0.5))
    bench.desk.set(1, DriveLine(50.0, 4.0))
    bench.run()
    assert list(bench.board) == [0]
    assert bench.worst_v == pytest.approx(3.0, abs=STEP_V)
    assert bench.desk.refusals() == [
        "the lines together may reach 7 V, beyond the drive limit of 5 V"
    ]
    with pytest.raises(DriveError, match="may reach 7 V"):
        bench.desk.set(1, DriveLine(50.0, 4.0))


def test_a_line_waits_until_the_one_it_replaces_is_gone(bench):
    bench.desk.set(0, DriveLine(87.1, 4.0))
    bench.run()
    bench.desk.clear(0)
    bench.desk.set(1, DriveLine(50.0, 4.0))
    bench.speak()
    assert bench.driven_v == 0.0
    bench.hear()
    bench.speak()
    assert bench.driven_v == pytest.approx(4.0, abs=STEP_V)
    assert bench.worst_v < LIMIT_V


def test_rest_is_sent_until_the_board_has_answered(bench):
    bench.desk.set(0, DriveLine(87.1, 3.0))
    bench.run()
    bench.desk.rest()
    bench.lost = lambda: True
    bench.run(5)
    assert bench.driven_v > 2.9
    assert not bench.told[-1].is_at_rest
    assert bench.told[-1].lines == {0: DriveLine(87.1, 3.0)}
    bench.lost = lambda: False
    bench.run(2)
    assert bench.driven_v == 0.0
    assert bench.told[-1].is_at_rest
    said = len(bench.codes)
    bench.run(5)
    assert len(bench.codes) == said


def test_an_answer_to_an_earlier_rest_does_not_count(bench):
    bench.desk.rest()
    bench.speak()
    bench.desk.rest()
    bench.hear()
    assert not bench.told[-1].is_at_rest
    bench.run(1)
    assert bench.told[-1].is_at_rest


def test_a_line_without_an_answer_is_cleared_after_a_while(bench):
    bench.desk.set(0, DriveLine(87.1, 3.0))
    bench.speak()
    bench.waiting.clear()  # the answers stay out, the line is there
    for _ in range(12):
        bench.speak()
        bench.waiting.clear()
        bench.now_s += 0.6
    assert bench.driven_v == 0.0
    assert bench.desk.refusals() == ["the board does not answer to set line for 5 s; it is cleared"]
    assert not bench.told[-1].is_at_rest or not bench.told[-1].lines


def test_no_line_is_set_while_the_port_is_away(bench):
    bench.desk.away()
    with pytest.raises(DriveError, match=r"^the port is gone, so no line is set$"):
        bench.desk.set(0, DriveLine(87.1, 1.0))
    bench.run()
    bench.desk.set(0, DriveLine(87.1, 1.0))


def test_a_recording_with_lines_begins_with_rest(monkeypatch):
    bench = Bench(monkeypatch, is_held=True, wanted=[DriveLine(87.1, 2.0), DriveLine(31.7, 1.0)])
    bench.board = {3: 4.0}  # of a program that was killed a moment ago
    bench.run(1)
    assert bench.codes == [CommandCode.CLEAR_LINE, CommandCode.RAMP]
    assert not bench.desk.is_settled()
    bench.run(1)
    assert sorted(bench.board) == [0, 1]
    assert bench.worst_v <= LIMIT_V
    assert bench.desk.is_settled()
    bench.stream += 1  # a start: the lines are set anew, never at rest in between
    bench.run()
    assert CommandCode.CLEAR_LINE not in bench.codes[2:]
    assert bench.codes.count(CommandCode.SET_LINE) == 4


def test_samples_from_before_the_lines_are_not_kept_however_late_they_come(monkeypatch):
    """0.3 s at 4 kHz are 1200 samples, counted from the first frame behind the last answer."""
    bench = Bench(monkeypatch, is_held=True, wanted=[DriveLine(87.1, 2.0)])
    bench.run(2, every_s=5.0)
    assert not bench.desk.is_settled((4, 8000))  # the computer has slept, the samples had waited
    assert not bench.desk.is_settled((4, 9199))
    assert not bench.desk.is_settled((5, 300))  # the board was reset
    assert bench.desk.is_settled((5, 1500))
    assert bench.desk.is_settled((5, 1501))


def test_a_board_that_does_not_answer_ends_a_recording_with_lines(monkeypatch):
    bench = Bench(monkeypatch, is_held=True, wanted=[DriveLine(87.1, 2.0)])
    bench.lost = lambda: True
    bench.run(8)
    assert not bench.desk.is_settled()
    bench.run(2)
    with pytest.raises(DriveError, match=r"^the board does not answer to set line for 5 s$"):
        bench.desk.is_settled()


def test_a_fall_never_rises_and_ends_at_rest(bench):
    bench.desk.set(0, DriveLine(87.1, 2.0))
    bench.run()
    bench.lost = lambda: True
    bench.desk.set(0, DriveLine(87.1, 4.0))  # on its way: the board may hold the one or the other
    bench.speak()
    bench.desk.set(1, DriveLine(31.7, 0.5))
    bench.lost = lambda: False
    bench.run(1, every_s=0.1)
    assert sorted(bench.board) == [0, 1]
    steps, before_v = list(bench.desk.fall(announced())), bench.driven_v
    for _, requests in steps:
        for code, arguments in requests:
            bench.obey(code, arguments)
        assert bench.driven_v <= before_v
        before_v = bench.driven_v
    assert bench.driven_v == 0.0
    assert sum(wait_s for wait_s, _ in steps) < 0.5


@pytest.mark.parametrize("seed", range(60))
@pytest.mark.parametrize("loss", [0.0, 0.3])
def test_whatever_is_asked_and_lost_the_limit_holds_and_a_stop_stops(monkeypatch, seed, loss):
    draw = np.random.default_rng([9311, seed])
    bench = Bench(monkeypatch)
    bench.lost = lambda: draw.random() < loss
    for _ in range(150):
        slot = int(draw.integers(4))
        try:
            match draw.integers(12):
                case 0:
                    bench.desk.rest()
                case 1 | 2:
                    bench.desk.clear(slot)
                case 3:
                    bench.desk.set(slot, DriveLine(5000.0, float(draw.uniform(0, 5))))
                case 4:
                    bench.refuses ^= {slot}
                case 5 if draw.random() < 0.1:
                    bench.desk.away()
                case 6 if draw.random() < 0.1:
                    bench.stream += 1
                case 7 | 8 | 9 | 10:
                    bench.desk.set(slot, DriveLine(87.1, float(draw.uniform(0, 5))))
        except DriveError:
            pass
        if draw.random() < 0.7:
            bench.speak()
        bench.hear(int(draw.integers(4)))
        bench.now_s += float(draw.exponential(0.1))
        assert bench.driven_v <= LIMIT_V + 4 * STEP_V
        if bench.told and bench.told[-1].is_at_rest:
            assert bench.driven_v == 0.0
        for k, volts in bench.board.items():
            # what is shown is never less than what is driven
            assert bench.told[-1].lines[k].amplitude_v >= volts - STEP_V
    bench.lost = lambda: False
    bench.run(10)
    assert bench.told[-1].lines == bench.told[-1].wanted
    assert sorted(bench.board) == sorted(bench.told[-1].wanted)
    for k, line in bench.told[-1].wanted.items():
        assert bench.board[k] == pytest.approx(line.amplitude_v, abs=STEP_V)
    bench.desk.rest()
    bench.run(1)
    assert bench.driven_v == 0.0
    assert bench.told[-1].is_at_rest

"""What a live page may ask for, and what it may not."""

from pathlib import Path

import numpy as np
import pytest

from calibration.desk.watch.drive import SLOTS
from calibration.desk.watch.orders import Answer, Orders
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.state import WatchState
from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.live_events import LiveChannels, LiveReply, LiveState
from firmware_bridge.recording_name import recording_in
from metro.bench import Bench
from metro.measured import Measured


class Recorded:
    """A source that keeps what it was asked for."""

    def __init__(self, folder):
        self.asked, self.folder = [], folder

    def poll(self):
        return []

    def start_recording(self, name):
        path = recording_in(self.folder, name)  # as a live session does
        self.asked.append(("record", name))
        return path

    def stop_recording(self):
        self.asked.append(("end",))

    def set_line(self, slot, frequency_hz, amplitude_v, phase_rad=0.0):
        self.asked.append(("set", slot, frequency_hz, amplitude_v, phase_rad))

    def clear_line(self, slot):
        self.asked.append(("clear", slot))

    def rest(self):
        self.asked.append(("rest",))

    def close(self):
        pass


def bench(limit_v=5.0):
    return Bench().replace(
        {} if limit_v is None else {"actuator.drive_limit": Measured.of(limit_v, "V")}
    )


def board(stream=1, full_scale_v=5.0):
    channels = (ChannelInfo("photodiode", "V"), ChannelInfo("drive", "V"))
    return LiveChannels(1000.0, channels, full_scale_v=full_scale_v, stream=stream)


def made(tmp_path, *, limit_v=5.0, said=None, is_replay=False):
    state = WatchState(WatchSetup("test", bench(limit_v)))
    state.take(said or board())
    source = Recorded(tmp_path)
    return Orders(source, state, is_replay=is_replay), source, state


@pytest.fixture
def desk(tmp_path):
    return made(tmp_path)


def line(frequency=87.1, amplitude=2.0, **more):
    return {"do": "set line", "frequency": frequency, "amplitude": amplitude, **more}


def test_a_line_goes_into_the_first_free_slot_and_is_followed(desk):
    orders, source, state = desk
    assert orders.obey(line(phase=90)) == Answer("line 1 set: 87.1 Hz, 2 V")
    assert orders.obey(line("141.3 Hz", "500 mV")) == Answer("line 2 set: 141.3 Hz, 0.5 V")
    assert source.asked == [
        ("set", 0, 87.1, 2.0, pytest.approx(np.pi / 2)), ("set", 1, 141.3, 0.5, 0.0),
    ]  # fmt: skip
    assert state.stream.lines.frequencies_hz == (87.1, 141.3)
    assert orders.document()["sum_v"] == 2.5
    orders.obey({"do": "clear line", "slot": 0})
    assert state.stream.lines.frequencies_hz == (141.3,)
    assert orders.obey(line(31.7)).text.startswith("line 1 ")


def test_the_sum_of_the_amplitudes_counts_against_the_limit(desk):
    orders, source, _ = desk
    orders.obey(line(31.7, 3.0))
    answer = orders.obey(line(87.1, 2.1))
    assert answer == Answer(
        "the lines together may reach 5.1 V, beyond the drive limit of 5 V", refused=True
    )
    assert len(source.asked) == 1
    assert not orders.obey(line(31.7, 5.0, slot=0)).refused  # in place of the 3 V
    assert orders.document()["sum_v"] == 5.0


@pytest.mark.parametrize(
    "wrong",
    [
        {"amplitude": -1.0}, {"amplitude": "nan"}, {"amplitude": "inf"}, {"amplitude": 1e400},
        {"amplitude": "5 m"}, {"amplitude": None}, {"amplitude": [1]}, {"amplitude": True},
        {"frequency": 0.0}, {"frequency": -3}, {"frequency": "x"}, {"frequency": ""},
        {"phase": "nan"}, {"phase": {}}, {"slot": SLOTS}, {"slot": -1}, {"slot": 0.5},
        {"slot": "0"}, {"slot": True}, {"amplitude": "1e300 kV"},
    ],
)  # fmt: skip
def test_what_is_no_line_is_refused_and_not_passed_on(desk, wrong):
    orders, source, _ = desk
    answer = orders.obey(line() | wrong)
    assert answer.refused
    assert "\n" not in answer.text
    assert source.asked == []
    assert orders.drive.lines == {}


@pytest.mark.parametrize(
    "order",
    [None, 3, "stop", [], {}, {"do": "format disk"}, {"do": ["stop"]}, {"do": "set line"},
     {"do": "clear line"}, {"do": "record"}],
)  # fmt: skip
def test_what_is_no_order_is_refused(desk, order):
    orders, source, _ = desk
    assert orders.obey(order).refused
    assert source.asked == []


@pytest.mark.parametrize(
    "name",
    ["../run", "/etc/run.mfr", "a/b.mfr", "..", "a\\b", "C:run.mfr", ".hidden", "a\nb", "a\0b", "",
     "x" * 300],
)  # fmt: skip
def test_no_recording_leaves_the_folder(desk, name, tmp_path):
    orders, _, _ = desk
    answer = orders.obey({"do": "record", "name": name})
    assert answer.refused
    assert list(tmp_path.iterdir()) == []


def test_a_plain_name_is_recorded_into_the_folder_once(desk, tmp_path):
    orders, source, _ = desk
    assert orders.obey({"do": "record", "name": " run 1 "}) == Answer("recording to run 1.mfr")
    assert source.asked == [("record", "run 1.mfr")]
    Path(tmp_path, "taken.mfr").write_text("")
    assert orders.obey({"do": "record", "name": "taken.mfr"}).refused
    assert orders.obey({"do": "end recording"}) == Answer("recording ended")


def test_stop_rests_the_drive_and_forgets_the_lines(desk):
    orders, source, state = desk
    orders.obey(line())
    assert orders.obey({"do": "stop"}) == Answer("drive stopped")
    assert source.asked[-1] == ("rest",)
    assert orders.drive.lines == {}
    assert state.stream.lines.frequencies_hz == ()


def test_stop_is_passed_on_whatever_is_known_of_the_drive(tmp_path):
    orders, source, _ = made(tmp_path, limit_v=None, said=board(full_scale_v=None))
    orders.obey({"do": "stop"})
    assert source.asked == [("rest",)]


def test_without_a_limit_or_a_drive_no_line_is_set(tmp_path):
    for orders, source, _ in (
        made(tmp_path, limit_v=None),
        made(tmp_path, said=board(full_scale_v=None)),
        made(tmp_path, is_replay=True),
    ):
        assert orders.obey(line()) == Answer(orders.drive.why_not(), refused=True)
        assert source.asked == []


def test_a_replay_records_nothing(tmp_path):
    orders, source, _ = made(tmp_path, is_replay=True)
    assert orders.obey({"do": "record", "name": "run"}).refused
    assert source.asked == []
    assert orders.document()["can_record"] is False


def test_a_port_or_board_that_was_away_has_no_lines_set(desk):
    orders, _, state = desk
    orders.drive.follow_port()
    orders.obey(line())
    state.take(LiveState("gone", "unplugged"))
    orders.drive.follow_port()
    assert orders.drive.lines == {}
    state.take(LiveState("connected"))
    orders.obey(line())
    state.take(board(stream=2))
    orders.drive.follow_port()
    assert orders.drive.lines == {}


def test_all_slots_taken(desk):
    orders, _, _ = desk
    for k in range(SLOTS):
        assert not orders.obey(line(20.0 + k, 0.1)).refused
    assert orders.obey(line(60.0, 0.1)) == Answer(
        f"all {SLOTS} lines are set; clear one first", refused=True
    )


def test_a_line_that_the_board_refuses_is_not_set(desk):
    orders, _, state = desk
    orders.obey(line(31.7, 1.0))
    orders.obey(line(87.1, 2.0))
    orders.drive.hear(LiveReply("set line: done"))
    orders.drive.hear(LiveReply("the board refuses to set line: no such slot", refused=True))
    assert list(orders.drive.lines) == [0]
    assert state.stream.lines.frequencies_hz == (31.7,)


def test_where_a_line_in_place_of_another_is_refused_the_other_stays(desk):
    orders, _, _ = desk
    orders.obey(line(31.7, 1.0))
    orders.drive.hear(LiveReply("set line: done"))
    orders.obey(line(31.7, 4.0, slot=0))
    orders.drive.hear(
        LiveReply("a line of 4 V is beyond the board's full scale of 2 V", refused=True)
    )
    assert orders.drive.lines[0].amplitude_v == 1.0


def test_other_answers_never_make_a_drive_look_at_rest(desk):
    orders, _, _ = desk
    orders.obey(line(31.7, 1.0))
    for text, refused in (("ramp: done", False), ("clear line: done", False),
                          ("run.mfr exists already", True), ("no space left on device", True)):  # fmt: skip
        orders.drive.hear(LiveReply(text, refused))
    assert orders.document()["sum_v"] == 1.0

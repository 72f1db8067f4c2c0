"""What a live page may ask for, and what it may not."""

from pathlib import Path

import numpy as np
import pytest

from calibration.desk.watch.drive import SLOTS
from calibration.desk.watch.orders import Answer, Orders
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.state import WatchState
from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.drive_lines import DriveLine
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_events import LiveChannels, LiveLines, LiveState
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
        return len(self.asked)

    def clear_line(self, slot):
        self.asked.append(("clear", slot))
        return len(self.asked)

    def rest(self):
        self.asked.append(("rest",))
        return len(self.asked)

    def close(self):
        pass


def bench(limit_v=5.0):
    return Bench().replace(
        {} if limit_v is None else {"actuator.drive_limit": Measured.of(limit_v, "V")}
    )


def board(stream=1, full_scale_v=5.0):
    channels = (ChannelInfo("photodiode", "V"), ChannelInfo("drive", "V"))
    return LiveChannels(1000.0, channels, full_scale_v=full_scale_v, stream=stream)


def made(tmp_path, *, limit_v=5.0, said=None, **kind):
    state = WatchState(WatchSetup("test", bench(limit_v)))
    state.take(said or board())
    source = Recorded(tmp_path)
    return Orders(source, state, **kind), source, state


@pytest.fixture
def desk(tmp_path):
    return made(tmp_path)


def line(frequency=87.1, amplitude=2.0, **more):
    return {"do": "set line", "frequency": frequency, "amplitude": amplitude, **more}


def test_a_line_goes_into_the_first_free_slot_and_is_followed(desk):
    orders, source, state = desk
    assert orders.obey(line(phase=90)) == Answer("line 1 sent: 87.1 Hz, 2 V")
    assert orders.obey(line("141.3 Hz", "500 mV")) == Answer("line 2 sent: 141.3 Hz, 0.5 V")
    assert source.asked == [
        ("set", 0, 87.1, 2.0, pytest.approx(np.pi / 2)), ("set", 1, 141.3, 0.5, 0.0),
    ]  # fmt: skip
    assert state.stream.lines.frequencies_hz == (87.1, 141.3)
    assert orders.document()["sum_v"] == 2.5
    assert orders.obey({"do": "clear line", "slot": 0}) == Answer("clear line 1 sent")
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


def test_stop_is_confirmed_by_the_board_and_not_before(desk):
    orders, source, state = desk
    orders.obey(line())
    told(orders, source, {0: DriveLine(87.1, 2.0)})
    assert orders.drive.condition == "on"
    assert orders.obey({"do": "stop"}) == Answer("stop sent")
    assert source.asked[-1] == ("rest",)
    assert orders.drive.wanted == {}
    assert orders.drive.condition == "stopping"
    assert not told(orders, source, {0: DriveLine(87.1, 2.0)}, wanted={})
    assert orders.document()["sum_v"] == 2.0  # still driven, as far as is known
    # at rest, but before the stop was heard of
    before = LiveLines({}, {}, is_at_rest=True, orders=len(source.asked) - 1)
    assert not orders.drive.hear(before)
    assert orders.drive.condition == "stopping"
    assert told(orders, source, {}, is_at_rest=True)
    assert orders.drive.condition == "at rest"
    assert state.stream.lines.frequencies_hz == ()


def told(orders, source, lines, wanted=None, *, is_at_rest=False):
    """The port's process says what it knows after every order."""
    wanted = lines if wanted is None else wanted
    return orders.drive.hear(LiveLines(lines, wanted, is_at_rest, len(source.asked)))


@pytest.mark.parametrize("how", ["gone", "silent", "failed"])
def test_nothing_is_claimed_of_a_port_that_is_away(desk, how):
    orders, source, state = desk
    told(orders, source, {}, is_at_rest=True)
    state.take(LiveState(how, "unplugged"))
    assert orders.drive.condition == "unknown"
    assert not orders.drive.is_at_rest
    stop = orders.obey({"do": "stop"})
    assert stop.refused
    assert stop.text.endswith(f"the port is {how}; whether the drive is at rest is not known")
    assert source.asked == [("rest",)]
    record = orders.obey({"do": "record", "name": "run"})
    assert record == Answer(f"the port is {how}: no recording can begin", refused=True)
    assert orders.obey(line()) == Answer(f"the port is {how}: no line is set", refused=True)
    assert source.asked == [("rest",)]


def test_a_stop_that_nobody_takes_is_said_to_be_unknown(desk):
    orders, source, _ = desk

    def ended():
        raise BridgeError("the process that held it has ended")

    source.rest = ended
    assert orders.obey({"do": "stop"}) == Answer(
        "the process that held it has ended; whether the drive is at rest is not known",
        refused=True,
    )


def test_stop_is_passed_on_whatever_is_known_of_the_drive(tmp_path):
    orders, source, _ = made(tmp_path, limit_v=None, said=board(full_scale_v=None))
    orders.obey({"do": "stop"})
    assert source.asked == [("rest",)]


def test_without_a_limit_or_a_drive_no_line_is_set(tmp_path):
    for orders, source, _ in (
        made(tmp_path, limit_v=None),
        made(tmp_path, said=board(full_scale_v=None)),
        made(tmp_path, is_replay=True),
        made(tmp_path, is_text=True),
    ):
        assert orders.obey(line()) == Answer(orders.drive.why_not(), refused=True)
        assert source.asked == []


def test_a_replay_records_nothing(tmp_path):
    orders, source, _ = made(tmp_path, is_replay=True)
    assert orders.obey({"do": "record", "name": "run"}).refused
    assert source.asked == []
    assert orders.document()["can_record"] is False


@pytest.mark.parametrize("kind", ["is_replay", "is_text"])
def test_a_stop_where_nobody_can_be_told_is_over(tmp_path, kind):
    """The board that prints text may well drive, by a column called so: it cannot be asked."""
    orders, source, _ = made(tmp_path, **{kind: True})
    said = orders.obey({"do": "stop"})
    assert said.is_stop_over
    assert said.refused == (kind == "is_text")
    assert source.asked == []
    assert orders.drive.condition == "none"


def test_all_slots_taken(desk):
    orders, _, _ = desk
    for k in range(SLOTS):
        assert not orders.obey(line(20.0 + k, 0.1)).refused
    assert orders.obey(line(60.0, 0.1)) == Answer(
        f"all {SLOTS} lines are set; clear one first", refused=True
    )


def test_only_what_the_port_says_is_shown(desk):
    orders, source, state = desk
    orders.obey(line(31.7, 1.0))
    orders.obey(line(87.1, 2.0))
    assert orders.document()["sum_v"] == 3.0  # may be set at any moment
    told(orders, source, {0: DriveLine(31.7, 1.0)})  # the board has refused the other one
    assert list(orders.drive.lines) == [0]
    assert state.stream.lines.frequencies_hz == (31.7,)


def test_where_a_line_in_place_of_another_is_not_answered_the_larger_is_shown(desk):
    orders, source, _ = desk
    told(orders, source, {0: DriveLine(31.7, 4.0)})
    orders.obey(line(31.7, 1.0, slot=0))
    assert orders.document()["sum_v"] == 4.0
    orders.obey({"do": "clear line", "slot": 0})
    assert orders.document()["sum_v"] == 4.0
    assert not orders.obey(line(87.1, 4.5)).refused  # it will wait for the other to be gone
    told(orders, source, {0: DriveLine(87.1, 4.5)})
    assert orders.document()["sum_v"] == 4.5


def test_an_order_on_its_way_is_not_forgotten_over_news_from_before(desk):
    orders, _, _ = desk
    orders.obey(line(31.7, 1.0))
    orders.drive.hear(LiveLines({}, {}, is_at_rest=True, orders=0))
    assert orders.document()["sum_v"] == 1.0
    assert orders.drive.condition == "on"
    assert orders.obey(line(87.1, 1.0)).text.startswith("line 2 ")


@pytest.mark.parametrize("large", [10**400, -(10**400), "9" * 400, "1e400"])
def test_a_number_too_large_for_a_float_is_refused(desk, large):
    orders, source, _ = desk
    for name in ("frequency", "amplitude", "phase"):
        answer = orders.obey(line() | {name: large})
        assert answer.refused
        assert len(answer.text) < 100
    assert source.asked == []


@pytest.mark.parametrize(
    "odd", ["1_0", "\u0663", "\uff11", "1_0 Hz", "0x10", "1 2", True, "infinity"]
)
def test_what_only_a_programming_language_takes_for_a_number_is_refused(desk, odd):
    orders, source, _ = desk
    for name in ("frequency", "amplitude", "phase"):
        assert orders.obey(line() | {name: odd}).refused
    assert source.asked == []


@pytest.mark.parametrize(
    ("said", "phase_deg"), [("90", 90), (" -45.5 ", -45.5), ("0.5 rad", 28.64788975654116),
                            ("90 deg", 90), (".5e1", 5), ("", 0), (30, 30)],
)  # fmt: skip
def test_a_phase_is_in_degrees_unless_it_has_a_unit(desk, said, phase_deg):
    orders, source, _ = desk
    assert not orders.obey(line(phase=said)).refused
    assert np.degrees(source.asked[0][4]) == pytest.approx(phase_deg)

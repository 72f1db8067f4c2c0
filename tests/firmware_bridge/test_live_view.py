"""What is shown of a board that begins again under the id and the indices it had before."""

import pytest
from wire_board import RATE_HZ, SLOTS, WireBoard

from firmware_bridge.envelope import Unwrapper
from firmware_bridge.live_events import LiveBlock, LiveGap
from firmware_bridge.live_view import LiveView

SECOND_NS = 1_000_000_000


class Wire:
    """A link that hands every message to a view, in real time."""

    def __init__(self):
        self.events, self.now_ns = [], SECOND_NS
        self.view = LiveView(self.events.append)
        self._unwrapper = Unwrapper()

    def send(self, data):
        for message in self._unwrapper.feed(data):
            self.now_ns += SECOND_NS * SLOTS // int(RATE_HZ)
            self.view.take(message, self.now_ns, self.now_ns)

    def plug(self, frames, start=0):
        """Return the blocks of a board that begins to send."""
        seen = len(self.events)
        board = WireBoard(self, stream=5, start=start)
        board.announce()
        board.send(frames)
        return [event for event in self.events[seen:] if isinstance(event, LiveBlock)]

    def gaps(self):
        return [event for event in self.events if isinstance(event, LiveGap)]


@pytest.mark.parametrize("frames", [5, 200])
def test_the_same_frames_again_after_a_loss_of_the_port_are_shown(frames):
    wire = Wire()
    wire.plug(frames)
    wire.view.away()
    wire.now_ns += SECOND_NS
    blocks = wire.plug(30)
    assert len(blocks) == 30
    (gap,) = wire.gaps()
    assert not gap.exact
    assert gap.start_index == frames * SLOTS
    assert gap.length == pytest.approx(RATE_HZ, abs=2 * SLOTS)
    assert blocks[0].start_index == gap.start_index + gap.length
    assert wire.view.is_announced


def test_a_board_that_went_on_while_the_port_was_away_leaves_an_exact_gap():
    wire = Wire()
    wire.plug(10)
    wire.view.away()
    blocks = wire.plug(100, start=14 * SLOTS)
    assert wire.gaps() == [LiveGap(10 * SLOTS, 4 * SLOTS)]
    assert blocks[0].start_index == 14 * SLOTS


def test_frames_received_twice_without_a_loss_of_the_port_are_not():
    wire = Wire()
    wire.plug(20)
    assert wire.plug(20) == []
    assert wire.gaps() == []

"""Bytes in, events out: samples, gaps, announcements, notes, and what was discarded.

No input or output happens here, and no content raises.
"""

from dataclasses import replace

from firmware_bridge.announcement import Announcement, parse_announcement
from firmware_bridge.envelope import Discarded, Unwrapper
from firmware_bridge.gap import Gap
from firmware_bridge.message import Command, LockIn, Note, Reply, parse_message
from firmware_bridge.message_head import WIRE_VERSION, MessageError, MessageType
from firmware_bridge.order import StreamOrder
from firmware_bridge.samples_frame import Samples, parse_samples, renamed
from firmware_bridge.stream_names import StreamNames

__all__ = [
    "Announcement",
    "Command",
    "Decoder",
    "Discarded",
    "Event",
    "Gap",
    "LockIn",
    "Note",
    "Reply",
    "Samples",
]

_STREAMS_KEPT = 4
_RATES_KEPT = 64
_AHEAD = 64  # frames between the first two that come through after a new beginning
_BESIDE = (MessageType.NOTE, MessageType.COMMAND, MessageType.REPLY, MessageType.LOCK_IN)


Event = Samples | Gap | Discarded | Announcement | Note | Command | Reply | LockIn


class Decoder:
    """Incremental decoder of the wire; events do not depend on how the bytes are cut.

    Frames of a stream come out in the order of their indices. A frame that is ahead of its turn is
    held until the missing ones have come, or until ``window`` frames, or 2 s of the board's
    time, are held; only then is the gap reported. A frame that comes later still is kept: its
    `Samples` comes out late, with an index inside the gap reported before, which it closes (wholly
    or in part). Frames received twice are dropped and reported as `Discarded`.

    A new stream id is a restart of the board: what is held comes out, then a `Gap` of length 0 that
    is not exact, at the index where the old stream ended; its length is the host's to find.

    Parameters
    ----------
    window : int
        Frames held while one is missing; 0 reports each gap at once.
    """

    def __init__(self, window: int = 64) -> None:
        self._unwrapper = Unwrapper()
        self._window = window
        self._orders: dict[int, StreamOrder[Samples]] = {}
        self._current: int | None = None
        self._rates: dict[int, float] = {}
        self._names = StreamNames()
        self._stray: tuple[Samples, bytes] | None = None

    def feed(self, data: bytes) -> list[Event]:
        """Return the events that ``data`` completes.

        Parameters
        ----------
        data : bytes
            Whatever has arrived, cut anywhere.

        Returns
        -------
        list of Samples, Gap, Discarded, Announcement, Note, Command, Reply or LockIn
            In order.
        """
        return self._opened(self._unwrapper.feed(data))

    def close(self) -> list[Event]:
        """Return what was still held, and count the bytes of an unfinished frame as discarded.

        Returns
        -------
        list of events
            As from `feed`.
        """
        return self._opened(self._unwrapper.close()) + self.flush()

    def admit(self, frame: Samples, message: bytes) -> list[tuple[Samples, bytes]]:
        """Return the frames to go on with, under another stream id where their board began again.

        Parameters
        ----------
        frame : Samples
            The message, parsed.
        message : bytes
            Content and CRC.

        Returns
        -------
        list of (Samples, bytes)
            In the order of arrival; empty where it takes the next frame to tell.
        """
        before = self.strays()
        frame, message = _under(self.name_of(frame.stream), frame, message)
        order = self._orders.get(frame.stream)
        if order is None or not order.is_back(frame.index, len(frame.data), message):
            return [*before, (frame, message)]
        if not before or not _follows(frame, before[0][0]):
            self._stray = (frame, message)
            return before
        name = self.rename(frame.stream)
        return [_under(name, *each) for each in (*before, (frame, message))]

    def strays(self) -> list[tuple[Samples, bytes]]:
        """Return what `admit` still keeps for the next frame, which will not come.

        Returns
        -------
        list of (Samples, bytes)
            At most one.
        """
        stray, self._stray = self._stray, None
        return [] if stray is None else [stray]

    def rename(self, stream: int) -> int:
        """Have a stream that begins again go by a new id; return it.

        Parameters
        ----------
        stream : int
            The id by which it went.

        Returns
        -------
        int
            One that no stream has.
        """
        sent = self.sent_as(stream)
        name = self._names.renew(stream, taken=self._orders.keys() | self._rates.keys())
        self._rate(name, self._rates.get(sent, 0.0))
        return name

    def name_of(self, stream: int) -> int:
        """Return the id by which a stream goes: as it is sent, unless it began again."""
        return self._names.of(stream)

    def sent_as(self, stream: int) -> int:
        """Return the id under which the board sends a stream."""
        return self._names.sent_as(stream)

    def _rate(self, stream: int, rate_hz: float) -> None:
        self._rates[stream] = rate_hz
        while len(self._rates) > _RATES_KEPT:
            del self._rates[next(iter(self._rates))]

    def flush(self) -> list[Event]:
        """Return what was still held, with the gaps before it: nothing missing will come any more.

        Returns
        -------
        list of Samples or Gap
            In order.
        """
        events = [event for each in self.strays() for event in self.place(*each)]
        return events + [event for order in self._orders.values() for event in order.flush()]

    def _opened(self, pieces: list[bytes | Discarded]) -> list[Event]:
        events: list[Event] = []
        for piece in pieces:
            if isinstance(piece, Discarded):
                events.append(piece)
            else:
                events += self.accept(piece)
        return events

    def accept(self, message: bytes) -> list[Event]:
        """Return the events of one message that is already unwrapped and checked.

        Parameters
        ----------
        message : bytes
            Content and CRC, as `Unwrapper.feed` returns it.

        Returns
        -------
        list of Samples, Gap, Discarded, Announcement, Note, Command, Reply or LockIn
            In order.
        """
        kind, version = message[0], message[1]
        if version != WIRE_VERSION:
            return [
                Discarded.message(
                    message, f"wire version {version}; this program knows {WIRE_VERSION}"
                )
            ]
        try:
            if kind == MessageType.SAMPLES:
                frames = self.admit(parse_samples(message), message)
                return [event for each in frames for event in self.place(*each)]
            if kind == MessageType.ANNOUNCEMENT:
                announcement = parse_announcement(message)
                self._rate(announcement.stream, announcement.rate_hz)
                return [announcement]
            if kind in _BESIDE:
                return [parse_message(message)]
        except MessageError as error:
            return [Discarded.message(message, str(error))]
        return [Discarded.message(message, f"unknown message type {kind:#04x}")]

    def place(self, frame: Samples, message: bytes) -> list[Event]:
        """Return what comes out when one parsed frame is put into its place.

        Parameters
        ----------
        frame : Samples
            The message, parsed.
        message : bytes
            Content and CRC.

        Returns
        -------
        list of Samples, Gap or Discarded
            In order.
        """
        events: list[Event] = []
        order = self._orders.get(frame.stream)
        if order is None:
            events += self._restart(frame.stream)
            order = self._orders[frame.stream]
        events += order.put(frame.index, len(frame.data), frame, message)
        return events

    def _restart(self, stream: int) -> list[Event]:
        events: list[Event] = []
        if self._current is not None:
            old = self._orders[self._current]
            events += old.flush()
            events.append(Gap(old.expected, 0, exact=False))
        rate_hz = self._rates.get(stream)
        span = round(2 * rate_hz) if rate_hz else None
        self._orders[stream] = StreamOrder(self._window, span)
        self._current = stream
        if len(self._orders) > _STREAMS_KEPT:
            del self._orders[next(iter(self._orders))]
        return events


def _under(name: int, frame: Samples, message: bytes) -> tuple[Samples, bytes]:
    if name == frame.stream:
        return frame, message
    return replace(frame, stream=name), renamed(message, name)


def _follows(frame: Samples, before: Samples) -> bool:
    """Return whether two frames that lie behind are the beginning of one new counting."""
    ahead = frame.index - before.index
    return frame.stream == before.stream and 0 < ahead <= _AHEAD * max(1, len(before.data))

"""Messages to what a viewer sees: channels, values, gaps, on one count of samples."""

from collections.abc import Callable

from firmware_bridge.announcement import Announcement, parse_announcement
from firmware_bridge.decoder import Decoder, Event
from firmware_bridge.gap import Gap
from firmware_bridge.host_clock import missing_before
from firmware_bridge.live_events import LiveEvent, LiveGap, block_of, channels_of
from firmware_bridge.message_head import MessageError, MessageType
from firmware_bridge.samples_frame import Samples, parse_samples

__all__ = ["LiveView"]

_STREAMS_KEPT = 4  # a board has one at a time


class LiveView:
    """Decode what comes for the eye, beside what a recording does with the same messages.

    Parameters
    ----------
    emit : callable
        Takes each `LiveEvent`.
    """

    def __init__(self, emit: Callable[[LiveEvent], None]) -> None:
        self._emit = emit
        self._decoder = Decoder()
        self._announced: dict[int, Announcement] = {}
        self._messages: dict[int, bytes] = {}
        self._shown: Announcement | None = None
        self._origin: dict[int, int] = {}  # stream: view index of its index 0
        self._reached = 0
        self._last_ns = 0
        self._was_away = False
        self.announcement: Announcement | None = None
        """What the board said last, None from the port's loss until it speaks again."""
        self.stream: int | None = None
        """Of the last frame."""

    @property
    def is_announced(self) -> bool:
        """Whether what comes now can be shown."""
        return self.announcement is not None and (
            self.stream is None or self._decoder.sent_as(self.stream) in self._announced
        )

    @property
    def announcements(self) -> list[bytes]:
        """The sealed announcements that a recording which begins now needs."""
        return list(self._messages.values())

    def take(self, message: bytes, monotonic_ns: int, unix_ns: int) -> None:
        """Take one sealed message.

        Parameters
        ----------
        message : bytes
            Content and CRC.
        monotonic_ns, unix_ns : int
            The host's clocks at its arrival.
        """
        if message[0] == MessageType.ANNOUNCEMENT:
            self._announce(message)
        if message[0] not in (MessageType.ANNOUNCEMENT, MessageType.SAMPLES):
            return
        if self._was_away and message[0] == MessageType.SAMPLES:
            self._was_away = False
            self._maybe_anew(message)
        for event in self._decoder.accept(message):
            self._show(event, monotonic_ns, unix_ns)

    def _maybe_anew(self, message: bytes) -> None:
        """Forget what came before a loss of the port where the board counts from further back.

        It may send the very same frames again under the same id, which would be dropped as received
        twice: a converter that shows nothing but zeros does.
        """
        try:
            frame = parse_samples(message)
        except MessageError:
            return
        origin = self._origin.get(self._decoder.name_of(frame.stream))
        if origin is None or frame.index + origin >= self._reached:
            return
        self._decoder, self.stream = Decoder(), None
        self._origin.clear()
        for said in self._messages.values():
            self._decoder.accept(said)

    def away(self) -> None:
        """Take note that the port was away: nothing from before will come any more."""
        self.announcement, self._was_away = None, True
        for event in self._decoder.flush():
            self._show(event, self._last_ns, 0)

    def _announce(self, message: bytes) -> None:
        try:
            announcement = parse_announcement(message)
        except MessageError:
            return
        self.announcement = announcement
        self._announced[announcement.stream] = announcement
        self._messages[announcement.stream] = message
        for kept in (self._announced, self._messages, self._origin):
            while len(kept) > _STREAMS_KEPT:
                del kept[next(iter(kept))]

    def _show(self, event: Event, monotonic_ns: int, unix_ns: int) -> None:
        if isinstance(event, Gap):
            if event.exact and self.stream in self._origin:
                start = event.index + self._origin[self.stream]
                self._emit(LiveGap(start, event.length))
                self._reached = max(self._reached, start + event.length)
        elif isinstance(event, Samples):
            self.stream = event.stream
            announcement = self._announced.get(self._decoder.sent_as(event.stream))
            if announcement is not None:
                self._samples(event, announcement, monotonic_ns, unix_ns)

    def _samples(
        self, frame: Samples, announcement: Announcement, monotonic_ns: int, unix_ns: int
    ) -> None:
        if frame.stream not in self._origin:
            self._begin(frame, announcement, monotonic_ns)
        if self._shown != announcement:
            self._shown = announcement
            self._emit(channels_of(announcement))
        start = frame.index + self._origin[frame.stream]
        if len(frame.data):
            self._emit(block_of(frame, announcement, start, unix_ns * 1e-9))
        self._reached = max(self._reached, start + len(frame.data))
        self._last_ns = monotonic_ns

    def _begin(self, frame: Samples, announcement: Announcement, monotonic_ns: int) -> None:
        """Place a new stream behind the one before, as the host's clock tells."""
        missing = 0
        if self._last_ns:
            rate_hz = announcement.rate_hz * announcement.speed
            since_s = (monotonic_ns - self._last_ns) * 1e-9
            missing = missing_before(len(frame.data), since_s, rate_hz)
            self._emit(LiveGap(self._reached, missing, exact=False))
        self._origin[frame.stream] = self._reached + missing - frame.index

"""The streams that a board has announced, and the messages that wait for an announcement."""

from dataclasses import replace

from firmware_bridge.announcement import Announcement
from firmware_bridge.decoder import Decoder
from firmware_bridge.running_recording import RunningRecording

__all__ = ["AnnouncedStreams"]

_PENDING_BYTES = 4 << 20


class AnnouncedStreams:
    """Keep announcements, also of streams that go by another id since they began again.

    Parameters
    ----------
    decoder : Decoder
        Knows the ids by which streams go.
    recording : RunningRecording
        Where it is said that a stream has begun again.
    """

    def __init__(self, decoder: Decoder, recording: RunningRecording) -> None:
        self._decoder, self._recording = decoder, recording
        self._announced: dict[int, Announcement] = {}
        self._pending: list[bytes] = []
        self.latest: Announcement | None = None
        """What the board said last about itself, None from the port's loss until it speaks again."""

    def __contains__(self, stream: int) -> bool:
        return stream in self._announced

    @property
    def are_any(self) -> bool:
        """Whether any board has announced itself."""
        return bool(self._announced)

    @property
    def is_awaited(self) -> bool:
        """Whether messages wait for an announcement."""
        return bool(self._pending)

    def add(self, announcement: Announcement) -> list[bytes]:
        """Keep an announcement.

        Parameters
        ----------
        announcement : Announcement
            What the board says.

        Returns
        -------
        list of bytes
            The messages that have waited, to be taken once more.
        """
        self._announced[announcement.stream] = self.latest = announcement
        waiting, self._pending = self._pending, []
        return waiting

    def wait(self, message: bytes) -> None:
        """Keep a message until its stream is announced; of too many, discard the oldest.

        Parameters
        ----------
        message : bytes
            Content and CRC.
        """
        self._pending.append(message)
        while sum(map(len, self._pending)) > _PENDING_BYTES:
            early = self._pending.pop(0)
            self._recording.discard_message(early, "frames without an announcement")

    def of(self, stream: int) -> Announcement:
        """Return the announcement of a stream that has one, also where it began again.

        Parameters
        ----------
        stream : int
            The id by which it goes.

        Returns
        -------
        Announcement
            Under that id.
        """
        if stream not in self._announced:
            sent = self._decoder.sent_as(stream)
            self._announced[stream] = replace(self._announced[sent], stream=stream)
            self._recording.remark(
                f"the board began again under its stream id {sent}; it goes by {stream} here"
            )
        return self._announced[stream]

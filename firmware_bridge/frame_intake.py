"""What a recording does with samples frames: each in its place in the file, then counted."""

from firmware_bridge.announced_frame import fits, shortened
from firmware_bridge.announced_streams import AnnouncedStreams
from firmware_bridge.counted_samples import CountedSamples
from firmware_bridge.decoder import Decoder, Event
from firmware_bridge.envelope import Discarded
from firmware_bridge.running_recording import RunningRecording
from firmware_bridge.samples_frame import Samples

__all__ = ["FrameIntake"]


class FrameIntake:
    """Write frames as they come and hand them to the decoder, which puts them in order.

    Parameters
    ----------
    decoder : Decoder
        Only counts: the file gets what came.
    streams : AnnouncedStreams
        What the board said of them.
    counted : CountedSamples
        Takes what the decoder gives out.
    recording : RunningRecording
        Where frames are written.
    """

    def __init__(
        self,
        decoder: Decoder,
        streams: AnnouncedStreams,
        counted: CountedSamples,
        recording: RunningRecording,
    ) -> None:
        self._decoder, self._streams = decoder, streams
        self._counted, self._recording = counted, recording
        self._was_away = False

    def take(self, frame: Samples, message: bytes) -> None:
        """Take a frame of an announced stream.

        Parameters
        ----------
        frame : Samples
            The message, parsed.
        message : bytes
            Content and CRC.
        """
        for each in self._decoder.admit(frame, message):
            self._admitted(*each)

    def away(self) -> None:
        """Take note that the port was away: nothing from before will come any more."""
        self._was_away = True

    def finish(self) -> None:
        """Keep what was held back until the next frame told, and count what the decoder holds."""
        for each in self._decoder.strays():
            self._admitted(*each)
        self._counted.finish(self._decoder.close())

    def _admitted(self, frame: Samples, message: bytes) -> None:
        announcement = self._streams.of(frame.stream)
        grid = self._recording.grid
        if grid.is_closed(frame.stream) or not fits(message, announcement):
            reason = "a frame unlike the announcement of this recording"
            self._recording.discard_message(message, reason)
            return
        if frame.stream not in grid:
            length = len(frame.data)
            self._counted.begin_stream(announcement, frame.stream, frame.index, length)
        if not self._recording.is_complete:
            self._keep(frame, message)

    def _keep(self, frame: Samples, message: bytes) -> None:
        if not self._counted.make_room(frame.stream, frame.index, message):
            return
        events: list[Event] | None = None  # None: the decoder has not seen it yet
        start = self._recording.grid.place(frame.stream, frame.index)
        if start < 0:
            events = self._decoder.place(frame, message)
            if any(isinstance(event, Discarded) for event in events):
                self._counted.follow(events)
                return  # it is in the file before
        self._write(frame, message, start)
        if events is None:
            events = self._decoder.place(frame, message)
        if self._was_away:
            events += self._decoder.flush()
            self._was_away = False
        self._counted.follow(events)
        self._recording.stamp_first()

    def _write(self, frame: Samples, message: bytes, start: int) -> None:
        """Append a frame, or as much of it as is wanted from its place on."""
        wanted = self._recording.grid.wanted
        room = len(frame.data) if wanted is None else wanted - start
        if wanted is None or room > 0:
            if room < len(frame.data):
                message = shortened(message, room, frame)
            self._recording.files.append(message)
        self._recording.discards.kept()
        self._recording.clock.heard()

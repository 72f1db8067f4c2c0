"""What a recording does with lock-in results: they say how far a board is that sends no samples."""

from dataclasses import replace

from firmware_bridge.announced_streams import AnnouncedStreams
from firmware_bridge.counted_samples import CountedSamples
from firmware_bridge.decoder import Decoder
from firmware_bridge.message import LockIn
from firmware_bridge.running_recording import RunningRecording
from firmware_bridge.samples_frame import renamed

__all__ = ["LockInIntake"]


class LockInIntake:
    """Write results as they come.

    Parameters
    ----------
    decoder : Decoder
        Knows the ids by which streams go.
    streams : AnnouncedStreams
        What the board said of them.
    counted : CountedSamples
        Counts the samples that results stand for.
    recording : RunningRecording
        Where results are written.
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
        self.count = 0
        """Results received."""

    def take(self, result: LockIn, message: bytes) -> None:
        """Take a result of an announced stream.

        Parameters
        ----------
        result : LockIn
            The message, parsed.
        message : bytes
            Content and CRC.
        """
        result, message = self._renamed(result, message)
        announcement = self._streams.of(result.stream)
        grid = self._recording.grid
        if grid.is_closed(result.stream):
            return
        if result.stream not in grid:
            self._counted.begin_stream(announcement, result.stream, result.index, result.length)
        if self._recording.files.is_open and not self._recording.is_complete:
            self._keep(result, message)

    def _renamed(self, result: LockIn, message: bytes) -> tuple[LockIn, bytes]:
        """Return a result under the id by which its stream goes; results never come late."""
        name = self._decoder.name_of(result.stream)
        end = result.index + result.length
        if not self._counted.are_any and self._recording.clock.is_marked(name, end):
            name = self._decoder.rename(name)
        if name == result.stream:
            return result, message
        return replace(result, stream=name), renamed(message, name)

    def _keep(self, result: LockIn, message: bytes) -> None:
        if not self._counted.make_room(result.stream, result.index, message):
            return
        self._recording.files.append(message)
        self.count += 1
        self._recording.clock.heard()
        self._counted.count_result(result)

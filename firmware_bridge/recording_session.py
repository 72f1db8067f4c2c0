"""The two threads of a recording: one only reads and queues, the other places and writes."""

import contextlib
import threading
from collections.abc import Callable

from firmware_bridge.arrival_writer import ArrivalWriter
from firmware_bridge.board_answers import BoardAnswers
from firmware_bridge.board_connection import BoardConnection
from firmware_bridge.board_talk import BoardTalk
from firmware_bridge.byte_queue import ByteQueue
from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.hearing import FrameHearing, Hearing, TextHearing
from firmware_bridge.held_port import HeldPort
from firmware_bridge.lock_in_start import LockInStart
from firmware_bridge.port import ByteSource
from firmware_bridge.port_reader import PortReader
from firmware_bridge.port_watch import PortWatch, Watcher
from firmware_bridge.recording_progress import Progress
from firmware_bridge.silence import Silence
from firmware_bridge.sink import Sink
from firmware_bridge.text_frames import TextFramer

__all__ = ["RecordingSession"]

_PROGRESS_S = 0.1


class RecordingSession:
    """The two threads of one recording and what they share.

    Parameters
    ----------
    source : ByteSource
        The open port.
    baud : int
        Symbols per second, for opening it again.
    intake : Sink
        Where messages go.
    framer : TextFramer, optional
        Where the board prints text.
    reconnect : bool
        Wait for a port that is gone.
    stop : threading.Event
        Ends the recording when set.
    desk : DriveDesk, optional
        Who wants drive lines of the board.
    watcher : Watcher, optional
        Who is told of a port that is gone, of silence and of refusals; nothing of these ends the
        session then.
    lock_in : LockInStart, optional
        What the board is asked for instead of samples.
    """

    def __init__(
        self,
        source: ByteSource,
        baud: int,
        intake: Sink,
        framer: TextFramer | None,
        reconnect: bool,
        stop: threading.Event,
        desk: DriveDesk | None = None,
        watcher: Watcher | None = None,
        lock_in: LockInStart | None = None,
    ) -> None:
        self._intake, self._stop, self._queue = intake, stop, ByteQueue()
        watch = PortWatch(source.name, watcher)
        silence = Silence(source.name, baud, framer is not None)
        port = HeldPort(source, baud, watch)
        answers = BoardAnswers(watch, desk, lock_in)
        talk: BoardTalk | None = None
        hearing: Hearing
        if framer is None:
            talk = BoardTalk(port, intake, silence, watch, desk, lock_in)
            hearing = FrameHearing(intake, answers)
        else:
            hearing = TextHearing(intake, framer)
        self._reader = PortReader(port, talk, self._queue, stop, reconnect)
        self._connection = BoardConnection(
            intake, hearing, answers, silence, watch, reconnect, lock_in
        )
        self._writer = ArrivalWriter(
            self._queue, self._reader, intake, hearing, self._connection, stop
        )

    def run(self, progress: Callable[[Progress], None] | None) -> None:
        """Record until the end, and raise what went wrong.

        Parameters
        ----------
        progress : callable, optional
            Called a few times a second.

        Raises
        ------
        BridgeError
            If the file cannot be made.
        DeviceFailedError
            If the port or the file failed midway.
        """
        threads = (
            threading.Thread(target=self._reader.run, name="port reader", daemon=True),
            threading.Thread(target=self._writer.run, name="recording writer", daemon=True),
        )
        for thread in threads:
            thread.start()
        with contextlib.suppress(KeyboardInterrupt):  # Ctrl-C is how a recording is ended
            while not self._writer.ended.wait(_PROGRESS_S):
                self._show(progress)
        self._stop.set()
        self._queue.close()
        for thread in threads:
            while thread.is_alive():
                with contextlib.suppress(KeyboardInterrupt):  # what came is still being written
                    thread.join()
        self._show(progress)
        if self._writer.failure is not None:
            raise self._writer.failure

    def _show(self, progress: Callable[[Progress], None] | None) -> None:
        if progress is None:
            return
        intake = self._intake
        progress(
            Progress(
                intake.reached,
                intake.wanted,
                intake.rate_hz,
                intake.gaps,
                intake.flagged,
                intake.bytes_discarded,
                self._queue.fill,
                self._connection.is_lost,
            )
        )

"""The thread that writes a recording: it takes what the reader has queued, until the end."""

import threading
import time

from firmware_bridge.board_connection import BoardConnection
from firmware_bridge.byte_queue import ByteQueue
from firmware_bridge.hearing import Hearing
from firmware_bridge.port_reader import PortReader
from firmware_bridge.sink import Sink

__all__ = ["ArrivalWriter"]

_WAIT_S = 0.05


class ArrivalWriter:
    """Take arrivals until nothing more comes or is wanted; then close the recording.

    Parameters
    ----------
    queue : ByteQueue
        Where arrivals come from.
    reader : PortReader
        Who puts them there.
    intake : Sink
        What is written to.
    hearing : Hearing
        Finds messages in what arrives.
    connection : BoardConnection
        Takes each arrival.
    stop : threading.Event
        Set at the end, whatever it was.
    """

    def __init__(
        self,
        queue: ByteQueue,
        reader: PortReader,
        intake: Sink,
        hearing: Hearing,
        connection: BoardConnection,
        stop: threading.Event,
    ) -> None:
        self._queue, self._reader, self._intake = queue, reader, intake
        self._hearing, self._connection, self._stop = hearing, connection, stop
        self._failure: BaseException | None = None
        self.ended = threading.Event()
        """Set once the recording is closed."""

    @property
    def failure(self) -> BaseException | None:
        """What went wrong, in the reading first."""
        return self._reader.failure or self._failure

    def run(self) -> None:
        """Write, and close the recording."""
        try:
            self._write()
        except BaseException as error:  # noqa: BLE001  # a thread's failure is the recording's
            self._failure = error
        finally:
            self._stop.set()
            self._queue.close()
            self._close()
            self.ended.set()

    def _write(self) -> None:
        while not self._intake.is_complete:
            has_ended = self._reader.ended.is_set()
            arrivals = self._queue.take(_WAIT_S)
            if has_ended and not arrivals:
                self._hearing.finish()
                return
            for arrival in arrivals:
                self._connection.take(arrival)
            now_ns, unix_ns = time.monotonic_ns(), time.time_ns()
            self._hearing.tick(now_ns, unix_ns)
            self._intake.tick(now_ns, unix_ns)
            self._connection.check_silence()

    def _close(self) -> None:
        try:
            self._intake.close(is_as_asked=self.failure is None)
        except BaseException as error:  # noqa: BLE001  # else the end would be waited for forever
            self._failure = self._failure or error

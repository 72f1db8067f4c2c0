"""The thread that reads a port: it queues what arrives, with the time, and says what is due."""

import threading
import time

from firmware_bridge.board_talk import BoardTalk
from firmware_bridge.byte_queue import Arrival, ByteQueue
from firmware_bridge.held_port import HeldPort
from firmware_bridge.port import PortLostError

__all__ = ["PortReader"]


class PortReader:
    """Read until told to stop, or until the port is gone for good.

    Parameters
    ----------
    port : HeldPort
        What is read.
    talk : BoardTalk, optional
        What is said to the board; a board that prints text does not listen.
    queue : ByteQueue
        Where arrivals go.
    stop : threading.Event
        Ends the reading when set; set by a failure.
    is_patient : bool
        Wait for a port that is gone.
    """

    def __init__(
        self,
        port: HeldPort,
        talk: BoardTalk | None,
        queue: ByteQueue,
        stop: threading.Event,
        is_patient: bool,
    ) -> None:
        self._port, self._talk, self._queue = port, talk, queue
        self._stop, self._is_patient = stop, is_patient
        self.ended = threading.Event()
        """Set once nothing more will be put into the queue."""
        self.failure: BaseException | None = None
        """What went wrong."""

    def run(self) -> None:
        """Read, and leave the board at rest."""
        try:
            while not self._stop.is_set() and self._read():
                pass
        except Exception as error:  # noqa: BLE001  # a thread's failure is the recording's
            self.failure = error
            self._stop.set()
        finally:
            self.ended.set()
            self._leave()

    def _leave(self) -> None:
        try:
            if self._talk is not None:
                self._talk.leave()
        except Exception as error:  # noqa: BLE001  # a thread's failure is the recording's
            self.failure = self.failure or error
        finally:
            self._port.close()

    def _read(self) -> bool:
        """Read once; return whether to go on."""
        if self._talk is not None:
            self._talk.speak()
        try:
            data = self._port.read()
        except PortLostError as error:
            return self._lost(str(error))
        if data:
            self._queue.put(_arrival(data))
        return True

    def _lost(self, reason: str) -> bool:
        """Wait for a port that is gone; return whether it is back."""
        self._queue.put(_arrival(lost=reason))
        if not self._is_patient or not self._port.maybe_reopen(self._stop):
            return False
        self._queue.put(_arrival(is_back=True))
        if self._talk is not None:
            self._talk.opened()
        return True


def _arrival(data: bytes = b"", *, lost: str = "", is_back: bool = False) -> Arrival:
    return Arrival(data, time.monotonic_ns(), time.time_ns(), lost, is_back)

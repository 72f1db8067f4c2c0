"""The queue between the thread that reads a port and the one that writes the recording."""

import threading
from collections import deque
from dataclasses import dataclass

__all__ = ["Arrival", "ByteQueue"]

LIMIT_BYTES = 32 << 20
"""What the queue holds: over 10 s of a 12 Mbit/s link, 27 s."""


@dataclass(frozen=True, slots=True)
class Arrival:
    """Bytes that arrived, when, and what happened to the port.

    Parameters
    ----------
    data : bytes
        Empty where something else happened.
    monotonic_ns, unix_ns : int
        The host's clocks just after the read.
    lost : str
        Why the port is gone, or empty.
    is_back : bool
        True where the port was opened again.
    """

    data: bytes
    monotonic_ns: int
    unix_ns: int
    lost: str = ""
    is_back: bool = False


class ByteQueue:
    """A queue bounded by bytes.

    When it is full the reader waits: a sender with flow control waits with it, and what a port
    without one then loses shows as an exact gap.

    Parameters
    ----------
    limit_bytes : int
        Bytes held at most.
    """

    def __init__(self, limit_bytes: int = LIMIT_BYTES) -> None:
        self._limit = limit_bytes
        self._items: deque[Arrival] = deque()
        self._changed = threading.Condition()
        self._closed = False
        self.held_bytes = 0
        """Bytes waiting now."""
        self.full_count = 0
        """How often the reader found it full."""

    @property
    def fill(self) -> float:
        """How full it is, 0 to 1."""
        return self.held_bytes / self._limit

    def put(self, arrival: Arrival) -> None:
        """Append, waiting while the queue is full and not closed.

        Parameters
        ----------
        arrival : Arrival
            What to append.
        """
        with self._changed:
            if self.held_bytes >= self._limit:
                self.full_count += 1
            while self.held_bytes >= self._limit and not self._closed:
                self._changed.wait()
            self._items.append(arrival)
            self.held_bytes += len(arrival.data)
            self._changed.notify_all()

    def take(self, timeout_s: float) -> list[Arrival]:
        """Return all that is waiting, or an empty list after ``timeout_s`` without any.

        Parameters
        ----------
        timeout_s : float
            How long to wait for the first one [s].

        Returns
        -------
        list of Arrival
            In order.
        """
        with self._changed:
            if not self._items:
                self._changed.wait(timeout_s)
            taken = list(self._items)
            self._items.clear()
            self.held_bytes = 0
            self._changed.notify_all()
        return taken

    def close(self) -> None:
        """Let nobody wait any more."""
        with self._changed:
            self._closed = True
            self._changed.notify_all()

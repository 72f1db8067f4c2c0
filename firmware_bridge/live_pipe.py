"""The bounded way from a port's process to its viewer: who does not look loses blocks, nothing else."""

import threading
from collections import deque
from multiprocessing.connection import Connection

from firmware_bridge.live_events import LiveBlock, LiveEvent, LiveRecording, LiveState

__all__ = ["LivePipe"]

LIMIT_BYTES = 8 << 20
"""Values that wait for a viewer that does not look; the oldest are left out beyond it."""

_BLOCK_BYTES = 200  # what a block costs beside its values
_AT_ONCE = 256


class LivePipe:
    """Send events from a thread of its own, so that nobody who tells something ever waits.

    Parameters
    ----------
    connection : multiprocessing.connection.Connection
        To the viewer.
    limit_bytes : int
        What may wait.
    """

    def __init__(self, connection: Connection, limit_bytes: int = LIMIT_BYTES) -> None:
        self._connection, self._limit = connection, limit_bytes
        self._blocks: deque[tuple[int, LiveBlock]] = deque()
        self._others: deque[tuple[int, LiveEvent]] = deque()
        self._number = self._held = self._dropped = 0
        self._changed = threading.Condition()
        self._is_ended = False
        self._thread = threading.Thread(target=self._send, name="live pipe", daemon=True)
        self._thread.start()

    def put(self, event: LiveEvent) -> None:
        """Take an event; by any thread.

        Parameters
        ----------
        event : LiveEvent
            To be sent in its turn.
        """
        with self._changed:
            self._number += 1
            if isinstance(event, LiveBlock):
                self._blocks.append((self._number, event))
                self._held += event.values.nbytes + _BLOCK_BYTES
                while self._held > self._limit and len(self._blocks) > 1:
                    _, oldest = self._blocks.popleft()
                    self._held -= oldest.values.nbytes + _BLOCK_BYTES
                    self._dropped += len(oldest.values)
            else:
                if isinstance(event, LiveRecording):  # only the last one of a row counts
                    while self._others and self._is_older(self._others[-1][1], event):
                        self._others.pop()
                self._others.append((self._number, event))
                while len(self._others) > self._limit // _BLOCK_BYTES:
                    self._others.popleft()
            self._changed.notify()

    @staticmethod
    def _is_older(before: LiveEvent, event: LiveRecording) -> bool:
        return isinstance(before, LiveRecording) and before.file == event.file

    def close(self, timeout_s: float) -> None:
        """Send what waits, but wait for the viewer no longer than ``timeout_s``.

        Parameters
        ----------
        timeout_s : float
            How long [s].
        """
        with self._changed:
            self._is_ended = True
            self._changed.notify()
        self._thread.join(timeout_s)

    def _send(self) -> None:
        while True:
            with self._changed:
                while not (self._blocks or self._others or self._is_ended):
                    self._changed.wait()
                if not (self._blocks or self._others):
                    return
                events = self._taken()
            try:
                self._connection.send(events)
            except (OSError, ValueError):  # nobody is there any more; go on without
                return

    def _taken(self) -> list[LiveEvent]:
        """Return the next events in their order, a bounded number."""
        events: list[LiveEvent] = []
        if self._dropped:
            events.append(LiveState("behind", f"{self._dropped} samples were left out of the view"))
            self._dropped = 0
        while len(events) < _AT_ONCE and (self._blocks or self._others):
            if not self._others or (self._blocks and self._blocks[0][0] < self._others[0][0]):
                _, block = self._blocks.popleft()
                self._held -= block.values.nbytes + _BLOCK_BYTES
                events.append(block)
            else:
                events.append(self._others.popleft()[1])
        return events

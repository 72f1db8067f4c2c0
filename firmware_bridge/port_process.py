"""The process that holds a port, as seen by the one that started it."""

import signal
from multiprocessing import get_context
from typing import TYPE_CHECKING

from firmware_bridge.live_events import LiveEvent
from firmware_bridge.live_process import LiveOptions, Order, hold_port

if TYPE_CHECKING:
    from multiprocessing.connection import Connection
    from multiprocessing.context import SpawnProcess

__all__ = ["PortProcess"]

_CLOSE_S = 10.0
_JOIN_S = 0.05
_AT_ONCE = 64  # messages taken at once, so that it ends even if they come as fast as it takes them


class PortProcess:
    """Start it, give it orders, take its events, end it.

    Parameters
    ----------
    options : LiveOptions
        Which port, and how it is held.
    """

    def __init__(self, options: LiveOptions) -> None:
        self._options = options
        self._connection: Connection | None = None
        self._process: SpawnProcess | None = None

    @property
    def is_running(self) -> bool:
        """Whether it is there."""
        return self._process is not None and self._process.is_alive()

    def start(self) -> None:
        """Start it, unless it has been started."""
        if self._process is not None:
            return
        context = get_context("spawn")
        ours, theirs = context.Pipe()
        process = context.Process(
            target=hold_port, args=(theirs, self._options), name="midfringe port", daemon=True
        )
        # Ctrl-C at the terminal reaches every process of it; this one is closed by its parent.
        blocked = _block_interrupt()
        try:
            process.start()
        finally:
            _restore_interrupt(blocked)
        theirs.close()
        self._connection, self._process = ours, process

    def close(self) -> None:
        """Have it end; after 10 s end it."""
        process, connection = self._process, self._connection
        self._process = self._connection = None
        if process is None or connection is None:
            return
        _send(connection, Order("close"))
        for _ in range(round(_CLOSE_S / _JOIN_S)):
            _taken(connection)  # what still waits for us would keep the process from ending
            process.join(_JOIN_S)
            if process.exitcode is not None:
                break
        else:
            _end(process)
        connection.close()

    def send(self, order: Order) -> bool:
        """Give it an order.

        Parameters
        ----------
        order : Order
            What it shall do.

        Returns
        -------
        bool
            False if it has ended.
        """
        return self._connection is not None and _send(self._connection, order)

    def taken(self) -> tuple[list[LiveEvent], bool]:
        """Take what has come, without waiting.

        Returns
        -------
        list of LiveEvent
            In order; perhaps not yet all of it, if very much has happened.
        bool
            True once, where nothing will come any more though it was not closed.
        """
        if self._connection is None:
            return [], False
        events, is_ended = _taken(self._connection)
        if is_ended:
            self._connection.close()
            self._connection = None
        return events, is_ended


def _send(connection: "Connection", order: Order) -> bool:
    try:
        connection.send(order)
    except (OSError, ValueError):
        return False
    return True


def _taken(connection: "Connection") -> tuple[list[LiveEvent], bool]:
    """Return what has come, and whether nothing will come any more."""
    events: list[LiveEvent] = []
    try:
        for _ in range(_AT_ONCE):
            if not connection.poll(0):
                return events, False
            events += connection.recv()
    except (EOFError, OSError):
        return events, True
    return events, False


def _end(process: "SpawnProcess") -> None:
    process.terminate()
    process.join(_CLOSE_S)
    if process.exitcode is None:  # else the end of this program would wait for it
        process.kill()
        process.join(_CLOSE_S)


def _block_interrupt() -> set[int] | None:
    if not hasattr(signal, "pthread_sigmask"):
        return None
    return set(signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT}))


def _restore_interrupt(before: set[int] | None) -> None:
    if before is not None:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)

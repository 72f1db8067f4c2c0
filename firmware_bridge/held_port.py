"""A port that may go away, and is then opened again under its name."""

import threading

from firmware_bridge.port import ByteSource, PortError, open_port
from firmware_bridge.port_watch import PortWatch

__all__ = ["HeldPort"]

_REOPEN_S = 0.25


class HeldPort:
    """A `ByteSource` in front of the one that is open now.

    Parameters
    ----------
    source : ByteSource
        The open port.
    baud : int
        Symbols per second, for opening it again.
    watch : PortWatch
        Who is told why it cannot be opened yet.
    """

    def __init__(self, source: ByteSource, baud: int, watch: PortWatch) -> None:
        self.name = source.name
        self._source, self._baud, self._watch = source, baud, watch

    def read(self) -> bytes:
        """Return what has arrived; see `ByteSource`."""
        return self._source.read()

    def write(self, data: bytes) -> bool:
        """Send bytes; see `ByteSource`."""
        return self._source.write(data)

    def close(self) -> None:
        """Close it."""
        self._source.close()

    def maybe_reopen(self, stop: threading.Event) -> bool:
        """Open it again as soon as it is there.

        Parameters
        ----------
        stop : threading.Event
            Ends the waiting when set.

        Returns
        -------
        bool
            False where the waiting was ended.
        """
        self.close()
        while not stop.wait(_REOPEN_S):
            try:
                self._source = open_port(self.name, self._baud)
            except PortError as error:
                self._watch.still_gone(error)
            else:
                return True
        return False

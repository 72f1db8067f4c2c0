"""Who is told how a port stands and what a board refuses: a watcher, or else the log."""

import logging
from typing import Protocol

from firmware_bridge.drive_lines import DriveError

__all__ = ["PortWatch", "Watcher"]

_log = logging.getLogger(__name__)


class Watcher(Protocol):
    """Who is told how a port stands, instead of an end to the recording."""

    def state(self, state: str, reason: str) -> None:
        """Take note of "connected", "gone" or "silent".

        Parameters
        ----------
        state, reason : str
            Which, and why.
        """

    def reply(self, text: str, *, refused: bool) -> None:
        """Take note of what the board says to a command.

        Parameters
        ----------
        text : str
            One line.
        refused : bool
            Whether it does not obey.
        """


class PortWatch:
    """Tell the watcher; without one, log what can be waited for and raise what cannot.

    Parameters
    ----------
    name : str
        The port.
    watcher : Watcher, optional
        Who looks on.
    """

    def __init__(self, name: str, watcher: Watcher | None) -> None:
        self.name, self._watcher = name, watcher

    def gone(self, reason: str) -> None:
        """Tell that the port is gone and waited for.

        Parameters
        ----------
        reason : str
            Why.
        """
        if self._watcher is not None:
            self._watcher.state("gone", reason)
        else:
            _log.warning("%s is gone (%s); waiting for it", self.name, reason)

    def still_gone(self, error: Exception) -> None:
        """Log why the port cannot be opened again yet.

        Parameters
        ----------
        error : Exception
            What opening it raised.
        """
        _log.debug("%s", error)

    def back(self) -> None:
        """Tell that the port was opened again."""
        if self._watcher is not None:
            self._watcher.state("connected", f"{self.name} is back")
        else:
            _log.warning("%s is back", self.name)

    def maybe_silent(self, complaint: str) -> bool:
        """Tell that nothing valid comes; return whether anyone was there to be told.

        Parameters
        ----------
        complaint : str
            What is wrong.

        Returns
        -------
        bool
            False without a watcher: the recording has to end.
        """
        if self._watcher is not None:
            self._watcher.state("silent", complaint)
        return self._watcher is not None

    def obeyed(self, text: str) -> None:
        """Tell that the board has done as it was asked.

        Parameters
        ----------
        text : str
            One line.
        """
        if self._watcher is not None:
            self._watcher.reply(text, refused=False)

    def refused(self, reason: str) -> None:
        """Tell that the drive cannot be as it was asked.

        Parameters
        ----------
        reason : str
            One line.

        Raises
        ------
        DriveError
            Without a watcher.
        """
        if self._watcher is None:
            raise DriveError(f"{self.name}: {reason}")
        self._watcher.reply(reason, refused=True)

    def notice(self, text: str) -> None:
        """Tell what has happened to the drive.

        Parameters
        ----------
        text : str
            One line.
        """
        if self._watcher is None:
            _log.warning("%s", text)
        else:
            self._watcher.reply(text, refused=True)

    def alarm(self, text: str) -> None:
        """Tell that the drive may not be at rest; ``--quiet`` does not hide it.

        Parameters
        ----------
        text : str
            One line.
        """
        if self._watcher is None:
            _log.error("%s", text)
        else:
            self._watcher.reply(text, refused=True)

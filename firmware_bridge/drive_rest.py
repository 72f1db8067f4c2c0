"""The rest of a drive: wanted until the board has confirmed all of it."""

from firmware_bridge.drive_answer import UNKNOWN
from firmware_bridge.drive_lines import Request, rest_requests
from firmware_bridge.message import CommandCode

__all__ = ["REST", "DriveRest", "is_confirmed"]

REST = frozenset((CommandCode.CLEAR_LINE, CommandCode.RAMP))
"""What a rest is made of: all lines cleared, the offset at zero."""


def is_confirmed(status: int) -> bool:
    """Return whether a reply's status says that a part of the rest is there.

    Parameters
    ----------
    status : int
        Of the reply.

    Returns
    -------
    bool
        Also for a board that knows no such command: it has nothing that could be brought to rest.
    """
    return status in (0, UNKNOWN)


class DriveRest:
    """What of a rest is not confirmed yet, and when it was asked for last."""

    def __init__(self) -> None:
        self._open = REST
        self._serial = 0  # from which on answers count for it
        self._made_s: float | None = None

    @property
    def is_open(self) -> bool:
        """Whether anything of it waits for the board."""
        return bool(self._open)

    def want(self, serial: int) -> None:
        """Want it anew.

        Parameters
        ----------
        serial : int
            Of the next command: answers to those before do not count.
        """
        self._open, self._made_s, self._serial = REST, None, serial

    def due(self, rate_hz: float, now_s: float, repeat_s: float) -> list[Request]:
        """Return the commands for it, where they are due.

        Parameters
        ----------
        rate_hz : float
            Samples per second of the board.
        now_s, repeat_s : float
            By the monotonic clock, and after how long it is asked for again [s].

        Returns
        -------
        list of Request
            Empty where nothing waits, or it was asked for just now.
        """
        is_made = self._made_s is not None and now_s - self._made_s < repeat_s
        if not self._open or is_made:
            return []
        self._made_s = now_s
        return rest_requests(rate_hz)

    def heard(self, code: CommandCode, serial: int, status: int) -> None:
        """Take an answer of the board to a part of it.

        Parameters
        ----------
        code, serial : CommandCode and int
            What was asked, and the command's serial.
        status : int
            Of the reply.
        """
        if serial >= self._serial and is_confirmed(status):
            self._open -= {code}

"""When the samples of a board that was told to drive may be kept."""

import time

from firmware_bridge.drive_answer import ANSWER_S
from firmware_bridge.drive_lines import DriveError

__all__ = ["DriveSettling"]

_SETTLE_S = 0.3  # slew, and the filters behind the drive


class DriveSettling:
    """Wait until all is answered, and a moment longer, by the host's clock and by the board's samples.

    By both: what arrives may have been sampled long before, where a board or this computer lags.
    """

    def __init__(self) -> None:
        self._sent_s: float | None = None  # the last command
        self._first_s: float | None = None  # and the first one since the port was away
        self._begin: tuple[int, int] | None = None  # stream and sample from which all was answered
        self.is_over = False
        """Whether it has been waited for; it stays so."""

    @property
    def has_sent(self) -> bool:
        """Whether any command was sent."""
        return self._sent_s is not None

    def sent(self) -> None:
        """Take note of a command."""
        self._sent_s = time.monotonic()
        self._first_s = self._first_s or self._sent_s

    def away(self) -> None:
        """Take note that the port was away."""
        self._first_s = self._begin = None

    def wait(self, *, is_done: bool, at: tuple[int, int] | None, rate_hz: float | None) -> bool:
        """Return whether it is over.

        Parameters
        ----------
        is_done : bool
            Whether the board has answered everything.
        at : tuple of int and int, or None
            Stream id and first sample of what has arrived; None where no samples come.
        rate_hz : float or None
            Samples per second.

        Returns
        -------
        bool
            Once True, it stays so.

        Raises
        ------
        DriveError
            If the board does not answer.
        """
        now_s = time.monotonic()
        if not is_done:
            self._begin = None
            if now_s - (self._first_s or now_s) > ANSWER_S:
                raise DriveError(f"the board does not answer to set line for {ANSWER_S:g} s")
            return False
        if at is not None and (self._begin is None or self._begin[0] != at[0]):
            self._begin = at
        is_long = now_s - (self._sent_s or now_s) >= _SETTLE_S
        if at is not None and self._begin is not None:
            is_long = is_long and at[1] - self._begin[1] >= _SETTLE_S * (rate_hz or 0.0)
        self.is_over = is_long
        return is_long

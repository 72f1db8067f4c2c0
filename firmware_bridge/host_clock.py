"""The host's clocks beside the board's counting, and the stamps that say so in a recording."""

from firmware_bridge.host_note import Stamp

__all__ = ["ARRIVAL_U_S", "ELAPSED_U_S", "HostClock", "missing_before"]

ARRIVAL_U_S = 0.05 / 3**0.5
"""Standard uncertainty of an arrival [s]: half a system tick and a driver's buffering, ±50 ms at
most, rectangular. Our estimate."""

ELAPSED_U_S = ARRIVAL_U_S * 2**0.5
"""Standard uncertainty of the time between two arrivals [s]."""

_STAMP_NS = 2_000_000_000


class HostClock:
    """Keep when the last samples came and how far the board had counted then.

    Times are pairs of the host's monotonic clock and of its UTC [ns].
    """

    def __init__(self) -> None:
        self.now_ns = (0, 0)
        """Of what is at hand."""
        self._last_ns = (0, 0)  # of the last samples
        self._stamped_ns = 0
        self._mark: tuple[int, int, int] | None = None  # stream, index after the last sample, clock

    @property
    def since_s(self) -> float:
        """How long ago the last samples came [s]."""
        return (self.now_ns[0] - self._last_ns[0]) * 1e-9

    @property
    def is_due(self) -> bool:
        """Whether it is time for a stamp."""
        return self.now_ns[0] - self._stamped_ns >= _STAMP_NS

    @property
    def has_stamped(self) -> bool:
        """Whether the present file has a stamp."""
        return bool(self._stamped_ns)

    def heard(self) -> None:
        """Take note that samples came now."""
        self._last_ns = self.now_ns

    def mark(self, stream: int, end: int, clock: int) -> None:
        """Take note of how far the board has counted.

        Parameters
        ----------
        stream : int
            Stream id.
        end : int
            Index after the last sample.
        clock : int
            Board clock, 0 where it was not told.
        """
        self._mark = stream, end, clock

    def is_marked(self, stream: int, end: int) -> bool:
        """Return whether a stream has been counted as far as this.

        Parameters
        ----------
        stream : int
            Stream id.
        end : int
            Index after a sample.

        Returns
        -------
        bool
            False where another stream was counted last.
        """
        return self._mark is not None and self._mark[0] == stream and end <= self._mark[1]

    def forget(self) -> None:
        """Forget how far the board has counted: what was before stands in another file."""
        self._mark = None

    def renew(self) -> None:
        """Take note that the file that begins needs a stamp of its own."""
        self._stamped_ns = 0

    def maybe_stamp(self) -> Stamp | None:
        """Return when the last samples came, None before the first ones.

        Returns
        -------
        Stamp or None
            To be written; the next one is due in 2 s.
        """
        if self._mark is None:
            return None
        (stream, end, clock), (monotonic_ns, unix_ns) = self._mark, self._last_ns
        self._stamped_ns = self.now_ns[0]
        return Stamp(unix_ns, monotonic_ns, stream, end, clock)


def missing_before(length: int, since_s: float, rate_hz: float) -> int:
    """Return how many samples are missing before a stream, as the host's clock tells.

    Parameters
    ----------
    length : int
        Samples of its first frame, which has just come.
    since_s : float
        How long ago the last samples before it came [s].
    rate_hz : float
        Samples per second of the host's time.

    Returns
    -------
    int
        0 or more.
    """
    return max(0, round(since_s * rate_hz) - length)

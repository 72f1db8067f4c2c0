"""Whether what is kept of a log's recordings has room for what was recorded just now."""

import os
from dataclasses import dataclass
from pathlib import Path

from calibration.desk.ledger_errors import LedgerError
from firmware_bridge.byte_size import byte_size_text
from firmware_bridge.recording_header import Header, parse_header

__all__ = ["LeastRoom", "bytes_per_second"]

_HEADER_BYTES = 1 << 20
_FRAME_S = 0.5  # a board sends a frame at least this often, filled or not
_SHORTEST_S = 1.0
_TWO = 2  # the running recording and the one before it: else that one goes as it ends


@dataclass(frozen=True, slots=True)
class LeastRoom:
    """What ``--keep-bytes`` must hold: two recordings, else the one just ended is deleted at once.

    Parameters
    ----------
    keep_bytes : int
        What is kept [bytes].
    length_s : float
        Length of a recording by the board's counting [s]; a second at least, as records are written
        every half of one.
    option : str
        Which says so, for the message.
    """

    keep_bytes: int
    length_s: float = _SHORTEST_S
    option: str = ""

    def check(self, path: str | os.PathLike[str]) -> None:
        """Refuse what is kept where the board of a recording that has just begun sends too much.

        Parameters
        ----------
        path : path
            The recording; its header is on the disk.

        Raises
        ------
        LedgerError
            If two recordings do not fit.
        """
        with Path(path).open("rb") as file:
            header, header_bytes = parse_header(file.read(_HEADER_BYTES), os.fspath(path))
        rate = bytes_per_second(header)
        length_s = max(self.length_s, _SHORTEST_S)
        told = self.option + " " * bool(self.option) if length_s == self.length_s else ""
        least = _TWO * (header_bytes + length_s * rate)
        if self.keep_bytes < least:
            raise LedgerError(
                f"--keep-bytes must hold two recordings of {told}{length_s:g} s: "
                f"{byte_size_text(least, is_up=True)} at the board's {byte_size_text(rate)}/s, "
                f"got {byte_size_text(self.keep_bytes)}"
            )


def bytes_per_second(header: Header) -> float:
    """Return how fast a recording grows.

    Parameters
    ----------
    header : Header
        Its header.

    Returns
    -------
    float
        Bytes per second of the board's counting, host stamps not counted.
    """
    announced = header.announcement
    return header.record_bytes / min(announced.slots / announced.rate_hz, _FRAME_S)

"""Lines of numbers, as any first sketch prints them, to the messages of the wire as they arrive."""

import math
import re
from collections import Counter

import numpy as np

from firmware_bridge.announcement import Announcement, ChannelInfo, pack_announcement
from firmware_bridge.envelope import Discarded, seal, seal_rows
from firmware_bridge.frame import OVER_RANGE, pack_frames

__all__ = ["TextFramer"]

_ENDS = re.compile(rb"[\r\n]+")
_SPACES = re.compile(r"[;,\s]+")
_SPACES_BUT_COMMA = re.compile(r"[;\s]+")
_SETTLE_S = 2.0  # the host's stamps of single lines jitter by tens of milliseconds
_SETTLE_LINES = 8
_FRAME_S = 0.25
_LINE_MAX = 4096
_INT32_MAX = 2**31 - 1


class TextFramer:
    """Frame lines of numbers, each line one sample of every column.

    The first lines tell the number of columns, the decimals (counts are the numbers times a power of
    ten) and, without ``rate_hz``, the rate by the host's clock. A first partial line and lines
    without numbers are discarded; a damaged line among good ones is a missing sample.

    Parameters
    ----------
    stream : int
        Stream id to use.
    rate_hz : float, optional
        Lines per second, where known.
    """

    def __init__(self, stream: int, rate_hz: float | None = None) -> None:
        self._stream = stream
        self._rate_hz = rate_hz
        self._rest = b""
        self._is_first = True  # the first line may have begun before we listened
        self._early: list[tuple[float, list[float], str]] = []
        self._announcement: Announcement | None = None
        self._columns = 0
        self._factor = 1
        self._rows: list[list[float]] = []
        self._begun_s = 0.0
        self._index = 0
        self._sequence = 0

    @property
    def lines(self) -> int:
        """Lines of numbers so far."""
        return self._index + len(self._rows) + len(self._early)

    def restart(self) -> None:
        """Forget a partial line: the port was away."""
        self._rest, self._is_first = b"", True

    def feed(self, data: bytes, now_s: float) -> list[bytes | Discarded]:
        """Return the messages that ``data``, received at ``now_s``, completes.

        Parameters
        ----------
        data : bytes
            Cut anywhere.
        now_s : float
            The host's clock at its arrival [s].

        Returns
        -------
        list of bytes or Discarded
            Sealed messages, and what was thrown away.
        """
        *lines, self._rest = _ENDS.split(self._rest + data)
        out: list[bytes | Discarded] = []
        if len(self._rest) > _LINE_MAX:
            out.append(Discarded(len(self._rest), "no line end in 4096 bytes: is this text?"))
            self._rest, self._is_first = b"", True
        for line in lines:
            if self._is_first:
                self._is_first = False
                if line:
                    out.append(Discarded(len(line), "first line, perhaps only a part of one"))
            elif line:
                out += self._line(line, now_s)
        return out + self.tick(now_s)

    def tick(self, now_s: float) -> list[bytes | Discarded]:
        """Return the frame that is due by time, so that one leaves twice a second and more.

        Parameters
        ----------
        now_s : float
            The host's clock [s].

        Returns
        -------
        list of bytes or Discarded
            As from `feed`.
        """
        if self._rows and now_s - self._begun_s >= _FRAME_S:
            return self.flush()
        return []

    def flush(self) -> list[bytes | Discarded]:
        """Return what is waiting, framed.

        Returns
        -------
        list of bytes or Discarded
            As from `feed`.
        """
        if self._announcement is None or not self._rows:
            return []
        scaled = np.rint(np.array(self._rows) * self._factor)
        over = np.abs(scaled) > _INT32_MAX
        rows = pack_frames(
            np.clip(scaled, -_INT32_MAX - 1, _INT32_MAX).astype(np.int32),
            slots=self._announcement.slots,
            first_index=self._index,
            first_sequence=self._sequence,
            stream=self._stream,
            clock=0,
            flags=OVER_RANGE if over.any() else 0,
        )
        self._index += len(self._rows)
        self._sequence += len(rows)
        self._rows = []
        return [row.tobytes() for row in seal_rows(rows)]

    def _line(self, line: bytes, now_s: float) -> list[bytes | Discarded]:
        text = line.decode(errors="replace").strip()
        numbers = _numbers(text)
        if self._announcement is None:
            if numbers:
                self._early.append((now_s, numbers, text))
                return self._settle(now_s)
            return [Discarded(len(line), "a line without numbers")]
        if len(numbers) == self._columns:
            if not self._rows:
                self._begun_s = now_s
            self._rows.append(numbers)
            return self.flush() if len(self._rows) >= self._announcement.slots else []
        if not any(character.isdigit() for character in text):
            return [Discarded(len(line), "a line without numbers")]
        done = self.flush()
        self._index += 1
        return [*done, Discarded(len(line), "a damaged line, one sample missing")]

    def _settle(self, now_s: float) -> list[bytes | Discarded]:
        first_s = self._early[0][0]
        count = len(self._early)
        if count < _SETTLE_LINES or (self._rate_hz is None and now_s - first_s < _SETTLE_S):
            return []
        self._columns = Counter(len(numbers) for _, numbers, _ in self._early).most_common(1)[0][0]
        decimals = max(_decimals(text) for _, _, text in self._early)
        largest = max(1.0, *(abs(x) for _, numbers, _ in self._early for x in numbers))
        decimals = min(decimals, max(0, math.floor(math.log10(_INT32_MAX / largest))))
        self._factor = 10**decimals
        rate_hz = self._rate_hz or _rate([stamp_s for stamp_s, _, _ in self._early])
        self._announcement = Announcement(
            stream=self._stream,
            rate_hz=rate_hz,
            format="int32",
            slots=min(512, max(1, round(rate_hz * _FRAME_S))),
            channels=[
                ChannelInfo(f"column {k + 1}", "1", 1 / self._factor) for k in range(self._columns)
            ],
            board="lines of text",
        )
        out: list[bytes | Discarded] = [seal(pack_announcement(self._announcement))]
        early, self._early = self._early, []
        for stamp_s, _, text in early:
            out += self._line(text.encode(), stamp_s)
        return out


def _rate(stamps_s: list[float]) -> float:
    # A read may bring several lines at once: count from the first to the last read.
    behind_first = sum(stamp_s > stamps_s[0] for stamp_s in stamps_s)
    return float(f"{behind_first / (stamps_s[-1] - stamps_s[0]):.6g}")


def _numbers(text: str) -> list[float]:
    """Return the numbers of a line, none if anything else is in it."""
    # A comma beside another separator, or a single one between digits and blanks, is decimal.
    has_others = ";" in text or "\t" in text or " " in text.replace(", ", ",")
    separator = _SPACES_BUT_COMMA if has_others and "," in text and "." not in text else _SPACES
    try:
        found = [float(word.replace(",", ".")) for word in separator.split(text) if word]
    except ValueError:
        return []
    return found if all(map(math.isfinite, found)) else []


def _decimals(text: str) -> int:
    return max((len(part) for part in re.findall(r"\d[.,](\d+)", text)), default=0)

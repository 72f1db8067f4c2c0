"""The line on the terminal while a recording runs."""

import time
from collections.abc import Callable
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from firmware_bridge.recording_progress import Progress

__all__ = ["LiveLine"]

_EVERY_S = 0.25
_OVER_S = 2.0  # the rate is that of the last two seconds
_WIDTH = 79  # a longer line would wrap and could not be overwritten


class LiveLine:
    """Show where a recording stands: time, samples, rate, gaps, over-range, buffer.

    Parameters
    ----------
    write : callable
        Takes text for the terminal.
    """

    def __init__(self, write: Callable[[str], None]) -> None:
        self._write = write
        self._seen: list[tuple[float, int]] = []
        self._length = 0

    def show(self, progress: "Progress") -> None:
        """Overwrite the line, a few times a second.

        Parameters
        ----------
        progress : Progress
            Where the recording stands.
        """
        now_s = time.monotonic()
        if self._seen and now_s - self._seen[-1][0] < _EVERY_S:
            return
        self._seen.append((now_s, progress.samples))
        while now_s - self._seen[0][0] > _OVER_S and len(self._seen) > 2:
            del self._seen[0]
        text = line_of(progress, self._rate_hz())[:_WIDTH]
        self._write("\r" + text.ljust(self._length))
        self._length = len(text)

    def end(self) -> None:
        """Leave the line as it is, and go to the next."""
        if self._length:
            self._write("\n")
            self._length = 0

    def step_aside(self, record: object) -> bool:  # noqa: ARG002  # a filter of the log
        """Go to the next line, so that a message of the log gets one of its own.

        Parameters
        ----------
        record : object
            What is logged.

        Returns
        -------
        bool
            True: it is logged.
        """
        self.end()
        return True

    def _rate_hz(self) -> float | None:
        (first_s, before), (last_s, samples) = self._seen[0], self._seen[-1]
        return (samples - before) / (last_s - first_s) if last_s > first_s else None


def line_of(progress: "Progress", rate_hz: float | None) -> str:
    """Return the line.

    Parameters
    ----------
    progress : Progress
        Where the recording stands.
    rate_hz : float, optional
        Samples per second as they come in.

    Returns
    -------
    str
        Without line end.
    """
    if progress.rate_hz is None:
        return "waiting for the port" if progress.is_lost else "waiting for the board"
    time_s = progress.samples / progress.rate_hz
    of = f"/{progress.wanted / progress.rate_hz:.6g}" if progress.wanted else ""
    rate = "" if rate_hz is None else f"  {rate_hz:.4g} Hz"
    over = f"  {progress.over_range_frames} frames over range" if progress.over_range_frames else ""
    lost = f"  {progress.bytes_discarded} B discarded" if progress.bytes_discarded else ""
    gaps = f"{progress.gaps} gap" + ("" if progress.gaps == 1 else "s")
    state = "waiting for the port" if progress.is_lost else f"buffer {progress.fill:.0%}"
    return f"{time_s:.1f}{of} s{rate}  {gaps}{over}{lost}  {state}"

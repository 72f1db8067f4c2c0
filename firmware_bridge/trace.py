"""What every recording is, whatever file it came from: traces of channels on one regular grid."""

import math
from abc import ABC, abstractmethod
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.channel import Channel, find_channel
from firmware_bridge.gap import Gap
from firmware_bridge.span import Block, Span, SpanError
from firmware_bridge.timing import BY_BOARD, Timing
from metro.notebook import NotebookPage, maybe_figure

__all__ = ["Recording", "Trace"]

_SHOWN_SAMPLES = 20_000_000  # drawn in a notebook within a second or two


@dataclass(frozen=True, eq=False, slots=True)
class Trace:
    """One channel on the regular grid, t = (start_index + k) / rate_hz from the first sample.

    Parameters
    ----------
    name, unit : str
        Of the channel.
    values : ndarray, shape (n,)
        Float64 in ``unit``, NaN where missing or over-range.
    rate_hz : float
        Samples per second.
    start_index : int
        Grid index of ``values[0]``, counted from the recording's first sample.
    missing, over_range : int
        How many values are NaN for either reason.
    timing : Timing
        What the times rest on.
    """

    name: str
    unit: str
    values: NDArray[np.float64]
    rate_hz: float
    start_index: int = 0
    missing: int = 0
    over_range: int = 0
    timing: Timing = BY_BOARD

    def times_s(self) -> NDArray[np.float64]:
        """Return the times of the values [s], 0 at the recording's first sample.

        Returns
        -------
        ndarray, shape (n,)
            Times [s].
        """
        return (self.start_index + np.arange(self.values.size)) / self.rate_hz


class Recording(NotebookPage, ABC):
    """A recording on a regular grid: ``length`` samples at ``rate_hz``, gaps included.

    Subclasses say what the file holds and implement `read`.

    Parameters
    ----------
    path : str
        Where it came from, "-" for standard input.
    format : str
        "mfr", "csv", "text", "npy", "npz" or "hdf5".
    rate_hz : float
        Samples per second.
    channels : sequence of Channel
        Without the time column.
    length : int
        Samples on the grid, from the first to the last, gaps included.
    rate_u_hz : float, optional
        Standard uncertainty of the rate [Hz], None where unknown.
    gaps : sequence of Gap
        On the grid, in order.
    over_range : int
        Number of over-range values, all channels together.
    remarks : sequence of str
        What a reader should know, one line each.
    reasons : sequence of str
        Why it must not be trusted as a whole: it was cut, or a large part could not be read.
    columns : sequence of int, optional
        The file's column number of each channel, from 1 with the time column counted; by default
        1, 2, 3 …
    start_unix_s : float, optional
        UTC of the first sample, seconds since 1970, where known.
    timing : Timing
        What the times of the samples rest on.
    """

    def __init__(
        self,
        *,
        path: str,
        format: str,  # noqa: A002  # the word people use for it
        rate_hz: float,
        channels: Sequence[Channel],
        length: int,
        rate_u_hz: float | None = None,
        gaps: Sequence[Gap] = (),
        over_range: int = 0,
        remarks: Sequence[str] = (),
        reasons: Sequence[str] = (),
        columns: Sequence[int] | None = None,
        start_unix_s: float | None = None,
        timing: Timing = BY_BOARD,
    ) -> None:
        self.path = path
        self.format = format
        self.rate_hz = rate_hz
        self.rate_u_hz = rate_u_hz
        self.channels = tuple(channels)
        self.length = length
        self.gaps = list(gaps)
        self.over_range = over_range
        self.remarks = list(remarks)
        self.reasons = list(reasons)
        self.columns = tuple(columns or range(1, len(self.channels) + 1))
        self.start_unix_s = start_unix_s
        self.timing = timing

    def notebook_tables(self) -> list[tuple[Sequence[str], Iterable[Sequence[Any]]]]:
        """Return what the recording holds, and its channels."""
        held = [
            ("recording", f"{self.path} ({self.format})"),
            ("samples", f"{self.length} at {self.rate_hz:.9g} Hz"),
            ("duration", f"{self.duration_s:.6g} s"),
            ("gaps", f"{len(self.gaps)} ({sum(gap.length for gap in self.gaps)} samples)"),
            ("over range", f"{self.over_range} values"),
            *(("remark", remark) for remark in self.remarks),
        ]
        channels = [
            (number, channel.name, "counts" if channel.unit == "1" else channel.unit)
            for number, channel in zip(self.columns, self.channels, strict=True)
        ]
        return [((), held), (("column", "channel", "unit"), channels)]

    def notebook_figure(self) -> Any:  # noqa: ANN401  # matplotlib's Figure or None
        """Return every channel at a glance; None where reading it all would take long."""
        if self.length > _SHOWN_SAMPLES:
            return None
        from firmware_bridge.inspection import inspect_recording
        from firmware_bridge.inspection_plot import inspection_figure

        return maybe_figure(lambda: inspection_figure(self, inspect_recording(self)))

    @property
    def duration_s(self) -> float:
        """Length of the grid [s]."""
        return self.length / self.rate_hz

    @abstractmethod
    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return samples ``start`` to ``stop`` (not included) of some channels.

        Parameters
        ----------
        channels : sequence of int
            Positions in ``self.channels``.
        start, stop : int
            Grid indices, 0 ≤ start ≤ stop ≤ length.

        Returns
        -------
        Span
            ``values`` of shape (stop − start, len(channels)).
        """

    def find(self, name: str) -> int:
        """Return the position in ``channels`` of a channel named by header or column number.

        Parameters
        ----------
        name : str
            Only digits: the file's column number from 1, the time column counted; ``"name:3"``:
            the header "3"; anything else: the header.

        Returns
        -------
        int
            Position in ``self.channels``.

        Raises
        ------
        ChannelError
            If there is no such channel, or two of that name.
        """
        return find_channel(name, self.channels, self.columns, self.path)

    def trace(self, name: str, from_s: float | None = None, to_s: float | None = None) -> Trace:
        """Return one channel, or the stretch ``from_s`` ≤ t < ``to_s`` of it.

        Parameters
        ----------
        name : str
            As for `find`.
        from_s, to_s : float, optional
            Times [s] from the recording's first sample.

        Returns
        -------
        Trace
            On the regular grid.

        Raises
        ------
        ChannelError
            If there is no such channel.
        SpanError
            If the stretch holds no sample of the recording.
        """
        position = self.find(name)
        start, stop = self.span(from_s, to_s)
        span = self.read([position], start, stop)
        values = np.ascontiguousarray(span.values[:, 0])
        empty = int(np.count_nonzero(np.isnan(values)))
        channel = self.channels[position]
        return Trace(
            name=channel.name,
            unit=channel.unit,
            values=values,
            rate_hz=self.rate_hz,
            start_index=start,
            missing=empty - span.over_range,
            over_range=span.over_range,
            timing=self.timing,
        )

    def blocks(
        self,
        samples: int = 65536,
        channels: Sequence[int] | None = None,
        from_s: float | None = None,
        to_s: float | None = None,
    ) -> Iterator[Block]:
        """Yield the recording in stretches of ``samples``, so that memory stays bounded.

        Parameters
        ----------
        samples : int
            Samples a block; the last one may be shorter.
        channels : sequence of int, optional
            Positions in ``self.channels``, by default all.
        from_s, to_s : float, optional
            As for `trace`.

        Yields
        ------
        Block
            In order, gaps included as NaN.
        """
        wanted = list(range(len(self.channels)) if channels is None else channels)
        start, stop = self.span(from_s, to_s)
        for first in range(start, stop, samples):
            span = self.read(wanted, first, min(first + samples, stop))
            yield Block(first, span.values, span.over_range)

    def span(self, from_s: float | None = None, to_s: float | None = None) -> tuple[int, int]:
        """Return the grid indices (start, stop) of the samples with ``from_s`` ≤ t < ``to_s``.

        Parameters
        ----------
        from_s, to_s : float, optional
            Times [s]; by default the whole recording.

        Returns
        -------
        tuple of (int, int)
            start and stop, start < stop.
        """
        start = 0 if from_s is None else max(0, self._ceil(from_s))
        stop = self.length if to_s is None else min(self.length, self._ceil(to_s))
        if start >= stop:
            raise SpanError(
                f"{self.path} has no sample from {0.0 if from_s is None else from_s:g} s to "
                f"{self.duration_s if to_s is None else to_s:g} s; it lasts {self.duration_s:g} s"
            )
        return start, stop

    def _ceil(self, time_s: float) -> int:
        # A millionth of a sample forgives the rounding of decimal times times the rate.
        return math.ceil(time_s * self.rate_hz - 1e-6)

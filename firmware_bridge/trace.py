"""What every recording is, whatever file it came from: channels and traces on one regular grid."""

import math
from abc import ABC, abstractmethod
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.errors import BridgeError

__all__ = [
    "Block",
    "Channel",
    "ChannelError",
    "Gap",
    "Recording",
    "Span",
    "SpanError",
    "Timing",
    "Trace",
]


class ChannelError(BridgeError):
    """A channel name that the recording does not have, or has more than once."""


class SpanError(BridgeError):
    """A stretch of time that lies outside the recording or is empty."""


@dataclass(frozen=True, slots=True)
class Channel:
    """One channel of a recording: value in ``unit`` = counts · ``scale`` + ``offset``.

    Parameters
    ----------
    name : str
        Header or announced name.
    unit : str
        Unit of the values, "1" where none is known.
    scale, offset : float
        From counts to ``unit``; 1 and 0 where the file holds the values themselves.
    """

    name: str
    unit: str = "1"
    scale: float = 1.0
    offset: float = 0.0


@dataclass(frozen=True, slots=True)
class Gap:
    """Samples that never arrived.

    Parameters
    ----------
    index : int
        First missing sample: in a recording counted on its grid, from a decoder by the board.
    length : int
        Number of missing samples; 0 where it cannot be known (a decoder at a board reset).
    exact : bool
        True where the board's own counting gives the length, False where a clock does.
    length_u : float
        Standard uncertainty of ``length`` in samples, 0 where exact.
    """

    index: int
    length: int
    exact: bool = True
    length_u: float = 0.0


@dataclass(frozen=True, slots=True)
class Timing:
    """What the times of a recording's samples rest on.

    Parameters
    ----------
    is_by_host : bool
        True where nothing but the arrival of the samples at the host tells their times: a sample
        lost on the way moves all that follow, and phases mean nothing.
    jitter_s, jitter_u_s : float
        Rms distance of the moments of sampling from the regular grid [s], and its standard
        uncertainty. A line of frequency f loses the factor exp(−(2πf·jitter)²/2) to it.
    """

    is_by_host: bool = False
    jitter_s: float = 0.0
    jitter_u_s: float = 0.0


@dataclass(frozen=True, eq=False, slots=True)
class Span:
    """Values of some channels over some samples, as a recording reads them.

    Parameters
    ----------
    values : ndarray, shape (n, channels)
        Float64 in channel units, NaN where missing or over-range.
    over_range : int
        How many of the NaN are over-range values; the others are missing.
    """

    values: NDArray[np.float64]
    over_range: int = 0


@dataclass(frozen=True, eq=False, slots=True)
class Block:
    """A stretch of a recording: ``values`` as in `Span`, from sample ``start_index`` on."""

    start_index: int
    values: NDArray[np.float64]
    over_range: int = 0


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
    timing: Timing = Timing()

    def times_s(self) -> NDArray[np.float64]:
        """Return the times of the values [s], 0 at the recording's first sample.

        Returns
        -------
        ndarray, shape (n,)
            Times [s].
        """
        return (self.start_index + np.arange(self.values.size)) / self.rate_hz


class Recording(ABC):
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
        columns: Sequence[int] | None = None,
        start_unix_s: float | None = None,
        timing: Timing = Timing(),
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
        self.columns = tuple(columns or range(1, len(self.channels) + 1))
        self.start_unix_s = start_unix_s
        self.timing = timing

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
        if name.isascii() and name.isdigit():
            return self._find_column(int(name))
        wanted = name.removeprefix("name:")
        found = [k for k, channel in enumerate(self.channels) if channel.name == wanted]
        if len(found) != 1:
            what = "more than one channel" if found else "no channel"
            raise ChannelError(f"{self.path} has {what} named {wanted!r}; it has {self._listed()}")
        return found[0]

    def _find_column(self, number: int) -> int:
        if number not in self.columns:
            raise ChannelError(
                f"{self.path}: column {number} is no channel (columns count from 1, the time "
                f"column included); it has {self._listed()}"
            )
        return self.columns.index(number)

    def _listed(self) -> str:
        return ", ".join(
            f"{column} {channel.name!r}"
            for column, channel in zip(self.columns, self.channels, strict=True)
        )

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

"""Is a recording sound? What each channel holds, what is missing, and how the clocks agree."""

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.gap_reason import counted, gap_reason
from firmware_bridge.host_clock import ARRIVAL_U_S
from firmware_bridge.lock_in_recording import LockInRecording
from firmware_bridge.recording import NO_END, MfrRecording
from firmware_bridge.suspicions import Codes, Repetition, StuckRuns
from firmware_bridge.trace import Recording

__all__ = ["ChannelState", "ClockState", "Inspection", "inspect_recording"]

_CLOCK_LIMIT = 1e-3  # a crystal is within 1e-4; what is worse costs amplitude in every line fit
_CLOCK_SPAN_S = 10.0  # below it the stamps' jitter drowns any offset
_BLOCK, _LEAST_BLOCK = 64, 16  # samples looked at for repetition


@dataclass(frozen=True, slots=True)
class ChannelState:
    """What one channel holds; values in its unit, NaN where it has no value at all.

    Parameters
    ----------
    name, unit : str
        Of the channel.
    minimum, maximum, mean, standard_deviation : float
        Of the values that are there.
    missing, over_range : int
        Values that are not.
    stuck_samples, stuck_from : int
        Length and first sample of a run of one value that is longer than chance, 0 without one.
    missing_codes : tuple of int
        Codes of the converter that never occur though those beside them do.
    """

    name: str
    unit: str
    minimum: float
    maximum: float
    mean: float
    standard_deviation: float
    missing: int
    over_range: int
    stuck_samples: int = 0
    stuck_from: int = 0
    missing_codes: tuple[int, ...] = ()

    @property
    def is_constant(self) -> bool:
        """True if it holds one value only: dead, stuck, or not connected."""
        return self.minimum == self.maximum


@dataclass(frozen=True, slots=True)
class ClockState:
    """The board's clock beside the host's.

    Parameters
    ----------
    offset : float
        Relative: positive where the board samples faster than announced.
    offset_u : float
        Its standard uncertainty, from the scatter of the stamps; the host's own clock not included.
    span_s : float
        Time over which they were compared.
    """

    offset: float
    offset_u: float
    span_s: float


@dataclass(frozen=True, slots=True)
class Inspection:
    """The verdict on a recording.

    Parameters
    ----------
    channels : list of ChannelState
        What each holds.
    clock : ClockState or None
        None where the clocks cannot be compared.
    reasons : list of str
        What speaks against the recording, empty where it is sound.
    repeated_blocks, block_samples : int
        Blocks equal to an earlier one, and the samples of each.
    course : tuple of two ndarrays, or None
        Time of the host and of the board at each stamp [s], both from 0; with `clock` only.
    """

    channels: list[ChannelState]
    clock: ClockState | None
    reasons: list[str]
    repeated_blocks: int = 0
    block_samples: int = 0
    course: tuple[NDArray[np.float64], NDArray[np.float64]] | None = None

    @property
    def is_sound(self) -> bool:
        """True if nothing speaks against the recording."""
        return not self.reasons


def inspect_recording(recording: Recording) -> Inspection:
    """Look through a whole recording, in bounded memory.

    Parameters
    ----------
    recording : Recording
        Any.

    Returns
    -------
    Inspection
        What was found.
    """
    found = _Suspicions(recording)
    channels = [
        found.complete(_channel_state(recording, k), k) for k in range(len(recording.channels))
    ]
    course = _clock_course(recording) if isinstance(recording, MfrRecording) else None
    clock = None if course is None else _clock_state(*course)
    reasons = [*_reasons(recording, channels, clock), *found.reasons(recording, channels)]
    repetition = found.repetition
    return Inspection(
        channels, clock, reasons, len(repetition.repeated), repetition.samples, course
    )


class _Suspicions:
    """One look through all channels side by side."""

    def __init__(self, recording: Recording) -> None:
        is_mfr = isinstance(recording, MfrRecording)
        slots = recording.file.slots if isinstance(recording, MfrRecording) else 0
        self.repetition = Repetition(slots if slots >= _LEAST_BLOCK else _BLOCK)
        self._stuck = StuckRuns(len(recording.channels))
        self._codes = [Codes(c.scale, c.offset) for c in recording.channels] if is_mfr else []
        for block in recording.blocks():
            self.repetition.add(block.start_index, block.values)
            self._stuck.add(block.start_index, block.values)
            for k, codes in enumerate(self._codes):
                codes.add(block.values[:, k])

    def complete(self, state: ChannelState, k: int) -> ChannelState:
        """Return the state of channel k with what was found."""
        stuck = self._stuck.is_suspicious(k)
        return replace(
            state,
            stuck_samples=int(self._stuck.longest[k]) if stuck else 0,
            stuck_from=int(self._stuck.starts[k]) if stuck else 0,
            missing_codes=tuple(self._codes[k].missing()) if self._codes else (),
        )

    def reasons(self, recording: Recording, channels: list[ChannelState]) -> list[str]:
        """Return what speaks against the recording."""
        out = []
        for state in channels:
            if state.stuck_samples:
                out.append(
                    f"channel {state.name!r} does not change for "
                    f"{state.stuck_samples / recording.rate_hz:.4g} s from "
                    f"{state.stuck_from / recording.rate_hz:.6g} s on: stuck"
                )
            if state.missing_codes:
                out.append(
                    f"channel {state.name!r}: {counted(len(state.missing_codes), 'code')} absent though "
                    f"the codes beside occur often (first: {state.missing_codes[0]})"
                )
        if self.repetition.is_suspicious:
            first_s = self.repetition.repeated[0] / recording.rate_hz
            out.append(
                f"{counted(len(self.repetition.repeated), 'block')} of {self.repetition.samples} "
                f"samples equal to an earlier one in every value (first at {first_s:.6g} s)"
            )
        return out


def _channel_state(recording: Recording, position: int) -> ChannelState:
    count, mean, squares = 0, 0.0, 0.0
    low, high, over_range = math.inf, -math.inf, 0
    for block in recording.blocks(channels=[position]):
        over_range += block.over_range
        values = block.values[:, 0]
        values = values[~np.isnan(values)]
        if not values.size:
            continue
        low, high = min(low, float(values.min())), max(high, float(values.max()))
        block_mean = float(values.mean())
        total = count + values.size
        # Pairwise merging of sums of squares, as in Chan, Golub & LeVeque, Am. Stat. 37 (1983) 242.
        squares += float(np.sum((values - block_mean) ** 2))
        squares += (block_mean - mean) ** 2 * count * values.size / total
        mean += (block_mean - mean) * values.size / total
        count = total
    channel = recording.channels[position]
    missing = recording.length - count - over_range
    if not count:
        nothing = math.nan
        return ChannelState(
            channel.name, channel.unit, nothing, nothing, nothing, nothing, missing, over_range
        )
    deviation = math.sqrt(squares / (count - 1)) if count > 1 else math.nan
    return ChannelState(channel.name, channel.unit, low, high, mean, deviation, missing, over_range)


def _clock_course(
    recording: MfrRecording,
) -> tuple[NDArray[np.float64], NDArray[np.float64]] | None:
    """Return the host's and the board's time at each stamp, None where they say nothing."""
    announced = recording.header.announcement
    if announced.simulated and announced.speed != 1.0:
        return None  # such a board runs as fast as it is read
    if recording.header.info.get("clock") == "host":
        return None  # the host's clock gave the rate
    stamps = [s for s in recording.stamps if s.stream == recording.stamps[0].stream]
    if len(stamps) < 3:
        return None
    host_s = np.array([(s.monotonic_ns - stamps[0].monotonic_ns) * 1e-9 for s in stamps])
    board_s = np.array([s.index - stamps[0].index for s in stamps]) / recording.rate_hz
    return (host_s, board_s) if host_s[-1] >= _CLOCK_SPAN_S else None


def _clock_state(host_s: NDArray[np.float64], board_s: NDArray[np.float64]) -> ClockState:
    slope, slope_u = _slope(host_s, board_s)
    return ClockState(slope - 1.0, slope_u, float(host_s[-1]))


def _slope(x: NDArray[np.float64], y: NDArray[np.float64]) -> tuple[float, float]:
    """Return the least-squares slope and its standard uncertainty."""
    x, y = x - x.mean(), y - y.mean()
    weight = float(x @ x)
    slope = float(x @ y) / weight
    scatter = float(np.sum((y - slope * x) ** 2)) / (x.size - 2)
    # Few stamps may agree by chance: the scatter is taken no smaller than what a stamp is good for.
    return slope, math.sqrt(max(scatter, ARRIVAL_U_S**2 / x.size) / weight)


def _reasons(
    recording: Recording, channels: list[ChannelState], clock: ClockState | None
) -> list[str]:
    reasons = []
    if recording.gaps:
        reasons.append(gap_reason(recording.gaps, recording.length))
    estimated = sum(not gap.exact for gap in recording.gaps)
    if estimated:
        reasons.append(f"{counted(estimated, 'gap')} of estimated length")
    if recording.over_range:
        reasons.append(f"{counted(recording.over_range, 'value')} over-range")
    if isinstance(recording, (MfrRecording, LockInRecording)):
        if recording.damaged:
            reasons.append(counted(recording.damaged, "damaged record"))
        if not recording.has_end:
            reasons.append(NO_END)
        if recording.file.tail_bytes:
            reasons.append("the file ends within a record")
    else:
        reasons += recording.reasons
    for state in channels:
        if math.isnan(state.mean):
            reasons.append(f"channel {state.name!r} has no value at all")
        elif state.is_constant and recording.length > 1:
            reasons.append(f"channel {state.name!r} is constant: dead, stuck or not connected")
    if clock is not None and abs(clock.offset) > max(_CLOCK_LIMIT, 3 * clock.offset_u):
        reasons.append(f"the board's clock is off by {clock.offset:+.2%} against the host's")
    return reasons

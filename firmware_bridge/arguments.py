"""Arguments of the commands: how sampling starts, the rate, and the drive's lines and ramps.

A board counts in integers. Frequencies are steps of a 32-bit phase per sample, amplitudes and
targets parts of the drive's full scale; what they are in volts the board's channels say.
"""

import struct
from fractions import Fraction
from math import pi

from firmware_bridge.message_head import MessageError

__all__ = [
    "ALL_LINES",
    "SEND_LOCK_IN",
    "SEND_SAMPLES",
    "clear_arguments",
    "line_arguments",
    "phase_step",
    "ramp_arguments",
    "rate_arguments",
    "start_arguments",
    "step_frequency_hz",
]

ALL_LINES = 255
SEND_SAMPLES = 1
SEND_LOCK_IN = 2

_START = struct.Struct("<BBHI")
_RATE = struct.Struct("<II")
_LINE = struct.Struct("<BBHII")
_CLEAR = struct.Struct("<BBH")
_RAMP = struct.Struct("<hHI")

_TURN = 1 << 32


def phase_step(frequency_hz: float, rate_hz: float) -> int:
    """Return the phase step per sample, 2^32 a turn, that is nearest to a frequency.

    Parameters
    ----------
    frequency_hz : float
        Above 0 and below half the rate.
    rate_hz : float
        Samples per second, > 0.

    Returns
    -------
    int
        1 to 2^31 − 1.

    Raises
    ------
    MessageError
        If no step stands for the frequency.
    """
    step = round(frequency_hz / rate_hz * _TURN) if rate_hz > 0 else 0
    if not 1 <= step < _TURN // 2:
        raise MessageError(
            f"frequency_hz must be > 0 Hz and < {rate_hz / 2:g} Hz, half the rate, "
            f"got {frequency_hz!r}"
        )
    return step


def step_frequency_hz(step: int, rate_hz: float) -> float:
    """Return the frequency that a phase step truly has, within rate / 2^33 of the one wanted."""
    return step * rate_hz / _TURN


def start_arguments(
    *, samples: bool = True, lock_in_channel: int | None = None, lock_in_length: int = 0
) -> bytes:
    """Return the arguments of ``start``.

    Parameters
    ----------
    samples : bool
        Send samples frames.
    lock_in_channel : int, optional
        Send lock-in results of this channel, counted from 0.
    lock_in_length : int
        Samples accumulated for each result.

    Returns
    -------
    bytes
        8 bytes.

    Raises
    ------
    MessageError
        If something does not fit its field.
    """
    sends = SEND_SAMPLES * samples + SEND_LOCK_IN * (lock_in_channel is not None)
    return _pack(_START, "start", sends, lock_in_channel or 0, 0, lock_in_length)


def rate_arguments(rate_hz: float) -> bytes:
    """Return the arguments of ``rate``: the ratio of two 32-bit numbers nearest to it.

    Parameters
    ----------
    rate_hz : float
        Samples per second and channel, 1e-9 to 2^32.

    Returns
    -------
    bytes
        8 bytes.

    Raises
    ------
    MessageError
        If the rate is beyond these.
    """
    if not 1e-9 <= rate_hz < _TURN:
        raise MessageError(f"rate_hz must be ≥ 1e-9 Hz and < 2^32 Hz, got {rate_hz!r}")
    most = max(1, int((_TURN - 1) / max(rate_hz, 1.0)))
    ratio = Fraction(rate_hz).limit_denominator(most)
    return _pack(_RATE, "rate", ratio.numerator, ratio.denominator)


def line_arguments(line: int, step: int, amplitude: float, phase_rad: float = 0.0) -> bytes:
    """Return the arguments of ``set line``: amplitude · cos(2π · step · n / 2^32 + phase).

    Parameters
    ----------
    line : int
        Which line of the board, counted from 0.
    step : int
        From `phase_step`; n is the index of the sample.
    amplitude : float
        Part of the drive's full scale, 0 to 1; 0 only for the lock-in.
    phase_rad : float
        Phase at sample index 0 [rad].

    Returns
    -------
    bytes
        12 bytes.

    Raises
    ------
    MessageError
        If something does not fit its field.
    """
    if not 0 <= amplitude <= 1:
        raise MessageError(f"amplitude must be 0 to 1 of full scale, got {amplitude!r}")
    codes = min(round(amplitude * 65536), 65535)
    phase = round(phase_rad / (2 * pi) * _TURN) % _TURN
    return _pack(_LINE, "line", line, 0, codes, step, phase)


def clear_arguments(line: int = ALL_LINES) -> bytes:
    """Return the arguments of ``clear line``, by default for all lines.

    Raises
    ------
    MessageError
        If the number is not 0 to 255.
    """
    return _pack(_CLEAR, "line", line, 0, 0)


def ramp_arguments(target: float, samples: int) -> bytes:
    """Return the arguments of ``ramp``.

    Parameters
    ----------
    target : float
        Where the offset goes, −1 to 1 of the drive's full scale; 0 is rest.
    samples : int
        How many samples it takes, 1 or more.

    Returns
    -------
    bytes
        8 bytes.

    Raises
    ------
    MessageError
        If something does not fit its field.
    """
    if not -1 <= target <= 1:
        raise MessageError(f"target must be -1 to 1 of full scale, got {target!r}")
    counts = max(-32767, min(32767, round(target * 32768)))
    return _pack(_RAMP, "samples", counts, 0, samples)


def _pack(layout: struct.Struct, name: str, *values: int) -> bytes:
    try:
        return layout.pack(*values)
    except struct.error as error:
        raise MessageError(f"{name} does not fit its field: {error}, got {values}") from None

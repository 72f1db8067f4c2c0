"""On which slope a recording lies, told by its drive: half a turn from the calibration is the other one."""

import numpy as np
from numpy.typing import NDArray

from calibration.channel_volts import channel_volts
from calibration.record import Calibration
from calibration.working_point import invert_fringe
from firmware_bridge.trace import Recording

__all__ = ["side_cautions"]

_LOOKED_AT = 1 << 17  # samples
_PARTS = 16  # all of one sign by chance: once in 65536
_LEAST_CYCLES = 4.0  # of a line in a part


def side_cautions(
    recording: Recording, channel: str, calibration: Calibration, slope: str
) -> list[str]:
    """Return the caution that a recording's lines are half a turn from the calibration's.

    Parameters
    ----------
    recording : Recording
        With a channel named ``drive``; without one nothing is said.
    channel : str
        The photodiode's.
    calibration : Calibration
        Extremes, and the phase at each line.
    slope : str
        On which the recording is taken to lie.

    Returns
    -------
    list of str
        One line at most.
    """
    names = [item.name for item in recording.channels]
    position = recording.find(channel)
    if "drive" not in names or names[position] == "drive":
        return []
    wanted = [position, names.index("drive")]
    span = recording.read(wanted, 0, min(recording.length, _LOOKED_AT)).values
    volts = channel_volts(recording, position, calibration).of(span[:, 0])
    phase = invert_fringe(volts, calibration.extremes, slope).phase_rad
    turned = [
        f"{float(entry.frequency.magnitude):g} Hz"
        for entry in calibration.actuator
        if entry.phase is not None
        and _is_opposite(
            phase,
            span[:, 1],
            float(entry.frequency.magnitude) / recording.rate_hz,
            float(entry.phase.magnitude),
        )
    ]
    if not turned:
        return []
    return [
        (
            f"response over drive is half a turn from the calibration at {', '.join(turned)}: does the "
            f"recording lie on the other slope than {slope}, or is a connection swapped?"
        )
    ]


def _is_opposite(
    phase: NDArray[np.float64], drive: NDArray[np.float64], cycles: float, expected_rad: float
) -> bool:
    """Return whether a line is nearer to half a turn from its expected phase, in every part."""
    length = len(phase) // _PARTS
    if length * cycles < _LEAST_CYCLES:
        return False
    shape = (_PARTS, length)
    carrier = np.hanning(length) * np.exp(-2j * np.pi * cycles * np.arange(length))
    sums = []
    for values in (phase, drive):
        parts = values[: _PARTS * length].reshape(shape)
        seen = np.isfinite(parts)
        if (seen.mean(axis=1) < 0.5).any():
            return False
        means = parts.mean(axis=1, where=seen, keepdims=True)
        sums.append(np.where(seen, parts - means, 0.0) @ carrier)
    along = (sums[0] * np.conj(sums[1]) * np.exp(-1j * expected_rad)).real
    return bool((along < 0.0).all())

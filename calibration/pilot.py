"""The pilot: a driven line whose harmonics tell where on the fringe a bench is."""

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.working_phase import block_sums
from metro.kernel.bessel import bessels

__all__ = ["Pilot", "check_pilot", "find_pilot", "pilot_block", "pilot_frequency", "seen_pilot"]

FloatArray = NDArray[np.float64]

_FEWEST = 16
_HIGHEST = 0.45  # of the rate
_LEAST_DEPTH = 0.03
_DEEPEST = 2.3  # J0 and J1 both well away from zero below that
_CLOCK = 0.02  # relative: boards on an RC oscillator are 1 % off
_COHERENT = 0.5  # of the blocks: by chance seldom more than (ln n/n)^½ of n blocks turn together
_SEARCHED = 4.0  # periods of the pilot in a block while its frequency is looked for


@dataclass(frozen=True)
class Pilot:
    """A pilot line.

    Attributes
    ----------
    frequency_hz : float
        In the board's time [Hz].
    depth_rad : float
        Depth [rad].
    phase_rad : float
        Phase of its motion at t = 0 [rad]; to half a turn, the sign, it is set from outside.
    reasons : list of str
        Why it must not be trusted.
    """

    frequency_hz: float
    depth_rad: float
    phase_rad: float
    reasons: list[str] = field(default_factory=list)


def check_pilot(pilot_hz: float, rate_hz: float) -> None:
    """Refuse a pilot that a record at this rate cannot show.

    Parameters
    ----------
    pilot_hz : float
        The line [Hz].
    rate_hz : float
        Sample rate [Hz].

    Raises
    ------
    CalibrationError
        If it is not above 0 and below 0.45 of the rate.
    """
    if not 0.0 < pilot_hz < _HIGHEST * rate_hz:
        raise CalibrationError(
            f"the pilot must lie above 0 and below {_HIGHEST:g} of the rate of {rate_hz:g} Hz, "
            f"got {pilot_hz:g} Hz"
        )


def pilot_block(rate_hz: float, pilot_hz: float, count: int, periods: float) -> int:
    """Return how many samples a block of so many periods has.

    Parameters
    ----------
    rate_hz : float
        Sample rate [Hz].
    pilot_hz : float
        The line [Hz].
    count : int
        Samples of the record.
    periods : float
        Of the pilot in a block.

    Returns
    -------
    int
        Even, 16 and more.

    Raises
    ------
    CalibrationError
        If the record is shorter than two blocks.
    """
    half = max(round(0.5 * periods * rate_hz / pilot_hz), _FEWEST // 2)
    if 4 * half > count:
        raise CalibrationError(
            f"a pilot at {pilot_hz:g} Hz needs {4 * half} samples and more, got {count}"
        )
    return 2 * half


def _harmonics(
    cosine: FloatArray, rate_hz: float, pilot_hz: float, start_index: int, length: int
) -> tuple[FloatArray, NDArray[np.complex128]]:
    """Return mean and first harmonic of each block by least squares."""
    good = np.isfinite(cosine)
    time = (start_index + np.arange(len(cosine))) / rate_hz
    carrier = np.exp(-2j * np.pi * pilot_hz * time)
    columns = np.where(good, np.stack([np.ones(len(cosine)), carrier.real, -carrier.imag]), 0.0)
    record = np.where(good, cosine, 0.0)
    pairs = [(i, j) for i in range(3) for j in range(i, 3)]
    parts = np.stack([columns[i] * columns[j] for i, j in pairs] + [c * record for c in columns])
    sums = block_sums(parts, length)
    matrix = np.empty((sums.shape[1], 3, 3))
    for k, (i, j) in enumerate(pairs):
        matrix[:, i, j] = matrix[:, j, i] = sums[k]
    matrix += 1e-9 * np.eye(3) * length
    solved: FloatArray = np.asarray(
        np.linalg.solve(matrix, sums[len(pairs) :].T[:, :, None])[:, :, 0], dtype=np.float64
    )
    # a·cos ωt + b·sin ωt is the real part of (a − ib)·e^{iωt}
    return solved[:, 0], solved[:, 1] - 1j * solved[:, 2]


def _depth(mean: FloatArray, first: FloatArray) -> float:
    """Return the depth for which mean/J0 and first/2J1 are cosine and sine of one phase."""
    grid = np.geomspace(0.01, _DEEPEST, 600)
    table = np.array([bessels(1, float(m)) for m in grid])
    square = (mean[None, :] / table[:, :1]) ** 2 + (0.5 * first[None, :] / table[:, 1:]) ** 2
    # blocks at mid-fringe tell the depth, those at an extreme nothing: there first is small
    weight = first**2 + 1e-12
    miss = np.abs(square - 1.0) @ weight
    return float(grid[int(np.argmin(miss))])


def pilot_frequency(
    cosine: FloatArray, rate_hz: float, pilot_hz: float, start_index: int = 0
) -> float:
    """Return the pilot's frequency in the board's time, which is not the generator's.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The record between −1 and 1; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz].
    pilot_hz : float
        As the generator has it [Hz].
    start_index : int, optional
        Number of the first sample.

    Returns
    -------
    float
        Frequency [Hz], within 2 %: where the squares of the first harmonics, free of the sign that
        changes at every extreme, turn at one rate; as given where they do not.
    """
    # differences over half a period double the pilot and leave next to nothing of slow fringes, whose
    # leakage would show at the blocks' own rate
    half = max(1, round(0.5 * rate_hz / pilot_hz))
    bare = cosine[2 * half :] - 2.0 * cosine[half:-half] + cosine[: -2 * half]
    length = pilot_block(rate_hz, pilot_hz, len(bare), _SEARCHED)
    _, first = _harmonics(bare, rate_hz, pilot_hz, start_index, length)
    size = 8 * 2 ** math.ceil(math.log2(len(first)))
    power = np.abs(np.fft.fft(first**2, size))
    block_hz = rate_hz / (length // 2)
    turning_hz = np.fft.fftfreq(size, 1.0 / block_hz)
    power[np.abs(turning_hz) > 2.0 * _CLOCK * pilot_hz] = 0.0
    top = int(np.argmax(power))
    if power[top] < _COHERENT * float(np.sum(np.abs(first) ** 2)):
        return pilot_hz
    left, middle, right = (float(power[(top + step) % size]) for step in (-1, 0, 1))
    curve = left - 2.0 * middle + right
    shift = 0.5 * (left - right) / curve if curve < 0.0 and min(left, right) > 0.0 else 0.0
    return pilot_hz + 0.5 * float(turning_hz[top] + shift * block_hz / size)


def find_pilot(
    cosine: FloatArray,
    rate_hz: float,
    pilot_hz: float,
    length: int,
    start_index: int = 0,
    phase_rad: float | None = None,
) -> Pilot:
    """Find depth and phase of a pilot line in a record that runs through its fringes.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The record between −1 and 1; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz].
    pilot_hz : float
        The line in the board's time [Hz].
    length : int
        Samples in a block; blocks overlap by half.
    start_index : int, optional
        Number of the first sample counted from the recording's first, where t = 0.
    phase_rad : float, optional
        Phase of its motion to half a turn; sets the sign.

    Returns
    -------
    Pilot
        Depth and phase.
    """
    mean, first = _harmonics(cosine, rate_hz, pilot_hz, start_index, length)
    # −2·sin φ·J1·e^{iψ}: the sign of sin φ drops out of the square
    phase = 0.5 * float(np.angle(np.sum(first**2)))
    if phase_rad is not None and math.cos(phase - phase_rad) < 0.0:
        phase += math.pi
    along = (first * np.exp(-1j * phase)).real
    across = float(np.sqrt(np.mean((first * np.exp(-1j * phase)).imag ** 2)))
    depth = _depth(mean, along)
    reasons = []
    if depth < _LEAST_DEPTH or across > 0.5 * float(np.sqrt(np.mean(along**2))):
        reasons.append(
            f"the pilot at {pilot_hz:g} Hz is too weak or not steady: depth {depth:.2g} rad, "
            f"{_LEAST_DEPTH:g} rad is the least"
        )
    if depth > 0.95 * _DEEPEST:
        reasons.append(f"the pilot at {pilot_hz:g} Hz is too deep: {_DEEPEST:g} rad is the limit")
    return Pilot(pilot_hz, depth, math.remainder(phase, 2.0 * math.pi), reasons)


def seen_pilot(moved: FloatArray, rate_hz: float, pilot: Pilot, start_index: int = 0) -> Pilot:
    """Return the pilot with the depth and phase that a phase without its slow course shows.

    Parameters
    ----------
    moved : ndarray, shape (n,)
        Phase less the slow course [rad]; NaN where it is not known.
    rate_hz : float
        Sample rate [Hz].
    pilot : Pilot
        As found at first; its sign is kept.
    start_index : int, optional
        Number of the first sample counted from the recording's first, where t = 0.

    Returns
    -------
    Pilot
        The same where the record shows too little.
    """
    known = np.flatnonzero(np.isfinite(moved))
    if len(known) < 4 * _FEWEST:
        return pilot
    turned = 2.0 * np.pi * pilot.frequency_hz * (start_index + known) / rate_hz
    columns = np.stack([np.ones(len(known)), np.cos(turned), -np.sin(turned)], axis=1)
    _, real, imaginary = np.linalg.lstsq(columns, moved[known], rcond=None)[0].tolist()
    depth, phase = math.hypot(real, imaginary), math.atan2(imaginary, real)
    if not 0.5 < depth / pilot.depth_rad < 2.0 or math.cos(phase - pilot.phase_rad) < 0.7:
        return pilot
    return replace(pilot, depth_rad=depth, phase_rad=phase)

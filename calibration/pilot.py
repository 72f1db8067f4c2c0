"""The pilot: a driven line whose harmonics tell where on the fringe a bench is."""

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from metro.kernel.bessel import bessels

__all__ = ["Pilot", "WorkingPhases", "find_pilot", "pilot_angle", "seen_pilot", "working_phases"]

FloatArray = NDArray[np.float64]

_FEWEST = 16
_LEAST_DEPTH = 0.03
_DEEPEST = 2.3  # J0 and J1 both well away from zero below that


@dataclass(frozen=True)
class Pilot:
    """A pilot line.

    Attributes
    ----------
    frequency_hz : float
        As given [Hz].
    depth_rad : float
        Depth [rad].
    phase_rad : float
        Phase of its motion at t = 0 [rad]; to half a turn, the sign, it is set from outside.
    block : int
        Samples in a block.
    reasons : list of str
        Why it must not be trusted.
    """

    frequency_hz: float
    depth_rad: float
    phase_rad: float
    block: int
    reasons: list[str] = field(default_factory=list)


@dataclass(frozen=True)
class WorkingPhases:
    """Slow phase in blocks that overlap by half.

    Attributes
    ----------
    middle : ndarray, shape (k,)
        Middles of the blocks [samples].
    phase_rad : ndarray, shape (k,)
        Phase over the expected one [rad], unwrapped.
    size : ndarray, shape (k,)
        Size of (cos φ, sin φ) found; 1 where the extremes hold and nothing moves fast.
    length : int
        Samples in a block.
    """

    middle: FloatArray
    phase_rad: FloatArray
    size: FloatArray
    length: int

    def course(self, count: int) -> FloatArray:
        """Return the slow phase at each sample.

        Parameters
        ----------
        count : int
            Samples.

        Returns
        -------
        ndarray, shape (n,)
            Phase [rad].
        """
        return np.interp(np.arange(count), self.middle, self.phase_rad)

    def lost(self, count: int, weakest: float) -> NDArray[np.bool_]:
        """Return the samples in whose blocks the pilot shows too little.

        Parameters
        ----------
        count : int
            Samples.
        weakest : float
            Least size.

        Returns
        -------
        ndarray of bool, shape (n,)
            True where the phase is lost.
        """
        size = np.interp(np.arange(count), self.middle, np.minimum(self.size, 2.0))
        return np.asarray((size < weakest) | (size > 1.6))


def _block(rate_hz: float, pilot_hz: float, count: int, periods: float) -> int:
    half = max(round(0.5 * periods * rate_hz / pilot_hz), _FEWEST // 2)
    if 4 * half > count:
        raise CalibrationError(
            f"a pilot at {pilot_hz:g} Hz needs {4 * half} samples and more, got {count}"
        )
    return 2 * half


def _sums(parts: FloatArray, length: int) -> FloatArray:
    """Return the sums over blocks that overlap by half, last axis first cut to whole half blocks."""
    half = length // 2
    starts = np.arange(0, parts.shape[-1] - half + 1, half)
    single = np.add.reduceat(parts[..., : starts[-1] + half], starts, axis=-1)
    return np.asarray(single[..., 1:] + single[..., :-1])


def _middles(count: int, length: int) -> FloatArray:
    half = length // 2
    blocks = (count // half) - 1
    return half * np.arange(1, blocks + 1, dtype=float) - 0.5


def pilot_angle(pilot: Pilot, count: int, rate_hz: float, start_index: int) -> FloatArray:
    """Return the pilot's own motion.

    Parameters
    ----------
    pilot : Pilot
        As found.
    count : int
        Samples.
    rate_hz : float
        Sample rate [Hz].
    start_index : int
        Number of the first sample counted from the recording's first, where t = 0.

    Returns
    -------
    ndarray, shape (n,)
        Phase [rad].
    """
    time = (start_index + np.arange(count)) / rate_hz
    turned = 2.0 * np.pi * pilot.frequency_hz * time + pilot.phase_rad
    return np.asarray(pilot.depth_rad * np.cos(turned))


def working_phases(cosine: FloatArray, expected: FloatArray, pilot: Pilot) -> WorkingPhases:
    """Return how far the phase is off an expected one, block by block.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The record between −1 and 1; NaN where samples are missing.
    expected : ndarray, shape (n,)
        Expected phase, the pilot's motion included [rad].
    pilot : Pilot
        For the length of a block.

    Returns
    -------
    WorkingPhases
        From least squares of cos(expected + δ) in each block: all harmonics of the pilot serve.
    """
    good = np.isfinite(cosine)
    record = np.where(good, cosine, 0.0)
    one, two = np.where(good, np.cos(expected), 0.0), np.where(good, -np.sin(expected), 0.0)
    parts = np.stack([one * one, one * two, two * two, one * record, two * record])
    a, b, d, u, v = _sums(parts, pilot.block)
    bottom = a * d - b * b
    usable = bottom > 1e-6 * np.maximum(a + d, 1e-12) ** 2
    safe = np.where(usable, bottom, 1.0)
    c = np.where(usable, (d * u - b * v) / safe, 0.0)
    s = np.where(usable, (a * v - b * u) / safe, 0.0)
    middle = _middles(len(cosine), pilot.block)
    size = np.hypot(c, s)
    kept = size > 0.2
    if np.count_nonzero(kept) < 2:
        raise CalibrationError(f"the pilot at {pilot.frequency_hz:g} Hz shows in no two blocks")
    phase = np.interp(middle, middle[kept], np.unwrap(np.arctan2(s[kept], c[kept])))
    return WorkingPhases(middle, phase, size, pilot.block)


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
    sums = _sums(parts, length)
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


def find_pilot(
    cosine: FloatArray,
    rate_hz: float,
    pilot_hz: float,
    start_index: int = 0,
    phase_rad: float | None = None,
    periods: float = 4.0,
) -> Pilot:
    """Find depth and phase of a pilot line in a record that runs through its fringes.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The record between −1 and 1; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz].
    pilot_hz : float
        The line [Hz].
    start_index : int, optional
        Number of the first sample counted from the recording's first, where t = 0.
    phase_rad : float, optional
        Phase of its motion to half a turn; sets the sign.
    periods : float, optional
        Of the pilot in a block; blocks overlap by half.

    Returns
    -------
    Pilot
        Depth and phase.

    Raises
    ------
    CalibrationError
        If the record is too short.
    """
    length = _block(rate_hz, pilot_hz, len(cosine), periods)
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
    return Pilot(pilot_hz, depth, math.remainder(phase, 2.0 * math.pi), length, reasons)


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

"""Bessel nulls: the drive at which a line's first harmonic vanishes, over a series of drives.

The minimum-point method (ISO 16063-11, method 2). The first harmonic vanishes at a fringe top as well; so
the third, which then vanishes too, must be seen, and the second tells that the line moves the mirror.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibration.bessel_table import bessel_rows
from calibration.errors import CalibrationError
from metro.measured import Measured

__all__ = ["DrivePoint", "Null", "NullSeries", "bessel_nulls"]

FloatArray = NDArray[np.float64]

_FEWEST = 4
_SEEN = 5.0  # standard uncertainties above which a harmonic is seen
# Zeros of J1, Abramowitz & Stegun 1964, table 9.5 (from memory), to the last digit computed.
_ZEROS = (
    3.8317059702075125,
    7.015586669815619,
    10.173468135062722,
    13.323691936314223,
    16.470630050877634,
    19.615858510468243,
)
_DEEPEST = 21.0  # rad: the series is looked at up to here


@dataclass(frozen=True)
class DrivePoint:
    """One recording of a drive series.

    Attributes
    ----------
    drive : float
        Amplitude of the drive, any unit; > 0.
    harmonics : ndarray of complex, shape (3,)
        Phasors of harmonics 1 to 3 of the photodiode at t = 0.
    u : ndarray, shape (3,)
        Standard uncertainties of their real and imaginary parts.
    drive_phase_rad : float
        Phase of the drive at t = 0 [rad].
    """

    drive: float
    harmonics: NDArray[np.complex128]
    u: FloatArray
    drive_phase_rad: float


@dataclass(frozen=True)
class Null:
    """One null of the first harmonic.

    Attributes
    ----------
    number : int
        Of the zero of J1, from 1.
    depth_rad : float
        The zero [rad].
    drive : Measured
        Drive at which it lies.
    """

    number: int
    depth_rad: float
    drive: Measured


@dataclass(frozen=True)
class NullSeries:
    """What a drive series says.

    Attributes
    ----------
    nulls : list of Null
        Nulls within the series.
    depth_per_drive : Measured or None
        Radians per unit of drive from the nulls; None without any.
    from_all : Measured or None
        The same from the ratio of harmonics 1 and 3 in all recordings.
    reasons : list of str
        Why it must not be trusted; empty where nothing was found.
    """

    nulls: list[Null]
    depth_per_drive: Measured | None
    from_all: Measured | None
    reasons: list[str] = field(default_factory=list)


def _signed(points: Sequence[DrivePoint]) -> tuple[FloatArray, FloatArray]:
    """Return harmonics 1 and 3 with their signs and their u, shape (n, 2) each.

    In a·cos(φ0 + m·cos θ) harmonic 1 is −2a·sin φ0·J1·cos θ and harmonic 3 is +2a·sin φ0·J3·cos 3θ. The
    lag of the motion behind the drive, common to all, is taken from the strongest first harmonics.
    """
    turned = np.array([p.harmonics[0] * np.exp(-1j * p.drive_phase_rad) for p in points])
    third = np.array([p.harmonics[2] * np.exp(-3j * p.drive_phase_rad) for p in points])
    lag = 0.5 * float(np.angle(np.sum(turned**2 * np.abs(turned))))
    out = np.stack([-(turned * np.exp(-1j * lag)).real, (third * np.exp(-3j * lag)).real], axis=1)
    return out, np.array([[p.u[0], p.u[2]] for p in points])


def _misfit(gain: FloatArray, drive: FloatArray, size: FloatArray, u: FloatArray) -> FloatArray:
    """Return χ² of J1 : J3 against the harmonics, for some gains [rad per unit]."""
    rows = bessel_rows(np.outer(gain, drive).ravel(), 3)
    one, three = rows[:, 1].reshape(-1, len(drive)), rows[:, 3].reshape(-1, len(drive))
    cross = size[:, 0] * three - size[:, 1] * one
    variance = (u[:, 0] * three) ** 2 + (u[:, 1] * one) ** 2
    return np.asarray(np.sum(cross**2 / np.maximum(variance, 1e-300), axis=1))


def _gain(
    drive: FloatArray, size: FloatArray, u: FloatArray
) -> tuple[float, float, float, float | None]:
    """Return gain, its u, χ² per degree of freedom, and another gain that fits as well."""
    grid = np.arange(0.3, _DEEPEST, 0.005) / float(drive.max())
    chi = _misfit(grid, drive, size, u)
    best = int(np.argmin(chi))
    scale = max(float(chi[best]) / max(len(drive) - 1, 1), 1.0)
    far = np.abs(grid - grid[best]) > 0.15 * grid[best]
    rival = float(grid[far][np.argmin(chi[far])])
    if float(chi[far].min()) > float(chi[best]) + 16.0 * scale:
        rival = math.nan
    gain, step = float(grid[best]), 0.002 / float(drive.max())
    for _ in range(30):
        low, middle, high = _misfit(
            np.array([gain - step, gain, gain + step]), drive, size, u
        ).tolist()
        bend = max(low - 2.0 * middle + high, 1e-300)
        moved = 0.5 * step * (low - high) / bend
        gain += max(min(moved, 3.0 * step), -3.0 * step)
        if abs(moved) < 1e-9 * gain:
            break
        step = max(min(step, 10.0 * abs(moved)), 1e-5 * gain)
    spread = step * math.sqrt(2.0 / bend) * math.sqrt(scale)
    return gain, spread, scale, None if math.isnan(rival) else rival


def _null_at(
    number: int, drive: FloatArray, size: FloatArray, u: FloatArray, expected: float
) -> Null | None:
    """Return a null from the recordings about it: harmonic 1 over harmonic 3 is straight there."""
    order = np.argsort(np.abs(drive - expected))[:4]
    near = order[np.abs(drive[order] / expected - 1.0) < 0.35]
    seen = near[np.abs(size[near, 1]) > _SEEN * u[near, 1]]
    if len(seen) < 2 or not (drive[seen].min() <= expected <= drive[seen].max()):
        return None
    ratio = size[seen, 0] / size[seen, 1]
    spread = np.hypot(u[seen, 0], ratio * u[seen, 1]) / np.abs(size[seen, 1])
    # the bend of J1/J3 about its zero, taken off so that few recordings suffice
    depth = _ZEROS[number - 1] * drive[seen] / expected
    rows = bessel_rows(depth, 3)
    slope = rows[:, 1] / rows[:, 3] / (drive[seen] - expected + 1e-12 * expected)
    at = drive[seen] - ratio / slope
    weight = (slope / spread) ** 2
    where = float(np.sum(weight * at) / np.sum(weight))
    rest = float(np.sum(weight * (at - where) ** 2)) / max(len(seen) - 1, 1)
    u_where = math.sqrt(max(rest, 1.0) / float(np.sum(weight)))
    return Null(number, _ZEROS[number - 1], Measured.of(where, "1", u_where, len(seen) - 1))


def bessel_nulls(points: Sequence[DrivePoint]) -> NullSeries:
    """Find the drives at which the first harmonic of a line vanishes because J1 does.

    Parameters
    ----------
    points : sequence of DrivePoint
        At least four recordings at different drives, the working point free in each.

    Returns
    -------
    NullSeries
        Nulls and radians per unit of drive.

    Raises
    ------
    CalibrationError
        If there are fewer than four different drives.

    References
    ----------
    ISO 16063-11:1999, method 2 (minimum points), cited from memory.
    """
    points = sorted(points, key=lambda point: point.drive)
    drive = np.array([point.drive for point in points])
    if len(np.unique(drive)) < _FEWEST or not drive[0] > 0.0:
        raise CalibrationError(
            f"nulls need {_FEWEST} recordings at different drives above 0, got {len(np.unique(drive))}"
        )
    size, u = _signed(points)
    gain, gain_u, scale, rival = _gain(drive, size, u)
    reasons = _reasons(points, size, u, gain, rival, scale)
    nulls = []
    for number, zero in enumerate(_ZEROS, start=1):
        expected = zero / gain
        if drive[0] <= expected <= drive[-1]:
            null = _null_at(number, drive, size, u, expected)
            if null is None:
                reasons.append(
                    f"null {number}, near a drive of {expected:.4g}: no third harmonic is seen about it, "
                    "so that a fringe top cannot be told from a null"
                )
            else:
                nulls.append(null)
    if not nulls:
        reasons.append("no null of the first harmonic lies within the series")
    from_all = Measured.of(gain, "1", gain_u, len(drive) - 1)
    return NullSeries(nulls, _per_drive(nulls), from_all, reasons)


def _per_drive(nulls: list[Null]) -> Measured | None:
    if not nulls:
        return None
    ratios = np.array([null.depth_rad / float(null.drive.magnitude) for null in nulls])
    u = np.array(
        [
            ratio * float(null.drive.u_magnitude) / float(null.drive.magnitude)
            for ratio, null in zip(ratios, nulls, strict=True)
        ]
    )
    weight = 1.0 / np.maximum(u, 1e-12 * ratios) ** 2
    mean = float(np.sum(weight * ratios) / np.sum(weight))
    rest = float(np.sum(weight * (ratios - mean) ** 2)) / max(len(nulls) - 1, 1)
    spread = math.sqrt(max(rest, 1.0) / float(np.sum(weight)))
    return Measured.of(mean, "1", spread, min(null.drive.dof for null in nulls) + len(nulls) - 1)


def _reasons(
    points: Sequence[DrivePoint],
    size: FloatArray,
    u: FloatArray,
    gain: float,
    rival: float | None,
    scale: float,
) -> list[str]:
    reasons = []
    second = np.array([abs(p.harmonics[1]) / p.u[1] for p in points])
    if not np.any(second > _SEEN):
        reasons.append(
            "the second harmonic is seen in no recording: does the line move the mirror?"
        )
    if not np.any(np.abs(size[:, 1]) > _SEEN * u[:, 1]):
        reasons.append(
            "the third harmonic is seen in no recording: a fringe top cannot be told from a null"
        )
    if rival is not None:
        reasons.append(
            f"two scales fit alike: {gain:.4g} and {rival:.4g} rad per unit of drive; begin the series "
            "below the first null"
        )
    if scale > 9.0:
        reasons.append(
            f"harmonics 1 and 3 do not follow one scale (χ² is {scale:.3g} times its degrees of freedom):"
            " the motion is not in proportion to the drive, or the working point moved in a recording"
        )
    return reasons

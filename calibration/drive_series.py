"""A line driven at several amplitudes, up and down: what it would be without any drive.

Piezo ceramics follow the Rayleigh law: the coefficient grows in proportion to the amplitude E of the
drive, d = d0 + αE, and the loop it runs through makes the fundamental lag, so that the complex
coefficient is d0 + αE·(1 − 4i/3π). The straight line is fitted with a free complex slope; the law's
4/3π then is a check. What going down leaves against going up is hysteresis of the amplitude.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import pi, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from metro.measured import Measured

__all__ = ["RAYLEIGH_LAG", "DriveSeries", "SeriesPoint", "fit_series"]

FloatArray = NDArray[np.float64]

RAYLEIGH_LAG = 4.0 / (3.0 * pi)
"""Lag over growth of the coefficient in the Rayleigh law.

Damjanovic, J. Appl. Phys. 82, 1788 (1997); Hall, J. Mater. Sci. 36, 4575 (2001); from memory.
"""
AMPLITUDES_MIN = 3
SPREAD_MIN = 1.5  # largest over smallest drive, below which nothing can be extrapolated


@dataclass(frozen=True)
class SeriesPoint:
    """A line in one recording of a series.

    Parameters
    ----------
    drive_v : float
        Amplitude at the terminals, zero to peak [V].
    coefficient : complex
        Metres per volt.
    u : float
        Standard uncertainty of its real and of its imaginary part, from the line fit alone [m/V].
    later : complex
        What its second half gives more than its first half [m/V].
    later_u : float
        Standard uncertainty of that [m/V].
    """

    drive_v: float
    coefficient: complex
    u: float
    later: complex = 0.0
    later_u: float = 0.0


@dataclass(frozen=True)
class DriveSeries:
    """What a drive series says about one line.

    Parameters
    ----------
    frequency_hz : float
        Of the line [Hz].
    small_signal : Measured
        Magnitude extrapolated to no drive [m/V].
    amplitude_slope : Measured
        Growth with the amplitude [m/V²].
    lag : Measured
        Growth of the lag with the amplitude over the growth of the magnitude; 0.424 in the Rayleigh
        law.
    up_down : Measured or None
        Drive falling minus drive rising, at the same drive [m/V]; None for one direction only.
    creep : Measured
        Second halves of the recordings minus first halves, relative.
    from_v, to_v : float
        Range of the amplitudes [V].
    points : tuple of SeriesPoint
        In the order of the recordings.
    chi_square, dof : float, int
        Of the straight line.
    reasons : list of str
        Why it must not be trusted.
    """

    frequency_hz: float
    small_signal: Measured
    amplitude_slope: Measured
    lag: Measured
    up_down: Measured | None
    creep: Measured
    from_v: float
    to_v: float
    points: tuple[SeriesPoint, ...]
    chi_square: float
    dof: int
    reasons: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form, as the calibration keeps it."""
        return {
            "frequency": Measured.of(self.frequency_hz, "Hz"),
            "small_signal": self.small_signal.to_dict(with_dof=True),
            "amplitude_slope": self.amplitude_slope.to_dict(with_dof=True),
            "lag": self.lag.to_dict(with_dof=True),
            "up_down": None if self.up_down is None else self.up_down.to_dict(with_dof=True),
            "creep": self.creep.to_dict(with_dof=True),
            "from": Measured.of(self.from_v, "V"),
            "to": Measured.of(self.to_v, "V"),
            "points": [
                {
                    "drive": Measured.of(point.drive_v, "V"),
                    "magnitude": Measured.of(abs(point.coefficient), "m/V", point.u),
                    "phase": Measured.of(
                        float(np.angle(point.coefficient)), "rad", point.u / abs(point.coefficient)
                    ),
                }
                for point in self.points
            ],
            "chi_square": self.chi_square,
            "dof": self.dof,
            "reasons": self.reasons,
        }


def fit_series(
    frequency_hz: float, points: Sequence[SeriesPoint], common_u: float
) -> DriveSeries | str:
    """Return what a series says about one line, or why it says nothing.

    Parameters
    ----------
    frequency_hz : float
        Of the line [Hz].
    points : sequence of SeriesPoint
        In the order recorded; from the largest drive on the drive counts as falling.
    common_u : float
        Relative standard uncertainty that all points share (ruler, drive reading, extremes).

    Returns
    -------
    DriveSeries or str
        The straight line through the points, or a sentence.
    """
    drives = np.array([point.drive_v for point in points])
    distinct = np.unique(np.round(drives / max(drives.max(initial=0.0), 1e-300), 2))
    if distinct.size < AMPLITUDES_MIN or drives.max() < SPREAD_MIN * drives.min():
        return (
            f"the drive series says nothing about the line at {frequency_hz:g} Hz: it needs at "
            f"least {AMPLITUDES_MIN} drives, the largest {SPREAD_MIN:g} times the smallest, got "
            f"{distinct.size} from {drives.min(initial=np.inf):.3g} V to "
            f"{drives.max(initial=0.0):.3g} V"
        )
    falling = np.arange(drives.size) > int(np.argmax(drives))
    columns = [np.ones(drives.size), drives, *([falling * 1.0] if falling.any() else [])]
    solution, covariance, chi_square = _straight(np.stack(columns, axis=1), points)
    dof = 2 * (drives.size - len(columns))
    widened = max(1.0, sqrt(chi_square / dof)) if dof else 1.0
    u = widened * np.sqrt(np.diag(covariance))
    start, slope = complex(solution[0]), complex(solution[1])
    size, turn = abs(start), abs(start) / start
    growth = slope * turn
    free = float(dof or 1)
    return DriveSeries(
        frequency_hz=frequency_hz,
        small_signal=Measured.of(size, "m/V", float(np.hypot(u[0], common_u * size)), free),
        amplitude_slope=Measured.of(growth.real, "m/V**2", float(u[1]), free),
        lag=_lag(growth, float(u[1]), free),
        up_down=_up_down(solution, u, turn, free) if falling.any() else None,
        creep=_creep(points, turn, size),
        from_v=float(drives.min()),
        to_v=float(drives.max()),
        points=tuple(points),
        chi_square=chi_square,
        dof=dof,
        reasons=_reasons(chi_square, dof),
    )


def _straight(
    matrix: FloatArray, points: Sequence[SeriesPoint]
) -> tuple[NDArray[np.complex128], FloatArray, float]:
    """Return the weighted complex straight line, the covariance of each part, and chi-square."""
    weights = np.array([1.0 / point.u for point in points])
    values = np.array([point.coefficient for point in points])
    scale = np.abs(matrix).max(axis=0)
    white = weights[:, None] * matrix / scale
    solution = np.linalg.lstsq(white.astype(complex), weights * values, rcond=None)[0]
    left = weights * values - white @ solution
    covariance = np.linalg.inv(white.T @ white) / np.outer(scale, scale)
    return solution / scale, covariance, float(np.sum(np.abs(left) ** 2))


def _lag(growth: complex, u: float, dof: float) -> Measured:
    """Return −Im/Re of the growth; its u is that of a ratio, wide where nothing grows."""
    ratio = -growth.imag / growth.real if growth.real else 0.0
    spread = u / abs(growth.real) * sqrt(1.0 + ratio**2) if growth.real else 1e6
    return Measured.of(ratio, "1", spread, dof)


def _up_down(
    solution: NDArray[np.complex128], u: FloatArray, turn: complex, dof: float
) -> Measured:
    return Measured.of(float((solution[2] * turn).real), "m/V", float(u[2]), dof)


def _creep(points: Sequence[SeriesPoint], turn: complex, size: float) -> Measured:
    known = [point for point in points if point.later_u > 0]
    if not known:
        return Measured.of(0.0, "1", None)
    weights = np.array([1.0 / point.later_u**2 for point in known])
    values = np.array([(point.later * turn).real for point in known])
    mean, u = float(weights @ values / weights.sum()), float(weights.sum() ** -0.5)
    return Measured.of(mean / size, "1", u / size)


def _reasons(chi_square: float, dof: int) -> list[str]:
    # chi-square of dof degrees of freedom beyond 4 of its standard deviations √(2·dof)
    if dof and chi_square > dof + 4 * sqrt(2.0 * dof):
        return [
            (
                f"the coefficient is no straight line of the drive: chi-square {chi_square:.3g} for "
                f"{dof} degrees of freedom"
            )
        ]
    return []

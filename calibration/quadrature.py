"""Phase from two detectors in quadrature: ellipse corrected, unwrapped, periodic error stated."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibration.ellipse import Ellipse, fit_ellipse
from calibration.errors import CalibrationError
from calibration.swept_record import record_noise

__all__ = ["QuadraturePhase", "quadrature_phase"]

FloatArray = NDArray[np.float64]

_SECTORS = 12
_LONGEST_STEP = 0.8 * math.pi  # per sample; at π the direction is lost
_ORDERS = np.arange(1, 5)
_LARGEST_ERROR = 0.05  # rad: above it the two signals lie on no ellipse


@dataclass(frozen=True)
class QuadraturePhase:
    """Phase of a record with two detectors.

    Attributes
    ----------
    phase_rad : ndarray, shape (n,)
        Unwrapped phase [rad], NaN where a sample is missing; grows from x towards y.
    phase_u_rad : float
        Standard uncertainty of one sample from the noise [rad].
    ellipse : Ellipse
        Offsets, gain ratio and quadrature angle that were undone.
    periodic_error_rad : float
        Amplitude of the periodic error left, harmonics 1 to 4 of the fringe together [rad].
    periodic_error_u_rad : float
        Its standard uncertainty, that of the ellipse's parameters included [rad].
    uncorrected_error_rad : float
        Peak periodic error without the correction [rad].
    largest_step_rad : float
        Largest change of phase from sample to sample [rad]; unwrapping is ambiguous at π.
    reasons : list of str
        Why the phase must not be trusted; empty where nothing was found.
    """

    phase_rad: FloatArray
    phase_u_rad: float
    ellipse: Ellipse
    periodic_error_rad: float
    periodic_error_u_rad: float
    uncorrected_error_rad: float
    largest_step_rad: float
    reasons: list[str] = field(default_factory=list)


def _left_over(ellipse: Ellipse, phase: FloatArray, size: FloatArray) -> tuple[float, float]:
    """Return amplitude and u of the periodic error left, from the radius' harmonics.

    An error of the radius that goes as cos kφ comes with an error of the phase that goes as sin kφ and
    is about as large.
    """
    error = size / ellipse.radius - 1.0
    carriers = np.exp(-1j * np.outer(_ORDERS, phase))
    found = np.abs(2.0 * (carriers @ error) / len(phase))
    rest = float(np.std(error))
    chance = rest * math.sqrt(2.0 / len(phase))
    amplitude = math.sqrt(max(float(np.sum(found**2)) - len(_ORDERS) * chance**2, 0.0))
    p, q, r, alpha, _ = np.sqrt(np.diag(ellipse.covariance)).tolist()
    offsets = math.hypot(p, q) / ellipse.radius
    u = math.hypot(chance, offsets, 0.5 * r / ellipse.gain_ratio, 0.5 * alpha)
    return amplitude, u


def _over_gaps(turns: FloatArray, good: NDArray[np.int64]) -> tuple[FloatArray, list[str]]:
    """Unwrap the phase of the samples that are there, carried over gaps by the speed beside them."""
    phase = np.unwrap(turns)
    lengths = np.diff(good)
    if not np.any(lengths > 1):
        return phase, []
    speed = np.diff(turns)
    speed = np.angle(np.exp(1j * speed))
    single = np.where(lengths == 1, speed, np.nan)
    before = _last_known(single)
    expected = before[:-1] * lengths[1:] if len(before) > 1 else np.zeros(0)
    step = speed.copy()
    gaps = np.flatnonzero(lengths > 1)
    doubtful = 0
    for gap in gaps.tolist():
        guess = float(expected[gap - 1]) if gap > 0 else 0.0
        step[gap] = guess + math.remainder(float(speed[gap]) - guess, 2.0 * math.pi)
        doubtful += abs(guess) + 0.3 * abs(guess) > math.pi
    out = turns[0] + np.concatenate([[0.0], np.cumsum(step)])
    if not doubtful:
        return out, []
    return out, [
        f"{doubtful} gaps are so long that the phase turned by more than π: fringes may be lost in them"
    ]


def _last_known(values: FloatArray) -> FloatArray:
    known = np.isfinite(values)
    place = np.maximum.accumulate(np.where(known, np.arange(len(values)), 0))
    return np.asarray(np.where(known[place], values[place], 0.0))


def _reasons(
    phase: FloatArray,
    largest: float,
    error: tuple[float, float],
    clipped: list[str],
) -> list[str]:
    reasons = list(clipped)
    sectors = np.unique(np.floor(np.mod(phase, 2.0 * math.pi) / (2.0 * math.pi / _SECTORS)))
    if len(sectors) < 9:
        reasons.append(
            f"the phase covers {len(sectors)} of {_SECTORS} parts of a fringe: the ellipse is known from "
            "an arc only"
        )
    if largest > _LONGEST_STEP:
        reasons.append(
            f"sampled too slowly: the phase turns by up to {largest:.2g} rad a sample; unwrapping is "
            "ambiguous at π"
        )
    if error[0] > _LARGEST_ERROR:
        reasons.append(
            f"the two signals lie on no ellipse: a periodic error of {error[0]:.2g} rad is left; likely "
            "causes: clipping, a drift of power or contrast, a ghost beam"
        )
    elif error[1] > _LARGEST_ERROR:
        reasons.append(f"the ellipse is poorly known: periodic error up to {error[1]:.2g} rad")
    return reasons


def _piled_up(name: str, values: FloatArray) -> list[str]:
    """Return whether samples lie on an end as no turning signal does."""
    out = []
    width = 1e-3 * float(np.ptp(values))
    for end, level in (("bottom", -values), ("top", values)):
        top = float(level.max())
        last = int(np.count_nonzero(level > top - 0.5 * width))
        near = int(np.count_nonzero(level > top - 40.0 * width))
        # a sine has √(0.5/40) = 11 % of the samples of its last 40 widths in the last half width
        if last > 30 and last > 0.4 * near:
            out.append(f"the {end} of {name} is clipped: {last} samples lie on the last value")
    return out


def quadrature_phase(x: FloatArray, y: FloatArray) -> QuadraturePhase:
    """Return the phase from two detectors in quadrature.

    Parameters
    ----------
    x, y : ndarray, shape (n,)
        The detectors, any unit; NaN where samples are missing.

    Returns
    -------
    QuadraturePhase
        Unwrapped phase with its periodic error.

    Raises
    ------
    CalibrationError
        If fewer than 12 samples are there, one does not change, or they lie on no ellipse.

    References
    ----------
    P. L. M. Heydemann, Appl. Opt. 20 (1981) 3382 (formulas from memory).
    """
    good = np.flatnonzero(np.isfinite(x) & np.isfinite(y))
    one, two = x[good], y[good]
    if len(good) and (np.ptp(one) <= 0.0 or np.ptp(two) <= 0.0):
        raise CalibrationError("one of the two detectors does not change")
    ellipse = fit_ellipse(one, two)
    cosine, sine = ellipse.corrected(one, two)
    wrapped = np.arctan2(sine, cosine)
    unwrapped, gaps = _over_gaps(wrapped, good)
    error = _left_over(ellipse, unwrapped, np.hypot(cosine, sine))
    phase = np.full(len(x), np.nan)
    phase[good] = unwrapped
    steps = np.abs(np.diff(phase))
    steps = steps[np.isfinite(steps)]
    largest = float(steps.max()) if len(steps) else 0.0
    clipped = _piled_up("the first signal", one) + _piled_up("the second signal", two)
    noise = math.hypot(record_noise(cosine), record_noise(sine)) / math.sqrt(2.0)
    return QuadraturePhase(
        phase,
        noise / ellipse.radius,
        ellipse,
        *error,
        ellipse.periodic_error_rad(),
        largest,
        _reasons(unwrapped, largest, error, clipped) + gaps,
    )
